"""Why configurations come back: mean motions, synodic periods, commensurabilities, chance.

Mean rates: Standish & Williams, table 2a (see `epochtest.sky.mean_elements`); Moon: the sidereal
month of Chapront-Touze & Chapront (1988). All are sidereal, referred to the ecliptic of J2000.
Years are Julian years of 365.25 days.

Mean motions speak of averages: single returns differ from them by the ellipticity of the orbits
and, seen from a planet, by its retrograde loops.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations
from math import floor, inf, prod

import numpy as np

from epochtest.errors import ProtocolError
from epochtest.sky.mean_elements import DAYS_PER_CENTURY, ELEMENTS
from epochtest.study.events import Body

DAYS_PER_YEAR = 365.25
SIDEREAL_MONTH_DAYS = 27.321661547
MOST_CONVERGENTS = 12
# A ratio of float64 with 10 significant digits says nothing beyond denominators of 10^5.
LARGEST_DENOMINATOR = 100_000
CLOSE_DRIFT_DEG = 20.0  # a cycle that comes back this near is called a commensurability


def mean_rate_deg_per_day(body: Body) -> float:
    """Mean motion of a planet about the Sun, or of the Moon about the Earth, degrees per day.

    Raises ProtocolError for the Sun, which has none.
    """
    if body == "moon":
        return 360.0 / SIDEREAL_MONTH_DAYS
    if body not in ELEMENTS:
        raise ProtocolError(f"{body!r} has no mean motion; name a planet or the Moon.")
    return ELEMENTS[body].per_century[3] / DAYS_PER_CENTURY


def apparent_rate_deg_per_day(centre: Body, body: Body) -> float:
    """Mean rate of the longitude of ``body`` seen from ``centre``, degrees per day, averaged.

    From the Sun a planet's own. From a planet, the slower of its own and the centre's: an outer
    planet keeps its own mean motion through all its loops, while the Sun and the inner planets,
    which never leave the Sun, go round with the Sun once per revolution of the centre.
    """
    if {centre, body} == {"earth", "moon"}:
        return mean_rate_deg_per_day("moon")
    seen, seer = (name if name != "moon" else "earth" for name in (body, centre))
    rates = [mean_rate_deg_per_day(name) for name in (seen, seer) if name != "sun"]
    return min(rates)


def period_days(rate_deg_per_day: float) -> float:
    """Days per turn; infinite for a rate of zero."""
    return 360.0 / abs(rate_deg_per_day) if rate_deg_per_day else inf


def synodic_period_days(one: Body, other: Body) -> float:
    """Mean days between two meetings of two planets about the Sun: 360 / |difference of rates|."""
    return period_days(mean_rate_deg_per_day(one) - mean_rate_deg_per_day(other))


def meeting_period_days(centre: Body, one: Body, other: Body) -> float:
    """Mean days in which two bodies, seen from ``centre``, gain a turn on each other.

    The Sun and an inner planet gain none; their meetings (two per turn: before and behind the
    Sun) follow the synodic period of that planet and the centre, which is returned. Infinite for
    two inner planets, whose meetings have no mean motion of their own.
    """
    rate = apparent_rate_deg_per_day(centre, one) - apparent_rate_deg_per_day(centre, other)
    if rate == 0.0 and "sun" in (one, other):
        return synodic_period_days(centre, other if one == "sun" else one)
    return period_days(rate)


def convergents(ratio: float, most: int = MOST_CONVERGENTS) -> tuple[tuple[int, int], ...]:
    """Continued-fraction convergents (p, q) of a positive ratio, best approximations p/q.

    Khinchin (1964), Continued Fractions, ch. 1: p_k = a_k p_{k-1} + p_{k-2}, same for q. Stops
    after ``most``, at an exact value, or where q passes `LARGEST_DENOMINATOR`.
    """
    if not (ratio > 0.0 and np.isfinite(ratio)):
        raise ValueError(f"a ratio of periods is positive and finite, but found {ratio}")
    rest = Fraction(ratio)
    found: list[tuple[int, int]] = []
    p, q, before_p, before_q = 1, 0, 0, 1
    while len(found) < most:
        whole = floor(rest)
        p, before_p = whole * p + before_p, p
        q, before_q = whole * q + before_q, q
        if q > LARGEST_DENOMINATOR:
            break
        found.append((p, q))
        if rest == whole:
            break
        rest = 1 / (rest - whole)
    return tuple(found)


@dataclass(frozen=True)
class Cycle:
    """Nearly whole numbers of revolutions of two bodies in the same time.

    In ``years``, exactly ``slow_revolutions`` of ``slow``, the fast body makes nearly
    ``fast_revolutions`` and gains ``drift_deg`` (signed) beyond them; they meet ``meetings``
    times. After ``cycles_to_close`` cycles, ``closing_years``, the drift has summed to a turn.
    """

    fast: str
    slow: str
    fast_revolutions: int
    slow_revolutions: int
    years: float
    drift_deg: float
    meetings: int
    cycles_to_close: float
    closing_years: float


def cycle(
    names: tuple[str, str], rates_deg_per_day: tuple[float, float], revolutions: tuple[int, int]
) -> Cycle:
    """The `Cycle` of a fast and a slow body with those rates and numbers of revolutions."""
    fast_rate, slow_rate = rates_deg_per_day
    fast, slow = revolutions
    days = slow * period_days(slow_rate)
    drift = fast_rate * days - 360.0 * fast
    to_close = 360.0 / abs(drift) if drift else inf
    years = days / DAYS_PER_YEAR
    return Cycle(*names, fast, slow, years, drift, abs(fast - slow), to_close, to_close * years)


def commensurabilities(
    names: tuple[str, str], rates_deg_per_day: tuple[float, float]
) -> tuple[Cycle, ...]:
    """Cycles of two bodies by rising length: the convergents of their period ratio.

    Names and rates in any order; the faster becomes ``fast``. Empty where the rates are equal.
    """
    one, other = rates_deg_per_day
    if one == other:
        return ()
    if one < other:
        return commensurabilities((names[1], names[0]), (other, one))
    return tuple(cycle(names, (one, other), (p, q)) for p, q in convergents(one / other) if p > 0)


def best_cycle(cycles: Sequence[Cycle], within_deg: float = CLOSE_DRIFT_DEG) -> Cycle | None:
    """The shortest cycle whose drift is at most ``within_deg``; None if there is none."""
    near = (found for found in cycles if abs(found.drift_deg) <= within_deg)
    return min(near, key=lambda found: found.years, default=None)


def chance_within_arc(count: int, width_deg: float, *, along_line: bool = False) -> float:
    """Chance that ``count`` independent uniform longitudes fit in an arc: n (W/360)^(n-1).

    Each body in turn is the trailing one and the others lie within W ahead of it; exclusive for
    W up to 180 degrees (90 along a line, where angles count twice). Common practice.
    """
    share = _share(width_deg, along_line)
    return float(count * share ** (count - 1))


def entries_within_arc_per_day(
    rates_deg_per_day: Sequence[float], width_deg: float, *, along_line: bool = False
) -> float:
    """How often per day n bodies with these steady rates come into an arc of W, on average.

    An entry is a pair of edges i, j closing to W, which happens |rate_i - rate_j|/360 times a
    day, while the other n - 2 lie between them, (W/360)^(n-2): the sum over all pairs. Derived
    here; it has the chance of `chance_within_arc` as rate times mean length of a visit. Angles
    count twice along a line. Longitudes are taken as independent.
    """
    fold = 2.0 if along_line else 1.0
    share = _share(width_deg, along_line)
    closing = sum(fold * abs(a - b) / 360.0 for a, b in combinations(rates_deg_per_day, 2))
    return float(closing * share ** (len(rates_deg_per_day) - 2))


def entries_about_reference_per_day(
    relative_rates_deg_per_day: Sequence[float], within_deg: Sequence[float]
) -> float:
    """How often per day all bodies come within +-eps_i of a reference direction, on average.

    sum_i |Omega_i|/360 prod_{j != i} 2 eps_j/360, with the rates Omega relative to the reference
    (common practice). Raises ValueError for lists of different lengths.
    """
    shares = [2.0 * eps / 360.0 for eps in within_deg]
    each = zip(relative_rates_deg_per_day, range(len(shares)), strict=True)
    return float(sum(abs(rate) / 360.0 * prod(shares[:i] + shares[i + 1 :]) for rate, i in each))


def _share(width_deg: float, along_line: bool) -> float:
    """Share of the circle; refuses what is wider than half of it."""
    share = (2.0 if along_line else 1.0) * width_deg / 360.0
    if not 0.0 <= share <= 0.5:
        raise ValueError(
            f"the formula holds for arcs up to {90 if along_line else 180} degrees; "
            f"found {width_deg:g}"
        )
    return share
