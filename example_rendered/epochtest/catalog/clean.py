"""Raw rows to earthquakes: every row is either kept or set aside with its reason."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from epochtest.catalog.duplicates import Located, near_duplicates, repeated_ids
from epochtest.catalog.fields import absent, decimals, text_array, trimmed
from epochtest.catalog.geometry import signed_longitude_deg
from epochtest.catalog.mechanism import mechanisms
from epochtest.catalog.schema import as_schema
from epochtest.catalog.times import ParsedTimes, parse_times
from epochtest.errors import CatalogError
from epochtest.study.settings import CatalogSettings

WRONG_FIELDS = "wrong number of fields"
NO_TIME = "unparseable time"
NO_PLACE = "coordinates missing or not numeric"
OFF_EARTH = "coordinates out of range"
NO_MAGNITUDE = "missing magnitude"
ODD_MAGNITUDE = "non-numeric magnitude"
WILD_MAGNITUDE = "magnitude out of range"
ODD_DEPTH = "non-numeric depth"
WILD_DEPTH = "depth out of range"
OTHER_TYPE = "event type not kept"
SAME_ID = "duplicate id"
REUSED_ID = "id already used by another event"
NEAR_DUPLICATE = "near duplicate"
BROKEN_MECHANISM = "incomplete or impossible mechanism dropped"
REASONS = (
    WRONG_FIELDS, NO_TIME, NO_PLACE, OFF_EARTH, NO_MAGNITUDE, ODD_MAGNITUDE, WILD_MAGNITUDE,
    ODD_DEPTH, WILD_DEPTH, OTHER_TYPE, SAME_ID, REUSED_ID, NEAR_DUPLICATE,
)  # fmt: skip
"""Why rows are set aside; a row with several faults has the first of them in this order."""

MAGNITUDE_RANGE = (-5.0, 11.0)
DEPTH_RANGE_KM = (-10.0, 1000.0)
"""Outside these a value is a code for "unknown" or a slip (common practice; as `Selection`)."""

QUARANTINE_COLUMNS = ("file", "line", "reason", "detail", "event_id", "time", "magnitude")


@dataclass(frozen=True)
class Cleaned:
    """A catalog fit for testing, and everything that was not.

    ``kept`` has the columns of `schema.COLUMNS`, sorted by time, then id. ``quarantined`` has
    QUARANTINE_COLUMNS in file order: ``line`` is a number, the rest is text as it stood in the
    file; ``detail`` is the value found or the id of the row kept instead. ``rows_by_file`` counts
    the rows read, files in order. ``repairs`` counts the kept rows whose time was re-spelled or
    whose broken mechanism was dropped, by kind.
    """

    kept: pd.DataFrame
    quarantined: pd.DataFrame
    rows_by_file: dict[str, int]
    repairs: dict[str, int]

    @property
    def rows_read(self) -> int:
        """All rows of all files."""
        return sum(self.rows_by_file.values())


class _Verdicts:
    """The first reason and its detail for every row, as code and text."""

    def __init__(self, n: int) -> None:
        self.code = np.full(n, -1, dtype=np.int16)
        self.detail: dict[int, str] = {}

    @property
    def open(self) -> NDArray[np.bool_]:
        return self.code < 0

    def give(self, reason: str, rows: NDArray[np.int64], details: list[str]) -> None:
        for row, detail in zip(rows.tolist(), details, strict=True):
            if self.code[row] < 0:
                self.code[row] = REASONS.index(reason)
                self.detail[row] = detail

    def give_where(self, reason: str, mask: NDArray[np.bool_], found: pa.Array) -> None:
        rows = np.flatnonzero(mask & self.open)
        self.give(reason, rows, found.take(pa.array(rows)).to_pylist())


def clean(raw: pd.DataFrame, settings: CatalogSettings) -> Cleaned:
    """Judge the rows of ``raw`` (columns of `read.RAW_TEXT_COLUMNS` and ``source_line``).

    The order of ``raw`` is the file order that decides between duplicates (`duplicates`). Rows
    with a blank event type are kept. Raises CatalogError if a row were lost or doubled.
    """
    text = {name: text_array(raw[name]) for name in raw.columns if name != "source_line"}
    verdicts = _Verdicts(len(raw))
    times = parse_times(text["time"])
    angles, broken = mechanisms(text)
    table = _values(text, raw, times, angles)
    for reason, mask, found in _faults(text, table, times, settings):
        verdicts.give_where(reason, mask, found)
    _set_repeats_aside(table, text, settings, verdicts)
    kept = table[verdicts.open]
    order = pc.sort_indices(
        pa.table({"time": kept["time_utc"].to_numpy(), "id": text_array(kept["event_id"])}),
        sort_keys=[("time", "ascending"), ("id", "ascending")],
    )
    changed = {**times.repaired, BROKEN_MECHANISM: broken}
    repairs = {kind: int((mask & verdicts.open).sum()) for kind, mask in changed.items()}
    cleaned = Cleaned(
        as_schema(kept.iloc[np.asarray(order)]),
        _quarantine(raw, verdicts),
        {str(file): int(n) for file, n in raw["source_file"].value_counts(sort=False).items()},
        {kind: count for kind, count in repairs.items() if count},
    )
    check_conservation(cleaned)
    return cleaned


def check_conservation(cleaned: Cleaned) -> None:
    """Raise CatalogError unless, for every file, rows read = kept + quarantined."""
    kept = cleaned.kept["source_file"].value_counts()
    aside = cleaned.quarantined["file"].value_counts()
    for file, rows in cleaned.rows_by_file.items():
        ends = int(kept.get(file, 0)), int(aside.get(file, 0))
        if rows != sum(ends):
            raise CatalogError(
                f"{file}: {rows} rows were read, but {ends[0]} kept and {ends[1]} set aside; "
                "this is a fault of the program, please report it.",
                file=file, rows_read=rows, kept=ends[0], quarantined=ends[1],
            )  # fmt: skip


def _values(
    text: dict[str, pa.Array],
    raw: pd.DataFrame,
    times: ParsedTimes,
    angles: NDArray[np.float64],
) -> pd.DataFrame:
    """Every row as numbers, NaN or NaT where the text gives none."""
    file_and_line = pc.binary_join_element_wise(
        text["source_file"],
        pc.cast(pa.array(raw["source_line"].to_numpy()), pa.large_string()),
        pa.scalar(":", pa.large_string()),
    )
    given_id = trimmed(text["event_id"])
    arrays = {
        "event_id": pc.if_else(pc.equal(given_id, ""), file_and_line, given_id),
        "magnitude_type": trimmed(text["magnitude_type"]),
        "event_type": trimmed(text["event_type"]),
        "source_file": text["source_file"],
    }
    strike, dip, rake = angles
    plain = {name: pd.array(array, dtype="str") for name, array in arrays.items()}
    return pd.DataFrame(
        {
            "event_id": plain["event_id"],
            "time_utc": times.utc,
            "latitude_deg": decimals(text["latitude"]),
            "longitude_deg": signed_longitude_deg(decimals(text["longitude"])),
            "depth_km": decimals(text["depth"]),
            "magnitude": decimals(text["magnitude"]),
            "magnitude_type": plain["magnitude_type"],
            "event_type": plain["event_type"],
            "strike_deg": strike,
            "dip_deg": dip,
            "rake_deg": rake,
            "day_only": times.day_only,
            "source_file": plain["source_file"],
            "source_line": raw["source_line"].to_numpy(),
        }
    )


def _faults(
    text: dict[str, pa.Array], table: pd.DataFrame, times: ParsedTimes, settings: CatalogSettings
) -> Iterator[tuple[str, NDArray[np.bool_], pa.Array]]:
    """Reasons that a row gives by itself, in the order of REASONS: mask, text found."""
    latitude, longitude = table["latitude_deg"].to_numpy(), table["longitude_deg"].to_numpy()
    magnitude, depth = table["magnitude"].to_numpy(), table["depth_km"].to_numpy()
    place = pc.binary_join_element_wise(
        text["latitude"], text["longitude"], pa.scalar(", ", pa.large_string())
    )
    kind = trimmed(text["event_type"])
    wanted = pa.array([word.strip().lower() for word in settings.keep_event_types], pa.string())
    other = ~np.asarray(pc.is_in(pc.utf8_lower(kind), value_set=wanted))
    other &= ~np.asarray(pc.equal(kind, ""))
    no_magnitude = absent(text["magnitude"])
    yield WRONG_FIELDS, np.asarray(pc.not_equal(text["fault"], "")), text["fault"]
    yield NO_TIME, np.isnat(times.utc), text["time"]
    yield NO_PLACE, np.isnan(latitude) | np.isnan(longitude), place
    yield OFF_EARTH, (np.abs(latitude) > 90.0) | (np.abs(longitude) > 180.0), place
    yield NO_MAGNITUDE, no_magnitude, text["magnitude"]
    yield ODD_MAGNITUDE, np.isnan(magnitude) & ~no_magnitude, text["magnitude"]
    yield WILD_MAGNITUDE, _outside(magnitude, MAGNITUDE_RANGE), text["magnitude"]
    yield ODD_DEPTH, np.isnan(depth) & ~absent(text["depth"]), text["depth"]
    yield WILD_DEPTH, _outside(depth, DEPTH_RANGE_KM), text["depth"]
    yield OTHER_TYPE, other, kind


def _outside(values: NDArray[np.float64], limits: tuple[float, float]) -> NDArray[np.bool_]:
    return (values < limits[0]) | (values > limits[1])


def _set_repeats_aside(
    table: pd.DataFrame, text: dict[str, pa.Array], settings: CatalogSettings, verdicts: _Verdicts
) -> None:
    """Judge duplicates among the rows that are sound by themselves."""
    rows = np.flatnonzero(verdicts.open)
    rows = rows[table["event_id"].iloc[rows].duplicated(keep=False).to_numpy()]
    sound = table.iloc[rows]
    updated = parse_times(text["updated"].take(pa.array(rows))).utc
    aside, instead, reused = repeated_ids(sound["event_id"], updated, sound["time_utc"].to_numpy())
    for reason, mask in ((SAME_ID, ~reused), (REUSED_ID, reused)):
        verdicts.give(reason, rows[aside[mask]], _named(table, rows[instead[mask]]))
    rows = np.flatnonzero(verdicts.open)
    sound = table.iloc[rows]
    located = Located(
        sound["time_utc"].to_numpy(),
        sound["latitude_deg"].to_numpy(),
        sound["longitude_deg"].to_numpy(),
        sound["magnitude"].to_numpy(),
        ~sound["day_only"].to_numpy(),
    )
    aside, instead = near_duplicates(
        located, settings.duplicate_seconds, settings.duplicate_km, settings.duplicate_magnitude
    )
    verdicts.give(NEAR_DUPLICATE, rows[aside], _named(table, rows[instead]))


def _named(table: pd.DataFrame, rows: NDArray[np.int64]) -> list[str]:
    kept = table[["event_id", "source_file", "source_line"]].iloc[rows]
    named = kept.itertuples(index=False, name=None)
    return [f"kept: {event_id} ({file}, line {line})" for event_id, file, line in named]


def _quarantine(raw: pd.DataFrame, verdicts: _Verdicts) -> pd.DataFrame:
    rows = np.flatnonzero(~verdicts.open)
    aside = raw.iloc[rows]
    frame = pd.DataFrame(
        {
            "file": aside["source_file"],
            "line": aside["source_line"].astype("int64"),
            "reason": [REASONS[code] for code in verdicts.code[rows].tolist()],
            "detail": [verdicts.detail[row] for row in rows.tolist()],
            "event_id": aside["event_id"],
            "time": aside["time"],
            "magnitude": aside["magnitude"],
        }
    ).reset_index(drop=True)
    texts = dict.fromkeys((name for name in QUARANTINE_COLUMNS if name != "line"), "str")
    return frame.astype(texts)
