"""What is asserted about a recurring configuration, judged by the table of its occurrences.

Three kinds. Each is judged within the span that was searched, and only there:

    agree       the span holds all that the assertion speaks of, and nothing contradicts it
    disagree    at least one occurrence, or a gap without any, contradicts it: one suffices,
                even if the assertion also speaks of years outside the span
    cannot be decided within the kernel    neither
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

import numpy as np

from epochtest.errors import ProtocolError
from epochtest.sky.mean_motion import DAYS_PER_YEAR
from epochtest.sky.occurrences import Occurrence
from epochtest.timescale import tdb_days_from_utc, utc_from_tdb_days, utc_instant

Verdict = Literal["agree", "disagree", "cannot be decided within the kernel"]
AGREE: Verdict = "agree"
DISAGREE: Verdict = "disagree"
UNDECIDED: Verdict = "cannot be decided within the kernel"

Span = tuple[float, float]
"""First and last day of TDB since J2000.0."""


@dataclass(frozen=True)
class EveryYears:
    """ "Happens every ``years`` years": every interval is that long, give or take a tolerance."""

    years: float
    tolerance_years: float

    def __post_init__(self) -> None:
        if not (self.years > 0.0 and 0.0 <= self.tolerance_years < self.years):
            raise ProtocolError(
                f"every {self.years:g} years within {self.tolerance_years:g}: give a period above "
                "0 and a tolerance from 0 to less than the period."
            )


@dataclass(frozen=True)
class LastHappened:
    """ "Last happened between ``from_utc`` and ``to_utc``", said at ``as_of_utc`` (ISO, UTC).

    It asserts an occurrence that touches [from, to), and none that begins later, until as_of.
    For a year give its first day and that of the next; for a date, widen it by its tolerance.
    """

    from_utc: str
    to_utc: str
    as_of_utc: str

    def __post_init__(self) -> None:
        if not _instant(self.from_utc) < _instant(self.to_utc) <= _instant(self.as_of_utc):
            raise ProtocolError(
                f"last happened from {self.from_utc} to {self.to_utc} as of {self.as_of_utc}: give "
                "three dates in this order, the first two different."
            )


@dataclass(frozen=True)
class NotAgainFor:
    """ "Will not happen again for ``years`` years after ``after_utc``" (ISO, UTC).

    An occurrence that has begun by ``same_event_days`` after that date is the one spoken of.
    """

    years: float
    after_utc: str
    same_event_days: float = 1.0

    def __post_init__(self) -> None:
        _instant(self.after_utc)
        if not self.years > 0.0 or not self.same_event_days >= 0.0:
            raise ProtocolError(
                f"not again for {self.years:g} years, same event within {self.same_event_days:g} "
                "days: give years above 0 and days of 0 or more."
            )


Assertion = EveryYears | LastHappened | NotAgainFor


@dataclass(frozen=True)
class Ruling:
    """The verdict on one assertion, why, and the occurrences that speak against it."""

    assertion: Assertion
    verdict: Verdict
    reason: str
    counter_examples: tuple[Occurrence, ...] = ()


def judge(assertion: Assertion, occurrences: Sequence[Occurrence], searched: Span) -> Ruling:
    """Judge by all ``occurrences`` (sorted) within ``searched`` (days of TDB)."""
    if isinstance(assertion, EveryYears):
        return _every(assertion, occurrences, searched)
    if isinstance(assertion, LastHappened):
        return _last(assertion, occurrences, searched)
    return _not_again(assertion, occurrences, searched)


def overall(rulings: Sequence[Ruling]) -> Verdict:
    """Disagree if any does, else undecided if any is (or there is none), else agree."""
    verdicts = {ruling.verdict for ruling in rulings}
    if DISAGREE in verdicts:
        return DISAGREE
    return AGREE if verdicts == {AGREE} else UNDECIDED


def needed_span(assertion: Assertion, searched: Span) -> Span:
    """The days that would have to be searched to decide: for a period, one more on either side."""
    if isinstance(assertion, EveryYears):
        reach = (assertion.years + assertion.tolerance_years) * DAYS_PER_YEAR
        return searched[0] - reach, searched[1] + reach
    if isinstance(assertion, LastHappened):
        return _days(assertion.from_utc), _days(assertion.as_of_utc)
    after = _days(assertion.after_utc)
    return after, after + assertion.years * DAYS_PER_YEAR


def _every(said: EveryYears, occurrences: Sequence[Occurrence], searched: Span) -> Ruling:
    low = (said.years - said.tolerance_years) * DAYS_PER_YEAR
    high = (said.years + said.tolerance_years) * DAYS_PER_YEAR
    against: dict[Occurrence, None] = {}  # an ordered set
    off = 0
    for before, after in pairwise(occurrences):
        if not low <= after.tdb_days - before.tdb_days <= high:
            against |= {before: None, after: None}
            off += 1
    asked = f"{said.years:g} +- {said.tolerance_years:g} years"
    counted = max(len(occurrences) - 1, 0)
    # Before the first and after the last one the interval is known to be at least so long.
    edges = (searched[0], *(found.tdb_days for found in occurrences), searched[1])
    open_gaps = {edges[1] - edges[0], edges[-1] - edges[-2]}
    longest_open = max(open_gaps) / DAYS_PER_YEAR
    if not off and longest_open * DAYS_PER_YEAR > high:
        near = tuple(dict.fromkeys((*occurrences[:1], *occurrences[-1:])))
        reason = (
            f"The span searched begins or ends with {longest_open:.2f} years without any, "
            f"longer than {asked}."
        )
        return Ruling(said, DISAGREE, reason, near)
    if off:
        reason = f"{off} of {counted} intervals between occurrences are not {asked}."
        return Ruling(said, DISAGREE, reason, tuple(against))
    if counted:
        reason = f"All {counted} intervals between occurrences are {asked}."
        return Ruling(said, AGREE, reason)
    found = "a single occurrence was" if occurrences else "no occurrence was"
    years = (searched[1] - searched[0]) / DAYS_PER_YEAR
    reason = (
        f"In {years:.1f} years searched {found} found, which neither shows nor rules out {asked}."
    )
    return Ruling(said, UNDECIDED, reason)


def _last(said: LastHappened, occurrences: Sequence[Occurrence], searched: Span) -> Ruling:
    first, last, as_of = (_days(said.from_utc), _days(said.to_utc), _days(said.as_of_utc))
    there = [o for o in occurrences if o.begins_tdb_days < last and o.ends_tdb_days >= first]
    later = tuple(o for o in occurrences if last <= o.begins_tdb_days <= as_of)
    asserted = f"{said.from_utc} to {said.to_utc}"
    if later:
        reason = (
            f"It happened {_times(len(later))} after {asserted} and until {said.as_of_utc}, "
            f"last on {later[-1].time_utc[:10]}."
        )
        return Ruling(said, DISAGREE, reason, later)
    if not there and searched[0] <= first and last <= searched[1]:
        before = [o for o in occurrences if o.begins_tdb_days < first][-1:]
        reason = f"It did not happen from {asserted}" + (
            f"; the last one before that was on {before[0].time_utc[:10]}." if before else "."
        )
        return Ruling(said, DISAGREE, reason, tuple(before))
    if there and as_of <= searched[1]:
        reason = (
            f"It happened on {there[-1].time_utc[:10]}, and not after {said.to_utc} until "
            f"{said.as_of_utc}."
        )
        return Ruling(said, AGREE, reason)
    reason = f"{_outside(first, as_of, searched)}; nothing found inside contradicts it."
    return Ruling(said, UNDECIDED, reason)


def _not_again(said: NotAgainFor, occurrences: Sequence[Occurrence], searched: Span) -> Ruling:
    after, until = needed_span(said, searched)
    starts = after + said.same_event_days
    again = tuple(o for o in occurrences if starts < o.begins_tdb_days <= until)
    end = _date(until)
    if again:
        years = (again[0].begins_tdb_days - after) / DAYS_PER_YEAR
        reason = (
            f"It happens {_times(len(again))} after {said.after_utc} and until {end}, first on "
            f"{again[0].time_utc[:10]}, {years:.2f} years after."
        )
        return Ruling(said, DISAGREE, reason, again)
    if searched[0] <= after and until <= searched[1]:
        reason = f"It does not happen after {said.after_utc} until {end}."
        return Ruling(said, AGREE, reason)
    reason = f"{_outside(after, until, searched)}; nothing found inside contradicts it."
    return Ruling(said, UNDECIDED, reason)


def _times(count: int) -> str:
    return "once" if count == 1 else f"{count} times"


def _outside(first: float, last: float, searched: Span) -> str:
    """Which of the asserted days were not searched."""
    parts = []
    if first < searched[0]:
        parts.append(f"{_date(first)} to {_date(min(last, searched[0]))}")
    if last > searched[1]:
        parts.append(f"{_date(max(first, searched[1]))} to {_date(last)}")
    return f"It speaks of {' and '.join(parts)}, outside the span searched"


def _instant(text: str) -> np.datetime64:
    try:
        return utc_instant(text)
    except ValueError as error:
        raise ProtocolError(
            f"{text!r} is no date; write it like 1982-03-10 (years 1 to 9999)."
        ) from error


def _days(text: str) -> float:
    return float(tdb_days_from_utc(_instant(text)))


def _date(tdb_days: float) -> str:
    """The UTC date of a day of TDB."""
    return str(utc_from_tdb_days(tdb_days).astype("datetime64[D]"))
