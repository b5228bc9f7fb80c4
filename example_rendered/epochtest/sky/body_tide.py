"""The body tide: displacement, strain and stress of the solid Earth's surface.

With the potential W_n of degree n the ground moves by h_n W_n / g upwards and l_n grad W_n / g
sideways (Love 1909, Shida 1912). Around the axis to the body everything depends on the angle psi
from it alone. With A_n = GM/d (R/d)^n, c = cos psi and q the horizontal part of the unit vector
to the body, the surface strain is

    e = A_n / (g R) { (h_n P_n - l_n c P_n') I + l_n P_n'' q q^T }        (no pole is special)

    psi direction:   (d_psi u_psi + u_r) / R,   across it:   (u_psi cot psi + u_r) / R

The surface is free of traction, so the vertical strain follows from the horizontal one, and
stress from Hooke's law. Extension and tension are positive.

The liquid core answers the tides near one sidereal day more weakly. h_2 alone would be up to 16 mm
wrong, most of it in K1; the four largest of these corrections are added (`diurnal_correction`).

What is left out: oceans (see OCEAN_LOADING_NOTE), the other corrections of the IERS model (2 mm
of displacement), the core's part in sideways motion (0.5 % of strain), flattening in strain
(0.4 %), and depth. Surface values hold for shallow points: by our own estimate the pressure from
the tide's pull grows by about rho W_2' = 3 Pa per km (mean Moon), 5 % of the surface stress at
35 km. Deeper than some 70 km take them as an order of magnitude.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.sky.earth_fixed import (
    EARTH_RADIUS_M,
    Points,
    earth_fixed_km,
    mean_sidereal_angle_rad,
)
from epochtest.sky.ephemeris import Ephemeris, Vectors
from epochtest.sky.tide_potential import (
    DEGREES,
    SURFACE_GRAVITY_M_PER_S2,
    legendre,
    tide_gm,
    tide_parts,
)
from epochtest.study.events import Body

Values = NDArray[np.float64]
Phasors = NDArray[np.complex128]

TIDE_BODIES: tuple[Body, ...] = ("moon", "sun")  # all others together: below 1e-4 of the Moon
SHALLOW_KM = 70.0  # common practice: shallow earthquakes lie above this
OCEAN_LOADING_NOTE = (
    "Ocean loading is not modelled. The solid Earth's tide, which is, stays below about 5 kPa; "
    "the ocean tide's load can reach about 50 kPa near coasts (Cochran, Vidale & Tanaka 2004), so "
    "near the sea both the size and the phase of the true tidal stress can differ from these."
)


@dataclass(frozen=True)
class LoveNumbers:
    """h_n and l_n; h_2 and l_2 change with (3 sin^2 lat - 1)/2. IERS Conventions (2010) 7.1.1."""

    h2: float = 0.6078
    l2: float = 0.0847
    h3: float = 0.292
    l3: float = 0.015
    h2_latitude: float = -0.0006
    l2_latitude: float = 0.0002

    def of_degree(self, degree: int, sin_latitude: ArrayLike) -> tuple[Values, Values]:
        """h and l of degree 2 or 3 at points whose geocentric latitude has this sine."""
        sine = np.asarray(sin_latitude, dtype=float)
        if degree == 3:
            return np.full_like(sine, self.h3), np.full_like(sine, self.l3)
        shape = 1.5 * sine * sine - 0.5
        return self.h2 + self.h2_latitude * shape, self.l2 + self.l2_latitude * shape


@dataclass(frozen=True)
class Rock:
    """Lame's constants in Pa of an isotropic elastic ground."""

    lame_lambda_pa: float = 30e9
    lame_mu_pa: float = 30e9

    def __post_init__(self) -> None:
        if not (self.lame_mu_pa > 0.0 and self.lame_lambda_pa >= 0.0):
            raise ValueError(
                "lame_mu_pa must be positive and lame_lambda_pa not negative but they are "
                f"{self.lame_mu_pa} and {self.lame_lambda_pa}"
            )

    @property
    def poisson_ratio(self) -> float:
        """nu = lambda / 2(lambda + mu)."""
        return 0.5 * self.lame_lambda_pa / (self.lame_lambda_pa + self.lame_mu_pa)


# Radial corrections of the diurnal band, IERS Conventions (2010) table 7.3a: in phase and out of
# phase in mm, then what turns besides K1's angle: N' (minus the node), h and the Sun's perigee p_s.
_DIURNAL_MM: dict[str, tuple[complex, float, float, float]] = {
    "K1": (12.00 - 0.80j, 0.0, 0.0, 0.0),
    "K1, nodal": (1.73 - 0.12j, 1.0, 0.0, 0.0),
    "P1": (-1.23 - 0.07j, 0.0, -2.0, 0.0),
    "psi1": (-0.50 - 0.01j, 0.0, 1.0, -1.0),
}
# N', h, p_s: degrees at J2000.0 and per day (Simon et al. 1994, mean elements, rounded).
_MEAN_ARGUMENTS = np.array([[234.9555, 0.0529538], [280.4665, 0.9856474], [282.9373, 0.0000471]])

