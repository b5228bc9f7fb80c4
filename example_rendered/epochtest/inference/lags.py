"""Counts by lag around the epochs (superposed epochs; Chree 1912, 1913) with their null.

Every earthquake counts once per epoch. The null turns all epochs round the span by the same
shift. On the grid, epochs against earthquakes give one series D: earthquakes m steps after an
epoch, summed over epochs. The profile seen at shift s is D read from s on, so the null of
every lag at every shift is already in D:

    D      ....a b c d e f g h ....      B[m] = sum of one lag bin of D from m on
    s = 0      [bin][bin][bin]           profile(s)[k] = B[s + first + k * width]
    s = 1        [bin][bin][bin]         largest of them: the simultaneous line

A line that holds at each lag is crossed somewhere in most profiles; the simultaneous lines are
crossed by one profile in twenty.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from epochtest.inference.shift import circular_correlation
from epochtest.inference.windows import (
    DAY_US,
    Counts,
    Grid,
    WindowDays,
    bin_counts,
    sorted_us,
)

BINS_PER_WINDOW = (8, 7, 6, 5, 4)
WINDOWS_EACH_SIDE = 3
MOST_BINS = 60


@dataclass(frozen=True)
class LagAxis:
    """``n`` lag bins of ``width`` grid steps from ``first_us`` (microseconds of lag) on."""

    first_us: int
    width: int
    n: int


@dataclass(frozen=True)
class LagProfile:
    """Counts by lag and the levels that chance reaches.

    ``edges_days`` (k+1,) in days of lag, ``counts`` (k,) summed over epochs. The null is the same
    at every lag: ``mean`` and the pointwise band ``low``..``high`` (2.5-97.5 % of shifts).
    ``simultaneous_high`` is reached or crossed upwards by at most 5 % of shifts anywhere among the
    shown lags, ``simultaneous_low`` downwards.
    """

    edges_days: tuple[float, ...]
    counts: tuple[int, ...]
    mean: float
    low: int
    high: int
    simultaneous_low: int
    simultaneous_high: int
    window_days: WindowDays
    n_epochs: int

    def as_dict(self) -> dict[str, Any]:
        """The profile as plain JSON types."""
        return {
            "edges_days": list(self.edges_days),
            "counts": list(self.counts),
            "mean": self.mean,
            "low": self.low,
            "high": self.high,
            "simultaneous_low": self.simultaneous_low,
            "simultaneous_high": self.simultaneous_high,
            "window_days": list(self.window_days),
            "n_epochs": self.n_epochs,
        }


def lag_axis(grid: Grid, epochs_utc: ArrayLike, window_days: WindowDays) -> LagAxis:
    """Lag bins for a chart: the window and three of its lengths on either side, <= 60 bins.

    A side never reaches further than the median interval between epochs, beyond which the
    next epoch's earthquakes would be shown again. Bins are whole grid steps; a window of whole
    steps is cut into 4 to 8 equal bins (a bin that fits a day is preferred), and the bins begin
    at its first lag.
    """
    steps = (window_days[1] - window_days[0]) * DAY_US / grid.step_us
    width = max(1, round(steps / BINS_PER_WINDOW[0]))
    whole = round(steps)
    if abs(steps - whole) < 1e-6:
        fitting = [whole // m for m in BINS_PER_WINDOW if whole % m == 0]
        width = next((w for w in fitting if _fits_a_day(w * grid.step_us)), (fitting or [width])[0])
    inside = max(1, round(steps / width))
    gaps = np.diff(sorted_us(epochs_utc, "epochs"))
    reach_us = WINDOWS_EACH_SIDE * (window_days[1] - window_days[0]) * DAY_US
    if gaps.size:
        reach_us = min(reach_us, float(np.median(gaps)))
    side = int(reach_us / (width * grid.step_us) + 1e-9)
    side = min(max(side, 1), (MOST_BINS - inside) // 2)
    first_us = round(window_days[0] * DAY_US) - side * width * grid.step_us
    return LagAxis(first_us, width, inside + 2 * side)


def _fits_a_day(width_us: int) -> bool:
    return DAY_US % width_us == 0 or width_us % DAY_US == 0


def counts_by_lag(times_utc: ArrayLike, epochs_utc: ArrayLike, edges_us: Counts) -> Counts:
    """Earthquakes (k,) at lags [edge, next edge) microseconds, summed over epochs."""
    times = sorted_us(times_utc, "earthquakes")
    epochs = sorted_us(epochs_utc, "epochs")
    before = np.zeros(edges_us.size, dtype=np.int64)
    for k, edge in enumerate(edges_us):
        before[k] = np.searchsorted(times, epochs + edge).sum()
    return np.diff(before)


def _reached_by_few(values: Counts, share: float) -> int:
    """Smallest whole level that at most ``share`` of the values reach or exceed."""
    ordered = np.sort(values)[::-1]
    return int(ordered[int(share * values.size + 1e-9)]) + 1


def lag_profile(
    grid: Grid,
    times_utc: ArrayLike,
    epochs_utc: ArrayLike,
    window_days: WindowDays,
    axis: LagAxis | None = None,
) -> LagProfile:
    """Observed counts by lag and the null's levels from every shift of the grid.

    The observed counts use exact times and all epochs given, those outside the span included,
    so that lags at the edges of the span are not short of epochs; the null uses the epochs
    inside the grid. Cost grows as bins of the grid times lag bins.
    """
    axis = axis or lag_axis(grid, epochs_utc, window_days)
    edges_us = axis.first_us + np.arange(axis.n + 1, dtype=np.int64) * (axis.width * grid.step_us)
    epochs_per_bin = bin_counts(grid, epochs_utc)
    by_step = circular_correlation(epochs_per_bin, bin_counts(grid, times_utc))
    wrapped = np.concatenate((by_step, np.resize(by_step, axis.width - 1)))
    total = np.concatenate(([0], np.cumsum(wrapped)))
    by_bin = total[axis.width :] - total[: -axis.width]
    largest, smallest = by_bin.copy(), by_bin.copy()
    for k in range(1, axis.n):
        turned = np.roll(by_bin, -k * axis.width)
        np.maximum(largest, turned, out=largest)
        np.minimum(smallest, turned, out=smallest)
    low, high = np.quantile(by_bin, (0.025, 0.975), method="inverted_cdf")
    return LagProfile(
        edges_days=tuple(float(edge) / DAY_US for edge in edges_us),
        counts=tuple(int(c) for c in counts_by_lag(times_utc, epochs_utc, edges_us)),
        mean=float(by_bin.mean()),
        low=int(low),
        high=int(high),
        simultaneous_low=-_reached_by_few(-smallest, 0.05),
        simultaneous_high=_reached_by_few(largest, 0.05),
        window_days=window_days,
        n_epochs=int(epochs_per_bin.sum()),
    )
