"""Stations and greatest elongations of the planets, seen from the Earth.

Station: the apparent geocentric longitude (light-time, aberration, true equinox of date) stands
still. Nutation is part of it and counts: the longitudes of Neptune and Pluto change their rate
by under 2" per day each day, the nutation has up to 0.2" per day, so a station in the longitude
from the mean equinox can differ by hours. Stations in right ascension are other instants still.

Greatest elongation: the true angle between the apparent directions of an inner planet and the
Sun is at a maximum, once east and once west of the Sun in each synodic period.

Passing behind the Sun's middle, a planet's apparent place jumps by the deflection of its light;
extremes that arise there (within a degree of the Sun, where no true one lies) are left out.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.directions import (
    apparent_longitude_deg,
    apparent_vectors,
    longitude_difference_deg,
    separation_deg,
)
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import PERIOD_DAYS, STEPS_PER_PERIOD, search_span
from epochtest.sky.instants import instants_table, one_series, rate_per_day, words
from epochtest.sky.search import Roots, Series, find_roots, search_grid
from epochtest.study.events import Body
from epochtest.timescale import Days

INNER: tuple[Body, ...] = ("mercury", "venus")
SEEN: tuple[Body, ...] = (*INNER, "mars", "jupiter", "saturn", "uranus", "neptune", "pluto")
# Half step of the rate. Its error grows as the square: 0.01 s for the nutation of 13.7 days; the
# rounding of float64 grows as its inverse: 1 ms for Pluto.
HALF_STEP_DAYS = 0.005
_CLEAR_OF_SUN_DEG = 1.0


def find_stations(
    ephemeris: Ephemeris, planet: Body, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Stations in apparent longitude with ``from_utc <= time < to_utc``, sorted.

    Columns: ``time_utc`` (datetime64[us], naive UTC), ``tdb_days`` (TDB since J2000.0),
    ``planet``, ``station`` ("turns retrograde" or "turns direct"), ``longitude_deg`` (apparent,
    true equinox of date), ``elongation_deg`` (true angle from the Sun).

    Raises ProtocolError for any body not in `SEEN`, EphemerisSpanError outside the kernel.
    """
    if planet not in SEEN:
        raise ProtocolError(
            f"{planet!r} has no station seen from the Earth; name one of {', '.join(SEEN)}."
        )

    def longitude(days: Days) -> Days:
        return apparent_longitude_deg(ephemeris, planet, days)

    def rate(days: Days, _series: Series) -> Days:
        return rate_per_day(longitude, days, ephemeris, HALF_STEP_DAYS, angle=True)

    step = min(PERIOD_DAYS[planet], PERIOD_DAYS["earth"]) / STEPS_PER_PERIOD
    span = search_span(ephemeris, from_utc, to_utc)
    grid = search_grid(span.first_days, span.last_days, step)
    roots = find_roots(rate, grid, rate(grid, one_series(grid)), angle=False)
    days, rising, _, from_sun_deg = _clear_of_sun(ephemeris, planet, roots)
    return instants_table(
        span,
        days,
        planet=np.full(days.size, planet, dtype=object),
        station=words(rising, "turns direct", "turns retrograde"),
        longitude_deg=longitude(days),
        elongation_deg=from_sun_deg,
    )


def find_greatest_elongations(
    ephemeris: Ephemeris, planet: Body, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Greatest elongations of Mercury or Venus with ``from_utc <= time < to_utc``, sorted.

    Columns: ``time_utc``, ``tdb_days``, ``planet``, ``side`` ("east": evening sky, or "west"),
    ``elongation_deg`` (true angle between apparent directions).

    Raises ProtocolError for any other body, EphemerisSpanError outside the kernel.
    """
    if planet not in INNER:
        raise ProtocolError(
            f"{planet!r} has no greatest elongation seen from the Earth; name one of "
            f"{', '.join(INNER)}."
        )

    def elongation(days: Days) -> Days:
        return separation_deg(*apparent_vectors(ephemeris, (planet, "sun"), days))

    def rate(days: Days, _series: Series) -> Days:
        return rate_per_day(elongation, days, ephemeris, HALF_STEP_DAYS)

    step = PERIOD_DAYS[planet] / STEPS_PER_PERIOD
    span = search_span(ephemeris, from_utc, to_utc)
    grid = search_grid(span.first_days, span.last_days, step)
    roots = find_roots(rate, grid, rate(grid, one_series(grid)), angle=False)
    days, rising, east, from_sun_deg = _clear_of_sun(ephemeris, planet, roots)
    greatest = ~rising
    return instants_table(
        span,
        days[greatest],
        planet=np.full(int(greatest.sum()), planet, dtype=object),
        side=words(east[greatest], "east", "west"),
        elongation_deg=from_sun_deg[greatest],
    )


def _clear_of_sun(
    ephemeris: Ephemeris, planet: Body, roots: Roots
) -> tuple[Days, NDArray[np.bool_], NDArray[np.bool_], Days]:
    """Instants, rising, planet east of the Sun, elongation (deg) of the roots beside the Sun."""
    seen, sun = apparent_vectors(ephemeris, (planet, "sun"), roots.days)
    elongation = separation_deg(seen, sun)
    clear = elongation > _CLEAR_OF_SUN_DEG
    east = longitude_difference_deg(seen, sun) > 0.0
    return roots.days[clear], roots.rising[clear], east[clear], elongation[clear]
