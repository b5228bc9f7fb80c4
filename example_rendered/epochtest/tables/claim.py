"""One claim's test in numbers, from hits to what could have been shown."""

from __future__ import annotations

import pandas as pd

from epochtest.study.results import FamilyAdjustment, TestResult
from epochtest.tables import numbers
from epochtest.tables.html import numeric


def test_table(result: TestResult, family: FamilyAdjustment | None) -> pd.DataFrame:
    """One row per number; ``family`` is what the study's other claims cost, None before that."""
    effect = result.effect
    level = numbers.percent(effect.confidence, 0)
    rows = [
        ("Earthquakes selected", numbers.count(result.n_earthquakes)),
        ("Epochs", numbers.count(result.n_epochs)),
        ("Coverage (share of the span inside the windows)", numbers.percent(result.coverage)),
        ("Hits (earthquakes inside the windows, each once)", numbers.count(result.hits)),
        ("Expected hits (earthquakes times coverage)", numbers.decimal(result.expected)),
        ("Rate ratio, inside over outside", numbers.ratio(effect.rate_ratio)),
        (f"{level} interval if earthquakes were independent", _interval(effect.exact_interval)),
        (f"{level} interval widened for clustering", _interval(effect.inflated_interval)),
        (
            f"Detectable ratio at {numbers.percent(effect.power, 0)} power, this claim alone",
            numbers.ratio(effect.detectable_ratio),
        ),
    ]
    for null in result.nulls:
        rows += [
            (f"Hits on the {null.grid_hours:g} h grid ({null.name})", numbers.count(null.observed)),
            (f"Mean and sd over {numbers.count(null.shifts)} shifts", _mean_sd(null.mean, null.sd)),
            ("Effective number of shifts", numbers.decimal(null.effective_shifts, 0)),
            ("Variance of the null over binomial variance", numbers.decimal(null.inflation, 2)),
            (f"p, {null.name}, this claim alone", numbers.p_value(null.p)),
        ]
    if family is not None:
        rows += [
            (f"p, Westfall-Young maxT over {family.claims} claims", numbers.p_value(family.p_maxt)),
            (f"p, Holm over {family.claims} claims", numbers.p_value(family.p_holm)),
            (f"p that decides ({family.correction})", numbers.p_value(family.p_used)),
            (
                f"Detectable ratio at {numbers.percent(effect.power, 0)} power, family paid for",
                numbers.ratio(effect.detectable_ratio_family),
            ),
        ]
    rows.append(
        (
            "Plain binomial p (ignores clustering; shown for comparison, decides nothing)",
            numbers.p_value(result.binomial_p),
        )
    )
    return numeric(pd.DataFrame(rows, columns=["Number", "Value"], dtype=object), "Value")


test_table.__test__ = False  # type: ignore[attr-defined]  # pytest: not a test function


def _interval(bounds: tuple[float, float | None]) -> str:
    return numbers.interval(bounds)


def _mean_sd(mean: float, sd: float) -> str:
    return f"{numbers.decimal(mean)} ± {numbers.decimal(sd)}"
