"""Rate ratios, their intervals, and the plain binomial p."""

from __future__ import annotations

import numpy as np
import pytest
from epochtest.inference.effect import binomial_p, rate_ratio, ratio_interval
from scipy import stats


def test_two_poisson_rates_equal_the_published_example() -> None:
    """11 in 800 against 21 in 3011 person-years: the example of R's poisson.test page.

    Tolerance: the last printed digit.
    """
    share = 800 / 3811
    assert rate_ratio(11, 32, share) == pytest.approx(1.971488, abs=5e-7)
    low, high = ratio_interval(11, 32, share, 0.95)
    assert low == pytest.approx(0.858426, abs=5e-7)
    assert high == pytest.approx(4.277266, abs=5e-7)
    assert binomial_p(11, 32, share, "either") == pytest.approx(0.0796686, abs=5e-8)


@pytest.mark.parametrize(
    ("hits", "n", "f"), [(0, 9, 0.2), (9, 9, 0.2), (3, 9, 0.5), (70, 900, 0.1)]
)
def test_binomial_p_equals_scipy(hits: int, n: int, f: float) -> None:
    """All three directions equal scipy.stats.binomtest (closed form; float rounding only)."""
    for direction, name in (("more", "greater"), ("fewer", "less"), ("either", "two-sided")):
        ours = binomial_p(hits, n, f, direction)
        assert ours == pytest.approx(stats.binomtest(hits, n, f, name).pvalue, rel=1e-9)


def test_interval_equals_clopper_pearson_of_scipy() -> None:
    """The interval is the Clopper-Pearson one of the share, as odds over odds (SciPy)."""
    limits = stats.binomtest(70, 900, 0.1).proportion_ci(0.9, "exact")
    want = [p / (1 - p) * 0.9 / 0.1 for p in limits]
    assert ratio_interval(70, 900, 0.1, 0.9) == pytest.approx(want, rel=1e-9)


def test_ends_of_the_scale_have_a_meaning() -> None:
    """No hits, all hits, no earthquakes, windows everywhere or nowhere: None is unbounded."""
    assert rate_ratio(0, 20, 0.1) == 0.0
    assert rate_ratio(20, 20, 0.1) is None
    low, high = ratio_interval(0, 20, 0.1, 0.95)
    assert low == 0.0
    assert high == pytest.approx((1 - 0.025 ** (1 / 20)) / 0.025 ** (1 / 20) * 9)  # closed form
    low, high = ratio_interval(20, 20, 0.1, 0.95, 4.0)
    assert high is None
    assert low == pytest.approx(9 * 0.025 ** (4 / 20) / (1 - 0.025 ** (4 / 20)))
    for hits, n, f in ((0, 0, 0.1), (5, 5, 1.0), (0, 5, 0.0)):
        assert rate_ratio(hits, n, f) is None
        assert ratio_interval(hits, n, f, 0.95) == (0.0, None)
        assert binomial_p(hits, n, f, "more") == 1.0


def test_inflation_widens_by_its_square_root_and_never_narrows() -> None:
    """For large counts the log interval grows as sqrt(phi) (normal limit; 2 % left of it)."""
    plain = np.log(ratio_interval(3000, 30000, 0.1, 0.95))
    wide = np.log(ratio_interval(3000, 30000, 0.1, 0.95, 4.0))
    assert np.ptp(wide) / np.ptp(plain) == pytest.approx(2.0, rel=0.02)
    assert ratio_interval(30, 300, 0.1, 0.95, 0.3) == ratio_interval(30, 300, 0.1, 0.95)


def test_exact_interval_covers_in_at_least_its_share_of_samples() -> None:
    """Clopper-Pearson covers at least 95 %: 2000 seeded samples, 99.9 % binomial bound below."""
    rng = np.random.default_rng(11)
    ratio, f, n = 1.4, 0.1, 200
    hits = rng.binomial(n, ratio * f / (1 - f + ratio * f), 2000)
    covered = 0
    for h in hits:
        low, high = ratio_interval(int(h), n, f, 0.95)
        covered += low <= ratio and (high is None or ratio <= high)
    assert covered >= stats.binom.ppf(0.001, 2000, 0.95)
