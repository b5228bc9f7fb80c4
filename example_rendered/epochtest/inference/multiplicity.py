"""The price of testing several claims: Westfall-Young maxT and Holm.

The same shift applied to the windows of all claims keeps what the claims share (overlapping
windows, nested magnitude floors), so the claims' standardised hits at one shift are one draw of
their joint null. Step-down maxT (Westfall & Young 1993, algorithm 4.1): with the claims ordered
by observed statistic, the largest first, the j-th is compared with the maximum over itself and
all smaller ones. Holm (1979) needs no joint null and costs more.

The rows (n shifts each) are asked for one by one from the smallest observed statistic up, and
only their running maximum is kept: memory is two rows, whatever the number of claims.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from epochtest.study.results import FamilyAdjustment, TestResult
from epochtest.study.settings import Correction, InferenceSettings

Row = NDArray[np.float32]


def critical_value(statistics: NDArray[np.floating], alpha: float) -> float:
    """Smallest value (n,) that at most a share ``alpha`` of the values reach; infinity if none."""
    allowed = math.floor(alpha * statistics.size + 1e-9)
    if allowed == 0:
        return math.inf
    edge = np.partition(statistics, statistics.size - allowed - 1)[statistics.size - allowed - 1]
    above = statistics[statistics > edge]
    return float(above.min()) if above.size else math.inf


@dataclass(frozen=True)
class MaxT:
    """Adjusted p-values (k,) in the order of the claims, and the largest statistic per shift."""

    p: tuple[float, ...]
    largest: Row

    def critical(self, alpha: float) -> float:
        """Single-step critical value: reached by some claim in at most ``alpha`` of shifts."""
        return critical_value(self.largest, alpha)


def maxt(observed: Sequence[float], row: Callable[[int], Row]) -> MaxT:
    """Westfall-Young step-down maxT over all shifts, the observed placement included.

    ``observed`` (k,) orders the claims; ``row(j)`` returns claim j's standardised statistics (n,)
    at every shift, the observed one first, large meaning "as claimed" (`ShiftSeries.standardised`).
    A claim whose row is constant has p = 1. Raises ValueError for rows of unequal length.
    """
    if not observed:
        raise ValueError("no claim to adjust for; give at least one")
    largest: Row | None = None
    p = [1.0] * len(observed)
    for j in sorted(range(len(observed)), key=lambda j: (observed[j], j)):
        statistics = row(j)
        if largest is None:
            largest = np.array(statistics, dtype=np.float32)
        elif statistics.shape != largest.shape:
            raise ValueError(
                f"claim {j} has {statistics.size} shifts but expected {largest.size}; "
                "test all claims of a family on one grid"
            )
        else:
            np.maximum(largest, statistics, out=largest)
        p[j] = int((largest >= np.float32(statistics[0])).sum()) / largest.size
    lowest = 0.0
    for j in sorted(range(len(observed)), key=lambda j: (-observed[j], -j)):
        p[j] = lowest = max(lowest, p[j])
    assert largest is not None
    return MaxT(tuple(p), largest)


def holm(p_values: Sequence[float]) -> tuple[float, ...]:
    """Holm's (1979) step-down adjusted p-values, in the given order."""
    order = sorted(range(len(p_values)), key=lambda j: p_values[j])
    adjusted = [1.0] * len(p_values)
    lowest = 0.0
    for rank, j in enumerate(order):
        lowest = max(lowest, min(1.0, (len(p_values) - rank) * p_values[j]))
        adjusted[j] = lowest
    return tuple(adjusted)


def adjust_family(
    tests: Sequence[TestResult], row: Callable[[int], Row], settings: InferenceSettings
) -> tuple[tuple[FamilyAdjustment, ...], tuple[float, ...]]:
    """Adjustments of all claims of a study, and the critical value each was held against.

    ``row(j)`` as in `maxt`. The critical values (k,), in units of the null's standard deviation,
    are those of the chosen correction: of the maximum over all claims (maxT), of the claim alone
    at alpha / k (Holm's first, hardest step) or at alpha (none). They feed the detectable ratio.
    """
    k = len(tests)
    critical: list[float] = [math.inf] * k
    own_alpha = settings.alpha / k if settings.correction == "holm" else settings.alpha

    def noted(j: int) -> Row:
        statistics = row(j)
        critical[j] = critical_value(statistics, own_alpha)
        return statistics

    joint = maxt([_observed(test) for test in tests], noted)
    if settings.correction == "maxT":
        critical = [joint.critical(settings.alpha)] * k
    raw = [max(null.p for null in test.nulls) for test in tests]
    by_holm = holm(raw)
    adjustments = []
    for j in range(k):
        used: dict[Correction, float] = {"maxT": joint.p[j], "holm": by_holm[j], "none": raw[j]}
        adjustments.append(
            FamilyAdjustment(
                correction=settings.correction,
                claims=k,
                p_maxt=joint.p[j],
                p_holm=by_holm[j],
                p_used=used[settings.correction],
            )
        )
    return tuple(adjustments), tuple(critical)


def _observed(test: TestResult) -> float:
    """Standardised hits as claimed, in double precision: they only order the claims."""
    null = test.nulls[0]
    if null.sd == 0.0:
        return 0.0
    score = (null.observed - null.mean) / null.sd
    return {"more": score, "fewer": -score, "either": abs(score)}[test.claim.direction]
