"""How often a configuration comes back: its occurrences, the reason, and what is asserted of it.

The verdict comes from the span searched, with the kernel, alone. Beyond it there is only an
*extrapolation* from mean elements, kept apart from the verdict and labelled as such.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from epochtest.sky.assertions import UNDECIDED, Assertion, Ruling, Verdict, judge, overall
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.explanation import Explanation, explain
from epochtest.sky.extrapolation import Extrapolation, days_between, extrapolate
from epochtest.sky.mean_motion import DAYS_PER_YEAR
from epochtest.sky.occurrences import (
    Configuration,
    Intervals,
    Occurrence,
    find_occurrences,
    intervals,
)
from epochtest.timescale import utc_instant


@dataclass(frozen=True)
class Recurrence:
    """All that is known of a configuration's return; ``searched`` are ISO dates, UTC, [from, to).

    ``verdict`` comes from the kernel alone. ``extrapolation`` is None where every assertion is
    decided within it; ``no_extrapolation`` then, or where there can be none, says why.
    """

    configuration: Configuration
    ephemeris: str
    searched: tuple[str, str]
    searched_years: float
    occurrences: tuple[Occurrence, ...]
    intervals: Intervals | None
    explanation: Explanation
    rulings: tuple[Ruling, ...]
    verdict: Verdict
    extrapolation: Extrapolation | None
    no_extrapolation: str


def assess_recurrence(
    ephemeris: Ephemeris,
    configuration: Configuration,
    assertions: Sequence[Assertion],
    *,
    from_utc: np.datetime64 | None = None,
    to_utc: np.datetime64 | None = None,
    one_event_within_days: float = 0.0,
) -> Recurrence:
    """Find every occurrence in [from, to) (the whole kernel if not given) and judge by them.

    Occurrences closer than ``one_event_within_days`` count as one (see `find_occurrences`).
    Raises EphemerisSpanError outside the kernel, ProtocolError for impossible bodies.
    """
    lowest, highest = ephemeris.covered_utc
    first = lowest if from_utc is None else utc_instant(from_utc)
    last = highest if to_utc is None else utc_instant(to_utc)
    searched = days_between(first, last)
    found = find_occurrences(
        ephemeris, configuration, first, last, one_event_within_days=one_event_within_days
    )
    rulings = tuple(judge(assertion, found, searched) for assertion in assertions)
    open_ones = [ruling.assertion for ruling in rulings if ruling.verdict == UNDECIDED]
    explanation = explain(configuration)
    extrapolation, why_not = None, "every assertion is decided within the span searched"
    if open_ones and "moon" in (configuration.centre, *configuration.bodies):
        why_not = "there are no mean elements of the Moon here that hold for centuries"
    elif open_ones:
        why_not = ""
        extrapolation = extrapolate(
            ephemeris,
            configuration,
            found,
            (first, last),
            open_ones,
            explanation.expected_return_years,
            one_event_within_days,
        )
    return Recurrence(
        configuration,
        str(ephemeris.name),
        (str(first), str(last)),
        (searched[1] - searched[0]) / DAYS_PER_YEAR,
        found,
        intervals(found),
        explanation,
        rulings,
        overall(rulings),
        extrapolation,
        why_not,
    )