IERS_2010 = LoveNumbers()
DEFAULT_ROCK = Rock()


class SurfaceTensor(NamedTuple):
    """North-north, east-east and north-east parts of a horizontal tensor, arrays of one shape.

    A strain (no unit) or a stress (Pa, tension positive). ``note`` says what is left out:
    ocean loading is not modelled and can be ten times as large near coasts.
    """

    nn: Values
    ee: Values
    ne: Values

    @property
    def trace(self) -> Values:
        """nn + ee: for a strain the areal strain."""
        return self.nn + self.ee

    @property
    def note(self) -> str:
        """OCEAN_LOADING_NOTE."""
        return OCEAN_LOADING_NOTE


def displacement_m(
    ephemeris: Ephemeris,
    tdb_days: ArrayLike,
    points: Points,
    bodies: tuple[Body, ...] = TIDE_BODIES,
    love: LoveNumbers = IERS_2010,
) -> Values:
    """Displacement (3, m, n) in m, east, north, up of ``points``, at ``tdb_days`` (n,) of TDB.

    IERS Conventions (2010) eq. 7.5 and 7.6: degrees 2 and 3, the permanent tide included, and
    with Moon and Sun the four largest diurnal corrections: within 3 mm of the full model. Ocean
    loading is not modelled: it moves coasts by up to several cm more, and where the solid tide's
    stress stays below about 5 kPa it can reach 50 kPa.
    Raises EphemerisSpanError outside the kernel.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    moved = np.zeros((3, len(points), days.size))
    radial = points.radial[:, :, None]
    axes = np.stack((points.east, points.north, points.up))
    for part in tide_parts(len(points), days.size):
        for body, vector in zip(bodies, earth_fixed_km(ephemeris, bodies, days[part]), strict=True):
            distance_m = 1000.0 * np.linalg.norm(vector, axis=0)
            towards = (1000.0 * vector / distance_m)[:, None, :]
            c = (towards * radial).sum(axis=0)
            total = np.zeros((3, *c.shape))
            for degree in DEGREES:
                h, shida = love.of_degree(degree, points.radial[2][:, None])
                p, slope, _ = legendre(degree, c)
                height = tide_height_m(body, distance_m, degree)
                total += height * (h * p * radial + shida * slope * (towards - c * radial))
            moved[:, :, part] += np.einsum("acm,cmn->amn", axes, total)
        moved[2, :, part] += _diurnal_rise_m(days[part], points, bodies)
    return moved


def surface_strain(
    ephemeris: Ephemeris,
    tdb_days: ArrayLike,
    points: Points,
    bodies: tuple[Body, ...] = TIDE_BODIES,
    love: LoveNumbers = IERS_2010,
) -> SurfaceTensor:
    """Horizontal strain (m, n) of the surface at ``points`` and ``tdb_days`` (n,) of TDB.

    Axes: geocentric north and east. With Moon and Sun the diurnal corrections are in. Ocean
    loading is not modelled: the solid tide's stress stays below about 5 kPa, ocean loading can
    reach 50 kPa near coasts.
    Raises EphemerisSpanError outside the kernel.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    strain = SurfaceTensor(*(np.zeros((len(points), days.size)) for _ in range(3)))
    axes = np.stack((points.east, points.south_north, points.radial))
    sine = points.radial[2][:, None]
    for part in tide_parts(len(points), days.size):
        for body, vector in zip(bodies, earth_fixed_km(ephemeris, bodies, days[part]), strict=True):
            local = np.einsum("acm,cn->amn", axes, vector)
            for total, more in zip(strain, strain_under(body, local, sine, love), strict=True):
                total[:, part] += more
        rise = _diurnal_rise_m(days[part], points, bodies) / EARTH_RADIUS_M
        strain.nn[:, part] += rise
        strain.ee[:, part] += rise
    return strain


