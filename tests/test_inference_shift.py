"""Hits at every circular shift and the p-values read from them."""

from __future__ import annotations

import numpy as np
import pytest
from epochtest.inference.shift import (
    ShiftSeries,
    circular_correlation,
    effective_number,
    hits_at_all_shifts,
    null_result,
)

TOY = np.array([0, 1, 0, 2, 0, 0, 3, 0, 1, 0, 2, 1])


def slow_hits(mask: np.ndarray, counts: np.ndarray) -> list[int]:
    """The definition: turn the mask, count what it marks."""
    return [int(counts[np.roll(mask, s)].sum()) for s in range(mask.size)]


@pytest.mark.parametrize("n", [1, 2, 12, 97, 360, 1009])
def test_one_transform_equals_turning_the_mask(n: int) -> None:
    """Every shift equals the brute-force twin, for even, odd and prime numbers of bins."""
    rng = np.random.default_rng(n)
    mask = rng.random(n) < 0.3
    counts = rng.poisson(2.0, n)
    counts[n // 2] += 5000
    assert hits_at_all_shifts(mask, counts).tolist() == slow_hits(mask, counts)


def test_shift_moves_the_windows_later() -> None:
    """Shift 1 puts a window one bin later: by hand."""
    mask = np.array([True, False, False, False])
    assert hits_at_all_shifts(mask, np.array([1, 2, 3, 4])).tolist() == [1, 2, 3, 4]


def test_toy_series_has_seven_hits_and_one_twelfth() -> None:
    """Keys 3, 6, 10 on the toy series: sum 7, p 1/12, enumerated by hand over 12 shifts."""
    mask = np.isin(np.arange(12), [3, 6, 10])
    series = ShiftSeries(hits_at_all_shifts(mask, TOY))
    assert series.hits[0] == 7
    assert series.p("more") == 1 / 12
    assert series.mean == 10 * 3 / 12


def test_direction_turns_the_rank() -> None:
    """p counts shifts at least as extreme, itself included: five values ranked by hand."""
    series = ShiftSeries(np.array([7, 3, 5, 7, 3]))
    assert series.p("more") == 2 / 5
    assert series.p("fewer") == 5 / 5
    assert series.p("either") == 4 / 5  # |7 - 5| = |3 - 5|: a tie that must count


@pytest.mark.parametrize("n", [3, 7, 11, 49, 876600])
def test_ties_about_a_mean_that_is_no_float_are_kept(n: int) -> None:
    """Deviations +d and -d tie exactly although the mean is a repeating fraction."""
    hits = np.full(n, 10)
    hits[0], hits[1], hits[2] = 11, 9, 10
    series = ShiftSeries(hits + 100000)
    assert series.p("either") == 2 / n
    row = series.standardised("either")
    assert row[0] == row[1]


def test_constant_series_says_nothing() -> None:
    """Where every shift gives the same count p is 1 and one value is independent."""
    series = ShiftSeries(np.full(50, 4))
    for direction in ("more", "fewer", "either"):
        result = null_result(series, direction, n_earthquakes=9, share=0.5, hours=1.0)
        assert (result.p, result.effective_shifts, result.sd) == (1.0, 1.0, 0.0)
    empty = null_result(series, "more", n_earthquakes=0, share=0.0, hours=1.0)
    assert empty.inflation == 1.0


@pytest.mark.parametrize("n", [10, 11, 64, 101])
def test_effective_number_equals_the_sum_over_autocorrelations(n: int) -> None:
    """n / sum of squared circular autocorrelations (Bretherton et al. 1999), slow twin."""
    x = np.random.default_rng(n).normal(size=n).cumsum()
    x -= x.mean()
    rho = [float(x @ np.roll(x, k)) / float(x @ x) for k in range(n)]
    assert effective_number(x) == pytest.approx(n / sum(r * r for r in rho), rel=1e-9)


def test_effective_number_of_a_sine_is_two() -> None:
    """A sine has squared autocorrelations of mean 1/2, hence two degrees of freedom: by hand."""
    assert effective_number(np.sin(2 * np.pi * np.arange(500) / 50)) == pytest.approx(2.0)


def test_inflation_is_one_for_independent_earthquakes_and_the_size_for_copies() -> None:
    """Each earthquake repeated five times in its bin has five times the binomial variance.

    Authority: a compound Poisson count of fixed size m has variance m times its mean. Interval:
    random windows leave the series with about 2000 independent shifts, so a variance ratio is
    known to about sqrt(2/2000) = 3 %; four such errors are allowed.
    """
    rng = np.random.default_rng(5)
    mask = np.convolve(rng.random(60000) < 0.004, np.ones(10), "full")[:60000] > 0
    single = rng.poisson(0.1, 60000)
    for size in (1, 5):
        series = ShiftSeries(hits_at_all_shifts(mask, size * single))
        result = null_result(
            series, "more", n_earthquakes=size * int(single.sum()), share=mask.mean(), hours=1.0
        )
        assert result.inflation == pytest.approx(size, rel=0.13)


def test_counts_too_large_for_the_transform_raise() -> None:
    """When float64 cannot tell neighbouring integers apart an error replaces a wrong count."""
    rng = np.random.default_rng(3)
    huge = rng.integers(0, 2**52, 1010)
    cancelling = np.where(np.arange(1010) % 2, 2**52, -(2**52)) + rng.integers(0, 9, 1010)
    pair = np.arange(1010) < 2
    for kernel, series in ((rng.random(1010) < 0.5, huge), (pair, cancelling)):
        with pytest.raises(ArithmeticError, match="too large to be correlated exactly"):
            circular_correlation(kernel, series)
