"""Close approaches of two bodies in the sky: minima of their true angle, seen from any centre.

The angle itself has a sharp corner where one body passes over the other; its cosine c = u.v of
the unit vectors is smooth there. Minima of the angle are the falling roots of the rate
c' = u'.v + u.v', so they are found by `epochtest.sky.search` without a grid point having to
hit the approach. Unlike a conjunction in longitude, this does not depend on the ecliptic.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.directions import separation_deg
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import LONGEST_STEP_DAYS, PERIOD_DAYS, STEPS_PER_PERIOD, search_span
from epochtest.sky.lineup_geometry import AU_KM, BODIES, require_bodies
from epochtest.sky.search import find_roots, search_grid
from epochtest.study.events import Body
from epochtest.timescale import Days, utc_from_tdb_days

Values = NDArray[np.float64]

CHUNK_POINTS = 32768  # of the grid: 8 MB of vectors for two bodies


def find_separation_minima(
    ephemeris: Ephemeris,
    centre: Body,
    bodies: Sequence[Body],
    below_deg: float,
    from_utc: np.datetime64 | str,
    to_utc: np.datetime64 | str,
) -> pd.DataFrame:
    """Every minimum in time, below ``below_deg``, of the angle of each pair among ``bodies``.

    Columns: ``time_utc`` (datetime64[us], naive UTC, ``from_utc <= time < to_utc``),
    ``tdb_days`` (days of TDB since J2000.0), ``first``, ``second`` (names, from the Sun
    outwards), ``separation_deg`` (true angle at ``centre``), ``distance_first_au`` and
    ``distance_second_au`` from it. Geometric directions at one instant: no light-time, no
    parallax of a place on the Earth. Instants are good to 0.1 ms of the ephemeris.

    Time grows with the span and the number of pairs, memory with the rows. Raises
    EphemerisSpanError outside the kernel, ProtocolError for bodies or a threshold that cannot be.
    """
    require_bodies((centre, *bodies))
    if len(bodies) < 2:
        raise ProtocolError(
            f"a separation needs at least two bodies, but found {', '.join(bodies) or 'none'}."
        )
    if not 0.0 < below_deg <= 180.0:
        raise ProtocolError(
            f"below_deg = {below_deg:g} can select nothing; give more than 0, at most 180 degrees."
        )
    span = search_span(ephemeris, from_utc, to_utc)
    tables = []
    for first, second in combinations(sorted(bodies, key=BODIES.index), 2):
        pair = (first, second)
        days = np.empty(0)
        if not span.empty:
            days = _minima(ephemeris, centre, pair, span.first_days, span.last_days)
        tables.append(_table(ephemeris, centre, pair, days, below_deg))
    table = pd.concat(tables, ignore_index=True)
    return span.inside(table.sort_values("tdb_days", kind="stable", ignore_index=True))


def _minima(
    ephemeris: Ephemeris, centre: Body, pair: tuple[Body, Body], first: float, last: float
) -> Days:
    """Minima (m,) of the angle between two days."""

    def cosine_rate(days: Days, _series: NDArray[np.intp]) -> Values:
        (u, du), (v, dv) = (_direction(ephemeris, centre, body, days) for body in pair)
        rate: Values = (du * v + u * dv).sum(axis=0)
        return rate

    shortest = min(PERIOD_DAYS[body] for body in (centre, *pair) if body != "sun")
    grid = search_grid(first, last, min(LONGEST_STEP_DAYS, shortest / STEPS_PER_PERIOD))
    found = []
    for begin in range(0, grid.size - 1, CHUNK_POINTS):
        end = min(begin + CHUNK_POINTS, grid.size - 1)
        # One more cell at both ends, so that a turn in the outermost cell shows as a triple.
        part = grid[max(begin - 1, 0) : end + 2]
        none = np.zeros(part.size, dtype=np.intp)
        roots = find_roots(cosine_rate, part, cosine_rate(part, none), angle=False)
        until = np.inf if end == grid.size - 1 else grid[end]
        mine = (roots.days >= grid[begin]) & (roots.days < until) & ~roots.rising
        found.append(roots.days[mine])
    return np.concatenate(found)


def _direction(ephemeris: Ephemeris, centre: Body, body: Body, days: Days) -> tuple[Values, Values]:
    """Unit vector (3, n) from ``centre`` to ``body``, and its rate per day."""
    place, velocity = ephemeris.vector_state(centre, body, days)
    distance = np.linalg.norm(place, axis=0)
    unit = place / distance
    across = velocity - unit * (unit * velocity).sum(axis=0)
    return unit, across / distance


def _table(
    ephemeris: Ephemeris,
    centre: Body,
    pair: tuple[Body, Body],
    days: Days,
    below_deg: float,
) -> pd.DataFrame:
    one, other = ephemeris.vectors_km(centre, pair, days)
    angle_deg = separation_deg(one, other)
    near = angle_deg < below_deg
    count = int(near.sum())
    return pd.DataFrame(
        {
            "time_utc": utc_from_tdb_days(days[near]).astype("datetime64[us]"),
            "tdb_days": days[near],
            "first": pd.array([pair[0]] * count, dtype="str"),
            "second": pd.array([pair[1]] * count, dtype="str"),
            "separation_deg": angle_deg[near],
            "distance_first_au": np.linalg.norm(one[:, near], axis=0) / AU_KM,
            "distance_second_au": np.linalg.norm(other[:, near], axis=0) / AU_KM,
        }
    )
