"""Epochs of a sky event: every instant of its kind between two dates.

An instant is where an angle difference meets its target, or where a range rate changes sign;
`epochtest.sky.search` finds them all at once.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.errors import EphemerisSpanError
from epochtest.sky.directions import (
    apparent_vectors,
    geometric_vectors,
    longitude_difference_deg,
    separation_deg,
)
from epochtest.sky.ephemeris import Ephemeris, Vectors
from epochtest.sky.search import Roots, Series, find_roots, search_grid
from epochtest.study.events import (
    PHASE_ELONGATION_DEG,
    Body,
    Frame,
    LongitudeDifference,
    MoonDistance,
    MoonPhase,
)
from epochtest.study.words import body_in_words
from epochtest.timescale import Days, tdb_days_from_utc, utc_from_tdb_days, utc_instant

SkyEvent = MoonPhase | MoonDistance | LongitudeDifference

# Sidereal periods in days, rounded (common practice); they only set the step of the grid.
PERIOD_DAYS: dict[str, float] = {
    "moon": 27.32, "mercury": 87.97, "venus": 224.7, "earth": 365.26, "mars": 687.0,
    "jupiter": 4333.0, "saturn": 10759.0, "uranus": 30689.0, "neptune": 60182.0,
    "pluto": 90560.0,
}  # fmt: skip
STEPS_PER_PERIOD = 24  # where directions can turn back: a step of 15 days for the Earth
STEPS_PER_PERIOD_DIRECT = 8  # where they cannot: at most 75 degrees (Mercury at perihelion)
LONGEST_STEP_DAYS = 200.0
ANOMALISTIC_STEP_DAYS = 27.55 / 12.0
# The grid reaches 1 ms over both ends, so that rounding to microseconds cannot lose an epoch
# between two spans that share an end.
OVERLAP_DAYS = 1e-3 / 86400.0

_PHASE_LABEL = {
    "new": "new Moon",
    "first-quarter": "first quarter",
    "full": "full Moon",
    "last-quarter": "last quarter",
}


class _Sighting(NamedTuple):
    """Two bodies seen from a centre in a frame."""

    ephemeris: Ephemeris
    centre: Body
    first: Body
    second: Body
    frame: Frame

    def vectors(self, tdb_days: Days) -> tuple[Vectors, Vectors]:
        """Vectors (3, n) to both bodies in km; the frame's ecliptic is the x-y plane."""
        bodies = (self.first, self.second)
        if self.frame == "apparent-of-date":
            one, other = apparent_vectors(self.ephemeris, bodies, tdb_days)
        else:
            one, other = geometric_vectors(self.ephemeris, self.centre, bodies, tdb_days)
        return one, other

    def step_days(self) -> float:
        """Step of the grid: a share of the shortest period among the bodies and the centre."""
        names = {self.centre, self.first, self.second}
        shortest = min(PERIOD_DAYS[name] for name in names if name != "sun")
        # Planets never turn back seen from the Sun, nor does the Moon seen from the Earth, or
        # the Earth seen from the Moon. (Neptune and Pluto overtake each other: still slow.)
        direct = (self.centre == "sun" and "moon" not in names) or (
            self.centre in ("earth", "moon") and {"earth", "moon"} <= names
        )
        steps = STEPS_PER_PERIOD_DIRECT if direct else STEPS_PER_PERIOD
        return min(LONGEST_STEP_DAYS, shortest / steps)


