"""Occurrences of a configuration: meetings of a pair, or groupings, as rows of plain values."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Literal

import numpy as np
import pandas as pd

from epochtest.errors import ProtocolError
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import find_epochs
from epochtest.sky.groupings import find_groupings
from epochtest.sky.mean_motion import DAYS_PER_YEAR
from epochtest.study.events import Body, LongitudeDifference
from epochtest.study.words import body_in_words
from epochtest.timescale import tdb_days_from_utc


@dataclass(frozen=True)
class Pair:
    """Two bodies seen from a centre in one direction, in opposite ones, or either ("line").

    With the centre they are the three bodies of a line-up. Geometric, J2000 ecliptic.
    """

    centre: Body
    bodies: tuple[Body, Body]
    aspect: Literal["conjunction", "opposition", "line"] = "conjunction"


@dataclass(frozen=True)
class Grouping:
    """Three or more bodies within an arc, seen from a centre; see `find_groupings`."""

    centre: Body
    bodies: tuple[Body, ...]
    below_deg: float
    along_line: bool = False


Configuration = Pair | Grouping


@dataclass(frozen=True)
class Occurrence:
    """One occurrence: its instant (for a grouping the tightest minimum), its beginning and end.

    Instants are ISO 8601 UTC and days of TDB since J2000.0. A pair meets at one instant. A visit
    that is cut by the ends of the kernel begins at -inf or ends at inf, with an empty text.
    ``size_deg`` is the width of the arc, or the angle by which the pair misses the exact line
    in space. ``events`` counts what was gathered into this one.
    """

    time_utc: str
    tdb_days: float
    begins_utc: str
    begins_tdb_days: float
    ends_utc: str
    ends_tdb_days: float
    size_deg: float
    events: int = 1


@dataclass(frozen=True)
class Intervals:
    """Years between successive occurrences; ``sd_years`` (n - 1) is NaN for a single interval."""

    count: int
    mean_years: float
    shortest_years: float
    longest_years: float
    sd_years: float


def find_occurrences(
    ephemeris: Ephemeris,
    configuration: Configuration,
    from_utc: np.datetime64,
    to_utc: np.datetime64,
    *,
    one_event_within_days: float = 0.0,
) -> tuple[Occurrence, ...]:
    """All occurrences with ``from_utc <= time < to_utc``, sorted.

    Those that begin within ``one_event_within_days`` after the one before has ended count as one
    (the three passages of a retrograde loop, say), at the time of the narrowest.

    Raises EphemerisSpanError outside the ephemeris, ProtocolError for impossible bodies.
    """
    if isinstance(configuration, Pair):
        found = _pair(ephemeris, configuration, from_utc, to_utc)
    else:
        found = _grouping(ephemeris, configuration, from_utc, to_utc)
    return _gathered(found, one_event_within_days)


def intervals(occurrences: Sequence[Occurrence]) -> Intervals | None:
    """Statistics of the intervals between successive instants; None for fewer than two."""
    if len(occurrences) < 2:
        return None
    years = np.diff([found.tdb_days for found in occurrences]) / DAYS_PER_YEAR
    spread = float(years.std(ddof=1)) if years.size > 1 else float("nan")
    return Intervals(
        int(years.size), float(years.mean()), float(years.min()), float(years.max()), spread
    )


def occurrence_table(occurrences: Sequence[Occurrence]) -> pd.DataFrame:
    """The occurrences as a table, with ``years_since_last`` (NaN in the first row).

    Columns: ``time_utc``, ``begins_utc``, ``ends_utc`` (datetime64[us], NaT where cut),
    ``tdb_days``, ``size_deg``, ``events``, ``years_since_last``.
    """

    def instants(texts: list[str]) -> pd.Series:
        return pd.Series(np.array([text or "NaT" for text in texts], dtype="datetime64[us]"))

    days = np.array([found.tdb_days for found in occurrences], dtype=float)
    return pd.DataFrame(
        {
            "time_utc": instants([found.time_utc for found in occurrences]),
            "begins_utc": instants([found.begins_utc for found in occurrences]),
            "ends_utc": instants([found.ends_utc for found in occurrences]),
            "tdb_days": days,
            "size_deg": np.array([found.size_deg for found in occurrences], dtype=float),
            "events": np.array([found.events for found in occurrences], dtype=np.int64),
            "years_since_last": np.diff(days, prepend=np.nan) / DAYS_PER_YEAR,
        }
    )


def describe_configuration(configuration: Configuration) -> str:
    """One phrase that names the bodies, the kind of meeting and the centre."""
    centre = configuration.centre
    names = [body_in_words(body) for body in configuration.bodies]
    listed = f"{', '.join(names[:-1])} and {names[-1]}"
    seen = f"seen from {body_in_words(centre)}"
    if isinstance(configuration, Pair):
        way = {
            "conjunction": "in conjunction",
            "opposition": "in opposition",
            "line": "on one line",
        }
        return f"{listed} {way[configuration.aspect]} {seen}"
    line = " along one line" if configuration.along_line else ""
    return f"{listed} within {configuration.below_deg:g} degrees{line} {seen}"


def _pair(
    ephemeris: Ephemeris, pair: Pair, from_utc: np.datetime64, to_utc: np.datetime64
) -> list[Occurrence]:
    angles = {"conjunction": (0.0,), "opposition": (180.0,), "line": (0.0, 180.0)}[pair.aspect]
    found = []
    for angle in angles:
        try:
            event = LongitudeDifference(centre=pair.centre, bodies=pair.bodies, angle_deg=angle)
        except ValueError as error:  # pydantic's own words are about fields of a file
            raise ProtocolError(
                f"{' and '.join(pair.bodies)} cannot meet seen from {pair.centre}: name two "
                "different bodies, neither of them the centre."
            ) from error
        table = find_epochs(event, ephemeris, from_utc, to_utc)
        rows = zip(
            _texts(table["time_utc"]), table["tdb_days"], table["separation_deg"], strict=True
        )
        for time, days, apart in rows:
            off = abs(float(apart) - angle)
            day = float(days)
            found.append(Occurrence(time, day, time, day, time, day, off))
    return sorted(found, key=lambda occurrence: occurrence.tdb_days)


def _grouping(
    ephemeris: Ephemeris, grouping: Grouping, from_utc: np.datetime64, to_utc: np.datetime64
) -> list[Occurrence]:
    table = find_groupings(
        ephemeris,
        grouping.centre,
        grouping.bodies,
        grouping.below_deg,
        from_utc,
        to_utc,
        along_line=grouping.along_line,
    )
    edges = [table[name].to_numpy() for name in ("entered_utc", "left_utc")]
    begins, ends = (
        np.where(np.isnat(edge), cut, tdb_days_from_utc(edge))
        for edge, cut in zip(edges, (-np.inf, np.inf), strict=True)
    )
    columns = (
        _texts(table["time_utc"]),
        table["tdb_days"].tolist(),
        _texts(table["entered_utc"]),
        begins.tolist(),
        _texts(table["left_utc"]),
        ends.tolist(),
        table["width_deg"].tolist(),
    )
    return [Occurrence(*row) for row in zip(*columns, strict=True)]


def _texts(instants: pd.Series) -> list[str]:
    """ISO 8601 texts; empty for NaT."""
    values = instants.to_numpy().astype("datetime64[us]")
    return ["" if np.isnat(value) else str(value) for value in values]


def _gathered(found: list[Occurrence], within_days: float) -> tuple[Occurrence, ...]:
    """Runs whose gaps are at most ``within_days``, each as one occurrence."""
    if within_days < 0.0:
        raise ProtocolError(f"one_event_within_days is {within_days:g}; give 0 or more.")
    if within_days == 0.0 or not found:
        return tuple(found)
    runs = [[found[0]]]
    for before, after in pairwise(found):
        if after.begins_tdb_days - before.ends_tdb_days <= within_days:
            runs[-1].append(after)
        else:
            runs.append([after])
    return tuple(
        replace(
            min(run, key=lambda occurrence: occurrence.size_deg),
            begins_utc=run[0].begins_utc,
            begins_tdb_days=run[0].begins_tdb_days,
            ends_utc=run[-1].ends_utc,
            ends_tdb_days=run[-1].ends_tdb_days,
            events=len(run),
        )
        for run in runs
    )
