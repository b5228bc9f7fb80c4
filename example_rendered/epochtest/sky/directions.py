"""Directions to bodies: geometric in the J2000 ecliptic, and apparent in the ecliptic of date.

Geometric: the straight line between two bodies at one instant, seen from any centre, in the
ecliptic of J2000 made from ICRF axes with the obliquity 84381.448" (IAU 1976, the value of the
`ECLIPJ2000` frame of the SPICE toolkit; the frame bias of 0.02" is not applied).

Apparent: what a geocentric observer would see: light-time, deflection by the Sun, aberration
(Explanatory Supplement 2013, ch. 7; Klioner 2003 gives the size of what is left out, at most
0.02" by the giant planets at their limbs), in the mean ecliptic of date (Capitaine et al. 2003).

Longitudes of date come from the *mean* equinox. Nutation turns the equinox along the ecliptic,
which adds the same angle to every longitude and nothing to a latitude; a difference of two
longitudes is free of it, and that saves the series. Where one longitude counts by itself
(equinoxes, stations), or a declination, `apparent_longitude_deg` and
`apparent_equatorial_vectors` add nutation and so refer to the *true* equinox and equator.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from skyfield.framelib import ICRS_to_J2000
from skyfield.nutationlib import iau2000b, mean_obliquity
from skyfield.precessionlib import compute_precession

from epochtest.sky.ephemeris import SPEED_OF_LIGHT_KM_PER_DAY, Ephemeris, Vectors
from epochtest.study.events import Body
from epochtest.timescale import J2000_JD, Days

Values = NDArray[np.float64]

OBLIQUITY_J2000_DEG = 84381.448 / 3600.0  # IAU 1976
SUN_GM_KM3_PER_S2 = 132712440041.28  # DE440, table 2 of Park et al. (2021)
_LIGHT_TIME_PASSES = 2  # from the geometric distance; each gains a factor v/c = 1e-4
_FIRST_STEP_DAYS = 1e-3
_NUTATION_UNIT_RAD = np.radians(1e-7 / 3600.0)  # of Skyfield's series
_NUTATION_CHUNK = 4096  # instants whose 77 terms are held at once: 2.5 MB an array
_BEHIND = 0.99999999999  # |cos| above which deflection by the Sun is left out (0.9" from it)


def _about_x(angle_rad: Values | float) -> Values:
    """Matrix (3, 3) or (3, 3, n) that turns the axes about x by ``angle_rad``."""
    cos, sin = np.cos(angle_rad), np.sin(angle_rad)
    one, zero = np.ones_like(cos), np.zeros_like(cos)
    return np.array([[one, zero, zero], [zero, cos, sin], [zero, -sin, cos]])


ECLIPTIC_J2000 = _about_x(np.radians(OBLIQUITY_J2000_DEG))


def spherical(xyz: Vectors) -> tuple[Values, Values, Values]:
    """Longitude in [0, 360) and latitude in degrees, and length, of vectors (3, n)."""
    x, y, z = xyz
    across = np.hypot(x, y)
    longitude_deg = np.degrees(np.arctan2(y, x)) % 360.0
    return longitude_deg, np.degrees(np.arctan2(z, across)), np.hypot(across, z)


def longitude_difference_deg(first: Vectors, second: Vectors) -> Values:
    """Longitude of ``first`` minus that of ``second`` (3, n) about the z axis, in [-180, 180]."""
    sine = first[1] * second[0] - first[0] * second[1]
    cosine = first[0] * second[0] + first[1] * second[1]
    difference: Values = np.degrees(np.arctan2(sine, cosine))
    return difference


def separation_deg(first: Vectors, second: Vectors) -> Values:
    """Angle (n,) between vectors (3, n), degrees; exact for small angles too."""
    across = np.linalg.norm(np.cross(first, second, axis=0), axis=0)
    angle: Values = np.degrees(np.arctan2(across, (first * second).sum(axis=0)))
    return angle


def geometric_vectors(
    ephemeris: Ephemeris, centre: Body, bodies: tuple[Body, ...], tdb_days: ArrayLike
) -> list[Vectors]:
    """Geometric vectors (3, n) from ``centre`` to each body, km, axes of the J2000 ecliptic."""
    return [ECLIPTIC_J2000 @ xyz for xyz in ephemeris.vectors_km(centre, bodies, tdb_days)]


def geometric_ecliptic(
    ephemeris: Ephemeris, centre: Body, body: Body, tdb_days: ArrayLike
) -> tuple[Values, Values, Values]:
    """Longitude, latitude (deg, J2000 ecliptic) and distance (km) of ``body`` from ``centre``.

    Raises EphemerisSpanError for instants (n,) outside the kernel.
    """
    return spherical(geometric_vectors(ephemeris, centre, (body,), tdb_days)[0])


def ecliptic_of_date(tdb_days: Days) -> Values:
    """Matrices (3, 3, n) from ICRF axes to the mean ecliptic and equinox of date."""
    jd_tdb = np.asarray(tdb_days) + J2000_JD
    precession = compute_precession(jd_tdb)
    obliquity_rad = np.radians(mean_obliquity(jd_tdb) / 3600.0)
    turned = np.einsum("ijn,jk->ikn", precession, ICRS_to_J2000)
    rotation: Values = np.einsum("ijn,jkn->ikn", _about_x(obliquity_rad), turned)
    return rotation


def apparent_vectors(
    ephemeris: Ephemeris, bodies: tuple[Body, ...], tdb_days: ArrayLike
) -> list[Vectors]:
    """Apparent geocentric vectors (3, n) of each body in km, mean ecliptic and equinox of date.

    The lengths are light-time distances in the barycentric frame (for the Moon up to 37 km off
    the geometric distance, because the Earth moves on meanwhile).

    Raises EphemerisSpanError outside the kernel.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    observer, velocity = ephemeris.state("earth", days)
    sun_to_observer = observer - ephemeris.position_km("sun", days)
    rotation = ecliptic_of_date(days)
    found = []
    for body in bodies:
        seen = _with_light_time(ephemeris, body, observer, days)
        if body != "sun":
            seen = seen + _deflection(seen, sun_to_observer)
        found.append(np.einsum("ijn,jn->in", rotation, _aberrated(seen, velocity)))
    return found


