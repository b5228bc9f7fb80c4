"""What the catalog step found, as a result object with notes in plain sentences."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.catalog.clean import NEAR_DUPLICATE, OTHER_TYPE, REASONS, REUSED_ID, Cleaned
from epochtest.catalog.completeness import bin_width, size_distribution
from epochtest.catalog.select import in_span
from epochtest.study.results import CatalogResult, FileCount, SizeDistribution
from epochtest.study.settings import Sources

FEW_FOR_SPAN = 10
"""Events below which nothing is said of whether the catalog fills the span."""
SPAN_GAP_MEANS = 20
"""A gap at an end of the span, in mean intervals, that a steady rate gives once in e^20."""
FEW_FOR_B = 50
"""Events above completeness below which b is called uncertain (common practice)."""


def summarise(
    cleaned: Cleaned, sources: Sources, span: tuple[np.datetime64, np.datetime64]
) -> CatalogResult:
    """Counts per file, reasons, times, sizes.

    ``sources`` describes every file of the catalog (`sources.verify_sources`); ``span`` is
    [start, end), UTC. First and last time, the largest magnitude, the day-only count and the
    magnitude types speak of all kept rows; the size distribution only of those in the span.
    """
    kept = cleaned.kept
    inside = in_span(kept, *span)
    sizes = size_distribution(kept["magnitude"].to_numpy()[inside])
    times = kept["time_utc"].to_numpy()
    return CatalogResult(
        files=_file_counts(cleaned, sources),
        rows_read=cleaned.rows_read,
        kept=len(kept),
        quarantined=len(cleaned.quarantined),
        reasons=_reasons(cleaned.quarantined),
        day_only=int(kept["day_only"].sum()),
        first_utc=_iso(times[0]) if times.size else None,
        last_utc=_iso(times[-1]) if times.size else None,
        in_span=int(inside.sum()),
        largest_magnitude=float(kept["magnitude"].max()) if len(kept) else None,
        magnitude_types=_counts(kept["magnitude_type"]),
        sizes=sizes,
        notes=tuple(_notes(cleaned, sizes, int(inside.sum()), span)),
    )


def _iso(instant: np.datetime64) -> str:
    return f"{instant.astype('datetime64[us]')}Z"


def _counts(column: pd.Series) -> dict[str, int]:
    """Values and how often, the most frequent first, then by name; blank is "not given"."""
    counts = column.value_counts()
    pairs = ((str(name) or "not given", int(n)) for name, n in counts.items())
    return dict(sorted(pairs, key=lambda pair: (-pair[1], pair[0])))


def _reasons(quarantined: pd.DataFrame) -> dict[str, int]:
    counts = quarantined["reason"].value_counts()
    return {reason: int(counts[reason]) for reason in REASONS if reason in counts}


def _file_counts(cleaned: Cleaned, sources: Sources) -> tuple[FileCount, ...]:
    described = {source.file: source for source in sources.source}
    kept = cleaned.kept["source_file"].value_counts()
    aside = cleaned.quarantined["file"].value_counts()
    return tuple(
        FileCount(
            file=file,
            sha256=described[file].sha256,
            origin=described[file].origin,
            licence=described[file].licence,
            rows_read=rows,
            kept=int(kept.get(file, 0)),
            quarantined=int(aside.get(file, 0)),
        )
        for file, rows in cleaned.rows_by_file.items()
    )


def _notes(
    cleaned: Cleaned,
    sizes: SizeDistribution,
    in_span_count: int,
    span: tuple[np.datetime64, np.datetime64],
) -> list[str]:
    kept, aside = cleaned.kept, cleaned.quarantined
    notes = []
    if len(kept) == 0:
        notes.append("No row was kept; read the reasons, and mend the file or study.toml.")
    elif in_span_count == 0:
        notes.append("No kept earthquake lies in the study's span; mend the span or the catalog.")
    notes.extend(_notes_on_span(kept["time_utc"].to_numpy(), span))
    if day_only := int(kept["day_only"].sum()):
        notes.append(
            f"{day_only} kept rows give a day without a time; they stand at 12:00 UTC, up to half "
            "a day from the truth, and were not searched for near duplicates."
        )
    notes.extend(f"{n} kept rows: {kind}." for kind, n in cleaned.repairs.items())
    types = _counts(kept["magnitude_type"].str.lower())
    if len(types) > 1:
        listed = ", ".join(f"{name} {n}" for name, n in types.items())
        notes.append(
            f"Magnitudes are of {len(types)} types ({listed}), used as given; they are not on one "
            "scale."
        )
    if untyped := int((kept["event_type"] == "").sum()):
        notes.append(f"{untyped} kept rows do not say what kind of event they are.")
    if no_depth := int(kept["depth_km"].isna().sum()):
        notes.append(f"{no_depth} kept rows have no depth; any depth limit excludes them.")
    notes.extend(_notes_on_quarantine(aside))
    notes.extend(_notes_on_sizes(sizes))
    return notes


def _notes_on_span(
    times_utc: NDArray[np.datetime64], span: tuple[np.datetime64, np.datetime64]
) -> list[str]:
    """A catalog that does not fill the span: expected counts and shifts would then be wrong."""
    inside = times_utc[(times_utc >= span[0]) & (times_utc < span[1])]
    if inside.size < FEW_FOR_SPAN:
        return []
    mean = (inside[-1] - inside[0]) / (inside.size - 1)
    gaps = {"begins": inside[0] - span[0], "ends": span[1] - inside[-1]}
    return [
        f"The catalog {word} {gap / np.timedelta64(1, 'D'):.0f} days inside the study's span, "
        f"{gap / mean:.0f} times its mean interval: expected counts and the shift null assume "
        "that it fills the span; shorten the span or complete the catalog."
        for word, gap in gaps.items()
        if gap > SPAN_GAP_MEANS * mean
    ]


def _notes_on_quarantine(aside: pd.DataFrame) -> list[str]:
    notes = []
    others = _counts(aside.loc[aside["reason"] == OTHER_TYPE, "detail"])
    if others:
        listed = ", ".join(f"{name} {n}" for name, n in others.items())
        notes.append(f"Set aside for their event type: {listed}.")
    if near := int((aside["reason"] == NEAR_DUPLICATE).sum()):
        notes.append(
            f"{near} rows were set aside as near duplicates of a row earlier in file order; in a "
            "rich aftershock sequence some may be true earthquakes: look at quarantine.csv."
        )
    if reused := int((aside["reason"] == REUSED_ID).sum()):
        notes.append(
            f"{reused} rows carry an id that another event, more than a day away, already had; "
            "give the files ids that differ, or these rows stay out."
        )
    return notes


def _notes_on_sizes(sizes: SizeDistribution) -> list[str]:
    notes = []
    width = bin_width(sizes.bin_width)
    if width != sizes.bin_width:
        notes.append(
            f"Magnitudes come in steps of {sizes.bin_width:g}; completeness and b are counted in "
            f"bins of {width:g}."
        )
    if sizes.mc is None:
        notes.append("Too few earthquakes in the span to tell completeness or b.")
    elif sizes.n_above < FEW_FOR_B:
        notes.append(f"Only {sizes.n_above} earthquakes lie above completeness; b is uncertain.")
    return notes
