"""Tide-generating potential and acceleration of degrees 2 and 3, of any body, anywhere.

Degree n of the potential of a body of GM at distance d, seen at psi from the point at r:

    W_n = GM / d (r / d)^n P_n(cos psi)

and its gradient, both for a rigid Earth: the ground's own yielding is `body_tide`'s matter.
Degree 4 and above are left out: for the Moon at perigee less than 0.04 % of degree 2.
(Munk & MacDonald 1960, chapter 2; Agnew 2015, Treatise on Geophysics 3.06.)
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.directions import SUN_GM_KM3_PER_S2
from epochtest.sky.earth_fixed import EARTH_RADIUS_M, Points, earth_fixed_km
from epochtest.sky.ephemeris import Ephemeris
from epochtest.study.events import Body

Values = NDArray[np.float64]

# Mass parameters of DE440 as its comment area gives them; planets with their moons.
GM_KM3_PER_S2: dict[Body, float] = {
    "moon": 4902.800118,
    "sun": SUN_GM_KM3_PER_S2,
    "mercury": 22031.868551,
    "venus": 324858.592,
    "mars": 42828.375816,
    "jupiter": 126712764.1,
    "saturn": 37940584.8418,
    "uranus": 5794556.4,
    "neptune": 6836527.10058,
    "pluto": 975.5,
}
EARTH_GM_M3_PER_S2 = 398600.435507e9  # DE440
SURFACE_GRAVITY_M_PER_S2 = EARTH_GM_M3_PER_S2 / EARTH_RADIUS_M**2  # 9.7983, as IERS (2010) eq. 7.5
MEAN_MOON_DISTANCE_KM = 384400.0
DEGREES = (2, 3)
_CHUNK_VALUES = 200_000  # points x instants worked on at once: a few MB


def mean_moon_acceleration_m_s2() -> float:
    """Vertical degree-2 acceleration under the Moon at 384400 km: 1.1011e-6 m/s2."""
    return zenith_acceleration_m_s2("moon", MEAN_MOON_DISTANCE_KM)


def zenith_acceleration_m_s2(body: Body, distance_km: float) -> float:
    """Vertical degree-2 acceleration 2 GM R / d^3 where ``body`` stands in the zenith."""
    return 2.0 * tide_gm(body) * EARTH_RADIUS_M / (1000.0 * distance_km) ** 3


def legendre(degree: int, c: Values) -> tuple[Values, Values, Values]:
    """P_n, P_n' and P_n'' at ``c`` for degree 2 or 3. Raises ValueError for another degree."""
    if degree == 2:
        return 1.5 * c * c - 0.5, 3.0 * c, np.full_like(c, 3.0)
    if degree == 3:
        squared = c * c
        return (2.5 * squared - 1.5) * c, 7.5 * squared - 1.5, 15.0 * c
    raise ValueError(f"the tide is computed for degrees 2 and 3 but degree {degree} was asked for")


def potential_m2_s2(
    gm_m3_s2: float, body_m: Values, point_m: Values, degrees: Sequence[int] = DEGREES
) -> Values:
    """Potential in m2/s2 at points (3, ...) of a body at (3, ...), metres; shapes broadcast."""
    distance, radius, c, _ = _geometry(body_m, point_m)
    total = np.zeros(np.broadcast_shapes(distance.shape, radius.shape))
    for n in degrees:
        total += gm_m3_s2 / distance * (radius / distance) ** n * legendre(n, c)[0]
    return total


def acceleration_m_s2(
    gm_m3_s2: float, body_m: Values, point_m: Values, degrees: Sequence[int] = DEGREES
) -> Values:
    """Gradient (3, ...) of `potential_m2_s2` in m/s2, in the axes of the vectors given."""
    distance, radius, c, towards = _geometry(body_m, point_m)
    outward = point_m / np.where(radius > 0.0, radius, 1.0)
    total = np.zeros((3, *np.broadcast_shapes(distance.shape, radius.shape)))
    for n in degrees:
        p, slope, _ = legendre(n, c)
        size = gm_m3_s2 / distance**2 * (radius / distance) ** (n - 1)
        total += size * (n * p * outward + slope * (towards - c * outward))
    return total


def tide_potential(
    ephemeris: Ephemeris,
    bodies: tuple[Body, ...],
    tdb_days: ArrayLike,
    points: Points,
    degrees: Sequence[int] = DEGREES,
) -> Values:
    """Potential in m2/s2 of each body at every point and instant: (bodies, m, n).

    ``tdb_days`` (n,) are days of TDB since J2000.0. Rigid Earth, no ocean.
    Raises EphemerisSpanError outside the kernel and ProtocolError for the Earth as a body.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    found = np.empty((len(bodies), len(points), days.size))
    gm, point = [tide_gm(body) for body in bodies], points.xyz_m[:, :, None]
    for part in tide_parts(len(points), days.size):
        for i, vector in enumerate(earth_fixed_km(ephemeris, bodies, days[part])):
            body_m = 1000.0 * vector[:, None, :]
            found[i, :, part] = potential_m2_s2(gm[i], body_m, point, degrees)
    return found


def tide_acceleration(
    ephemeris: Ephemeris,
    bodies: tuple[Body, ...],
    tdb_days: ArrayLike,
    points: Points,
    degrees: Sequence[int] = DEGREES,
) -> Values:
    """Acceleration in m/s2 of each body at every point and instant: (bodies, 3, m, n).

    The second axis is east, north, up of ``points``. Rigid Earth, no ocean.
    Raises EphemerisSpanError outside the kernel and ProtocolError for the Earth as a body.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    found = np.empty((len(bodies), 3, len(points), days.size))
    gm, point = [tide_gm(body) for body in bodies], points.xyz_m[:, :, None]
    axes = np.stack((points.east, points.north, points.up))
    for part in tide_parts(len(points), days.size):
        for i, vector in enumerate(earth_fixed_km(ephemeris, bodies, days[part])):
            gradient = acceleration_m_s2(gm[i], 1000.0 * vector[:, None, :], point, degrees)
            found[i, :, :, part] = np.einsum("acm,cmn->amn", axes, gradient)
    return found


def tide_gm(body: Body) -> float:
    """GM in m3/s2 of a body that can raise a tide on the Earth; else ProtocolError."""
    if body not in GM_KM3_PER_S2:
        known = ", ".join(GM_KM3_PER_S2)
        raise ProtocolError(
            f"{body!r} raises no tide on the Earth; name one of {known}.", body=body
        )
    return 1e9 * GM_KM3_PER_S2[body]


def _geometry(body_m: Values, point_m: Values) -> tuple[Values, Values, Values, Values]:
    """Distance, radius, cosine of the angle at the geocentre, unit vector to the body."""
    distance = np.sqrt((body_m * body_m).sum(axis=0))
    radius = np.sqrt((point_m * point_m).sum(axis=0))
    towards = body_m / distance
    c = (towards * point_m).sum(axis=0) / np.where(radius > 0.0, radius, 1.0)
    return distance, radius, c, towards


def tide_parts(points: int, instants: int) -> list[slice]:
    """Slices of the instants, so that points x instants per slice stay bounded."""
    step = max(1, _CHUNK_VALUES // max(1, points))
    return [slice(start, start + step) for start in range(0, instants, step)]
