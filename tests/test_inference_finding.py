"""The decision rule, its sentence, and one claim tested end to end."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from epochtest.inference.finding import decide, sentence
from epochtest.inference.multiplicity import adjust_family
from epochtest.inference.superposed import test_timing as run_timing
from epochtest.inference.superposed import with_family
from epochtest.study.claims import TimingClaim
from epochtest.study.results import Effect, FamilyAdjustment, NullResult, TestResult
from epochtest.study.settings import InferenceSettings

SPAN = (np.datetime64("1990-01-01", "us"), np.datetime64("2000-01-01", "us"))
SETTINGS = InferenceSettings(grid_hours=6.0)


def claim(**changes: Any) -> TimingClaim:
    """A made-up claim."""
    facts: dict[str, Any] = {
        "id": "made-up",
        "title": "Made up",
        "statement": "After listed dates there are more earthquakes.",
        "event": {"kind": "listed", "file": "dates.csv"},
        "window_days": (0.0, 3.0),
    }
    return TimingClaim(**{**facts, **changes})


def outcome(hits: int, p: float, **changes: Any) -> tuple[TestResult, FamilyAdjustment]:
    """A result with 100 hits expected among 1000 earthquakes."""
    null = NullResult(
        name="circular-shift", shifts=1000, effective_shifts=300, observed=hits, mean=100.0,
        sd=12.0, inflation=1.6, p=p, grid_hours=1.0,
    )  # fmt: skip
    effect = Effect(
        rate_ratio=1.2, exact_interval=(1.0, 1.5), inflated_interval=(0.9, None),
        confidence=0.95, detectable_ratio=1.3, power=0.8,
    )  # fmt: skip
    facts: dict[str, Any] = {
        "claim": claim(), "span_utc": ("1990-01-01T00:00:00Z", "2000-01-01T00:00:00Z"),
        "n_earthquakes": 1000, "n_epochs": 40, "coverage": 0.1, "hits": hits, "expected": 100.0,
        "binomial_p": p, "nulls": (null,), "effect": effect,
    }  # fmt: skip
    family = FamilyAdjustment(correction="maxT", claims=3, p_maxt=p, p_holm=p, p_used=p)
    return TestResult(**{**facts, **changes}), family


CASES = [
    # hits, p, claim, detectable ratio of the family, finding
    (150, 0.05, {}, 1.4, "excess"),
    (150, 0.0501, {}, 1.4, "none detected"),
    (50, 0.01, {"direction": "fewer"}, 0.7, "deficit"),
    (50, 0.01, {}, 1.4, "none detected"),
    (150, 0.01, {"direction": "fewer"}, 0.7, "none detected"),
    (50, 0.01, {"direction": "either"}, 1.4, "deficit"),
    (150, 0.01, {"direction": "either"}, 1.4, "excess"),
    (110, 0.3, {"asserted_rate_ratio": 1.3}, 1.4, "cannot tell"),
    (110, 0.3, {"asserted_rate_ratio": 1.4}, 1.4, "none detected"),
    (110, 0.3, {"asserted_rate_ratio": 1.3}, None, "cannot tell"),
    (110, 0.3, {}, None, "cannot tell"),
    (90, 0.3, {"asserted_rate_ratio": 0.8, "direction": "fewer"}, 0.7, "cannot tell"),
    (90, 0.3, {"asserted_rate_ratio": 0.6, "direction": "fewer"}, 0.7, "none detected"),
    (90, 0.3, {"asserted_rate_ratio": 0.8, "direction": "either"}, 1.3, "cannot tell"),
    (90, 0.3, {"asserted_rate_ratio": 0.7, "direction": "either"}, 1.4, "none detected"),
    (150, 0.001, {"minimum": {"epochs": 41}}, 1.2, "cannot tell"),
    (150, 0.001, {"minimum": {"earthquakes": 1001}}, 1.2, "cannot tell"),
    (150, 0.001, {"minimum": {"epochs": 40, "earthquakes": 1000}}, 1.2, "excess"),
]


@pytest.mark.parametrize(("hits", "p", "changes", "detectable", "finding"), CASES)
def test_decision_follows_the_rule(
    hits: int, p: float, changes: dict[str, Any], detectable: float | None, finding: str
) -> None:
    """Every branch of the written rule (the project's own design is the authority)."""
    test, family = outcome(hits, p, claim=claim(**changes))
    assert decide(test, family, 0.05, detectable) == finding


def test_every_null_must_agree() -> None:
    """One null whose own p is above alpha keeps the claim from being a finding."""
    test, family = outcome(150, 0.01)
    second = test.nulls[0].model_copy(update={"p": 0.2})
    test = test.model_copy(update={"nulls": (test.nulls[0], second)})
    assert decide(test, family, 0.05, 1.4) == "none detected"


@pytest.mark.parametrize(("hits", "p", "changes", "detectable", "finding"), CASES)
def test_sentence_names_the_numbers_and_predicts_nothing(
    hits: int, p: float, changes: dict[str, Any], detectable: float | None, finding: str
) -> None:
    """Ratio, both intervals, p and what was detectable are named; no word about the future."""
    test, family = outcome(hits, p, claim=claim(**changes))
    text = sentence(decide(test, family, 0.05, detectable), test, family, 0.05, detectable)
    assert text.lower().startswith(finding)
    for part in (f"{hits} of 1000", "rate ratio 1.2", "0.9 and more", "1 to 1.5", f"{p:.3g}"):
        assert part in text
    assert "no rate ratio would" in text if detectable is None else f"{detectable:.3g} or" in text
    for word in ("will", "predict", "forecast", "warning", "risk", "likely"):
        assert word not in text


def planted(seed: int) -> tuple[np.ndarray, np.ndarray]:
    """600 random earthquakes and 200 more in the windows of 60 random epochs."""
    rng = np.random.default_rng(seed)
    epochs = rng.uniform(1, 3640, 60)
    days = np.concatenate(
        (rng.uniform(0, 3652, 600), rng.choice(epochs, 200) + 3 * rng.random(200))
    )
    days = days[days < 3652]
    return tuple(SPAN[0] + np.round(x * 86400e6).astype("timedelta64[us]") for x in (days, epochs))


def test_one_claim_end_to_end_does_not_depend_on_order() -> None:
    """A strong planted effect is an excess, and shuffled input gives the same document."""
    times, epochs = planted(1)
    before = times.copy(), epochs.copy()
    result, series = run_timing(claim(), times, epochs, SPAN, SETTINGS)
    again, other = run_timing(claim(), times[::-1], np.sort(epochs)[::-1], SPAN, SETTINGS)
    assert (times == before[0]).all()
    assert (epochs == before[1]).all()
    assert result == again
    assert series.lags == other.lags
    assert result.nulls[0].p < 0.001
    families, critical = adjust_family(
        [result], lambda j: series.shifts.standardised("more"), SETTINGS
    )
    assert families[0].p_used == result.nulls[0].p == families[0].p_holm
    result = with_family(result, critical[0])
    assert result.effect.detectable_ratio_family == result.effect.detectable_ratio
    assert decide(result, families[0], 0.05, result.effect.detectable_ratio_family) == "excess"
    assert result.warnings == ()


def test_family_pays_by_the_chosen_correction() -> None:
    """With three claims the ratio to be shown grows from none to maxT and Holm."""
    rng = np.random.default_rng(2)
    times, _ = planted(2)
    days = [rng.uniform(0, 3640, 60) for _ in range(3)]
    pairs = [
        run_timing(
            claim(),
            times,
            SPAN[0] + np.round(x * 86400e6).astype("timedelta64[us]"),
            SPAN,
            SETTINGS,
        )
        for x in days
    ]
    ratios = {}
    for correction in ("none", "maxT", "holm"):
        settings = SETTINGS.model_copy(update={"correction": correction})
        families, critical = adjust_family(
            [pair[0] for pair in pairs], lambda j: pairs[j][1].shifts.standardised("more"), settings
        )
        ratios[correction] = with_family(pairs[0][0], critical[0]).effect.detectable_ratio_family
        used = {"none": pairs[0][0].nulls[0].p, "maxT": families[0].p_maxt}
        assert families[0].p_used == used.get(correction, families[0].p_holm)
        assert families[0].p_maxt >= pairs[0][0].nulls[0].p
    assert ratios["none"] == pairs[0][0].effect.detectable_ratio
    assert ratios["none"] < ratios["maxT"]
    assert ratios["none"] < ratios["holm"]


def test_awkward_inputs_give_results_with_warnings() -> None:
    """No earthquake, no epoch, windows everywhere, a step that leaves a rest: p is 1, no crash."""
    times, epochs = planted(3)
    everywhere = claim(window_days=(-3000.0, 3000.0))
    for case in (
        (claim(), times[:0], epochs),
        (claim(), times, epochs[:0]),
        (everywhere, times, epochs),
    ):
        result, _ = run_timing(*case, SPAN, SETTINGS)
        assert result.nulls[0].p == 1.0
        assert result.effect.detectable_ratio is None
        assert any("nothing can be concluded" in text for text in result.warnings)
    short = (SPAN[0], SPAN[1] - np.timedelta64(1, "h"))
    outside = np.array([short[0] - np.timedelta64(1, "us"), short[1]])
    result, _ = run_timing(claim(), np.append(times, outside), epochs, short, SETTINGS)
    assert result.n_earthquakes == int((times < short[1]).sum())
    assert any("last 5 h of the span" in text for text in result.warnings)
    evenly = SPAN[0] + np.arange(0, 3640, 30).astype("timedelta64[D]")
    result, _ = run_timing(claim(window_days=(0.0, 0.3)), times, evenly, SPAN, SETTINGS)
    assert any("finer grid_hours" in text for text in result.warnings)
    result, _ = run_timing(claim(), times, evenly, SPAN, SETTINGS)
    assert any("shifts are independent" in text for text in result.warnings)
