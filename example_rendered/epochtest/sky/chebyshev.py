"""Chebyshev segments of a JPL kernel (SPK data type 2), evaluated for many instants at once.

jplephem opens the file and maps the coefficients; the sums are our own because a search asks for
some thousand instants again and again: `jplephem` 2.24 takes 2 to 5 times as long, holds all
coefficients of all instants at once, and goes through seconds, which costs 2 microseconds of
resolution two centuries from J2000.0. Format: NAIF, SPK Required Reading, type 2.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from epochtest.timescale import J2000_JD, Days

CHUNK = 4096  # instants whose coefficients are held at once: 1.3 MB for the Moon


class Segment:
    """One body relative to another: ``first_days`` to ``last_days`` of TDB since J2000.0."""

    def __init__(self, segment: Any) -> None:
        first_jd, self._length_days, coefficients = segment.load_array()
        self._first_days = float(first_jd) - J2000_JD
        self._coefficients: NDArray[np.float64] = np.moveaxis(coefficients, 0, 1)  # (cell, 3, k)
        self.first_days = float(segment.start_jd) - J2000_JD
        self.last_days = float(segment.end_jd) - J2000_JD

    def position_km(self, tdb_days: Days) -> NDArray[np.float64]:
        """Vector (3, n) in km at ``tdb_days`` (n,), which the caller knows to lie inside."""
        position = np.empty((3, tdb_days.size))
        for start in range(0, tdb_days.size, CHUNK):
            part = slice(start, start + CHUNK)
            cell, x = self._place(tdb_days[part])
            terms = _chebyshev(x, self._coefficients.shape[2])
            np.einsum("mck,km->cm", self._coefficients[cell], terms, out=position[:, part])
        return position

    def state(self, tdb_days: Days) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Vector (3, n) in km and its rate (3, n) in km per day."""
        position, velocity = np.empty((3, tdb_days.size)), np.empty((3, tdb_days.size))
        for start in range(0, tdb_days.size, CHUNK):
            part = slice(start, start + CHUNK)
            cell, x = self._place(tdb_days[part])
            coefficients = self._coefficients[cell]
            terms = _chebyshev(x, coefficients.shape[2])
            slopes = _chebyshev_slopes(x, terms) * (2.0 / self._length_days)
            np.einsum("mck,km->cm", coefficients, terms, out=position[:, part])
            np.einsum("mck,km->cm", coefficients, slopes, out=velocity[:, part])
        return position, velocity

    def _place(self, days: Days) -> tuple[NDArray[np.intp], Days]:
        """Cell of each instant, and where in it from -1 to 1.

        Cells begin at multiples of half a day, so the difference to the begin loses nothing.
        (At a seam rounding may choose either cell; both hold the same place.)
        """
        cell = ((days - self._first_days) * (1.0 / self._length_days)).astype(np.intp)
        cell = np.minimum(cell, len(self._coefficients) - 1)
        since = days - (self._first_days + cell * self._length_days)
        return cell, since * (2.0 / self._length_days) - 1.0


def _chebyshev(x: Days, count: int) -> NDArray[np.float64]:
    """T_0..T_{count-1} at ``x``: (count, n)."""
    terms = np.empty((count, x.size))
    terms[0], terms[1] = 1.0, x
    twice = 2.0 * x
    for k in range(2, count):
        np.multiply(twice, terms[k - 1], out=terms[k])
        terms[k] -= terms[k - 2]
    return terms


def _chebyshev_slopes(x: Days, terms: NDArray[np.float64]) -> NDArray[np.float64]:
    """Derivatives of the T_k: (count, n), by T'_k = 2 T_{k-1} + 2 x T'_{k-1} - T'_{k-2}."""
    slopes = np.empty_like(terms)
    slopes[0], slopes[1] = 0.0, 1.0
    for k in range(2, len(terms)):
        slopes[k] = 2.0 * (terms[k - 1] + x * slopes[k - 1]) - slopes[k - 2]
    return slopes
