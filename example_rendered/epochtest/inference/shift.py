"""The circular-shift null: the hit count at every shift of the windows, at once.

If the sky has no say, the windows might as well lie anywhere: turning all of them together
round the span (what leaves at the end comes back at the start) gives an equally likely
placement, while the earthquakes keep every cluster they have. The n placements on the grid
form a group, so the rank of the observed one among them, itself included, is an exact
p-value if the catalog is stationary. Rate changes (network growth) break that assumption.

    counts  . 1 . 2 . . 3 . 1 . 2 1      hits(s) = sum over i of counts[i] * mask[i - s]
    mask    . . . # . . # . . . # .      = one circular cross-correlation
    shift s ------->                     = irfft(rfft(counts) * conj(rfft(mask)))

The transform has exactly n points (no padding: that would not be circular). Sources: shifts
as a null for two serially correlated series, Haurwitz & Brier (1981) and Prager & Hoenig
(1989) on superposed epochs; effective number, Bretherton et al. (1999).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from epochtest.inference.windows import Counts, Mask
from epochtest.study.claims import Direction
from epochtest.study.results import NullResult

SAFE_ROUNDING = 0.25
"""Distance from a whole number at which a transformed count is no longer trusted."""
LARGEST_SUM = 2.0**48
"""Sums beyond which float64 has few fractional bits left, so that rounding would look exact."""


def circular_correlation(kernel: Counts | Mask, series: Counts) -> Counts:
    """sum_i series[i] kernel[i - s] for every circular shift s, exact integers (n,).

    Cost grows as n log n, also for prime n. Raises ArithmeticError if the sums are too large
    for a float64 transform to tell neighbouring integers apart.
    """
    n = series.size
    spectrum = scipy.fft.rfft(series.astype(np.float64))
    spectrum *= np.conj(scipy.fft.rfft(kernel.astype(np.float64)))
    raw = scipy.fft.irfft(spectrum, n)
    whole = np.rint(raw)
    error = float(np.abs(raw - whole).max())
    if error >= SAFE_ROUNDING or float(np.abs(raw).max()) > LARGEST_SUM:
        raise ArithmeticError(
            f"counts are too large to be correlated exactly (rounding error {error:.2f}); "
            "check the catalog for a bin with an impossible number of earthquakes"
        )
    return np.asarray(whole, dtype=np.int64)


def hits_at_all_shifts(mask: Mask, counts: Counts) -> Counts:
    """Hits (n,) with the windows shifted by 0..n-1 bins later; index 0 is the observed placement.

    ``mask`` (n,) marks the bins in a window, ``counts`` (n,) holds earthquakes per bin.
    """
    return circular_correlation(mask, counts)


def effective_number(series: NDArray[np.int64] | NDArray[np.float64]) -> float:
    """Independent values in a circular series (n,): n / sum of squared autocorrelations.

    Second-moment form of Bretherton et al. (1999), over all circular lags. By Parseval the sum
    needs no autocorrelation: with P the power spectrum without its mean, it is
    (sum P)^2 / sum P^2. The spectrum is not smoothed, so the number is low by up to a factor of
    two (white series: n / 2). A constant series has 1.
    """
    n = series.size
    power = np.abs(scipy.fft.rfft(series - series.mean())) ** 2
    weight = np.full(power.size, 2.0)
    weight[0] = 0.0
    if n % 2 == 0:
        weight[-1] = 1.0
    if series.max() == series.min():
        return 1.0
    return float((weight @ power) ** 2 / (weight @ power**2))


@dataclass(frozen=True)
class ShiftSeries:
    """Hits (n,) at every shift of one claim's windows; index 0 is the observed placement."""

    hits: Counts

    @property
    def n(self) -> int:
        """Number of shifts, the observed placement included."""
        return self.hits.size

    @property
    def mean(self) -> float:
        """Mean number of hits over all shifts."""
        return int(self.hits.sum()) / self.n

    @property
    def sd(self) -> float:
        """Standard deviation of the hits over all shifts (the whole group, so divided by n)."""
        return float(self.hits.std())

    def deviations(self, direction: Direction) -> Counts:
        """n * (hits - mean), turned so that large means "as claimed"; exact integers.

        Whole numbers make ties exact: a float mean would split +d from -d in |hits - mean|.
        """
        deviation = self.n * self.hits - int(self.hits.sum())
        if direction == "more":
            return deviation
        return -deviation if direction == "fewer" else np.abs(deviation)

    def standardised(self, direction: Direction) -> NDArray[np.float32]:
        """Deviations over the standard deviation (n,), float32; zeros if nothing varies."""
        sd = self.sd
        if sd == 0.0:
            return np.zeros(self.n, dtype=np.float32)
        return np.asarray(self.deviations(direction) / (self.n * sd), dtype=np.float32)

    def p(self, direction: Direction) -> float:
        """Share of all shifts at least as extreme as the observed placement, itself included.

        Direction "either" ranks |hits - mean|: one statistic, so its rank stays exact where
        doubling the smaller one-sided p would not (skewed or tied counts), and the same
        statistic enters the joint null of several claims.
        """
        deviation = self.deviations(direction)
        return int((deviation >= deviation[0]).sum()) / self.n


def null_result(
    series: ShiftSeries, direction: Direction, *, n_earthquakes: int, share: float, hours: float
) -> NullResult:
    """The circular-shift verdict.

    ``n_earthquakes`` and ``share`` (of bins inside windows) are those of the grid, ``hours`` its
    step. The inflation is the variance over shifts divided by the binomial n f (1 - f); it is 1
    by definition where that is zero.
    """
    binomial_variance = n_earthquakes * share * (1.0 - share)
    return NullResult(
        name="circular-shift",
        shifts=series.n,
        effective_shifts=effective_number(series.hits),
        observed=int(series.hits[0]),
        mean=series.mean,
        sd=series.sd,
        inflation=series.sd**2 / binomial_variance if binomial_variance > 0.0 else 1.0,
        p=series.p(direction),
        grid_hours=hours,
    )
