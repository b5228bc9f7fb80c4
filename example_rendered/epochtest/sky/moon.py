"""The Moon: node passages, extremes of declination, standstills, perigean spring tides.

Node passage: the apparent geocentric latitude, mean ecliptic of date, is zero.

Extreme of declination: the apparent geocentric declination (true equator of date) is at its
monthly maximum ("north") or minimum ("south").

Standstill: one hemisphere at a time, the size of the declination at its monthly extremes is
compared. A *major* standstill is a monthly extreme whose size is the greatest, a *minor* one a
monthly extreme whose size is the least, of all monthly extremes of that hemisphere within a
quarter of a revolution of the node (1699.6 days) before and after it. So each hemisphere has one
of either kind in 18.6 years. The perturbation of the inclination with a period of 173 days
(0.15 deg) decides which month it is; the longitude of the node alone (0 or 180 deg) gives an
instant some months from it, and north and south need not share one.

Perigean spring tide: a new or full Moon within a stated time of a perigee. That is a criterion
in use, not a standard: authors take limits from some hours to several days, and some ask for a
small distance instead. It says when the astronomical tide is large; the height of the sea at a
place depends on much else.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.directions import (
    apparent_ecliptic,
    apparent_equatorial_vectors,
    apparent_longitude_deg,
    spherical,
)
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import (
    PERIOD_DAYS,
    STEPS_PER_PERIOD_DIRECT,
    clip_to_kernel,
    find_epochs,
    search_span,
)
from epochtest.sky.instants import instants_table, one_series, rate_per_day, words
from epochtest.sky.search import Series, find_roots, search_grid
from epochtest.study.events import MoonDistance, MoonPhase
from epochtest.timescale import Days

NODE_PERIOD_DAYS = 6798.38  # one revolution of the mean node (Meeus 1998, from eq. 47.7)
STANDSTILL_REACH_DAYS = NODE_PERIOD_DAYS / 4.0
MOST_HOURS_FROM_PERIGEE = 27.55455 / 2.0 * 24.0  # half an anomalistic month
HALF_STEP_DAYS = 0.002  # of the rate of declination: its error moves an extreme by 0.01 s
_STEP_DAYS = PERIOD_DAYS["moon"] / STEPS_PER_PERIOD_DIRECT


def find_node_passages(
    ephemeris: Ephemeris, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Passages of the Moon through its nodes with ``from_utc <= time < to_utc``, sorted.

    Columns: ``time_utc`` (datetime64[us], naive UTC), ``tdb_days`` (TDB since J2000.0),
    ``node`` (ascending or descending), ``longitude_deg`` (apparent, true equinox of date),
    ``distance_km`` (geometric, from the Earth's centre).

    Raises EphemerisSpanError if the span leaves the kernel.
    """

    def latitude(days: Days, _series: Series) -> Days:
        return apparent_ecliptic(ephemeris, "moon", days)[1]

    span = search_span(ephemeris, from_utc, to_utc)
    grid = search_grid(span.first_days, span.last_days, _STEP_DAYS)
    roots = find_roots(latitude, grid, latitude(grid, one_series(grid)), angle=False)
    return instants_table(
        span,
        roots.days,
        node=words(roots.rising, "ascending", "descending"),
        longitude_deg=apparent_longitude_deg(ephemeris, "moon", roots.days),
        distance_km=_distance_km(ephemeris, roots.days),
    )


