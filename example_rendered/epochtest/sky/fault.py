"""Stress resolved on a fault, and the other nodal plane of a mechanism.

Axes north, east, down; strike clockwise from north with the fault dipping to its right, dip from
the horizontal, rake in the plane from the strike direction, positive upwards (Aki & Richards
2002, sections 4.3 and 4.5). Tension is positive.

    n = (-sin d sin p,  sin d cos p,  -cos d)                       normal, into the hanging wall
    s = ( cos r cos p + cos d sin r sin p,
          cos r sin p - cos d sin r cos p,  -sin d sin r)           slip of the hanging wall

    shear = n.S.s     normal = n.S.n     Coulomb = shear + friction * normal

A Coulomb stress above zero brings the fault nearer to slip in the direction of its rake.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.errors import CatalogError

Values = NDArray[np.float64]

DEFAULT_FRICTION = 0.4  # effective, pore pressure included: common practice
_LEVEL = 1e-9  # downward part of a normal that is rounding: the plane is vertical


class Mechanism(NamedTuple):
    """Strike, dip and rake (n,) in degrees of one nodal plane; NaN where none is known."""

    strike_deg: Values
    dip_deg: Values
    rake_deg: Values

    @classmethod
    def of(cls, strike_deg: ArrayLike, dip_deg: ArrayLike, rake_deg: ArrayLike) -> Mechanism:
        """Make one of plain numbers or arrays, broadcast to (n,).

        Where one of the three is NaN, the mechanism is unknown and all become NaN.
        Raises CatalogError, with ``rows``, for a dip outside 0..90 or an infinite angle.
        """
        angles = np.array(np.broadcast_arrays(strike_deg, dip_deg, rake_deg), dtype=float)
        angles = angles.reshape(3, -1)
        unknown = np.isnan(angles).any(axis=0)
        bad = ~unknown & ~(np.isfinite(angles).all(axis=0) & (np.abs(angles[1] - 45.0) <= 45.0))
        if bad.any():
            rows = np.nonzero(bad)[0]
            strike, dip, rake = angles[:, rows[0]]
            raise CatalogError(
                f"{rows.size} of {bad.size} mechanisms are impossible (row {rows[0]}: strike "
                f"{strike}, dip {dip}, rake {rake}); the dip lies in 0..90 degrees: correct "
                "these rows, or leave the mechanism empty.",
                rows=rows,
            )
        return cls(*np.where(unknown, np.nan, angles))

    @property
    def known(self) -> NDArray[np.bool_]:
        """Which (n,) mechanisms are known."""
        return ~np.isnan(self.strike_deg)


class Resolved(NamedTuple):
    """Shear stress along the rake, normal stress and Coulomb stress, Pa, of one shape.

    Of a tide: ocean loading is not modelled (solid tide below about 5 kPa, ocean loading up to
    50 kPa near coasts), see `epochtest.sky.body_tide.OCEAN_LOADING_NOTE`.
    """

    shear_pa: Values
    normal_pa: Values
    coulomb_pa: Values


def normal_and_slip(mechanism: Mechanism) -> tuple[Values, Values]:
    """Unit normal and unit slip vector (3, n), north, east, down."""
    p, d, r = (np.radians(angle) for angle in mechanism)
    normal = np.array([-np.sin(d) * np.sin(p), np.sin(d) * np.cos(p), -np.cos(d)])
    slip = np.array(
        [
            np.cos(r) * np.cos(p) + np.cos(d) * np.sin(r) * np.sin(p),
            np.cos(r) * np.sin(p) - np.cos(d) * np.sin(r) * np.cos(p),
            -np.sin(d) * np.sin(r),
        ]
    )
    return normal, slip


def resolve(
    stress_ned_pa: ArrayLike, mechanism: Mechanism, friction: ArrayLike = DEFAULT_FRICTION
) -> Resolved:
    """Resolve symmetric tensors (3, 3) or (3, 3, n) in Pa on each plane (n,).

    ``friction`` is effective and not negative, one number or (n,).
    Ocean loading is not modelled where the stress is a tide's: solid tide below about 5 kPa,
    ocean loading up to 50 kPa near coasts (Cochran, Vidale & Tanaka 2004).
    Raises ValueError for friction that is negative or no number.
    """
    stress = np.asarray(stress_ned_pa, dtype=float)
    stress = stress[:, :, None] if stress.ndim == 2 else stress
    n, s = normal_and_slip(mechanism)
    traction = (stress * n[None]).sum(axis=1)
    shear, normal = (traction * s).sum(axis=0), (traction * n).sum(axis=0)
    return Resolved(shear, normal, shear + required_friction(friction) * normal)


def horizontal_weights(mechanism: Mechanism) -> tuple[Values, Values]:
    """Weights (3, n) of the parts nn, ee, ne of a horizontal stress in shear and normal stress.

    The tide's stress near the surface is horizontal, so three products give what `resolve` does.
    Ocean loading is not modelled in such a stress: up to 50 kPa near coasts, the solid tide 5.
    """
    n, s = normal_and_slip(mechanism)
    shear = np.array([n[0] * s[0], n[1] * s[1], n[0] * s[1] + n[1] * s[0]])
    normal = np.array([n[0] * n[0], n[1] * n[1], 2.0 * n[0] * n[1]])
    return shear, normal


def required_friction(friction: ArrayLike) -> Values:
    """``friction`` as an array. Raises ValueError if any is negative or no number."""
    values = np.asarray(friction, dtype=float)
    if not (values >= 0.0).all() or not np.isfinite(values).all():
        wrong = values[~((values >= 0.0) & np.isfinite(values))].ravel()[0]
        raise ValueError(f"friction must be a number of at least 0 but is {wrong}")
    return values


def auxiliary_plane(mechanism: Mechanism) -> Mechanism:
    """The other nodal plane: its normal is this slip vector, its slip vector this normal.

    Strike in [0, 360), rake in (-180, 180]. A plane of the same double couple: the shear stress
    on both is equal, the normal and so the Coulomb stress is not. The auxiliary of the
    auxiliary is the first plane again; where one of the two is vertical or horizontal, the
    same plane can have a second description (strike turned by 180, or strike with rake).
    """
    normal, slip = normal_and_slip(mechanism)
    return mechanism_of(slip, normal)


def mechanism_of(normal: Values, slip: Values) -> Mechanism:
    """Mechanism whose plane has the unit normal (3, n) and slip (3, n), or both reversed."""
    n = np.where(np.abs(normal) < _LEVEL, 0.0, normal)
    turn = np.where(n[2] > 0.0, -1.0, 1.0)  # the normal points up, into the hanging wall
    n, s = turn * n, turn * slip
    across = np.hypot(n[0], n[1])
    strike = np.arctan2(-n[0], n[1])
    dip = np.arctan2(across, -n[2])
    cos_p, sin_p, cos_d, sin_d = np.cos(strike), np.sin(strike), np.cos(dip), np.sin(dip)
    along = s[0] * cos_p + s[1] * sin_p
    upward = (s[0] * sin_p - s[1] * cos_p) * cos_d - s[2] * sin_d
    rake = np.degrees(np.arctan2(upward, along))
    rake = np.where(rake <= -180.0, 180.0, rake)
    strike_deg = np.degrees(strike) % 360.0
    return Mechanism(np.where(strike_deg >= 360.0, 0.0, strike_deg), np.degrees(dip), rake)
