"""Equinoxes and solstices; perihelion and aphelion of the Earth and the planets.

Seasons: the apparent geocentric longitude of the Sun (light-time, aberration, true equinox of
date) is 0, 90, 180 or 270 degrees (Meeus 1998, Astronomical Algorithms, ch. 27).

Apsides: extremes of the geometric distance of a body from the Sun at one instant. For the Earth
that is the Earth's own centre: the Moon swings it by 4,700 km about the barycentre of the two
and moves an apsis by up to 1.4 days from the barycentre's. The other planets are the barycentres
of their systems, as in the kernels. Every extreme counts: the Sun's own swing about the
barycentre of the planetary system can give Neptune three perihelia or aphelia in one revolution.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from epochtest.errors import ProtocolError
from epochtest.sky.directions import apparent_longitude_deg
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import PERIOD_DAYS, STEPS_PER_PERIOD, search_span
from epochtest.sky.instants import instants_table, one_series, words
from epochtest.sky.search import Series, find_roots, search_grid
from epochtest.study.events import Body
from epochtest.timescale import Days

AU_KM = 149597870.7  # IAU 2012, resolution B2
SEASON_DEG: dict[str, float] = {
    "March equinox": 0.0,
    "June solstice": 90.0,
    "September equinox": 180.0,
    "December solstice": 270.0,
}
_SEASON_STEP_DAYS = 30.0  # the Sun moves by about 30 degrees and never turns back
_EARTH_STEP_DAYS = 5.0  # a share of the month
_LONGEST_STEP_DAYS = 12.0  # the Sun's swing by Mercury has a period of 88 days


def find_seasons(
    ephemeris: Ephemeris, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Equinoxes and solstices with ``from_utc <= time < to_utc``, sorted.

    Columns: ``time_utc`` (datetime64[us], naive UTC), ``tdb_days`` (TDB since J2000.0),
    ``season`` (name by month, true for both hemispheres), ``longitude_deg`` (of the Sun).

    Raises EphemerisSpanError if the span leaves the kernel.
    """
    targets = np.array(list(SEASON_DEG.values()))

    def off_target(days: Days, series: Series) -> Days:
        off: Days = apparent_longitude_deg(ephemeris, "sun", days) - targets[series]
        return off

    span = search_span(ephemeris, from_utc, to_utc)
    grid = search_grid(span.first_days, span.last_days, _SEASON_STEP_DAYS)
    samples = apparent_longitude_deg(ephemeris, "sun", grid) - targets[:, None]
    roots = find_roots(off_target, grid, samples)
    names = np.array(list(SEASON_DEG), dtype=object)[roots.series]
    return instants_table(span, roots.days, season=names, longitude_deg=targets[roots.series])


def find_apsides(
    ephemeris: Ephemeris, body: Body, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Perihelia and aphelia of ``body`` with ``from_utc <= time < to_utc``, sorted.

    Columns: ``time_utc``, ``tdb_days``, ``body``, ``apsis`` (perihelion or aphelion),
    ``distance_km`` and ``distance_au`` from the centre of the Sun.

    Raises ProtocolError for anything but a planet, EphemerisSpanError outside the kernel.
    """
    if body == "moon" or body not in PERIOD_DAYS:
        raise ProtocolError(
            f"{body!r} has no perihelion; name a planet (for the Moon's perigee and apogee search "
            "the moon-distance event)."
        )

    def range_rate(days: Days, _series: Series) -> Days:
        position, velocity = ephemeris.vector_state("sun", body, days)
        rate: Days = (position * velocity).sum(axis=0) / np.linalg.norm(position, axis=0)
        return rate

    longest = _EARTH_STEP_DAYS if body == "earth" else _LONGEST_STEP_DAYS
    step = min(longest, PERIOD_DAYS[body] / STEPS_PER_PERIOD)
    span = search_span(ephemeris, from_utc, to_utc)
    grid = search_grid(span.first_days, span.last_days, step)
    roots = find_roots(range_rate, grid, range_rate(grid, one_series(grid)), angle=False)
    distance = np.linalg.norm(ephemeris.vectors_km("sun", (body,), roots.days)[0], axis=0)
    return instants_table(
        span,
        roots.days,
        body=np.full(roots.days.size, body, dtype=object),
        apsis=words(roots.rising, "perihelion", "aphelion"),
        distance_km=distance,
        distance_au=distance / AU_KM,
    )
