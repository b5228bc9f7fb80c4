"""Distances and longitudes on the sphere."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

EARTH_RADIUS_KM = 6371.0088
"""Mean radius (2a + b)/3 of GRS 80 (Moritz 2000, J. Geodesy 74)."""


def great_circle_km(
    latitude_deg: ArrayLike,
    longitude_deg: ArrayLike,
    other_latitude_deg: ArrayLike,
    other_longitude_deg: ArrayLike,
) -> NDArray[np.float64]:
    """Great-circle distance in km between points of any broadcastable shape.

    Haversine form, exact on the sphere and stable for short distances (Sinnott 1984);
    the sphere departs from the ellipsoid by at most about 0.6 %. Longitudes may be in any
    branch, so the dateline needs no care. NaN gives NaN.
    """
    first = np.radians(np.asarray(latitude_deg, dtype=float))
    second = np.radians(np.asarray(other_latitude_deg, dtype=float))
    turn = np.radians(
        np.asarray(other_longitude_deg, dtype=float) - np.asarray(longitude_deg, dtype=float)
    )
    half = (
        np.sin((second - first) / 2.0) ** 2
        + np.cos(first) * np.cos(second) * np.sin(turn / 2.0) ** 2
    )
    distance: NDArray[np.float64] = 2.0 * EARTH_RADIUS_KM * np.arcsin(np.sqrt(np.minimum(half, 1)))
    return distance


def signed_longitude_deg(longitude_deg: ArrayLike) -> NDArray[np.float64]:
    """Longitudes of 180..360 brought to -180..0; all others, also impossible ones, untouched."""
    longitude = np.asarray(longitude_deg, dtype=float)
    eastern = (longitude > 180.0) & (longitude <= 360.0)
    return np.where(eastern, longitude - 360.0, longitude)
