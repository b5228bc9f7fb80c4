"""Simulated clustered catalogs follow the laws they are made from."""

from __future__ import annotations

import numpy as np
import pytest
from epochtest.inference.etas import (
    EtasParameters,
    draw_delays,
    draw_magnitudes,
    grow,
    inside,
    plant_lone,
    simulate,
)
from scipy import integrate, stats

MILD = EtasParameters(0.5, 0.4, alpha=0.5)
STRONG = EtasParameters(0.2, 0.75, alpha=0.5)


@pytest.mark.parametrize("parameters", [MILD, STRONG])
def test_share_of_aftershocks_is_the_branching_ratio(parameters: EtasParameters) -> None:
    """In a stationary branching process the aftershocks are a share n of all (Ogata 1988).

    Interval: spread over 40 independent catalogs, four standard errors of their mean.
    """
    rng = np.random.default_rng(21)
    shares = []
    for _ in range(40):
        generation = simulate(parameters, 10_000.0, rng).generation
        shares.append((generation > 0).mean())
    error = np.std(shares, ddof=1) / np.sqrt(40)
    assert abs(np.mean(shares) - parameters.branching_ratio) < 4 * error
    assert error < 0.005  # the interval is narrow enough to mean something


@pytest.mark.parametrize("alpha", [0.5, 0.8, 1.0, 1.2])
def test_productivity_gives_the_branching_ratio(alpha: float) -> None:
    """K times the mean productivity, integrated numerically (SciPy quad), is the ratio."""
    made = EtasParameters(1.0, 0.6, alpha=alpha)
    ln10, reach = np.log(10.0), made.m_max - made.m_ref

    def density(x: float) -> float:
        return float(ln10 * 10 ** (-x) / (1 - 10 ** (-reach)) * 10 ** (alpha * x))

    assert made.productivity * integrate.quad(density, 0, reach)[0] == pytest.approx(0.6, rel=1e-7)


@pytest.mark.parametrize("p", [0.9, 1.0, 1.2, 2.0])
def test_delays_follow_the_omori_law(p: float) -> None:
    """Kolmogorov-Smirnov against the cut-off Omori-Utsu law, integrated numerically (SciPy).

    One of a hundred seeds would give p below .01; this seed is fixed.
    """
    made = EtasParameters(1.0, 0.5, omori_p=p, longest_delay_days=300.0)
    delays = np.sort(draw_delays(made, 2000, np.random.default_rng(4)))
    assert (delays >= 0).all()
    assert (delays <= 300.0).all()
    grid = np.expm1(np.linspace(0, np.log1p(300 / 0.01), 20_001)) * 0.01
    law = integrate.cumulative_trapezoid((grid + 0.01) ** -p, grid, initial=0.0)
    assert stats.kstest(delays, lambda t: np.interp(t, grid, law / law[-1])).pvalue > 0.01


def test_delays_in_a_catalog_are_times_after_the_mother() -> None:
    """With mothers at day 0 only, first-generation times are their delays: by construction."""
    catalog = grow(STRONG, np.zeros(500), 1e9, np.random.default_rng(1))
    first = catalog.generation == 1
    assert catalog.days[first] == pytest.approx(catalog.delay_days[first])
    assert np.isnan(catalog.delay_days[catalog.generation == 0]).all()
    assert (np.diff(catalog.days) >= 0).all()


def test_magnitudes_follow_gutenberg_richter() -> None:
    """Aki's (1965) b of the magnitudes is the one put in; none exceeds the cut-off.

    Interval: four times b / sqrt(n) (Aki 1965); the cut-off at 5 units changes b by 1e-4.
    """
    made = EtasParameters(1.0, 0.0, b=1.2, m_ref=3.0, m_max=8.0)
    magnitudes = draw_magnitudes(made, 50_000, np.random.default_rng(9))
    b = np.log10(np.e) / (magnitudes.mean() - 3.0)
    assert abs(b - 1.2) < 4 * 1.2 / np.sqrt(50_000)
    assert 3.0 <= magnitudes.min() < magnitudes.max() <= 8.0