def apparent_ecliptic(
    ephemeris: Ephemeris, body: Body, tdb_days: ArrayLike
) -> tuple[Values, Values, Values]:
    """Apparent geocentric longitude, latitude (deg) and light-time distance (km) of ``body``.

    Mean equinox of date: add the nutation in longitude for the true equinox.
    """
    return spherical(apparent_vectors(ephemeris, (body,), tdb_days)[0])


def nutation_rad(tdb_days: Days) -> tuple[Values, Values]:
    """Nutation in longitude and in obliquity (n,), radians, at ``tdb_days`` (n,).

    IAU 2000B (McCarthy & Luzum 2003, Celest. Mech. 85:37): 77 terms, within 1 mas of the full
    series in 1995-2050 and a few mas elsewhere.
    """
    angles = np.empty((2, tdb_days.size))
    for start in range(0, tdb_days.size, _NUTATION_CHUNK):
        part = slice(start, start + _NUTATION_CHUNK)
        angles[:, part] = iau2000b(tdb_days[part] + J2000_JD)
    angles *= _NUTATION_UNIT_RAD
    return angles[0], angles[1]


def apparent_longitude_deg(ephemeris: Ephemeris, body: Body, tdb_days: ArrayLike) -> Values:
    """Apparent geocentric longitude (n,) in [0, 360), degrees, *true* equinox of date."""
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    mean_deg, _, _ = apparent_ecliptic(ephemeris, body, days)
    longitude: Values = (mean_deg + np.degrees(nutation_rad(days)[0])) % 360.0
    return longitude


def apparent_equatorial_vectors(
    ephemeris: Ephemeris, bodies: tuple[Body, ...], tdb_days: ArrayLike
) -> list[Vectors]:
    """Apparent geocentric vectors (3, n) in km, *true* equator and equinox of date.

    `spherical` makes right ascension, declination and light-time distance of them.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    in_longitude, in_obliquity = nutation_rad(days)
    tilt = np.radians(mean_obliquity(days + J2000_JD) / 3600.0) + in_obliquity
    cos_psi, sin_psi = np.cos(in_longitude), np.sin(in_longitude)
    cos_tilt, sin_tilt = np.cos(tilt), np.sin(tilt)
    found = []
    for x, y, z in apparent_vectors(ephemeris, bodies, days):
        across = x * sin_psi + y * cos_psi
        turned = (
            x * cos_psi - y * sin_psi,
            across * cos_tilt - z * sin_tilt,
            across * sin_tilt + z * cos_tilt,
        )
        found.append(np.array(turned))
    return found


def _with_light_time(ephemeris: Ephemeris, body: Body, observer: Vectors, days: Days) -> Vectors:
    """Vector (3, n) from the observer now to ``body`` when the light left it, km, ICRF."""
    seen = ephemeris.position_km(body, days) - observer
    first = ephemeris.covered_tdb_days[0]
    for _ in range(_LIGHT_TIME_PASSES):
        left = days - np.linalg.norm(seen, axis=0) / SPEED_OF_LIGHT_KM_PER_DAY
        seen = ephemeris.position_km(body, np.maximum(left, first)) - observer
        early = left < first
        if early.any():  # the kernel's first hours: on along the parabola of its first instants
            _, rates = ephemeris.state(body, first + np.array([0.0, _FIRST_STEP_DAYS]))
            bend = (rates[:, 1:] - rates[:, :1]) / _FIRST_STEP_DAYS
            before = left[early] - first
            seen[:, early] += before * (rates[:, :1] + 0.5 * before * bend)
    return seen


def _deflection(seen: Vectors, sun_to_observer: Vectors) -> Vectors:
    """What the Sun's gravity adds to the vector ``seen``, km (Explanatory Supplement 7.63)."""
    length = np.linalg.norm(seen, axis=0)
    sun_distance = np.linalg.norm(sun_to_observer, axis=0)
    from_sun = seen + sun_to_observer
    p = seen / length
    q = from_sun / np.linalg.norm(from_sun, axis=0)
    e = sun_to_observer / sun_distance
    pq, qe, ep = (p * q).sum(axis=0), (q * e).sum(axis=0), (e * p).sum(axis=0)
    clear = np.abs(ep) <= _BEHIND
    speed_of_light_km_s = SPEED_OF_LIGHT_KM_PER_DAY / 86400.0
    strength = 2.0 * SUN_GM_KM3_PER_S2 / (speed_of_light_km_s**2 * sun_distance)
    size = np.where(clear, strength * length / np.where(clear, 1.0 + qe, 1.0), 0.0)
    bent: Vectors = size * (pq * e - ep * q)
    return bent


def _aberrated(seen: Vectors, velocity: Vectors) -> Vectors:
    """Direction ``seen`` for an observer moving at ``velocity``; same length (Lorentz, 7.40)."""
    length = np.linalg.norm(seen, axis=0)
    unit = seen / length
    beta = velocity / SPEED_OF_LIGHT_KM_PER_DAY
    inverse_gamma = np.sqrt(1.0 - (beta * beta).sum(axis=0))
    along = (unit * beta).sum(axis=0)
    turned = inverse_gamma * unit + (1.0 + along / (1.0 + inverse_gamma)) * beta
    aberrated: Vectors = length * turned / (1.0 + along)
    return aberrated