def strain_under(
    body: Body,
    local_km: Vectors,
    sin_latitude: ArrayLike,
    love: LoveNumbers = IERS_2010,
    degrees: Sequence[int] = DEGREES,
) -> SurfaceTensor:
    """Horizontal strain (...) raised by one body at ``local_km`` (3, ...): east, north, radial.

    The vectors start at the geocentre. Without `diurnal_correction`. Ocean loading is not
    modelled: the solid tide's stress stays below about 5 kPa, ocean loading can reach 50 kPa
    near coasts.
    """
    east, north, radial = local_km
    distance = np.sqrt(east * east + north * north + radial * radial)
    c, east, north = radial / distance, east / distance, north / distance
    same, along = np.zeros_like(c), np.zeros_like(c)
    for degree in degrees:
        h, shida = love.of_degree(degree, sin_latitude)
        p, slope, curve = legendre(degree, c)
        size = tide_height_m(body, 1000.0 * distance, degree) / EARTH_RADIUS_M
        same += size * (h * p - shida * (c * slope))
        along += size * shida * curve
    return SurfaceTensor(
        same + along * north * north, same + along * east * east, along * north * east
    )


def diurnal_correction(tdb_days: ArrayLike) -> tuple[Phasors, Phasors]:
    """What the liquid core changes in the diurnal tide: complex z (n,) in m, and its rate per day.

    The ground is higher by sin(2 lat) Im(z exp(i a)) with a = Greenwich mean sidereal time +
    longitude; the tide of Moon and Sun together. Terms of IERS Conventions (2010) table 7.3a
    above 0.5 mm, for K1, its nodal line, P1 and psi1.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    arguments = _MEAN_ARGUMENTS[:, :1] + _MEAN_ARGUMENTS[:, 1:] * days
    total, rate = np.zeros(days.size, dtype=complex), np.zeros(days.size, dtype=complex)
    for size_mm, *multiples in _DIURNAL_MM.values():
        turn = np.radians(np.asarray(multiples) @ arguments)
        per_day = np.radians(np.asarray(multiples) @ _MEAN_ARGUMENTS[:, 1])
        term = -1e-3 * size_mm * np.exp(1j * turn)  # table 7.3a counts from sidereal time + 180 deg
        total += term
        rate += 1j * per_day * term
    return total, rate


def has_diurnal(bodies: tuple[Body, ...]) -> bool:
    """Whether `diurnal_correction` belongs to these bodies: it is Moon's and Sun's together."""
    return {"moon", "sun"} <= set(bodies)


def _diurnal_rise_m(days: Values, points: Points, bodies: tuple[Body, ...]) -> Values:
    """`diurnal_correction` at every point and instant (m, n), m; zero without Moon and Sun."""
    if not has_diurnal(bodies):
        return np.zeros((len(points), days.size))
    x, y, z = points.radial
    turning = np.exp(1j * mean_sidereal_angle_rad(days)) * diurnal_correction(days)[0]
    rise: Values = 2.0 * z[:, None] * ((x + 1j * y)[:, None] * turning).imag
    return rise


def tide_height_m(body: Body, distance_m: Values, degree: int) -> Values:
    """GM/d (R/d)^n / g in m: the equilibrium tide of one degree under the body, over P_n(1)."""
    gm = tide_gm(body)
    ratio = EARTH_RADIUS_M / distance_m
    height = gm / SURFACE_GRAVITY_M_PER_S2 / distance_m
    for _ in range(degree):  # numpy's general power takes ten times as long
        height = height * ratio
    return height


def vertical_strain(strain: SurfaceTensor, rock: Rock = DEFAULT_ROCK) -> Values:
    """Vertical strain of a free surface, -nu/(1-nu) times the areal strain.

    Ocean loading is not modelled: its stress can reach 50 kPa near coasts, the solid tide's 5.
    """
    return -rock.poisson_ratio / (1.0 - rock.poisson_ratio) * strain.trace


def volumetric_strain(strain: SurfaceTensor, rock: Rock = DEFAULT_ROCK) -> Values:
    """Volumetric strain of a free surface, (1-2nu)/(1-nu) times the areal strain.

    Expansion is positive: it unclamps a fault of any direction, which is why it stands in where
    no mechanism is known. Ocean loading is not modelled: its stress can reach 50 kPa near
    coasts, the solid tide's 5.
    """
    return strain.trace + vertical_strain(strain, rock)


def surface_stress(strain: SurfaceTensor, rock: Rock = DEFAULT_ROCK) -> SurfaceTensor:
    """Horizontal stress in Pa by Hooke's law; the three parts with the vertical are zero.

    Ocean loading is not modelled: the solid tide's stress stays below about 5 kPa, ocean
    loading can reach 50 kPa near coasts (Cochran, Vidale & Tanaka 2004). Valid near the
    surface, as the module says.
    """
    common = rock.lame_lambda_pa * volumetric_strain(strain, rock)
    twice = 2.0 * rock.lame_mu_pa
    return SurfaceTensor(common + twice * strain.nn, common + twice * strain.ee, twice * strain.ne)
