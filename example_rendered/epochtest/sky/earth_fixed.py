"""Directions of bodies in the rotating Earth, and points of the Earth's surface in it.

    ICRF --precession, nutation--> true equator and equinox of date --sidereal angle--> Earth-fixed

Earth-fixed means: z along the celestial intermediate pole, x to the meridian of longitude zero.
That is the ITRF but for polar motion, which is left out (0.6" at most, common practice).

How good this is. Between 1973 and today the whole rotation agrees with IAU 2006/2000A to 0.01"
without polar motion. A tide changes by 5 parts in a million for 1". What limits other centuries
is UT1, from Skyfield's curve of Delta T (Morrison, Stephenson, Hohenkerk & Zawilski 2021):
uncertain (sizes from memory) by some seconds around 1700, a second before 1900, minutes in 2650.
A minute is 0.25 degrees of rotation and moves a tidal phase by 0.5 degrees.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.polynomial.chebyshev import chebvander
from numpy.typing import ArrayLike, NDArray
from skyfield.framelib import ICRS_to_J2000
from skyfield.nutationlib import build_nutation_matrix, iau2000b, mean_obliquity
from skyfield.precessionlib import compute_precession

from epochtest.errors import CatalogError
from epochtest.sky.ephemeris import Ephemeris, Vectors
from epochtest.study.events import Body
from epochtest.timescale import J2000_JD, SECONDS_PER_DAY, Days, tdb_minus_tt_s, timescale

Values = NDArray[np.float64]

EARTH_RADIUS_M = 6378136.6  # IERS Conventions (2010), table 1.1: the tidal formulas' radius
WGS84_RADIUS_M = 6378137.0
WGS84_FLATTENING = 1.0 / 298.257223563
SIDEREAL_RATE_RAD_PER_DAY = 2.0 * np.pi * 1.00273790935  # of mean sidereal time per day of UT1
_NODES_PER_DAY = 2.5  # of a window; with 6 more the Moon is interpolated to 1 part in 10^7
_EXTRA_NODES = 6
_TENTH_MICROARCSECOND_RAD = np.radians(1e-7 / 3600.0)


@dataclass(frozen=True)
class Points:
    """Points (m,) fixed to the Earth: ``xyz_m`` (3, m) and unit vectors (3, m).

    ``east``, ``north``, ``up`` are the local axes that belong to the latitude given (geodetic
    or geocentric); ``radial`` points away from the geocentre, and ``south_north`` (3, m) is
    the northward unit vector at right angles to it. At a pole the axes are those of the
    meridian of the longitude given.
    """

    xyz_m: Vectors
    east: Vectors
    north: Vectors
    up: Vectors
    radial: Vectors
    south_north: Vectors

    def __len__(self) -> int:
        return int(self.xyz_m.shape[1])


def earth_points(
    lat_deg: ArrayLike,
    lon_deg: ArrayLike,
    depth_km: ArrayLike = 0.0,
    *,
    geocentric: bool = False,
) -> Points:
    """Points at latitudes and longitudes in degrees and depths in km (broadcast to (m,)).

    Latitudes are geodetic on WGS84; with ``geocentric`` they are angles at the centre of a
    sphere of radius 6378136.6 m. Longitudes are positive east, of any size. A depth of NaN is
    unknown and taken as zero.
    Raises CatalogError for a latitude outside -90..90 or a coordinate that is no number.
    """
    lat, lon, depth = (
        np.atleast_1d(part).astype(float).ravel()
        for part in np.broadcast_arrays(lat_deg, lon_deg, depth_km)
    )
    require_coordinates(lat, lon)
    height = -1000.0 * np.where(np.isnan(depth), 0.0, depth)
    east, north, up = _local_axes(np.radians(lat), np.radians(lon))
    if geocentric:
        return Points((EARTH_RADIUS_M + height) * up, east, north, up, up, north)
    squared = WGS84_FLATTENING * (2.0 - WGS84_FLATTENING)
    normal = WGS84_RADIUS_M / np.sqrt(1.0 - squared * up[2] ** 2)
    stretch = np.array([normal, normal, normal * (1.0 - squared)])
    xyz = (stretch + height) * up
    radial = xyz / np.linalg.norm(xyz, axis=0)
    return Points(xyz, east, north, up, radial, np.cross(radial, east, axis=0))


def require_coordinates(lat_deg: Values, lon_deg: Values) -> None:
    """Raise CatalogError, with ``rows``, unless latitudes and longitudes (m,) are possible."""
    bad = ~((np.abs(lat_deg) <= 90.0) & np.isfinite(lon_deg))
    if not bad.any():
        return
    rows = np.nonzero(bad)[0]
    first = rows[0]
    raise CatalogError(
        f"{rows.size} of {bad.size} points have no possible position (row {first}: latitude "
        f"{lat_deg[first]}, longitude {lon_deg[first]}); latitudes lie in -90..90 degrees and "
        "neither may be missing: correct or leave out these rows.",
        rows=rows,
    )


def geocentric_latitude_rad(lat_deg: ArrayLike) -> Values:
    """Geocentric latitude in radians of the surface point at geodetic latitude (deg, WGS84)."""
    lat = np.radians(np.asarray(lat_deg, dtype=float))
    shrunk: Values = np.arctan2((1.0 - WGS84_FLATTENING) ** 2 * np.sin(lat), np.cos(lat))
    return shrunk


def true_equator_of_date(tdb_days: ArrayLike) -> tuple[Values, Values]:
    """Matrices (3, 3, n) from ICRF axes to the true equator and equinox of date, and their
    equation of the equinoxes (n,) in radians.

    Precession IAU 2006 (Capitaine, Wallace & Chapront 2003), nutation IAU 2000B (McCarthy &
    Luzum 2003, 77 terms, within 0.001" of 2000A from 1995 to 2050).
    """
    jd = np.atleast_1d(np.asarray(tdb_days, dtype=float)) + J2000_JD
    psi, epsilon = (part * _TENTH_MICROARCSECOND_RAD for part in iau2000b(jd))
    mean = np.radians(mean_obliquity(jd) / 3600.0)
    nutation = build_nutation_matrix(mean, mean + epsilon, psi)
    mean_equator = np.einsum("ijn,jk->ikn", compute_precession(jd), ICRS_to_J2000)
    return np.einsum("ijn,jkn->ikn", nutation, mean_equator), psi * np.cos(mean)


def mean_sidereal_angle_rad(tdb_days: ArrayLike) -> Values:
    """Greenwich mean sidereal time (n,) in radians.

    Earth rotation angle of UT1 plus accumulated precession (Capitaine, Wallace & McCarthy
    2003, eq. 42). UT1 comes from Skyfield's table and curve of Delta T.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    tt_days = days - tdb_minus_tt_s(days) / SECONDS_PER_DAY
    hours = timescale().tt_jd(J2000_JD, tt_days).gmst
    return np.asarray(hours, dtype=np.float64) * (np.pi / 12.0)


def earth_fixed_rotation(tdb_days: ArrayLike) -> Values:
    """Matrices (3, 3, n) from ICRF axes to Earth-fixed axes at ``tdb_days`` (n,)."""
    rotation, equinoxes = true_equator_of_date(tdb_days)
    angle = mean_sidereal_angle_rad(tdb_days) + equinoxes
    cos, sin = np.cos(angle), np.sin(angle)
    x, y, z = rotation
    turned: Values = np.stack((cos * x + sin * y, cos * y - sin * x, z))
    return turned


def earth_fixed_km(ephemeris: Ephemeris, bodies: tuple[Body, ...], tdb_days: Days) -> list[Vectors]:
    """Geometric geocentric vectors (3, n) of the bodies in km, Earth-fixed axes.

    Geometric, because a tide is raised by where a body is and not by where it is seen.
    Raises EphemerisSpanError outside the kernel.
    """
    vectors = ephemeris.vectors_km("earth", bodies, tdb_days)
    rotation = earth_fixed_rotation(tdb_days)
    return [np.einsum("ijn,jn->in", rotation, vector) for vector in vectors]


def local_windows_km(
    ephemeris: Ephemeris,
    bodies: tuple[Body, ...],
    tdb_days: Days,
    offset_hours: Values,
    lat_rad: Values,
    lon_rad: Values,
) -> tuple[list[Vectors], NDArray[np.complex128]]:
    """Geocentric vectors (3, n, k) of each body around n instants, km: east, north, radial axes.

    With them comes exp(i (sidereal time + longitude)), complex (n, k). The axes are those of
    geocentric latitude and longitude (n,) in radians; ``offset_hours`` (k,) of SI time count
    from each instant. Per window the kernel is asked at a few Chebyshev
    nodes, and the true equator is that of its middle (it moves by less than 0.3" a day); the
    Earth's turning is exact. Within 2 days of the instant directions are good to 1".
    Raises EphemerisSpanError outside the kernel.
    """
    offset_days = offset_hours / 24.0
    nodes, spread = _interpolation(offset_days)
    at_nodes = (tdb_days[:, None] + nodes).ravel()
    vectors = ephemeris.vectors_km("earth", bodies, at_nodes)
    equator, equinoxes = true_equator_of_date(tdb_days)
    angle = (mean_sidereal_angle_rad(tdb_days) + equinoxes + lon_rad)[:, None]
    turn = SIDEREAL_RATE_RAD_PER_DAY * offset_days
    cos = np.cos(angle) * np.cos(turn) - np.sin(angle) * np.sin(turn)
    sin = np.sin(angle) * np.cos(turn) + np.cos(angle) * np.sin(turn)
    sin_lat, cos_lat = np.sin(lat_rad)[:, None], np.cos(lat_rad)[:, None]
    found = []
    for vector in vectors:
        of_window = vector.reshape(3, tdb_days.size, nodes.size)
        # One product of two plain matrices: a stack of small ones keeps BLAS threads spinning.
        turned = np.einsum("ijn,jnq->inq", equator, of_window).reshape(-1, nodes.size)
        x, y, z = (turned @ spread).reshape(3, tdb_days.size, -1)
        outward = cos * x + sin * y
        east, north = cos * y - sin * x, cos_lat * z - sin_lat * outward
        found.append(np.stack((east, north, cos_lat * outward + sin_lat * z)))
    return found, cos + 1j * sin


def _interpolation(offset_days: Values) -> tuple[Values, Values]:
    """Nodes (q,) in days and the matrix (q, k) that carries values there to the offsets (k,)."""
    middle, reach = float(offset_days.mean()), 0.5 * float(np.ptp(offset_days))
    count = _EXTRA_NODES + int(np.ceil(_NODES_PER_DAY * 2.0 * reach))
    if offset_days.size <= count:
        return offset_days, np.eye(offset_days.size)
    x = np.cos(np.pi * (np.arange(count) + 0.5) / count)  # roots of T_count: inside the window
    at_offsets = chebvander((offset_days - middle) / reach, count - 1)
    spread = np.linalg.solve(chebvander(x, count - 1).T, at_offsets.T)
    return np.asarray(middle + reach * x), np.asarray(spread, dtype=np.float64)


def _local_axes(lat: Values, lon: Values) -> tuple[Vectors, Vectors, Vectors]:
    """Unit vectors east, north, up (3, m) at latitudes and longitudes in radians."""
    sin_lat, cos_lat, sin_lon, cos_lon = np.sin(lat), np.cos(lat), np.sin(lon), np.cos(lon)
    east = np.array([-sin_lon, cos_lon, np.zeros_like(lon)])
    north = np.array([-sin_lat * cos_lon, -sin_lat * sin_lon, cos_lat])
    return east, north, np.array([cos_lat * cos_lon, cos_lat * sin_lon, sin_lat])
