"""One timing claim tested: windows, hits, the shift null, the effect and what was detectable."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from epochtest.inference.effect import binomial_p, rate_ratio, ratio_interval
from epochtest.inference.lags import LagProfile, lag_profile
from epochtest.inference.multiplicity import critical_value
from epochtest.inference.power import detectable_ratio
from epochtest.inference.shift import ShiftSeries, hits_at_all_shifts, null_result
from epochtest.inference.windows import (
    Counts,
    Grid,
    Interval,
    bin_counts,
    coverage,
    epochs_reaching,
    hits_by_window,
    window_mask,
)
from epochtest.study.claims import TimingClaim
from epochtest.study.results import Effect, NullResult, TestResult
from epochtest.study.settings import InferenceSettings

COARSE_GRID = 0.02
"""Relative difference of grid and exact coverage above which the grid is called coarse."""
ONE_SEQUENCE = 0.2
"""Share of all hits in a single window from which the result is said to rest on one sequence."""
FEWEST_IN_ONE_WINDOW = 10
"""Below this many hits in a window no sequence is spoken of."""
FEWEST_EFFECTIVE_SHIFTS = 100
"""Below this many independent shifts the power at small alpha is lower than stated.

Measured with evenly spaced epochs (29.53 days, windows of 3 days, 17 effective shifts): .75-.81
at alpha .05 but .64 at alpha .01 for a stated .80.
"""


@dataclass(frozen=True)
class TimingSeries:
    """What the joint null and the charts need beside the numbers of a TestResult."""

    shifts: ShiftSeries
    lags: LagProfile


def test_timing(
    claim: TimingClaim,
    times_utc: ArrayLike,
    epochs_utc: ArrayLike,
    span: Interval,
    settings: InferenceSettings,
) -> tuple[TestResult, TimingSeries]:
    """Test one claim against every circular shift of its windows.

    ``times_utc`` (m,) are the selected earthquakes and ``epochs_utc`` (k,) all epochs whose window
    may reach into ``span`` [start, end), both UTC ``datetime64[us]`` in any order. Earthquakes
    outside the span are left out. Counts, coverage and rate ratio use exact times; the null uses
    the grid. Raises ProtocolError for NaT and for a grid that does not fit the span.
    """
    window = claim.window_days
    grid = Grid.over(span, settings.grid_hours)
    start, end = (instant.astype("datetime64[us]") for instant in span)
    times = np.asarray(times_utc, dtype="datetime64[us]")
    times = times[~((times < start) | (times >= end))]
    epochs = epochs_reaching(epochs_utc, window, span)

    mask = window_mask(grid, epochs, window)
    counts = bin_counts(grid, times)
    shifts = ShiftSeries(hits_at_all_shifts(mask, counts))
    null = null_result(
        shifts,
        claim.direction,
        n_earthquakes=int(counts.sum()),
        share=float(mask.mean()),
        hours=grid.step_hours,
    )
    n, share = times.size, coverage(epochs, window, span)
    by_window = hits_by_window(times, epochs, window)
    hits = int(by_window.sum())
    own_critical = critical_value(shifts.standardised(claim.direction), settings.alpha)
    effect = Effect(
        rate_ratio=rate_ratio(hits, n, share),
        exact_interval=ratio_interval(hits, n, share, settings.confidence),
        inflated_interval=ratio_interval(hits, n, share, settings.confidence, null.inflation),
        confidence=settings.confidence,
        detectable_ratio=detectable_ratio(
            n, share, null.inflation, own_critical, settings.power, claim.direction
        ),
        power=settings.power,
    )
    result = TestResult(
        claim=claim,
        span_utc=(_iso(start), _iso(end)),
        n_earthquakes=n,
        n_epochs=epochs.size,
        coverage=share,
        hits=hits,
        expected=n * share,
        binomial_p=binomial_p(hits, n, share, claim.direction),
        nulls=(null,),
        effect=effect,
        warnings=(
            *_warnings(grid, null, share, float(mask.mean()), n - int(counts.sum())),
            *_one_sequence(by_window, hits),
        ),
    )
    return result, TimingSeries(shifts, lag_profile(grid, times, epochs, window))


test_timing.__test__ = False  # type: ignore[attr-defined]  # pytest: not a test function


def _one_sequence(by_window: Counts, hits: int) -> tuple[str, ...]:
    """A sentence if a single window holds much of all that was hit."""
    most = int(by_window.max(initial=0))
    if most < FEWEST_IN_ONE_WINDOW or most < ONE_SEQUENCE * hits:
        return ()
    return (
        f"{most} of the {hits} hits fall into a single window: the result rests on one sequence. "
        "The shift null allows for that, but one such coincidence can make a small p; look at "
        "the timeline, and at the claim without that sequence.",
    )


def with_family(test: TestResult, critical_z: float) -> TestResult:
    """The result with the detectable ratio that pays for the family.

    ``critical_z`` comes from `multiplicity.adjust_family`.
    """
    ratio = detectable_ratio(
        test.n_earthquakes,
        test.coverage,
        max(null.inflation for null in test.nulls),
        critical_z,
        test.effect.power,
        test.claim.direction,
    )
    effect = test.effect.model_copy(update={"detectable_ratio_family": ratio})
    return test.model_copy(update={"effect": effect})


def _warnings(
    grid: Grid, null: NullResult, share: float, grid_share: float, beyond: int
) -> tuple[str, ...]:
    found = []
    if grid.remainder_hours > 0.0:
        found.append(
            f"The last {grid.remainder_hours:g} h of the span do not fill a bin of "
            f"{grid.step_hours:g} h: the null leaves them out, with {beyond} earthquakes."
        )
    if share > 0.0 and abs(grid_share - share) > COARSE_GRID * min(share, 1.0 - share):
        found.append(
            f"On the grid the windows cover {100 * grid_share:.4g} % of the span, by exact "
            f"measure {100 * share:.4g} %; choose a finer grid_hours."
        )
    if share > 0.5:
        found.append(
            f"The windows cover {100 * share:.3g} % of the span: most earthquakes are inside "
            "whatever the cause."
        )
    if null.sd == 0.0:
        found.append("Every shift gives the same number of hits, so nothing can be concluded.")
    elif null.effective_shifts < FEWEST_EFFECTIVE_SHIFTS:
        found.append(
            f"Only {null.effective_shifts:.0f} of the {null.shifts} shifts are independent "
            "(evenly spaced epochs, few epochs or long windows): p stays valid, but where a "
            f"decision needs p below about {1.0 / null.effective_shifts:.2g}, the price of several "
            "claims included, the power is lower than stated."
        )
    return tuple(found)


def _iso(instant: np.datetime64) -> str:
    return str(np.datetime_as_string(instant, unit="s")) + "Z"
