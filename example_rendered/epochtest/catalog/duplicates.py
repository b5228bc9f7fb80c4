"""The same earthquake listed twice: under one id, or under two.

Rows are ranked by file order: files as listed in study.toml, then line. So the catalog listed
first is preferred.

Same id
    The row with the latest ``updated`` time is kept; rows without one come after rows with one;
    among equals the first in file order is kept. Rows whose origin time lies more than a day
    from the kept row's are set aside under another reason: the id was used for two earthquakes.

Near duplicates
    Going through the rows in file order, a row is set aside if a row *kept before it* lies
    within all three tolerances, each bound included: origin time, great-circle distance of the
    epicentres, magnitude. Comparing with kept rows only means that no chain forms: with A kept
    and B set aside for A, a row C near B but not near A stays. Day-only rows have no time to
    compare and take no part.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.catalog.geometry import great_circle_km

REUSED_ID_AFTER = np.timedelta64(1, "D")
MAGNITUDE_ROUNDING = 1e-9
"""Slack for 1.1 - 0.6 > 0.5 in binary; far below any magnitude step in use."""

Rows = NDArray[np.int64]


def repeated_ids(
    event_id: pd.Series, updated: NDArray[np.datetime64], time_utc: NDArray[np.datetime64]
) -> tuple[Rows, Rows, NDArray[np.bool_]]:
    """Rows to set aside for a repeated id, the row kept instead, and whether the id was re-used.

    All inputs have shape (n,) in file order; ``updated`` is NaT where unknown. One sort.
    """
    codes = pd.factorize(event_id)[0]
    last = np.iinfo(np.int64).max
    newest_first = np.where(np.isnat(updated), last, -updated.astype(np.int64))
    ranked = np.lexsort((newest_first, codes))
    group = codes[ranked]
    first = np.concatenate(([True], group[1:] != group[:-1]))[: group.size]
    kept = ranked[first][np.cumsum(first) - 1] if ranked.size else ranked
    aside, instead = ranked[~first], kept[~first]
    reused = np.abs(time_utc[aside] - time_utc[instead]) > REUSED_ID_AFTER
    return aside, instead, reused


@dataclass(frozen=True)
class Located:
    """What near duplicates are judged by, all of shape (n,) in file order."""

    time_utc: NDArray[np.datetime64]
    latitude_deg: NDArray[np.float64]
    longitude_deg: NDArray[np.float64]
    magnitude: NDArray[np.float64]
    comparable: NDArray[np.bool_]


def near_duplicates(
    rows: Located, seconds: float, kilometres: float, magnitude: float
) -> tuple[Rows, Rows]:
    """Rows to set aside as near duplicates, in file order, and the kept row each repeats.

    Cost: one sort by time, plus the number of pairs within ``seconds``; for a catalog whose rate
    does not grow with its length that is n log n.
    """
    earlier, later = _close_pairs(rows, seconds, kilometres, magnitude)
    order = np.lexsort((earlier, later))
    repeats: dict[int, int] = {}
    for first, second in zip(earlier[order].tolist(), later[order].tolist(), strict=True):
        if first not in repeats and second not in repeats:
            repeats[second] = first
    aside = np.array(sorted(repeats), dtype=np.int64)
    return aside, np.array([repeats[row] for row in aside.tolist()], dtype=np.int64)


def _close_pairs(
    rows: Located, seconds: float, kilometres: float, magnitude: float
) -> tuple[Rows, Rows]:
    """All pairs within the tolerances, as (row earlier in file order, row later in it).

    In time order, neighbour k of every row is compared at once, for k = 1, 2, ... until no
    row has a k-th neighbour within the time tolerance.
    """
    members = np.flatnonzero(rows.comparable)
    by_time = members[np.argsort(rows.time_utc[members], kind="stable")]
    micros = rows.time_utc[by_time].astype(np.int64)
    longest = round(seconds * 1e6)
    pairs: list[tuple[Rows, Rows]] = []
    left, step = np.arange(by_time.size), 0
    while left.size:
        step += 1
        left = left[left + step < by_time.size]
        left = left[micros[left + step] - micros[left] <= longest]
        a, b = by_time[left], by_time[left + step]
        alike = np.abs(rows.magnitude[a] - rows.magnitude[b]) <= magnitude + MAGNITUDE_ROUNDING
        a, b = a[alike], b[alike]
        apart_km = great_circle_km(
            rows.latitude_deg[a], rows.longitude_deg[a], rows.latitude_deg[b], rows.longitude_deg[b]
        )
        near = apart_km <= kilometres
        pairs.append((a[near], b[near]))
    first = np.concatenate([a for a, _ in pairs]) if pairs else members[:0]
    second = np.concatenate([b for _, b in pairs]) if pairs else members[:0]
    return np.minimum(first, second), np.maximum(first, second)
