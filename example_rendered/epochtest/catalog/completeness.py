"""Magnitude-frequency distribution, magnitude of completeness, and b-value.

Counting is done in bins as wide as the step in which magnitudes are given, but never narrower
than 0.1: an agency mix has some magnitudes to 0.01 and most to 0.1, and in finer bins the
latter stand as spikes. Each bin is [centre - width/2, centre + width/2).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.study.results import SizeDistribution

STEPS = (1.0, 0.5, 0.2, 0.1, 0.05, 0.01, 0.001)
NARROWEST_BIN = 0.1
ON_STEP_SHARE = 0.95
"""A step counts as detected when this share of magnitudes are multiples of it: a few finer
values of another agency do not change it, and a tenfold finer step leaves only 10 % on it."""

ENOUGH_FOR_COARSE_STEP = 10
"""With fewer magnitudes, steps above 0.1 are not told from chance (0.5: 0.2^n for step 0.1)."""

MINIMUM_EVENTS = 10
"""Below this neither completeness nor b is given (common practice asks for 50 and more)."""

MAXIMUM_CURVATURE_CORRECTION = 0.2
"""Woessner & Wiemer (2005), Bull. Seismol. Soc. Am. 95."""

_FLOAT_NOISE = 1e-6


@dataclass(frozen=True)
class MagnitudeFrequency:
    """Counts per magnitude bin, gaps included: centres (k,), in the bin (k,), at or above (k,)."""

    centre: NDArray[np.float64]
    incremental: NDArray[np.int64]
    cumulative: NDArray[np.int64]
    width: float


def magnitude_step(magnitudes: ArrayLike) -> float:
    """Largest of STEPS of which nearly all magnitudes (n,) are multiples; 0.1 for none at all."""
    values = _finite(magnitudes)
    if values.size == 0:
        return NARROWEST_BIN
    for step in STEPS:
        if step > NARROWEST_BIN and values.size < ENOUGH_FOR_COARSE_STEP:
            continue
        multiple = values / step
        if np.mean(np.abs(multiple - np.round(multiple)) * step < _FLOAT_NOISE) >= ON_STEP_SHARE:
            return step
    return STEPS[-1]


def bin_width(step: float) -> float:
    """Width of the bins in which magnitudes of that step are counted."""
    return max(step, NARROWEST_BIN)


def magnitude_frequency(magnitudes: ArrayLike, width: float) -> MagnitudeFrequency:
    """Incremental and cumulative counts of magnitudes (n,) in bins of ``width``; NaN is ignored."""
    index = _bin_index(_finite(magnitudes), width)
    if index.size == 0:
        none = np.empty(0, dtype=np.int64)
        return MagnitudeFrequency(np.empty(0), none, none, width)
    incremental = np.bincount(index - index.min()).astype(np.int64)
    centre = np.round((np.arange(incremental.size) + index.min()) * width, 6)
    return MagnitudeFrequency(centre, incremental, incremental[::-1].cumsum()[::-1], width)


def maximum_curvature(table: MagnitudeFrequency) -> float | None:
    """Centre of the fullest bin, of several the highest (Wiemer & Wyss 2000); None without events.

    It tends to be too low, hence the correction of Woessner & Wiemer (2005).
    """
    if table.incremental.size == 0:
        return None
    fullest = np.flatnonzero(table.incremental == table.incremental.max())[-1]
    return float(table.centre[fullest])


def aki_utsu_b(magnitudes: ArrayLike, completeness: float, width: float) -> float | None:
    """Maximum-likelihood b of magnitudes (n,) all in bins at or above ``completeness``.

    b = log10(e) / (mean - (Mc - width/2)): Aki (1965) with Utsu's (1966) correction for bins.
    None for fewer than two events or without spread.
    """
    values = _finite(magnitudes)
    if values.size < 2 or np.ptp(values) < _FLOAT_NOISE:
        return None
    return float(np.log10(np.e) / (values.mean() - (completeness - width / 2.0)))


def shi_bolt_error(magnitudes: ArrayLike, b: float) -> float:
    """Standard error of b: ln(10) b^2 sqrt(sum (M - mean)^2 / (n (n - 1))) (Shi & Bolt 1982)."""
    values = _finite(magnitudes)
    scatter = float(((values - values.mean()) ** 2).sum()) / (values.size * (values.size - 1))
    return float(np.log(10.0) * b * b * np.sqrt(scatter))


def size_distribution(magnitudes: ArrayLike) -> SizeDistribution:
    """Step, completeness and b-value of magnitudes (n,); None where too few events tell.

    Magnitudes are rounded to their bins first; ``n_above`` counts, and b comes from, the events
    in bins at or above ``mc``, that is M >= mc - width/2. For all the formulas see Wiemer &
    Wyss (2000), Woessner & Wiemer (2005), Aki (1965), Utsu (1966), Shi & Bolt (1982).
    """
    values = _finite(magnitudes)
    step = magnitude_step(values)
    if values.size < MINIMUM_EVENTS:
        return SizeDistribution(
            bin_width=step, mc_maximum_curvature=None, mc=None, n_above=0, b=None, b_error=None
        )
    width = bin_width(step)
    curvature = maximum_curvature(magnitude_frequency(values, width))
    if curvature is None:
        raise ValueError("a table of events has a fullest bin")
    mc = round(curvature + MAXIMUM_CURVATURE_CORRECTION, 6)
    index = _bin_index(values, width)
    lowest = int(np.ceil((mc - _FLOAT_NOISE) / width))
    above = index[index >= lowest] * width
    b = aki_utsu_b(above, lowest * width, width)
    return SizeDistribution(
        bin_width=step,
        mc_maximum_curvature=curvature,
        mc=mc,
        n_above=above.size,
        b=b,
        b_error=None if b is None else shi_bolt_error(above, b),
    )


def _bin_index(values: NDArray[np.float64], width: float) -> NDArray[np.int64]:
    index: NDArray[np.int64] = np.floor(values / width + 0.5 + _FLOAT_NOISE).astype(np.int64)
    return index


def _finite(magnitudes: ArrayLike) -> NDArray[np.float64]:
    values: NDArray[np.float64] = np.asarray(magnitudes, dtype=float)
    return values[np.isfinite(values)]
