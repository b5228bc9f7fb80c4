"""Clustered seismicity without any sky effect: temporal ETAS catalogs by branching.

Epidemic-type aftershock sequences (Ogata 1988): independent earthquakes (immigrants) at a
constant rate; every earthquake of magnitude m has Poisson many offspring with mean
K 10^(alpha (m - m_ref)), delayed by the law of Omori and Utsu, density ~ (t + c)^-p; magnitudes
follow Gutenberg and Richter, cut off at m_max. The parameter is the branching ratio, the mean
number of offspring over all magnitudes, from which K follows. Delays are cut off at
``longest_delay_days``: with p near 1 an uncut law keeps a tenth of all offspring for centuries,
and no simulation of finite length would be stationary.

Catalogs are simulated generation by generation, each a few array operations.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class EtasParameters:
    """Rates per day, delays in days. Raises ValueError for values without a stationary catalog."""

    immigrants_per_day: float
    branching_ratio: float
    omori_p: float = 1.2
    omori_c_days: float = 0.01
    alpha: float = 0.8
    b: float = 1.0
    m_ref: float = 4.0
    m_max: float = 8.0
    longest_delay_days: float = 1000.0

    def __post_init__(self) -> None:
        if not 0.0 <= self.branching_ratio < 1.0:
            raise ValueError(
                f"branching_ratio must be in 0 <= n < 1 but is {self.branching_ratio}: "
                "at 1 and above, aftershocks never die out"
            )
        positive = ("omori_p", "omori_c_days", "b", "longest_delay_days")
        for name in positive:
            if not getattr(self, name) > 0.0:
                raise ValueError(f"{name} must be positive but is {getattr(self, name)}")
        if self.immigrants_per_day < 0.0 or self.m_max <= self.m_ref:
            raise ValueError("immigrants_per_day must not be negative, and m_max exceed m_ref")

    @property
    def rate_per_day(self) -> float:
        """Mean rate of all earthquakes of the stationary catalog."""
        return self.immigrants_per_day / (1.0 - self.branching_ratio)

    @property
    def productivity(self) -> float:
        """K: mean number of offspring of an earthquake of magnitude m_ref.

        The branching ratio over the mean of 10^(alpha (m - m_ref)) under the cut-off
        Gutenberg-Richter law, b / (b - alpha) (1 - 10^((alpha - b) R)) / (1 - 10^(-b R)), with
        R = m_max - m_ref.
        """
        reach = self.m_max - self.m_ref
        tail = self.b * math.log(10.0) / -math.expm1(-self.b * reach * math.log(10.0))
        excess = (self.alpha - self.b) * math.log(10.0)
        mean = tail * (reach if excess == 0.0 else math.expm1(excess * reach) / excess)
        return self.branching_ratio / mean


@dataclass(frozen=True)
class EtasCatalog:
    """Earthquakes in order of time: all arrays (n,).

    ``days`` since the start of the catalog, ``magnitudes``, ``generation`` (0 for immigrants),
    ``delay_days`` after the mother (NaN for immigrants).
    """

    days: Floats
    magnitudes: Floats
    generation: NDArray[np.int64]
    delay_days: Floats


def draw_magnitudes(parameters: EtasParameters, n: int, rng: np.random.Generator) -> Floats:
    """Magnitudes (n,) of the Gutenberg-Richter law between m_ref and m_max."""
    reach = parameters.m_max - parameters.m_ref
    share = -math.expm1(-parameters.b * reach * math.log(10.0))
    return parameters.m_ref - np.log10(1.0 - share * rng.random(n)) / parameters.b


def draw_delays(parameters: EtasParameters, n: int, rng: np.random.Generator) -> Floats:
    """Delays (n,) in days of the Omori-Utsu law cut off at the longest delay (inverse CDF)."""
    p, c = parameters.omori_p, parameters.omori_c_days
    reach = math.log1p(parameters.longest_delay_days / c)
    u = rng.random(n)
    if p == 1.0:
        return np.asarray(c * np.expm1(u * reach))
    share = -math.expm1((1.0 - p) * reach)
    return np.asarray(c * np.expm1(np.log1p(-share * u) / (1.0 - p)))


def grow(
    parameters: EtasParameters, immigrant_days: Floats, end_days: float, rng: np.random.Generator
) -> EtasCatalog:
    """Immigrants at given times (k,) and all their descendants before ``end_days``, sorted."""
    days = np.array(immigrant_days, dtype=np.float64)
    delay = np.full(days.size, np.nan)
    grown: list[tuple[Floats, Floats, NDArray[np.int64], Floats]] = []
    while days.size or not grown:
        magnitudes = draw_magnitudes(parameters, days.size, rng)
        grown.append((days, magnitudes, np.full(days.size, len(grown)), delay))
        mean = parameters.productivity * 10.0 ** (
            parameters.alpha * (magnitudes - parameters.m_ref)
        )
        mothers = np.repeat(days, rng.poisson(mean))
        delay = draw_delays(parameters, mothers.size, rng)
        days = mothers + delay
        early = days < end_days
        days, delay = days[early], delay[early]
    columns = [np.concatenate(column) for column in zip(*grown, strict=True)]
    order = np.argsort(columns[0], kind="stable")
    return EtasCatalog(*(column[order] for column in columns))


def simulate(
    parameters: EtasParameters,
    days: float,
    rng: np.random.Generator,
    *,
    burn_in_days: float | None = None,
    windows_days: Floats | None = None,
    window_factor: float = 1.0,
) -> EtasCatalog:
    """A catalog over [0, days), started ``burn_in_days`` earlier so that it is stationary.

    The default burn-in is twice the longest delay. ``windows_days`` (k, 2), disjoint [start, end),
    plants an effect: immigrants are ``window_factor`` times as frequent inside them (0 and more),
    and the clusters they start spill out of the windows. Cost grows with the earthquakes.
    """
    burn_in = 2.0 * parameters.longest_delay_days if burn_in_days is None else burn_in_days
    densest = max(window_factor, 1.0) if windows_days is not None else 1.0
    count = rng.poisson(parameters.immigrants_per_day * densest * (days + burn_in))
    immigrants = rng.uniform(-burn_in, days, count)
    if windows_days is not None:
        factor = np.where(inside(immigrants, windows_days), window_factor, 1.0)
        immigrants = immigrants[rng.random(count) * densest < factor]
    whole = grow(parameters, immigrants, days, rng)
    kept = whole.days >= 0.0
    return EtasCatalog(
        whole.days[kept], whole.magnitudes[kept], whole.generation[kept], whole.delay_days[kept]
    )


def inside(days: Floats, windows_days: Floats) -> NDArray[np.bool_]:
    """Which times (n,) lie in the sorted or unsorted disjoint windows (k, 2) [start, end)."""
    starts, ends = np.sort(windows_days, axis=0).T
    return np.asarray(
        np.searchsorted(starts, days, side="right") > np.searchsorted(ends, days, side="right")
    )


def plant_lone(
    days: Floats, span_days: float, windows_days: Floats, ratio: float, rng: np.random.Generator
) -> Floats:
    """The times (n,) with independent earthquakes added inside the windows, sorted.

    Expected number: (ratio - 1) times the mean rate n / span_days times the length of the disjoint
    windows (k, 2), which must lie in [0, span_days). Raises ValueError for a ratio below 1.
    """
    if ratio < 1.0:
        raise ValueError(f"ratio must be 1 or more but is {ratio}: nothing can be taken away here")
    lengths = windows_days[:, 1] - windows_days[:, 0]
    extra = rng.poisson((ratio - 1.0) * days.size / span_days * lengths.sum())
    chosen = rng.choice(lengths.size, extra, p=lengths / lengths.sum()) if extra else []
    added = windows_days[chosen, 0] + rng.random(extra) * lengths[chosen] if extra else []
    return np.sort(np.concatenate((days, added)))