def find_declination_extremes(
    ephemeris: Ephemeris, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Monthly extremes of declination with ``from_utc <= time < to_utc``, sorted.

    Columns: ``time_utc``, ``tdb_days``, ``extreme`` (north or south), ``declination_deg``
    (apparent, geocentric, true equator of date), ``distance_km`` (geometric).

    Raises EphemerisSpanError if the span leaves the kernel.
    """

    def declination(days: Days) -> Days:
        return spherical(apparent_equatorial_vectors(ephemeris, ("moon",), days)[0])[1]

    def rate(days: Days, _series: Series) -> Days:
        return rate_per_day(declination, days, ephemeris, HALF_STEP_DAYS)

    span = search_span(ephemeris, from_utc, to_utc)
    grid = search_grid(span.first_days, span.last_days, _STEP_DAYS)
    roots = find_roots(rate, grid, rate(grid, one_series(grid)), angle=False)
    return instants_table(
        span,
        roots.days,
        extreme=words(roots.rising, "south", "north"),
        declination_deg=declination(roots.days),
        distance_km=_distance_km(ephemeris, roots.days),
    )


def find_standstills(
    ephemeris: Ephemeris, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Major and minor standstills with ``from_utc <= time < to_utc``, sorted.

    Columns: ``time_utc``, ``tdb_days`` (of the monthly extreme), ``standstill`` (major or
    minor), ``extreme`` (north or south), ``declination_deg``, ``distance_km``.

    The 1699.6 days before and after belong to the definition. Where the kernel does not hold
    them nothing can be decided and nothing is listed: ``attrs["decided_tdb_days"]`` are the
    first and last instant between which every standstill is known.

    Raises EphemerisSpanError if the span leaves the kernel.
    """
    span = search_span(ephemeris, from_utc, to_utc)
    reach = np.timedelta64(round((STANDSTILL_REACH_DAYS + 1.0) * 86400.0), "s")
    start, end, _ = clip_to_kernel(ephemeris, span.from_utc - reach, span.to_utc + reach)
    monthly = find_declination_extremes(ephemeris, start, end)
    lowest, highest = ephemeris.covered_tdb_days
    decided = (lowest + STANDSTILL_REACH_DAYS, highest - STANDSTILL_REACH_DAYS)
    parts = []
    for hemisphere in ("north", "south"):
        rows = monthly[monthly["extreme"] == hemisphere]
        days, size = rows["tdb_days"].to_numpy(), rows["declination_deg"].abs().to_numpy()
        greatest, least = _within_reach(days, size, STANDSTILL_REACH_DAYS)
        known = (days >= decided[0]) & (days <= decided[1])
        for kind, best in (("major", greatest), ("minor", least)):
            found = rows[known & (size == best)]
            parts.append(found.assign(standstill=np.full(len(found), kind, dtype=object)))
    rows = pd.concat(parts)
    columns = {
        name: rows[name].to_numpy()
        for name in ("standstill", "extreme", "declination_deg", "distance_km")
    }
    table = instants_table(span, rows["tdb_days"].to_numpy(), **columns)
    table.attrs["decided_tdb_days"] = decided
    return table


def find_perigean_springs(
    ephemeris: Ephemeris,
    from_utc: np.datetime64,
    to_utc: np.datetime64,
    *,
    within_hours: float,
    phases: tuple[Literal["new", "full"], ...] = ("new", "full"),
) -> pd.DataFrame:
    """New and full Moons at most ``within_hours`` from a perigee, in the half-open span, sorted.

    Columns: ``time_utc``, ``tdb_days`` (of the apparent new or full Moon), ``phase`` (new Moon
    or full Moon), ``distance_km`` (then, geometric), ``perigee_tdb_days``,
    ``perigee_minus_phase_hours`` (negative: the perigee came first), ``perigee_distance_km``.
    ``attrs["criterion"]`` is the criterion in words.

    Perigees outside the kernel are unknown: in the last ``within_hours`` at its ends a
    spring tide can be missed.

    Raises ProtocolError unless 0 < within_hours < 330.65 (half an anomalistic month; at that,
    every new and full Moon would count) and a phase is named; EphemerisSpanError outside the
    kernel.
    """
    if not 0.0 < within_hours < MOST_HOURS_FROM_PERIGEE:
        raise ProtocolError(
            f"within_hours is {within_hours}; give more than 0 and less than "
            f"{MOST_HOURS_FROM_PERIGEE:.2f} hours, half the time from perigee to perigee."
        )
    span = search_span(ephemeris, from_utc, to_utc)
    event = MoonPhase(phases=phases, frame="apparent-of-date")
    syzygies = find_epochs(event, ephemeris, from_utc, to_utc)
    reach = np.timedelta64(round((within_hours + 1.0) * 3600.0), "s")
    start, end, _ = clip_to_kernel(ephemeris, span.from_utc - reach, span.to_utc + reach)
    perigees = find_epochs(MoonDistance(extreme="perigee"), ephemeris, start, end)
    days, at_perigee = syzygies["tdb_days"].to_numpy(), perigees["tdb_days"].to_numpy()
    nearest = _nearest(days, at_perigee)
    known = nearest >= 0
    syzygies, days, nearest = syzygies[known], days[known], nearest[known]
    hours = (at_perigee[nearest] - days) * 24.0
    close = np.abs(hours) <= within_hours
    table = instants_table(
        span,
        days[close],
        phase=syzygies["label"].to_numpy(dtype=object)[close],
        distance_km=syzygies["distance_km"].to_numpy()[close],
        perigee_tdb_days=at_perigee[nearest][close],
        perigee_minus_phase_hours=hours[close],
        perigee_distance_km=perigees["distance_km"].to_numpy()[nearest][close],
    )
    table.attrs["criterion"] = (
        f"{' or '.join(phases)} Moon at most {within_hours:g} h from a perigee "
        "(a criterion in use, not a standard)"
    )
    return table


def _distance_km(ephemeris: Ephemeris, days: Days) -> NDArray[np.float64]:
    """Geometric distance (n,) of the Moon from the Earth's centre."""
    distance: NDArray[np.float64] = np.linalg.norm(
        ephemeris.vectors_km("earth", ("moon",), days)[0], axis=0
    )
    return distance


def _within_reach(days: Days, size: Days, reach: float) -> tuple[Days, Days]:
    """Greatest and least ``size`` (n,) among the rows within ``reach`` days of each row."""
    if days.size == 0:
        return size, size
    first = np.searchsorted(days, days - reach, side="left")
    after = np.searchsorted(days, days + reach, side="right")
    cuts = np.column_stack((first, after)).ravel()
    # reduceat takes pairs of cuts; the value added at the end lets a cut stand behind the last.
    greatest = np.maximum.reduceat(np.append(size, -np.inf), cuts)[::2]
    least = np.minimum.reduceat(np.append(size, np.inf), cuts)[::2]
    return greatest, least


def _nearest(days: Days, among: Days) -> NDArray[np.intp]:
    """Index (n,) of the instant of ``among`` (m, sorted) nearest to each of ``days``; or -1."""
    if among.size == 0:
        return np.full(days.size, -1, dtype=np.intp)
    after = np.clip(np.searchsorted(among, days), 1, max(among.size - 1, 1))
    before, after = after - 1, np.minimum(after, among.size - 1)
    nearer_before = np.abs(days - among[before]) <= np.abs(among[after] - days)
    return np.where(nearer_before, before, after)
