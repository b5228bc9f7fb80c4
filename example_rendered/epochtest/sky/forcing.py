"""Forcing budget: how strongly each body pulls at the Earth, beside loads of every day.

The budget answers "could this line-up press on a fault at all?" with sizes only: the tide that a
body raises, where it stands in the zenith and, if asked, at one place; against the mean Moon, in
m/s2 and in Pa of surface stress; and that stress against weather and sea. It says nothing about
what happened, and it forecasts nothing.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.body_tide import (
    DEFAULT_ROCK,
    IERS_2010,
    OCEAN_LOADING_NOTE,
    LoveNumbers,
    Rock,
    strain_under,
    surface_strain,
    surface_stress,
)
from epochtest.sky.earth_fixed import Points, earth_points
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.search import find_roots, search_grid
from epochtest.sky.tide_potential import (
    GM_KM3_PER_S2,
    mean_moon_acceleration_m_s2,
    tide_acceleration,
    tide_gm,
    zenith_acceleration_m_s2,
)
from epochtest.study.events import Body
from epochtest.timescale import Days, tdb_days_from_utc, utc_from_tdb_days, utc_instant

Values = NDArray[np.float64]

TIDE_RAISERS: tuple[Body, ...] = tuple(GM_KM3_PER_S2)
_GRID_DAYS: dict[Body, float] = {"moon": 1.0}  # the Moon's distance turns every 14 days
_PLANET_GRID_DAYS = 4.0  # Mercury's turns every 40 days or more
_PLACE_STEP_DAYS = 1.0 / 48.0  # half an hour; tops are read off a parabola
_PLACE_CHUNK = 50_000
_ONE_MICROSECOND = np.timedelta64(1, "us")
_ONE_DAY = np.timedelta64(1, "D")


class Load(NamedTuple):
    """A load on the ground, Pa of vertical pressure or of stress, and where it is from."""

    name: str
    pascal: float
    source: str


EVERYDAY_LOADS: tuple[Load, ...] = (
    Load(
        "air_tide",
        22.5,
        "half-daily tide of air pressure at Copenhagen, amplitude 225 microbar: Chapman (1969), "
        "Q. J. R. Meteorol. Soc. 95",
    ),
    Load(
        "storm",
        2400.0,
        "fall of air pressure by 24 hPa in a day at 60 degrees latitude, the least that is called "
        "explosive: Sanders & Gyakum (1980), Mon. Weather Rev. 108",
    ),
    Load(
        "sea_metre",
        1025.0 * 9.80665,
        "1 m of ocean tide on the sea floor: density 1025 kg/m3 (common practice) times standard "
        "gravity (CGPM 1901)",
    ),
    Load(
        "ocean_loading",
        50e3,
        "ocean loading near coasts, the largest stresses: Cochran, Vidale & Tanaka (2004), Science "
        "306:1164",
    ),
)


def forcing_budget(
    ephemeris: Ephemeris,
    from_utc: np.datetime64,
    to_utc: np.datetime64,
    *,
    bodies: tuple[Body, ...] = TIDE_RAISERS,
    on_date: np.datetime64 | None = None,
    place: tuple[float, float] | None = None,
    love: LoveNumbers = IERS_2010,
    rock: Rock = DEFAULT_ROCK,
) -> pd.DataFrame:
    """Each body's largest tide in ``from_utc <= time < to_utc``: one row per body, largest first.

    Columns: ``body``; ``time_utc`` (datetime64[us]), ``tdb_days`` and ``distance_km`` of its
    nearest approach to the Earth; there, with the body in the zenith and to degree 2,
    ``acceleration_m_s2`` (vertical), ``ratio_to_mean_moon`` (Moon at 384400 km) and
    ``stress_pa`` (horizontal stress of the surface; degree 3 would add 2 % for the Moon and
    nothing for others); ``stress_over_...`` that stress divided by each of EVERYDAY_LOADS.
    With ``on_date`` the same for that UTC day in ``on_date_...`` columns. With ``place``
    (geodetic latitude, longitude, degrees) ``here_acceleration_m_s2`` and ``here_stress_pa``:
    the largest vertical acceleration and mean horizontal stress there, either sign, degrees 2
    and 3, and ``here_time_utc`` of the latter, to half an hour.

    ``attrs`` hold ``note`` (OCEAN_LOADING_NOTE) and ``loads`` (name: source). Ocean loading is
    not modelled: the solid tide stays below about 5 kPa, ocean loading can reach 50 kPa near
    coasts. Time grows with the span, ten times faster with ``place``; memory does not.
    Raises EphemerisSpanError outside the kernel; ProtocolError for an empty span, or the Earth
    among the bodies.
    """
    for body in bodies:
        tide_gm(body)
    first, last = _span_days(ephemeris, from_utc, to_utc)
    table = _nearest(ephemeris, bodies, first, last, love, rock)
    if on_date is not None:
        day = utc_instant(on_date).astype("datetime64[D]")
        edges = _span_days(ephemeris, day.astype("datetime64[us]"), day + _ONE_DAY)
        dated = _nearest(ephemeris, bodies, *edges, love, rock)
        table = table.join(dated.drop(columns="body").add_prefix("on_date_"))
    if place is not None:
        points = earth_points(*place)
        here = [_at_place(ephemeris, body, points, first, last, love, rock) for body in bodies]
        days = np.array([row[2] for row in here])
        table["here_acceleration_m_s2"] = np.array([row[0] for row in here], dtype=float)
        table["here_stress_pa"] = np.array([row[1] for row in here], dtype=float)
        table["here_time_utc"] = utc_from_tdb_days(days)
    table = table.sort_values("acceleration_m_s2", ascending=False, ignore_index=True)
    table.attrs = {
        "note": OCEAN_LOADING_NOTE,
        "loads": {load.name: load.source for load in EVERYDAY_LOADS},
    }
    return table


def nearest_approach(
    ephemeris: Ephemeris, body: Body, first_days: float, last_days: float
) -> tuple[float, float]:
    """Instant (days of TDB) and distance (km) of the least distance from the Earth's centre.

    Every minimum between both ends is found as a root of the range rate; the ends count too.
    Raises EphemerisSpanError outside the kernel.
    """

    def range_rate(days: Days, series: NDArray[np.intp]) -> Days:
        position, velocity = ephemeris.vector_state("earth", body, days)
        rate: Days = (position * velocity).sum(axis=0) / np.linalg.norm(position, axis=0)
        return rate

    grid = search_grid(first_days, last_days, _GRID_DAYS.get(body, _PLANET_GRID_DAYS))
    candidates = np.array([first_days, last_days])
    if grid.size:
        roots = find_roots(range_rate, grid, range_rate(grid, np.zeros(0, np.intp)), angle=False)
        candidates = np.concatenate((candidates, roots.days[roots.rising]))
    distance = np.linalg.norm(ephemeris.vectors_km("earth", (body,), candidates)[0], axis=0)
    nearest = int(np.argmin(distance))
    return float(candidates[nearest]), float(distance[nearest])


def zenith_stress_pa(
    body: Body, distance_km: float, love: LoveNumbers = IERS_2010, rock: Rock = DEFAULT_ROCK
) -> float:
    """Horizontal stress in Pa of the surface under a body in the zenith, degree 2.

    For the mean Moon 1987.34 Pa with the default rock, at the latitude (35.3 degrees) where the
    Love numbers have their plain values. Ocean loading is not modelled: it can reach 50 kPa
    near coasts, the solid tide about 5.
    """
    local_km = np.array([0.0, 0.0, distance_km])
    strain = strain_under(body, local_km, np.sqrt(1.0 / 3.0), love, degrees=(2,))
    return float(surface_stress(strain, rock).nn)


def _span_days(
    ephemeris: Ephemeris, from_utc: np.datetime64, to_utc: np.datetime64
) -> tuple[float, float]:
    """First and last instant of the half-open span, days of TDB; or the errors."""
    edges = np.array([utc_instant(from_utc), utc_instant(to_utc) - _ONE_MICROSECOND])
    if not edges[0] <= edges[1]:
        raise ProtocolError(
            f"the span from {from_utc} to {to_utc} is empty; let it end after it begins."
        )
    first, last = tdb_days_from_utc(edges)
    ephemeris.require(np.array([first, last]))
    return float(first), float(last)


def _nearest(
    ephemeris: Ephemeris,
    bodies: tuple[Body, ...],
    first: float,
    last: float,
    love: LoveNumbers,
    rock: Rock,
) -> pd.DataFrame:
    """The columns that belong to the nearest approach, one row per body in the order given."""
    found = np.array([nearest_approach(ephemeris, body, first, last) for body in bodies])
    days, distance = found.reshape(-1, 2).T
    pairs = list(zip(bodies, distance, strict=True))
    acceleration = np.array([zenith_acceleration_m_s2(*pair) for pair in pairs], dtype=float)
    stress = np.array([zenith_stress_pa(*pair, love, rock) for pair in pairs], dtype=float)
    table = pd.DataFrame(
        {
            "body": pd.Series(list(bodies), dtype=str),
            "time_utc": utc_from_tdb_days(days),
            "tdb_days": days,
            "distance_km": distance,
            "acceleration_m_s2": acceleration,
            "ratio_to_mean_moon": acceleration / mean_moon_acceleration_m_s2(),
            "stress_pa": stress,
        }
    )
    for load in EVERYDAY_LOADS:
        table[f"stress_over_{load.name}"] = stress / load.pascal
    return table


def _at_place(
    ephemeris: Ephemeris,
    body: Body,
    points: Points,
    first: float,
    last: float,
    love: LoveNumbers,
    rock: Rock,
) -> tuple[float, float, float]:
    """Largest vertical acceleration and mean horizontal stress at one point, and when."""
    count = max(3, int(np.ceil((last - first) / _PLACE_STEP_DAYS)) + 1)
    step = (last - first) / (count - 1)
    best = np.zeros(3)
    for start in range(0, count, _PLACE_CHUNK):
        # One point more on both sides, so that a top between two chunks is seen by both.
        index = np.arange(max(0, start - 1), min(count, start + _PLACE_CHUNK + 1))
        days = np.minimum(first + step * index, last)
        up = tide_acceleration(ephemeris, (body,), days, points)[0, 2, 0]
        stress = surface_stress(surface_strain(ephemeris, days, points, (body,), love), rock)
        largest, _ = _top(up)
        best[0] = max(best[0], largest)
        largest, column = _top(0.5 * stress.trace[0])
        if largest > best[1]:
            best[1:] = largest, days[column]
    return float(best[0]), float(best[1]), float(best[2])


def _top(values: Values) -> tuple[float, int]:
    """Largest absolute value, at the top of the parabola through three samples, and its place."""
    size = np.abs(values)
    column = int(np.argmax(size))
    if not 0 < column < size.size - 1:
        return float(size[column]), column
    before, here, after = size[column - 1 : column + 2]
    bend = before - 2.0 * here + after
    return float(here - (before - after) ** 2 / (8.0 * bend) if bend < 0.0 else here), column
