"""Tables of what went in: files, rows set aside, epochs and provenance."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import pandas as pd

from epochtest.study.results import CatalogResult, EpochResult, FamilyRates
from epochtest.tables import numbers
from epochtest.tables.html import numeric

_SHORT_HASH = 12


def files_table(catalog: CatalogResult) -> pd.DataFrame:
    """One row per input file and a sum: rows read = rows kept + rows set aside."""
    rows = [
        (
            file.file,
            file.origin,
            file.licence,
            numbers.count(file.rows_read),
            numbers.count(file.kept),
            numbers.count(file.quarantined),
            file.sha256[:_SHORT_HASH],
        )
        for file in catalog.files
    ]
    if len(rows) > 1:
        totals = (catalog.rows_read, catalog.kept, catalog.quarantined)
        rows.append(("all files", "", "", *map(numbers.count, totals), ""))  # type: ignore[arg-type]
    columns = ["File", "Origin", "Licence", "Rows read", "Kept", "Set aside", "SHA-256 (start)"]
    frame = pd.DataFrame(rows, columns=columns, dtype=object)
    return numeric(frame, "Rows read", "Kept", "Set aside")


def quarantine_table(reasons: Mapping[str, int]) -> pd.DataFrame:
    """Why rows were set aside, most frequent reason first."""
    ordered = sorted(reasons.items(), key=lambda item: (-item[1], item[0]))
    rows = [(reason, numbers.count(rows)) for reason, rows in ordered]
    return numeric(pd.DataFrame(rows, columns=["Reason", "Rows"], dtype=object), "Rows")


def base_rates_table(epochs: Sequence[EpochResult]) -> pd.DataFrame:
    """How often each sky event happens: without this, hits mean nothing."""
    rows = []
    for result in epochs:
        per_year = sum(result.per_year.values()) / len(result.per_year) if result.per_year else None
        extremes = (result.shortest_interval_days, result.longest_interval_days)
        rows.append(
            (
                result.claim,
                result.description,
                numbers.count(result.n_in_span),
                numbers.decimal(per_year),
                numbers.decimal(result.mean_interval_days),
                numbers.interval(extremes, 1) if extremes[1] is not None else numbers.NOTHING,
                numbers.percent(result.coverage),
                numbers.count(result.overlapping_windows),
            )
        )
    columns = [
        "Claim", "Sky event", "Epochs in span", "Per calendar year", "Mean interval (days)",
        "Shortest–longest (days)", "Coverage", "Overlapping windows",
    ]  # fmt: skip
    return numeric(pd.DataFrame(rows, columns=columns, dtype=object), *columns[2:])


def epochs_table(epochs: pd.DataFrame) -> pd.DataFrame:
    """Epochs as text: instant to the second, what happens, separation or distance."""
    rows = [
        (
            f"{time:%Y-%m-%d %H:%M:%S}",
            label,
            numbers.decimal(separation, 3),
            numbers.decimal(distance, 0),
        )
        for time, label, separation, distance in zip(
            epochs["time_utc"],
            epochs["label"],
            epochs["separation_deg"],
            epochs["distance_km"],
            strict=True,
        )
    ]
    columns = ["Instant (UTC)", "Event", "Separation (deg)", "Distance (km)"]
    return numeric(pd.DataFrame(rows, columns=columns, dtype=object), *columns[2:])


def nearby_table(rates: FamilyRates) -> pd.DataFrame:
    """What any instant has near it, whether or not anything happened then."""
    rows = [
        (
            f"{row.half_width_days:g}",
            numbers.percent(row.share_of_time),
            numbers.decimal(row.mean_number),
            numbers.count(row.median_number),
            numbers.count(row.most),
        )
        for row in rates.nearby
    ]
    columns = [
        "Within ± (days)", "Of all instants with at least one", "Mean number", "Median", "Most",
    ]  # fmt: skip
    return numeric(pd.DataFrame(rows, columns=columns, dtype=object), *columns[1:])


def provenance_table(facts: Mapping[str, object]) -> pd.DataFrame:
    """What the numbers were made with, in the order given."""
    rows = [(name, str(value)) for name, value in facts.items()]
    return pd.DataFrame(rows, columns=["What", "Value"], dtype=object)
