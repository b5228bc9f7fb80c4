"""Adjusted p-values of a family of claims."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from epochtest.inference.multiplicity import critical_value, holm, maxt
from scipy import stats

BH_1995 = [
    0.0001, 0.0004, 0.0019, 0.0095, 0.0201, 0.0278, 0.0298, 0.0344,
    0.0459, 0.3240, 0.4262, 0.5719, 0.6528, 0.7590, 1.0000,
]  # fmt: skip
"""Benjamini & Hochberg (1995), section 4.1, as printed in SciPy's documentation."""


def test_holm_on_the_fifteen_published_p_values() -> None:
    """Three rejections at .05 by Holm and by Bonferroni, four by Benjamini-Hochberg (SciPy)."""
    adjusted = np.array(holm(BH_1995))
    assert (adjusted <= 0.05).sum() == 3
    assert (np.array(BH_1995) * 15 <= 0.05).sum() == 3
    by_rate = stats.false_discovery_control(BH_1995)
    assert (by_rate <= 0.05).sum() == 4
    assert (adjusted >= by_rate - 1e-12).all()  # family-wise error costs at least as much


def test_holm_keeps_the_order_given() -> None:
    """Three p-values multiplied by 3, 2, 1 from the smallest up, worked by hand."""
    assert holm([0.04, 0.01, 0.03]) == pytest.approx((0.06, 0.03, 0.06))
    assert holm([0.5, 0.9]) == (1.0, 1.0)


def slow_maxt(rows: np.ndarray) -> list[float]:
    """The definition, with all rows in memory (Westfall & Young 1993, algorithm 4.1)."""
    order = np.argsort(-rows[:, 0], kind="stable")
    p = np.empty(len(rows))
    lowest = 0.0
    for rank, j in enumerate(order):
        joint = rows[order[rank:]].max(axis=0)
        lowest = p[j] = max(lowest, float((joint >= rows[j, 0]).mean()))
    return p.tolist()


@pytest.mark.parametrize("seed", range(5))
def test_streamed_maxt_equals_the_definition_in_any_order(seed: int) -> None:
    """The running maximum equals the slow twin, whatever the order of the claims, ties too."""
    rng = np.random.default_rng(seed)
    rows = np.round(rng.normal(size=(5, 400)) + rng.normal(size=400), 1).astype(np.float32)
    rows[:, 0] += np.arange(5) / 2
    want = slow_maxt(rows)
    for order in itertools.permutations(range(5)):
        turned = rows[list(order)]
        found = maxt(turned[:, 0].tolist(), turned.__getitem__)
        assert found.p == pytest.approx([want[j] for j in order])
    assert found.largest.tolist() == rows.max(axis=0).tolist()


def test_identical_claims_cost_nothing_and_independent_ones_about_sidak() -> None:
    """Copies share one p; k independent claims cost 1 - (1 - p)^k (Sidak 1967, closed form).

    Tolerance: 200000 draws at p near .08 have a standard error of .0006; four of them.
    """
    rng = np.random.default_rng(8)
    rows = rng.normal(size=(4, 200_000)).astype(np.float32)
    rows[:, 0] = 2.05
    same = maxt([2.05] * 3, lambda j: rows[0])
    alone = float((rows[0] >= rows[0, 0]).mean())
    assert same.p == (alone, alone, alone)
    joint = maxt([2.05] * 4, rows.__getitem__)
    assert max(joint.p) == pytest.approx(1 - stats.norm.cdf(2.05) ** 4, abs=0.0024)
    sidak = stats.norm.isf(1 - 0.95**0.25)
    assert joint.critical(0.05) == pytest.approx(sidak, abs=0.02)


def test_claim_without_any_variation_has_p_one() -> None:
    """A row of zeros (nothing varies) is never a finding and leaves the others alone."""
    rows = np.zeros((2, 100), dtype=np.float32)
    rows[1, 0], rows[1, 1:] = 3.0, -0.03
    assert maxt([0.0, 3.0], rows.__getitem__).p == (1.0, 0.01)


def test_critical_value_is_reached_by_at_most_its_share() -> None:
    """Ten values: one in ten may reach it; a tie at the edge moves it up; by hand."""
    values = np.arange(10.0)
    assert critical_value(values, 0.1) == 9.0
    assert critical_value(values, 0.2) == 8.0
    assert critical_value(np.array([0, 1, 2, 2.0]), 0.25) == math.inf
    assert critical_value(np.array([0, 2, 2, 3.0]), 0.5) == 3.0
    assert critical_value(values, 0.05) == math.inf


def test_rows_of_unequal_length_are_refused() -> None:
    """Claims on different grids have no joint null."""
    rows = [np.ones(5, np.float32), np.ones(6, np.float32)]
    with pytest.raises(ValueError, match="has 6 shifts but expected 5"):
        maxt([0.0, 1.0], rows.__getitem__)
    with pytest.raises(ValueError, match="no claim"):
        maxt([], rows.__getitem__)
