"""What the finders of single kinds of event share: rates, and the table of instants."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pandas as pd

from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import SearchSpan
from epochtest.sky.search import Series, wrap_deg
from epochtest.timescale import Days, utc_from_tdb_days


def instants_table(span: SearchSpan, days: Days, **columns: Any) -> pd.DataFrame:
    """``time_utc``, ``tdb_days`` and ``columns`` (n,), the rows within the span, sorted.

    Object arrays become columns of type ``str``, of whatever length.
    """
    table = pd.DataFrame({"time_utc": utc_from_tdb_days(days), "tdb_days": days, **columns})
    for name in columns:
        if table[name].dtype == object:
            table[name] = table[name].astype("str")
    return span.inside(table.sort_values("tdb_days", kind="stable"))


def one_series(grid_days: Days) -> Series:
    """Series number 0 for every point (n,) of the grid."""
    return np.zeros(grid_days.size, dtype=np.intp)


def words(chosen: Any, one: str, other: str) -> Any:
    """``one`` where ``chosen`` (n,) is true, else ``other``; an object array also when empty."""
    return np.where(chosen, one, other).astype(object)


def rate_per_day(
    value: Callable[[Days], Days],
    days: Days,
    ephemeris: Ephemeris,
    half_step_days: float,
    *,
    angle: bool = False,
) -> Days:
    """Rate (n,) of ``value`` per day at ``days`` (n,), by central differences.

    Within a half step of the kernel's ends the parabola through the nearest three points is
    used, so no instant outside the kernel is asked for. With ``angle``, differences of degrees
    are taken on the circle.
    """
    lowest, highest = ephemeris.covered_tdb_days
    middle = np.clip(days, lowest + half_step_days, highest - half_step_days)
    sides = value(np.concatenate((middle - half_step_days, middle + half_step_days)))
    before, after = np.split(sides, 2)
    change = wrap_deg(after - before) if angle else after - before
    rate: Days = change / (2.0 * half_step_days)
    edge = middle != days
    if edge.any():
        halfway = value(middle[edge])
        first, second = halfway - before[edge], after[edge] - halfway
        bend = wrap_deg(second) - wrap_deg(first) if angle else second - first
        rate[edge] += bend / half_step_days**2 * (days[edge] - middle[edge])
    return rate
