"""Three bodies on a line in the ecliptic: who stands between, and how far off the line they are.

              M            the plane through all three, at right angles to the
         _,--' '-._ m      ecliptic: at the instant of a line-up it exists
   f _,-'          '-._
F --------------------- L
                      l    m = f + l: the misses are the angles of one triangle
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.directions import ECLIPTIC_J2000, separation_deg
from epochtest.sky.ephemeris import Ephemeris, Vectors
from epochtest.sky.search import Series
from epochtest.study.events import Body
from epochtest.timescale import Days

Values = NDArray[np.float64]

AU_KM = 149597870.7  # IAU 2012, resolution B2
# From the Sun outwards: the order in which tables name bodies.
BODIES: tuple[Body, ...] = (
    "sun", "mercury", "venus", "earth", "moon", "mars",
    "jupiter", "saturn", "uranus", "neptune", "pluto",
)  # fmt: skip


class Geometry(NamedTuple):
    """Line-ups (m,): ``order`` (3, m) says which slot of the triple is first, middle and last.

    ``miss_deg`` (3, m) as seen from first, middle and last; ``distance_au`` (2, m) from the
    first to the middle and from the middle to the last; ``out_of_plane_deg`` (m,). For their
    definition see `epochtest.sky.atlas.find_lineups`.
    """

    order: Series
    out_of_plane_deg: Values
    miss_deg: Values
    distance_au: Values


def cross(places: Values) -> Values:
    """Twice the signed area (...) of triangles of places (3, 2, ...): zero on a line."""
    (ax, ay), (bx, by), (cx, cy) = places
    area: Values = (bx - ax) * (cy - ay) - (by - ay) * (cx - ax)
    return area


def cross_rate(places: Values, rates: Values) -> Values:
    """Rate (...) of `cross` for places (3, 2, ...) that move at ``rates`` (3, 2, ...)."""
    (ax, ay), (bx, by), (cx, cy) = places
    (au, av), (bu, bv), (cu, cv) = rates
    rate: Values = (
        (bu - au) * (cy - ay)
        + (bx - ax) * (cv - av)
        - (bv - av) * (cx - ax)
        - (by - ay) * (cu - au)
    )
    return rate


class Triples:
    """Triples of bodies (t, 3), by number, and their places at instants of their own."""

    def __init__(self, ephemeris: Ephemeris, bodies: tuple[Body, ...], triples: Series) -> None:
        self._ephemeris = ephemeris
        self._bodies = bodies
        # Which of its three (-1: none) each body is in each triple, (bodies, t).
        self._slot = np.full((len(bodies), len(triples)), -1, dtype=np.int8)
        for slot in range(3):
            self._slot[triples[:, slot], np.arange(len(triples))] = slot

    def area(self, days: Days, series: Series) -> Values:
        """`cross` (m,) of the triple ``series`` (m,) at ``days`` (m,), km2."""
        return cross(self._gathered(days, series, 2, self._position))

    def area_rate(self, days: Days, series: Series) -> Values:
        """Rate (m,) of `area` in km2 per day."""
        states = self._gathered(days, series, 4, self._state)
        return cross_rate(states[:, :2], states[:, 2:])

    def geometry(self, days: Days, series: Series) -> Geometry:
        """What the line-ups (m,) of the triples ``series`` at ``days`` look like."""
        xyz = self._gathered(days, series, 3, self._position)
        flat = xyz[:, :2]
        inward = [  # negative for the one between: the directions to the others are opposed
            ((flat[i - 1] - flat[i]) * (flat[i - 2] - flat[i])).sum(axis=0) for i in range(3)
        ]
        middle = np.argmin(inward, axis=0)
        order = np.stack([np.where(middle == 0, 1, 0), middle, np.where(middle == 2, 1, 2)])
        first, between, last = np.take_along_axis(xyz, order[:, None], axis=0)
        to_first, to_last = first - between, last - between
        ends = last - first
        miss = np.stack(
            [
                separation_deg(-to_first, ends),
                separation_deg(-to_first, to_last),
                separation_deg(to_last, ends),
            ]
        )
        return Geometry(
            order,
            -(_latitude_deg(to_first) + _latitude_deg(to_last)),
            miss,
            np.stack([np.linalg.norm(to_first, axis=0), np.linalg.norm(to_last, axis=0)]) / AU_KM,
        )

    def _position(self, body: Body, days: Days) -> Values:
        return ECLIPTIC_J2000 @ self._ephemeris.position_km(body, days)

    def _state(self, body: Body, days: Days) -> Values:
        return flat_state(self._ephemeris, body, days)

    def _gathered(
        self, days: Days, series: Series, rows: int, of_body: Callable[[Body, Days], Values]
    ) -> Values:
        """Rows (3, rows, m) of the three bodies of every instant; each body is asked once."""
        found = np.empty((3, rows, days.size))
        for body, slots in zip(self._bodies, self._slot, strict=True):
            slot = slots[series]
            column = np.nonzero(slot >= 0)[0]
            if column.size:
                found[slot[column], :, column] = of_body(body, days[column])[:rows].T
        return found


def flat_state(ephemeris: Ephemeris, body: Body, days: Days) -> Values:
    """x, y (km) and their rates (km per day), (4, n), barycentric, J2000 ecliptic."""
    place, velocity = ephemeris.state(body, days)
    return np.concatenate((ECLIPTIC_J2000[:2] @ place, ECLIPTIC_J2000[:2] @ velocity))


def _latitude_deg(xyz: Vectors) -> Values:
    latitude: Values = np.degrees(np.arctan2(xyz[2], np.hypot(xyz[0], xyz[1])))
    return latitude


def require_bodies(bodies: Sequence[str], among: Sequence[str] = BODIES) -> None:
    """Raise ProtocolError unless these are different bodies ``among`` those to choose from."""
    if strange := [body for body in bodies if body not in among]:
        raise ProtocolError(
            f"{strange[0]!r} (among {', '.join(bodies)}) is no body to choose here; "
            f"name some of {', '.join(among)}."
        )
    if len(set(bodies)) < len(bodies):
        raise ProtocolError(
            f"a body is named twice in {', '.join(bodies)} (it cannot be seen from itself, "
            "nor stand on a line with itself); name different bodies."
        )
