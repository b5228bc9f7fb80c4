"""Tables of claims about the sky alone: occurrences, returns, tides."""

from __future__ import annotations

from collections.abc import Sequence

import pandas as pd

from epochtest.study.sky_results import (
    ForcingResult,
    LoadRow,
    OccurrenceRow,
    PullRow,
    RecurrenceResult,
)
from epochtest.tables import numbers
from epochtest.tables.html import numeric


def sky_findings_table(results: Sequence[RecurrenceResult | ForcingResult]) -> pd.DataFrame:
    """One row per claim about the sky alone: what kind it is and what is found."""
    rows = [
        (result.claim.title, result.claim.kind, result.finding, result.sentence)
        for result in results
    ]
    return pd.DataFrame(rows, columns=["Claim", "Kind", "Finding", "In words"], dtype=object)


def occurrences_table(rows: Sequence[OccurrenceRow]) -> pd.DataFrame:
    """Occurrences: instant, beginning, end, size."""
    listed = [
        (
            row.time_utc[:16].replace("T", " "),
            _cut(row.begins_utc),
            _cut(row.ends_utc),
            numbers.decimal(row.size_deg, 3),
        )
        for row in rows
    ]
    columns = ["Instant", "Begins", "Ends", "Size (deg)"]
    return numeric(pd.DataFrame(listed, columns=columns, dtype=object), columns[3])


def _cut(instant: str | None) -> str:
    return "beyond the kernel" if instant is None else instant[:16].replace("T", " ")


def recurrence_numbers(result: RecurrenceResult) -> pd.DataFrame:
    """One row per number of a recurrence."""
    between = result.intervals
    rows = [
        ("Occurrences", numbers.count(result.n_occurrences)),
        ("Years searched", numbers.decimal(result.searched_years)),
    ]
    if between is not None:
        span = (between.shortest_years, between.longest_years)
        rows += [
            ("Mean years from one to the next", numbers.decimal(between.mean_years, 3)),
            ("Shortest–longest", numbers.interval(span, 3)),
            ("Standard deviation of these", numbers.decimal(between.sd_years, 3)),
        ]
    expected = result.explanation.expected_return_years
    rows.append(("Expected from mean motions (years)", numbers.decimal(expected, 3)))
    for pair in result.explanation.pairs:
        names = " and ".join(body.capitalize() for body in pair.bodies)
        rows.append((f"{names} meet every (years)", numbers.decimal(pair.meeting_years, 4)))
        if pair.cycle is not None:
            rows.append((f"{names}: best cycle", pair.cycle))
    return pd.DataFrame(rows, columns=["Number", "Value"], dtype=object)


def pulls_table(rows: Sequence[PullRow]) -> pd.DataFrame:
    """The strongest tide of each body, the strongest first."""
    listed = [
        (
            row.name.capitalize(),
            f"{row.acceleration_m_s2:.3g}",
            f"{row.share_of_moon:.3g}",
            f"{row.stress_pa:.3g}",
            row.at_utc[:10],
            f"{row.here_acceleration_m_s2:.3g}",
            f"{row.here_stress_pa:.3g}",
            numbers.NOTHING if row.on_date_m_s2 is None else f"{row.on_date_m_s2:.3g}",
        )
        for row in sorted(rows, key=lambda row: -row.acceleration_m_s2)
    ]
    columns = [
        "Body", "Pull at its nearest (m/s²)", "Over the mean Moon's", "Stress (Pa)", "When (UTC)",
        "Pull here (m/s²)", "Stress here (Pa)", "On the day (m/s²)",
    ]  # fmt: skip
    frame = pd.DataFrame(listed, columns=columns, dtype=object)
    return numeric(frame, *columns[1:4], *columns[5:])


def loads_table(rows: Sequence[LoadRow]) -> pd.DataFrame:
    """Everyday loads to compare with, with their sources."""
    listed = [(row.name, f"{row.stress_pa:.3g}", row.source) for row in rows]
    columns = ["Load", "Stress (Pa)", "Source"]
    return numeric(pd.DataFrame(listed, columns=columns, dtype=object), columns[1])
