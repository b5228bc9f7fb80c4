"""Why a configuration comes back when it does: its mean motions, in numbers and one sentence."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

import numpy as np

from epochtest.sky.mean_motion import (
    DAYS_PER_YEAR,
    Cycle,
    apparent_rate_deg_per_day,
    best_cycle,
    chance_within_arc,
    commensurabilities,
    entries_within_arc_per_day,
    meeting_period_days,
)
from epochtest.sky.occurrences import Configuration, Pair, describe_configuration
from epochtest.study.events import Body
from epochtest.study.words import body_in_words


@dataclass(frozen=True)
class PairMotion:
    """Mean motion of two of the bodies: their meeting period (inf: none) and best cycles.

    ``best`` is the shortest cycle that drifts by no more than 20 degrees, of all in ``cycles``.
    """

    bodies: tuple[str, str]
    meeting_years: float
    cycles: tuple[Cycle, ...]
    best: Cycle | None


@dataclass(frozen=True)
class Explanation:
    """Mean motions as numbers, and in one sentence.

    ``expected_return_years``: of a pair, the mean time between meetings; of a grouping, the mean
    time between entries into the arc if the longitudes were independent (inf if they never
    close). ``expected_share`` of the time in the arc likewise; NaN for a pair.
    ``independent`` is false where bodies share a mean motion (the Sun and the inner planets seen
    from a planet outside them), which makes both numbers mere orders of magnitude.
    """

    expected_return_years: float
    expected_share: float
    independent: bool
    pairs: tuple[PairMotion, ...]
    sentence: str


def explain(configuration: Configuration) -> Explanation:
    """Mean motions behind the return of a configuration, from mean elements alone."""
    centre, bodies = configuration.centre, configuration.bodies
    pairs = tuple(_pair_motion(centre, one, other) for one, other in combinations(bodies, 2))
    rates = [apparent_rate_deg_per_day(centre, body) for body in bodies]
    independent = len(set(rates)) == len(rates)
    if isinstance(configuration, Pair):
        share = float("nan")
        per_turn = _meetings_per_turn(configuration, independent)
        years = pairs[0].meeting_years / per_turn if per_turn else float("inf")
    else:
        line, width = configuration.along_line, configuration.below_deg
        share = chance_within_arc(len(bodies), width, along_line=line)
        per_day = entries_within_arc_per_day(rates, width, along_line=line)
        years = 1.0 / (per_day * DAYS_PER_YEAR) if per_day else float("inf")
    sentence = _sentence(configuration, years, share, independent, pairs)
    return Explanation(years, share, independent, pairs, sentence)


def _meetings_per_turn(pair: Pair, independent: bool) -> float:
    """An inner planet passes the Sun before and behind it, and is never opposite to it."""
    if independent:
        return 2.0 if pair.aspect == "line" else 1.0
    return 0.0 if pair.aspect == "opposition" else 2.0


def _pair_motion(centre: Body, one: Body, other: Body) -> PairMotion:
    first, second, seen_from = one, other, centre
    if apparent_rate_deg_per_day(centre, one) == apparent_rate_deg_per_day(centre, other):
        # With the Sun it is the centre and the planet whose revolutions count.
        first, second = (centre if name == "sun" else name for name in (one, other))
        seen_from = "sun" if "sun" in (one, other) else centre
    rates = (
        apparent_rate_deg_per_day(seen_from, first),
        apparent_rate_deg_per_day(seen_from, second),
    )
    cycles = commensurabilities((first, second), rates)
    years = meeting_period_days(centre, one, other) / DAYS_PER_YEAR
    return PairMotion((one, other), years, cycles, best_cycle(cycles))


def _sentence(
    configuration: Configuration,
    years: float,
    share: float,
    independent: bool,
    pairs: tuple[PairMotion, ...],
) -> str:
    """One plain sentence of the numbers."""
    what = describe_configuration(configuration)
    what = what[0].upper() + what[1:]
    if not isinstance(configuration, Pair):
        caution = "" if independent else ", a mere order of magnitude because some move together"
        moving = [pair for pair in pairs if np.isfinite(pair.meeting_years)]
        slowest = max(moving, key=lambda pair: pair.meeting_years, default=None)
        last = ""
        if slowest is not None:
            one, other = (body_in_words(name) for name in slowest.bodies)
            last = (
                f"; the slowest pair, {one} and {other}, gain a turn in "
                f"{slowest.meeting_years:.5g} years"
            )
        return (
            f"{what}: were the longitudes independent, this would take up {share:.3g} of all time "
            f"and begin once in {years:.4g} years{caution}{last}."
        )
    pair = pairs[0]
    if not np.isfinite(pair.meeting_years):
        return f"{what}: no mean period, because both keep near the Sun."
    if not np.isfinite(years):
        return f"{what}: never, because it keeps near the Sun."
    loops = "" if configuration.centre == "sun" else ", retrograde loops not counted"
    sentence = (
        f"{what}: on average once in {years:.4g} years{loops}, by mean motions that gain a turn "
        f"in {pair.meeting_years:.5g} years"
    )
    best = pair.best
    if best is None:
        return f"{sentence}."
    fast, slow = body_in_words(best.fast), body_in_words(best.slow)
    return (
        f"{sentence}; {best.fast_revolutions} revolutions of {fast} nearly equal "
        f"{best.slow_revolutions} of {slow} ({best.years:.2f} years), with a drift "
        f"of {best.drift_deg:+.2f} degrees that closes the circle in {best.closing_years:.0f} "
        "years."
    )
