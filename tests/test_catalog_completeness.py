"""Completeness and b-value against published data and closed forms."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import numpy as np
import pytest
from epochtest.catalog.completeness import (
    aki_utsu_b,
    magnitude_frequency,
    magnitude_step,
    maximum_curvature,
    shi_bolt_error,
    size_distribution,
)

FIJI = Path(__file__).parent / "data" / "fiji_magnitude_counts.csv"


def fiji() -> list[float]:
    """Magnitudes of the 1000 events near Fiji (R, datasets::quakes; see data/README.md)."""
    with FIJI.open(newline="") as stream:
        return [
            float(row["magnitude"])
            for row in csv.DictReader(stream)
            for _ in range(int(row["count"]))
        ]


def test_fiji() -> None:
    """R's `quakes`: 1000 events, fullest bin 4.5 (107 events), then the closed forms in plain
    Python with exact sums. Tolerance 1e-9: float64 sums of 415 terms.
    """
    magnitudes = fiji()
    assert len(magnitudes) == 1000
    assert math.isclose(math.fsum(magnitudes) / 1000, 4.6204, abs_tol=1e-9)
    result = size_distribution(magnitudes)
    assert (result.bin_width, result.mc_maximum_curvature, result.mc) == (0.1, 4.5, 4.7)
    above = [m for m in magnitudes if m > 4.65]
    mean = math.fsum(above) / len(above)
    b = math.log10(math.e) / (mean - 4.65)
    spread = math.fsum((m - mean) ** 2 for m in above) / (len(above) * (len(above) - 1))
    assert result.n_above == len(above) == 415
    assert result.b == pytest.approx(b, abs=1e-9)
    assert result.b == pytest.approx(1.22482, abs=5e-6)
    assert result.b_error == pytest.approx(math.log(10) * b * b * math.sqrt(spread), abs=1e-9)
    assert result.b_error == pytest.approx(0.050747, abs=5e-7)


def test_magnitude_frequency_table() -> None:
    """Counts per bin with the gap at 4.2, cumulated from above (Gutenberg & Richter 1944)."""
    table = magnitude_frequency([4.0, 4.1, 4.1, 4.3, float("nan")], 0.1)
    assert table.centre.tolist() == [4.0, 4.1, 4.2, 4.3]
    assert table.incremental.tolist() == [1, 2, 0, 1]
    assert table.cumulative.tolist() == [4, 3, 1, 1]


def test_bins_are_centred_and_half_open() -> None:
    """4.05 (40.5 steps) opens the bin of 4.1, however it is computed; negative values too."""
    table = magnitude_frequency([4.05, 3.95 + 0.1, 4.149, -0.05, -0.051], 0.1)
    filled = table.incremental > 0
    assert table.centre[filled].tolist() == [-0.1, 0.0, 4.1]
    assert table.incremental[filled].tolist() == [1, 1, 3]


def test_fiji_cumulative_counts() -> None:
    """R's `quakes`: the cumulative table agrees with counting magnitudes one by one."""
    magnitudes = fiji()
    table = magnitude_frequency(magnitudes, 0.1)
    for centre, count in zip(table.centre, table.cumulative, strict=True):
        assert count == sum(m > centre - 0.05 for m in magnitudes)


def test_maximum_curvature_takes_the_higher_of_equals() -> None:
    """The cautious choice among bins equally full."""
    assert maximum_curvature(magnitude_frequency([4.0, 4.0, 4.3, 4.3, 4.5], 0.1)) == 4.3
    assert maximum_curvature(magnitude_frequency([], 0.1)) is None


@pytest.mark.parametrize("step", [1.0, 0.5, 0.2, 0.1, 0.05, 0.01, 0.001])
def test_steps_are_detected(step: float) -> None:
    """Magnitudes rounded to a step show that step."""
    random = np.random.default_rng(20260101)
    magnitudes = np.round((3.0 + random.exponential(0.6, 2000)) / step) * step
    assert magnitude_step(magnitudes) == step


def test_steps_of_mixtures_and_of_few() -> None:
    """2 % of finer values do not hide a step of 0.1; two values of 4.5 do not prove 0.5."""
    magnitudes = np.append(np.tile([4.1, 4.2, 4.3], 98), [4.07, 4.23, 4.44, 4.51, 4.56, 4.13])
    assert magnitude_step(magnitudes) == 0.1
    assert magnitude_step([4.5, 4.5]) == 0.1
    assert magnitude_step([]) == 0.1


@pytest.mark.parametrize("magnitudes", [[], [5.0], [4.5, 5.0, 6.1], [float("nan")] * 20])
def test_few_events_give_none(magnitudes: list[float]) -> None:
    """0, 1 and few events: no completeness, no b, and no error raised."""
    result = size_distribution(magnitudes)
    assert (result.mc_maximum_curvature, result.mc, result.b, result.b_error) == (None,) * 4
    assert result.n_above == 0


def test_all_magnitudes_equal() -> None:
    """Without spread there is a fullest bin but no b."""
    result = size_distribution([5.0] * 30)
    assert result.mc_maximum_curvature == 5.0
    assert (result.n_above, result.b, result.b_error) == (0, None, None)


@pytest.mark.parametrize("step", [0.01, 0.1])
@pytest.mark.parametrize("b", [0.8, 1.2])
def test_b_is_recovered(step: float, b: float) -> None:
    """Exponential magnitudes (Gutenberg & Richter 1944) give back their b.

    n = 200,000 above Mc: standard error b/sqrt(n), 0.0018 to 0.0027 (Aki 1965). Bound: 4 of
    these plus the b^3 (ln 10 width)^2/12 by which Utsu's correction errs (Tinti & Mulargia 1987).
    """
    random = np.random.default_rng([20260101, int(step * 100), int(b * 10)])
    exact = 3.95 - (0.0 if step == 0.1 else 0.005)
    exact = exact + random.exponential(1.0 / (b * math.log(10)), 200_000)
    magnitudes = np.round(exact / step) * step
    bins = np.floor(magnitudes / 0.1 + 0.5 + 1e-6) * 0.1
    found = aki_utsu_b(bins, 4.0, 0.1)
    bias = b**3 * (math.log(10) * 0.1) ** 2 / 12
    assert found is not None
    assert abs(found - b) < 4 * b / math.sqrt(200_000) + bias


def test_shi_bolt_error_is_the_scatter_of_b() -> None:
    """The formula of Shi & Bolt (1982) against the scatter of b over 2000 simulated samples.

    400 events each; the relative error of a standard deviation of 2000 values is 1.6 %, bound 4
    times that plus 0.25 % for the small-sample bias 1/n of the formula.
    """
    random = np.random.default_rng(20260101)
    samples = 4.0 + random.exponential(1.0 / math.log(10), (2000, 400))
    found = [aki_utsu_b(sample, 4.0, 0.0) for sample in samples]
    values = np.array([b for b in found if b is not None])
    errors = [shi_bolt_error(s, float(b)) for s, b in zip(samples, values, strict=True)]
    assert abs(np.mean(errors) / values.std() - 1.0) < 4 * 0.016 + 0.0025
