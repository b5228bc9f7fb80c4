"""Counts by lag and their envelope from every shift."""

from __future__ import annotations

import itertools
import json

import numpy as np
import pytest
from epochtest.inference.lags import LagAxis, counts_by_lag, lag_axis, lag_profile
from epochtest.inference.windows import Grid

START = np.datetime64("2010-01-01", "us")
DAY_US = 86_400_000_000


def made(days: float, seed: int, quakes: int, epochs: int) -> tuple[Grid, np.ndarray, np.ndarray]:
    """A grid of 6 h, random earthquakes and random epochs."""
    rng = np.random.default_rng(seed)
    us = [np.sort(rng.integers(0, int(days * DAY_US), k)) for k in (quakes, epochs)]
    times, keys = (START + x.astype("timedelta64[us]") for x in us)
    end = START + np.timedelta64(int(days * DAY_US), "us")
    return Grid.over((START, end), 6.0), times, keys


def test_counts_equal_a_loop_over_pairs() -> None:
    """Each earthquake counts once per epoch (Chree 1912): slow twin over all pairs."""
    _, times, keys = made(300, 1, 400, 20)
    edges = np.arange(-5, 8) * DAY_US
    lags = (times[None, :] - keys[:, None]).astype(np.int64).ravel()
    slow = [int(((lags >= a) & (lags < b)).sum()) for a, b in itertools.pairwise(edges)]
    assert counts_by_lag(times, keys, edges).tolist() == slow


def test_envelope_equals_a_loop_over_shifts() -> None:
    """Levels from every shift equal the brute-force profiles on the grid: slow twin."""
    grid, times, keys = made(60, 2, 300, 7)
    axis = LagAxis(first_us=-DAY_US, width=2, n=9)
    profile = lag_profile(grid, times, keys, (0.0, 1.0), axis)
    in_bin = np.bincount((times - START).astype(np.int64) // grid.step_us, minlength=grid.n)
    epoch_bins = (keys - START).astype(np.int64) // grid.step_us
    slow = np.zeros((grid.n, axis.n), dtype=int)
    for shift in range(grid.n):
        for k in range(axis.n):
            for step in range(axis.width):
                at = (epoch_bins + shift - 4 + k * axis.width + step) % grid.n
                slow[shift, k] += in_bin[at].sum()
    assert profile.mean == pytest.approx(slow.mean())
    low, high = np.quantile(slow, (0.025, 0.975), method="inverted_cdf")
    assert (profile.low, profile.high) == (low, high)
    for level, reached in (
        (profile.simultaneous_high, slow.max(axis=1) >= profile.simultaneous_high),
        (profile.simultaneous_low, slow.min(axis=1) <= profile.simultaneous_low),
    ):
        assert reached.mean() <= 0.05, level
    assert (slow.max(axis=1) >= profile.simultaneous_high - 1).mean() > 0.05
    assert (slow.min(axis=1) <= profile.simultaneous_low + 1).mean() > 0.05


def test_constructed_response_stands_out_at_its_lag_only() -> None:
    """One earthquake 2.5 days after each of 40 epochs shows at lag 2.5 days: by construction."""
    keys = START + (np.arange(40) * 30 * DAY_US + 13 * DAY_US).astype("timedelta64[us]")
    times = keys + np.timedelta64(int(2.5 * DAY_US), "us")
    grid = Grid.over((START, START + np.timedelta64(1200, "D")), 1.0)
    profile = lag_profile(grid, times, keys, (2.0, 3.0))
    at = int(np.searchsorted(profile.edges_days, 2.5, side="right")) - 1
    assert profile.counts[at] == 40
    assert sum(profile.counts) == 40


@pytest.mark.parametrize(
    ("hours", "window", "width_h"),
    [(1.0, (0.0, 3.0), 12.0), (1.0, (0.0, 7.0), 24.0), (1.0, (-1.0, 1.0), 6.0), (6.0, (0, 1), 6.0)],
)
def test_default_axis_cuts_the_window_into_whole_bins(
    hours: float, window: tuple[float, float], width_h: float
) -> None:
    """The window's two edges are bin edges and a bin fits a day: arithmetic by hand."""
    grid = Grid.over((START, START + np.timedelta64(3000, "D")), hours)
    keys = START + (np.arange(40) * 60).astype("timedelta64[D]")
    axis = lag_axis(grid, keys, window)
    edges = (axis.first_us + np.arange(axis.n + 1) * axis.width * grid.step_us) / DAY_US
    assert axis.width * grid.step_hours == width_h
    assert set(window) <= set(edges.tolist())
    assert edges[0] == window[0] - 3 * (window[1] - window[0])
    assert axis.n <= 60


def test_default_axis_stops_at_the_median_interval() -> None:
    """With epochs 5 days apart, no lag beyond 5 days from the window is shown."""
    grid = Grid.over((START, START + np.timedelta64(300, "D")), 1.0)
    keys = START + (np.arange(50) * 5).astype("timedelta64[D]")
    axis = lag_axis(grid, keys, (0.0, 3.0))
    assert axis.first_us == -5 * DAY_US


def test_awkward_windows_still_give_a_small_profile() -> None:
    """Windows off the grid, one epoch or none: at most 60 bins and plain JSON."""
    grid, times, keys = made(500, 4, 100, 1)
    for window in ((0.0, 0.01), (-0.3, 71 / 24), (-400.0, 400.0)):
        for some in (keys, keys[:0]):
            profile = lag_profile(grid, times, some, window)
            assert 3 <= len(profile.counts) <= 60
            assert json.loads(json.dumps(profile.as_dict()))["counts"] == list(profile.counts)