@pytest.mark.parametrize("parameters", [MILD, STRONG])
def test_rate_is_stationary_from_the_first_day(parameters: EtasParameters) -> None:
    """First, middle and last fifth have the rate mu / (1 - n) (branching process, closed form).

    Interval: four standard errors over 60 independent catalogs.
    """
    rng = np.random.default_rng(33)
    counts = np.array(
        [np.histogram(simulate(parameters, 1500.0, rng).days, 5, (0, 1500))[0] for _ in range(60)]
    )
    for fifth in (0, 2, 4):
        error = counts[:, fifth].std(ddof=1) / np.sqrt(60)
        assert abs(counts[:, fifth].mean() - 300 * parameters.rate_per_day) < 4 * error
        assert error < 0.1 * 300 * parameters.rate_per_day


def test_burn_in_fills_the_first_days() -> None:
    """The first 20 days have the mean rate, and lack aftershocks without a burn-in.

    Closed form mu / (1 - n); four standard errors over 300 independent catalogs.
    """
    rng = np.random.default_rng(34)
    counts = {
        burn_in: np.array(
            [simulate(STRONG, 20.0, rng, burn_in_days=burn_in).days.size for _ in range(300)]
        )
        for burn_in in (None, 0.0)
    }
    error = counts[None].std(ddof=1) / np.sqrt(300)
    assert abs(counts[None].mean() - 20 * STRONG.rate_per_day) < 4 * error
    assert counts[0.0].mean() < 20 * STRONG.rate_per_day - 4 * error


def test_immigrants_are_modulated_inside_the_windows_only() -> None:
    """Immigrant counts inside and outside are Poisson with the given factor (4 sigma)."""
    rng = np.random.default_rng(3)
    windows = np.array([[100.0, 400.0], [600.0, 700.0]])
    made = EtasParameters(10.0, 0.3)
    for factor in (0.0, 0.5, 1.0, 3.0):
        catalog = simulate(made, 1000.0, rng, windows_days=windows, window_factor=factor)
        lone = catalog.days[catalog.generation == 0]
        within = inside(lone, windows).sum()
        assert abs(within - 4000 * factor) <= 4 * np.sqrt(4000 * factor)
        assert abs(lone.size - within - 6000) < 4 * np.sqrt(6000)


def test_lone_earthquakes_are_planted_at_the_stated_ratio() -> None:
    """(ratio - 1) n f extra earthquakes, all inside, the others kept: Poisson law, 4 sigma."""
    rng = np.random.default_rng(6)
    windows = np.array([[10.0, 20.0], [50.0, 80.0]])
    days = np.sort(rng.uniform(0, 100, 20_000))
    more = plant_lone(days, 100.0, windows, 1.5, rng)
    extra = np.setdiff1d(more, days)
    assert extra.size == more.size - days.size
    assert inside(extra, windows).all()
    assert abs(extra.size - 4000) < 4 * np.sqrt(4000)
    assert abs((extra < 30).mean() - 0.25) < 4 * np.sqrt(0.25 * 0.75 / extra.size)
    assert plant_lone(days, 100.0, windows, 1.0, rng).tolist() == days.tolist()
    with pytest.raises(ValueError, match=r"must be 1 or more but is 0\.5"):
        plant_lone(days, 100.0, windows, 0.5, rng)


def test_parameters_without_a_stationary_catalog_are_refused() -> None:
    """A branching ratio of 1 or more explodes: the message names the value."""
    with pytest.raises(ValueError, match=r"branching_ratio must be .* is 1.0"):
        EtasParameters(1.0, 1.0)
    with pytest.raises(ValueError, match="omori_c_days must be positive but is 0"):
        EtasParameters(1.0, 0.5, omori_c_days=0.0)
    with pytest.raises(ValueError, match="m_max exceed m_ref"):
        EtasParameters(1.0, 0.5, m_max=4.0)


def test_same_seed_gives_the_same_catalog() -> None:
    """All randomness comes from the generator passed in."""
    one, two = (simulate(MILD, 500.0, np.random.default_rng(5)) for _ in range(2))
    assert one.days.tolist() == two.days.tolist()
    assert one.magnitudes.tolist() == two.magnitudes.tolist()