def find_epochs(
    event: SkyEvent, ephemeris: Ephemeris, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Every epoch of ``event`` with ``from_utc <= time < to_utc``, sorted by time.

    Columns: ``time_utc`` (datetime64[us], naive UTC), ``tdb_days`` (days of TDB since J2000.0),
    ``label``, ``separation_deg`` (true angle between the two bodies in the event's frame; NaN
    for Moon distances), ``distance_km`` (geometric distance of the Moon from the Earth; NaN for
    longitude differences). Instants are good to 0.1 ms of the ephemeris and frame used.

    Raises EphemerisSpanError if the span leaves the kernel; see `clip_to_kernel`.
    """
    span = search_span(ephemeris, from_utc, to_utc)
    if span.empty:
        none = np.empty(0)
        return epoch_table(utc_from_tdb_days(none), none, [], none, none)
    first, last = span.first_days, span.last_days
    if isinstance(event, MoonDistance):
        table = _moon_distances(event, ephemeris, first, last)
    else:
        table = _differences(event, ephemeris, first, last)
    return span.inside(table)


def clip_to_kernel(
    ephemeris: Ephemeris, from_utc: np.datetime64, to_utc: np.datetime64
) -> tuple[np.datetime64, np.datetime64, bool]:
    """The part of [from_utc, to_utc) that the kernel covers, and whether anything was cut.

    A span wholly outside comes back empty (both ends the same instant).
    """
    lowest, highest = ephemeris.covered_utc
    first_utc, last_utc = (utc_instant(edge) for edge in (from_utc, to_utc))
    start = min(max(first_utc, lowest), highest)
    end = max(min(last_utc, highest), start)
    return start, end, bool(start != first_utc or end != last_utc)


def epoch_table(
    time_utc: NDArray[np.datetime64],
    tdb_days: Days,
    labels: list[str] | NDArray[np.object_],
    separation: NDArray[np.float64],
    distance: NDArray[np.float64],
) -> pd.DataFrame:
    """The table that every source of epochs returns, with its column types."""
    return pd.DataFrame(
        {
            "time_utc": time_utc.astype("datetime64[us]"),
            "tdb_days": tdb_days,
            "label": pd.array(labels, dtype="str"),
            "separation_deg": separation,
            "distance_km": distance,
        }
    )


class SearchSpan(NamedTuple):
    """``from_utc <= time < to_utc``, and the days of TDB to search: 1 ms more at both ends."""

    from_utc: np.datetime64
    to_utc: np.datetime64
    first_days: float
    last_days: float

    @property
    def empty(self) -> bool:
        """Whether no instant lies in the span."""
        return not self.from_utc < self.to_utc

    def inside(self, table: pd.DataFrame) -> pd.DataFrame:
        """The rows of ``table`` whose ``time_utc`` lies in the span, numbered from 0."""
        time = table["time_utc"].to_numpy()
        chosen = (time >= self.from_utc) & (time < self.to_utc)
        return (table if chosen.all() else table[chosen]).reset_index(drop=True)


def search_span(
    ephemeris: Ephemeris, from_utc: np.datetime64 | str, to_utc: np.datetime64 | str
) -> SearchSpan:
    """The span to search; raises EphemerisSpanError if it leaves the kernel."""
    first_utc, last_utc = (utc_instant(edge) for edge in (from_utc, to_utc))
    lowest, highest = ephemeris.covered_utc
    if lowest <= first_utc and last_utc <= highest:
        ends = tdb_days_from_utc(np.array([first_utc, last_utc]))
        earliest, latest = ephemeris.covered_tdb_days
        return SearchSpan(
            first_utc,
            last_utc,
            max(ends[0] - OVERLAP_DAYS, earliest),
            min(ends[1] + OVERLAP_DAYS, latest),
        )
    covered = tuple(str(edge.astype("datetime64[D]")) for edge in (lowest, highest))
    hint = ", or choose the kernel DE440 (1550 to 2650)" if ephemeris.name == "DE421" else ""
    raise EphemerisSpanError(
        f"epochs are asked for from {first_utc} to {last_utc} UTC, but the kernel "
        f"{ephemeris.name} covers {covered[0]} to {covered[1]}; shorten the span{hint}.",
        kernel=ephemeris.name,
        covered=covered,
        outside=np.array([first_utc < lowest, last_utc > highest]),
    )


def _moon_distances(
    event: MoonDistance, ephemeris: Ephemeris, first: float, last: float
) -> pd.DataFrame:
    def range_rate(days: Days, _series: Series) -> Days:
        position, velocity = ephemeris.vector_state("earth", "moon", days)
        rate: Days = (position * velocity).sum(axis=0) / np.linalg.norm(position, axis=0)
        return rate

    grid = search_grid(first, last, ANOMALISTIC_STEP_DAYS)
    none = np.zeros(grid.size, dtype=np.intp)
    roots = find_roots(range_rate, grid, range_rate(grid, none), angle=False)
    days = roots.days[roots.rising == (event.extreme == "perigee")]
    distance = np.linalg.norm(ephemeris.vectors_km("earth", ("moon",), days)[0], axis=0)
    labels, unknown = [str(event.extreme)] * days.size, np.full(days.size, np.nan)
    return epoch_table(utc_from_tdb_days(days), days, labels, unknown, distance)


def _differences(
    event: MoonPhase | LongitudeDifference, ephemeris: Ephemeris, first: float, last: float
) -> pd.DataFrame:
    sighting = _sighting(event, ephemeris)
    targets_deg, labels = _targets(event)
    targets = np.array(targets_deg)

    def off_target(days: Days, series: Series) -> Days:
        off: Days = longitude_difference_deg(*sighting.vectors(days)) - targets[series]
        return off

    grid = search_grid(first, last, sighting.step_days())
    samples = longitude_difference_deg(*sighting.vectors(grid)) - targets[:, None]
    roots: Roots = find_roots(off_target, grid, samples)
    one, other = sighting.vectors(roots.days)
    distance = (
        np.linalg.norm(ephemeris.vectors_km("earth", ("moon",), roots.days)[0], axis=0)
        if isinstance(event, MoonPhase)
        else np.full(roots.days.size, np.nan)
    )
    names = np.array(labels, dtype=object)[roots.series]
    time_utc = utc_from_tdb_days(roots.days)
    return epoch_table(time_utc, roots.days, names, separation_deg(one, other), distance)


def _sighting(event: MoonPhase | LongitudeDifference, ephemeris: Ephemeris) -> _Sighting:
    if isinstance(event, MoonPhase):
        return _Sighting(ephemeris, "earth", "moon", "sun", event.frame)
    return _Sighting(ephemeris, event.centre, *event.bodies, event.frame)


def _targets(event: MoonPhase | LongitudeDifference) -> tuple[list[float], list[str]]:
    """Differences looked for, degrees, and the label of each; a phase named twice counts once."""
    if isinstance(event, MoonPhase):
        named = {PHASE_ELONGATION_DEG[phase]: _PHASE_LABEL[phase] for phase in event.phases}
        for angle in event.elongations_deg:
            named.setdefault(angle, f"Moon {angle:g} deg east of the Sun")
        return list(named), list(named.values())
    pair = "-".join(body.capitalize() for body in event.bodies)
    seen = f"seen from {body_in_words(event.centre)}"
    angles = event.angles_deg()
    words = [event.aspect or f"{angle:g} deg" for angle in angles]
    return list(angles), [f"{pair} {word} {seen}" for word in words]
