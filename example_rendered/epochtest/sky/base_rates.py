"""How common line-ups are: what any instant has near it, whether or not anything happened then.

The number of line-ups within +-w of an instant t is a step function of t. It goes up by one at
w before each line-up and down by one at w after it, so its distribution over time is summed
exactly from the sorted edges; nothing is sampled.

      edges    ^     ^  v     v              ^ t_i - w     v t_i + w
      number 0 |  1  | 2|  1  |  0
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from epochtest.errors import ProtocolError
from epochtest.timescale import tdb_days_from_utc, utc_instant

DAYS_PER_YEAR = 365.25  # Julian year


class BaseRates(NamedTuple):
    """What the family of line-ups does by itself.

    ``lineups`` in ``years`` (Julian), ``per_year``; ``nearby`` holds one row per half width:
    ``half_width_days``, ``share_of_time`` with at least one line-up within it, ``mean_number``,
    ``median_number``, ``most`` line-ups within it of an arbitrary instant.
    """

    lineups: int
    years: float
    per_year: float
    nearby: pd.DataFrame


def base_rates(
    lineups: pd.DataFrame,
    from_utc: np.datetime64 | str,
    to_utc: np.datetime64 | str,
    half_widths_days: Sequence[float] = (1.0, 2.0, 3.0, 7.0),
) -> BaseRates:
    """Base rates of ``lineups``, a table with ``tdb_days`` of *all* events in ``from``..``to``.

    The table may be any family that a claim could have chosen from: the whole atlas, or the rows
    that a rule selects. Raises ProtocolError as `number_within` does.
    """
    first, last = tdb_days_from_utc(np.array([utc_instant(from_utc), utc_instant(to_utc)]))
    days = lineups["tdb_days"].to_numpy()
    rows = []
    for half_width in half_widths_days:
        table = number_within(days, half_width, first, last)
        share, number = table["share_of_time"].to_numpy(), table["number"].to_numpy()
        rows.append(
            {
                "half_width_days": float(half_width),
                "share_of_time": 1.0 - float(share[0]),
                "mean_number": float(share @ number),
                "median_number": int(number[np.searchsorted(np.cumsum(share), 0.5)]),
                "most": int(number[-1]),
            }
        )
    years = float(last - first) / DAYS_PER_YEAR
    count = int(((days >= first) & (days <= last)).sum())
    return BaseRates(count, years, count / years, pd.DataFrame(rows))


def number_within(
    event_days: ArrayLike, half_width_days: float, first_day: float, last_day: float
) -> pd.DataFrame:
    """Distribution of the number of events within +-``half_width_days`` of an arbitrary instant.

    ``event_days`` (n,) are all events from ``first_day`` to ``last_day``, in any order. An
    instant counts if it lies at least the half width inside both ends, so that no event near it
    is unknown. Columns: ``number`` (0, 1, ... up to the most that occur), ``share_of_time`` and
    ``share_at_least`` (this number or more). Time grows as n log n.

    Raises ProtocolError if the span is shorter than twice the half width, or that is not positive.
    """
    begin, end = first_day + half_width_days, last_day - half_width_days
    if not 0.0 < half_width_days < np.inf or not begin < end:
        raise ProtocolError(
            f"within +-{half_width_days:g} days of an instant cannot be counted in a span of "
            f"{last_day - first_day:g} days; give a positive half width less than half of it."
        )
    days = np.sort(np.asarray(event_days, dtype=float))
    ups = np.clip(days - half_width_days, begin, end)
    downs = np.clip(days + half_width_days, begin, end)
    edges = np.concatenate(([begin], ups, downs, [end]))
    change = np.concatenate(([0], np.ones(days.size), -np.ones(days.size), [0]))
    order = np.argsort(edges, kind="stable")
    number = np.cumsum(change[order])[:-1].astype(np.intp)
    time: NDArray[np.float64] = np.diff(edges[order])
    shares = np.bincount(number[time > 0.0], weights=time[time > 0.0]) / (end - begin)
    return pd.DataFrame(
        {
            "number": np.arange(shares.size),
            "share_of_time": shares,
            "share_at_least": np.minimum(np.cumsum(shares[::-1])[::-1], 1.0),
        }
    )
