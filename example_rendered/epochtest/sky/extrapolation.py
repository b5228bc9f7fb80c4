"""Beyond the kernel: occurrences from mean elements, and what they are worth.

Their uncertainty is measured: the same search runs on the mean elements inside the span that was
searched with the kernel, and the differences of the instants are the residuals. The elements were
fitted to 3000 BC - 3000 AD as a whole, so residuals inside the kernel stand for those outside it.
They change slowly over centuries, though, so a short kernel sees only part of them: with 1900-2050
alone to learn from (DE421), the stated uncertainty holds for 95 % of the 2,038 meetings of seven
pairs that DE440 has in 1551-1899 and 2053-2648, at worst for 70 % (Saturn-Neptune, four to learn
from). Prefer the long kernel.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from epochtest.sky.assertions import Assertion, Ruling, Span, judge, needed_span
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.explanation import explain
from epochtest.sky.mean_elements import MeanElements
from epochtest.sky.mean_motion import DAYS_PER_YEAR
from epochtest.sky.occurrences import Configuration, Grouping, Occurrence, find_occurrences
from epochtest.timescale import tdb_days_from_utc, utc_from_tdb_days

Values = NDArray[np.float64]
Series = NDArray[np.intp]

FEWEST_RESIDUALS = 3  # below this no uncertainty is stated
WANTED_RESIDUALS = 10
_WIDER = 1.5  # each step that a rare grouping's arc is widened by to have more to compare


@dataclass(frozen=True)
class Residuals:
    """Mean elements minus kernel inside the span searched: ``count`` occurrences of both.

    ``mean_days``, ``rms_days`` and ``largest_days`` of the instants, ``largest_size_deg`` of the
    width of the arc or the miss; NaN below three. ``derivation`` says in words what was compared
    and how ``uncertainty_days`` was made of it: the 95 % prediction limit for one more value of
    this rms by Student's t, t(n) rms sqrt(1 + 1/n), or the largest residual if that is larger.
    """

    count: int
    mean_days: float
    rms_days: float
    largest_days: float
    largest_size_deg: float
    uncertainty_days: float
    derivation: str


@dataclass(frozen=True)
class Extrapolation:
    """Occurrences beyond the span searched, from mean elements, and what they are worth.

    ``from_utc`` to ``to_utc`` (ISO) was looked at with mean elements, of which ``searched`` (two
    ISO dates) with the kernel. ``uncertainty_days`` (of each instant; NaN if unknown) is that of
    the residuals. A grouping narrower than the threshold by less than their ``largest_size_deg``
    may not happen at all, and one just wider may. Inside the span, ``missed`` occurrences of the
    kernel have no counterpart and ``spurious`` ones no original. ``rulings`` judge by the
    kernel's and these occurrences together, taking the latter at their word; ``cut`` tells that
    the assertions reach beyond the years 1 to 3000, where the elements end.
    """

    label: str
    from_utc: str
    to_utc: str
    searched: tuple[str, str]
    occurrences: tuple[Occurrence, ...]
    uncertainty_days: float
    residuals: Residuals
    missed: int
    spurious: int
    cut: bool
    rulings: tuple[Ruling, ...]


def extrapolate(
    ephemeris: Ephemeris,
    configuration: Configuration,
    found: tuple[Occurrence, ...],
    searched_utc: tuple[np.datetime64, np.datetime64],
    assertions: Sequence[Assertion],
    return_years: float,
    one_event_within_days: float = 0.0,
) -> Extrapolation:
    """Search mean elements where the assertions need it, and inside the span to calibrate.

    ``found`` are the occurrences of ``ephemeris`` within ``searched_utc``, ``return_years`` the
    expected time between two. Raises ProtocolError for the Moon, which has no mean elements.
    """
    elements = MeanElements()
    lowest, highest = elements.covered_tdb_days
    searched = days_between(*searched_utc)
    needed = [needed_span(assertion, searched) for assertion in assertions]
    wanted = min(searched[0], *(n[0] for n in needed)), max(searched[1], *(n[1] for n in needed))
    reach = max(wanted[0], lowest), min(wanted[1], highest)
    first, last = utc_from_tdb_days(np.array(reach))
    first, last = max(first, elements.covered_utc[0]), min(last, elements.covered_utc[1])
    rough = find_occurrences(
        elements, configuration, first, last, one_event_within_days=one_event_within_days
    )
    inside = [o for o in rough if searched[0] <= o.tdb_days < searched[1]]
    beyond = tuple(o for o in rough if not searched[0] <= o.tdb_days < searched[1])
    matched = len(matched_occurrences(found, inside, return_years))
    together = sorted((*found, *beyond), key=lambda occurrence: occurrence.tdb_days)
    residuals = _calibrate(ephemeris, configuration, (found, inside), searched_utc, return_years)
    return Extrapolation(
        "extrapolation from mean elements, not an ephemeris",
        str(first),
        str(last),
        (str(searched_utc[0]), str(searched_utc[1])),
        beyond,
        residuals.uncertainty_days,
        residuals,
        len(found) - matched,
        len(inside) - matched,
        wanted != reach,
        tuple(judge(assertion, together, reach) for assertion in assertions),
    )


def _calibrate(
    ephemeris: Ephemeris,
    configuration: Configuration,
    both: tuple[Sequence[Occurrence], Sequence[Occurrence]],
    searched_utc: tuple[np.datetime64, np.datetime64],
    return_years: float,
) -> Residuals:
    """Residuals of the occurrences; of a grouping too rare, those of ever wider arcs."""
    pairs = matched_occurrences(*both, return_years)
    what = "occurrences"
    while len(pairs) < WANTED_RESIDUALS and isinstance(configuration, Grouping):
        widest = 90.0 if configuration.along_line else 180.0
        if configuration.below_deg >= widest:
            break
        wider = min(_WIDER * configuration.below_deg, widest)
        configuration = replace(configuration, below_deg=wider)
        what = f"groupings within {wider:.4g} degrees"
        ours, theirs = (
            find_occurrences(source, configuration, *searched_utc)
            for source in (ephemeris, MeanElements())
        )
        pairs = matched_occurrences(ours, theirs, explain(configuration).expected_return_years)
    if len(pairs) < FEWEST_RESIDUALS:
        unknown = float("nan")
        text = f"unknown: only {len(pairs)} {what} inside the span searched can be compared"
        return Residuals(len(pairs), *(unknown,) * 5, text)
    days = np.array([theirs.tdb_days - ours.tdb_days for ours, theirs in pairs])
    size = np.array([theirs.size_deg - ours.size_deg for ours, theirs in pairs])
    rms, largest = float(np.sqrt((days**2).mean())), float(np.abs(days).max())
    limit = float(stdtrit(len(pairs), 0.975)) * rms * float(np.sqrt(1.0 + 1.0 / len(pairs)))
    text = (
        f"95 % limit (or the largest, if larger) of the differences between mean elements and "
        f"kernel in the instants of {len(pairs)} {what} inside the span searched"
    )
    return Residuals(
        len(pairs),
        float(days.mean()),
        rms,
        largest,
        float(np.abs(size).max()),
        max(limit, largest),
        text,
    )


def matched_occurrences(
    kernel: Sequence[Occurrence], rough: Sequence[Occurrence], return_years: float
) -> list[tuple[Occurrence, Occurrence]]:
    """Occurrences that are each other's nearest in time, kernel first.

    Two that lie more than a quarter of the expected return apart are no counterparts.
    """
    if not kernel or not rough:
        return []
    ours = np.array([o.tdb_days for o in kernel])
    theirs = np.array([o.tdb_days for o in rough])
    nearest, back = _nearest(theirs, ours), _nearest(ours, theirs)
    limit = return_years * DAYS_PER_YEAR / 4.0
    return [
        (kernel[i], rough[j])
        for i, j in enumerate(nearest)
        if back[j] == i and abs(theirs[j] - ours[i]) <= limit
    ]


def _nearest(among: Values, days: Values) -> Series:
    """Number of the instant of ``among`` (sorted) nearest to each of ``days``."""
    right = np.clip(np.searchsorted(among, days), 1, max(among.size - 1, 1))
    right = np.minimum(right, among.size - 1)
    left = np.maximum(right - 1, 0)
    nearest: Series = np.where(days - among[left] <= among[right] - days, left, right)
    return nearest


def days_between(first: np.datetime64, last: np.datetime64) -> Span:
    """Both instants (UTC) as days of TDB."""
    days = tdb_days_from_utc(np.array([first, last]))
    return float(days[0]), float(days[1])
