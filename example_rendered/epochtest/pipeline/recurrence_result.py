"""Between a recurrence claim and the sky layer: what is asked, and the answer as a result."""

from __future__ import annotations

import math
from datetime import date, datetime

import numpy as np

from epochtest.sky.assertions import Assertion, EveryYears, LastHappened, NotAgainFor, Ruling
from epochtest.sky.extrapolation import Extrapolation
from epochtest.sky.occurrences import Configuration, Grouping, Occurrence, Pair
from epochtest.sky.recurrence import Recurrence
from epochtest.study.claims import RecurrenceClaim
from epochtest.study.events import LongitudeDifference
from epochtest.study.sky_results import (
    CycleRow,
    ExplanationRow,
    ExtrapolationRow,
    IntervalRow,
    OccurrenceRow,
    RecurrenceResult,
    RulingRow,
)
from epochtest.study.words import described
from epochtest.timescale import SECONDS_PER_DAY, utc_instant

MOST_COUNTER_EXAMPLES = 20
DAYS_PER_YEAR = 365.25


def configuration_of(claim: RecurrenceClaim) -> Configuration:
    """The claim's event as the sky layer takes it."""
    event = claim.event
    if isinstance(event, LongitudeDifference):
        assert event.aspect is not None
        return Pair(event.centre, event.bodies, event.aspect)
    return Grouping(event.centre, event.bodies, event.below_deg, event.along_line)


def assertions_of(claim: RecurrenceClaim) -> list[Assertion]:
    """What the claim says, as the sky layer takes it."""
    said = claim.recurrence
    found: list[Assertion] = []
    if said.every_years is not None:
        found.append(EveryYears(said.every_years, said.tolerance_years))
    if said.last_happened is not None and said.before is not None:
        first, last = _give_or_take(said.last_happened, said.tolerance_years)
        before = utc_instant(said.before)
        found.append(LastHappened(_iso(first), _iso(min(last, before)), _iso(before)))
    if said.not_again_for_years is not None and said.before is not None:
        after = _iso(utc_instant(said.before))
        found.append(NotAgainFor(said.not_again_for_years, after))
    return found


def _iso(instant: np.datetime64) -> str:
    """A date where it is midnight, else to the second."""
    day = instant.astype("datetime64[D]")
    return str(day if day == instant else instant.astype("datetime64[s]"))


def _give_or_take(day: date | datetime, years: float) -> tuple[np.datetime64, np.datetime64]:
    """A day (or instant) with some years on either side; a whole day counts to its end."""
    slack = np.timedelta64(round(years * DAYS_PER_YEAR * SECONDS_PER_DAY * 1e6), "us")
    instant = utc_instant(day)
    return instant - slack, instant + slack + np.timedelta64(1, "D")


def recurrence_result(claim: RecurrenceClaim, found: Recurrence) -> RecurrenceResult:
    """What the search found, as it is written down."""
    searched = f"{found.searched[0][:10]} to {found.searched[1][:10]}"
    return RecurrenceResult(
        claim=claim,
        finding=found.verdict,
        sentence=(
            f"{found.verdict[0].upper()}{found.verdict[1:]}: {len(found.occurrences)} occurrences "
            f"in the {found.searched_years:.1f} years searched with {found.ephemeris} ({searched})."
        ),
        description=described(claim.event, found.ephemeris),
        ephemeris=found.ephemeris,
        searched_utc=found.searched,
        searched_years=found.searched_years,
        n_occurrences=len(found.occurrences),
        intervals=None
        if found.intervals is None
        else IntervalRow(
            count=found.intervals.count,
            mean_years=found.intervals.mean_years,
            shortest_years=found.intervals.shortest_years,
            longest_years=found.intervals.longest_years,
            sd_years=_finite(found.intervals.sd_years),
        ),
        explanation=ExplanationRow(
            sentence=found.explanation.sentence,
            expected_return_years=_finite(found.explanation.expected_return_years),
            pairs=tuple(
                CycleRow(
                    bodies=pair.bodies,
                    meeting_years=_finite(pair.meeting_years),
                    cycle=None
                    if pair.best is None
                    else f"{pair.best.fast_revolutions} of {pair.best.fast} in "
                    f"{pair.best.slow_revolutions} of {pair.best.slow}, {pair.best.years:.2f} "
                    f"years, drift {pair.best.drift_deg:+.2f} degrees",
                )
                for pair in found.explanation.pairs
            ),
        ),
        rulings=tuple(_ruling(ruling) for ruling in found.rulings),
        extrapolation=_extrapolation(found.extrapolation),
        no_extrapolation=found.no_extrapolation,
    )


def _ruling(ruling: Ruling) -> RulingRow:
    return RulingRow(
        said=_said(ruling.assertion),
        verdict=ruling.verdict,
        reason=ruling.reason,
        counter_examples=tuple(map(_row, ruling.counter_examples[:MOST_COUNTER_EXAMPLES])),
    )


def _said(assertion: Assertion) -> str:
    match assertion:
        case EveryYears():
            return f"every {assertion.years:g} years, give or take {assertion.tolerance_years:g}"
        case LastHappened():
            first, last = assertion.from_utc[:10], assertion.to_utc[:10]
            return f"as of {assertion.as_of_utc[:10]} it last happened between {first} and {last}"
        case NotAgainFor():
            return f"not again for {assertion.years:g} years after {assertion.after_utc[:10]}"


def _extrapolation(beyond: Extrapolation | None) -> ExtrapolationRow | None:
    if beyond is None:
        return None
    return ExtrapolationRow(
        label=beyond.label,
        from_utc=beyond.from_utc,
        to_utc=beyond.to_utc,
        occurrences=tuple(map(_row, beyond.occurrences)),
        uncertainty_days=_finite(beyond.uncertainty_days),
        derivation=beyond.residuals.derivation,
        missed=beyond.missed,
        spurious=beyond.spurious,
        rulings=tuple(_ruling(ruling) for ruling in beyond.rulings),
    )


def _row(found: Occurrence) -> OccurrenceRow:
    return OccurrenceRow(
        time_utc=found.time_utc,
        begins_utc=found.begins_utc or None,
        ends_utc=found.ends_utc or None,
        size_deg=found.size_deg,
        events=found.events,
    )


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None
