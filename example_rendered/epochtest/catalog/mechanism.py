"""Focal mechanisms in a catalog: strike, dip and rake of one nodal plane, or none."""

from __future__ import annotations

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from epochtest.catalog.fields import absent, decimals

ANGLES = ("strike", "dip", "rake")


def mechanisms(text: dict[str, pa.Array]) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
    """Strike, dip, rake (3, n) in degrees from text, and which rows give a broken one (n,).

    Aki & Richards convention: strike 0..360 clockwise from north with the dip to the right, dip
    0..90, rake -180..180 (0..360 is wrapped). A row has all three or NaN: an incomplete or
    impossible mechanism is dropped, the earthquake stays.
    """
    given = np.array([~absent(text[name]) for name in ANGLES])
    strike, dip, rake = (decimals(text[name]) for name in ANGLES)
    possible = (strike >= 0.0) & (strike <= 360.0) & (dip >= 0.0) & (dip <= 90.0)
    possible &= (rake >= -180.0) & (rake <= 360.0)
    wrapped = np.where(rake > 180.0, rake - 360.0, rake)
    angles = np.where(possible, np.array([strike % 360.0, dip, wrapped]), np.nan)
    return angles, given.any(axis=0) & ~possible
