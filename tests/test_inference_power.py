"""Detectable rate ratios and the earthquakes they need."""

from __future__ import annotations

import math

import pytest
from epochtest.inference.power import detectable_ratio, events_needed, normal_critical
from scipy import stats

Z = normal_critical(0.05, "more")


@pytest.mark.parametrize(("ratio", "n"), [(1.1, 7192), (1.25, 1227), (1.5, 339), (2.0, 100)])
def test_events_needed_equal_the_tabulated_ones(ratio: float, n: int) -> None:
    """f = .1, one-sided .05, power .8: sample-size formula for one proportion, common practice."""
    assert events_needed(ratio, 0.1, 1.0, Z, 0.8) == n


@pytest.mark.parametrize(("ratio", "n"), [(1.1, 7192), (1.25, 1227), (1.5, 339), (2.0, 100)])
def test_exact_power_there_is_a_little_below_the_stated_one(ratio: float, n: int) -> None:
    """Exact binomial power (SciPy) at those numbers is .75-.80: the price of the approximation."""
    critical = int(stats.binom.isf(0.05, n, 0.1)) + 1
    power = stats.binom.sf(critical - 1, n, ratio * 0.1 / (0.9 + ratio * 0.1))
    assert 0.75 <= power <= 0.80


@pytest.mark.parametrize("direction", ["more", "fewer", "either"])
@pytest.mark.parametrize("power", [0.3, 0.5, 0.8, 0.99])
@pytest.mark.parametrize("inflation", [1.0, 6.0])
def test_detectable_ratio_solves_its_equation(
    direction: str, power: float, inflation: float
) -> None:
    """The ratio put back into the power equation returns the stated power (normal law, SciPy)."""
    n, f = 2000, 0.07
    z = normal_critical(0.05, direction)
    ratio = detectable_ratio(n, f, inflation, z, power, direction)
    assert ratio is not None
    assert (ratio < 1) == (direction == "fewer")
    p1 = ratio * f / (1 - f + ratio * f)
    scale = math.sqrt(inflation / n)
    reached = (abs(p1 - f) - scale * z * math.sqrt(f * (1 - f))) / math.sqrt(p1 * (1 - p1)) / scale
    assert stats.norm.cdf(reached) == pytest.approx(power, abs=1e-9)


@pytest.mark.parametrize("ratio", [0.5, 0.9, 1.2, 3.0])
def test_both_ways_agree(ratio: float) -> None:
    """The events needed for a ratio make that ratio detectable, one fewer does not."""
    direction = "more" if ratio > 1 else "fewer"
    n = events_needed(ratio, 0.2, 3.0, Z, 0.8)
    assert n is not None
    at, before = (detectable_ratio(k, 0.2, 3.0, Z, 0.8, direction) for k in (n, n - 1))
    assert at is not None
    assert before is not None
    assert abs(math.log(at)) <= abs(math.log(ratio)) < abs(math.log(before))


def test_impossible_questions_have_no_ratio() -> None:
    """No earthquakes, no room above f, an infinite critical value: None, not a number."""
    assert detectable_ratio(0, 0.1, 1.0, Z, 0.8) is None
    assert detectable_ratio(3, 0.9, 1.0, Z, 0.8) is None
    assert detectable_ratio(20, 0.02, 1.0, Z, 0.8, "fewer") is None
    assert detectable_ratio(500, 0.1, 1.0, math.inf, 0.8) is None
    assert detectable_ratio(500, 1.0, 1.0, Z, 0.8) is None
    assert events_needed(1.0, 0.1, 1.0, Z, 0.8) is None


def test_two_sided_value_is_the_normal_one() -> None:
    """1.6449 one-sided, 1.9600 two-sided at .05: tables of the normal law, common practice."""
    assert normal_critical(0.05, "fewer") == pytest.approx(1.6449, abs=5e-5)
    assert normal_critical(0.05, "either") == pytest.approx(1.9600, abs=5e-5)
