"""Windows after epochs: their union on a grid and in exact time, and the counts inside.

A window is the lag interval [first, last) in days of 86400 s of civil (UTC) time, so leap
seconds are not counted: they would move an edge by less than half a minute in a century.

    epoch          epoch'                   two windows that overlap count once:
      |--[======)    |                      an earthquake is a hit if it follows
      |     |     |--[======)               at least one epoch at a lag inside
      -----[============)------> time       the window
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.errors import ProtocolError
from epochtest.study.results import EpochResult
from epochtest.study.settings import Span
from epochtest.timescale import Instants, utc_instant

Counts = NDArray[np.int64]
Mask = NDArray[np.bool_]
Interval = tuple[np.datetime64, np.datetime64]
WindowDays = tuple[float, float]

DAY_US = 86_400_000_000
HOUR_US = 3_600_000_000
LARGEST_GRID = 50_000_000
"""Bins beyond which one correlation would need gigabytes."""


def span_instants(span: Span) -> Interval:
    """First instant and end of a study span, UTC ``datetime64[us]``."""
    return utc_instant(span.start), utc_instant(span.end)


def sorted_us(instants: ArrayLike, what: str) -> Counts:
    """Instants (m,) as sorted int64 microseconds since 1970; the input is not modified.

    Raises ProtocolError, with ``what`` in the sentence, if one of them is NaT.
    """
    values = np.asarray(instants, dtype="datetime64[us]").ravel()
    missing = np.isnat(values)
    if missing.any():
        row = int(np.flatnonzero(missing)[0])
        raise ProtocolError.of(
            [f"{what}: entry {row} of {values.size} has no time (NaT); remove or complete it."]
        )
    return np.sort(values.astype(np.int64))


def _us(instant: np.datetime64) -> int:
    return int(instant.astype("datetime64[us]").astype(np.int64))


def _window_us(window_days: WindowDays) -> tuple[int, int]:
    first, last = (round(days * DAY_US) for days in window_days)
    if not first < last:
        raise ProtocolError.of(
            [f"window_days: is [first, last], first < last; found {list(window_days)}; mend it."]
        )
    return first, last


@dataclass(frozen=True)
class Grid:
    """Equal bins that cover a span from its start; what is left at its end is stated.

    ``start_utc`` is a ``datetime64[us]``, ``step_hours`` the width of a bin (rounded to whole
    microseconds), ``n`` the number of bins, ``remainder_hours`` the uncovered end of the span.
    """

    start_utc: np.datetime64
    step_hours: float
    n: int
    remainder_hours: float = 0.0

    @classmethod
    def over(cls, span: Interval, grid_hours: float) -> Grid:
        """The grid of ``grid_hours`` over [start, end); raises ProtocolError if none fits."""
        step_us = round(grid_hours * HOUR_US)
        length_us = _us(span[1]) - _us(span[0])
        n = length_us // step_us if step_us > 0 else 0
        if n < 1:
            raise ProtocolError.of(
                [
                    f"grid_hours: a step of {grid_hours} h does not fit into the span of "
                    f"{length_us / HOUR_US:g} h; choose a step between a microsecond and the span."
                ]
            )
        if n > LARGEST_GRID:
            raise ProtocolError.of(
                [
                    f"grid_hours: a step of {grid_hours} h cuts the span into {n} bins, more than "
                    f"{LARGEST_GRID}; choose a coarser step."
                ]
            )
        start = np.datetime64(_us(span[0]), "us")
        return cls(start, grid_hours, n, (length_us - n * step_us) / HOUR_US)

    @property
    def step_us(self) -> int:
        """Width of a bin in microseconds."""
        return round(self.step_hours * HOUR_US)

    @property
    def start_us(self) -> int:
        """Start in microseconds since 1970."""
        return _us(self.start_utc)


def window_mask(grid: Grid, epochs_utc: ArrayLike, window_days: WindowDays) -> Mask:
    """Bins (n,) whose centre lies in [epoch + first, epoch + last) of at least one epoch.

    A difference array: +1 where a window begins, -1 where it ends, summed up. Windows are
    clipped to the grid. Cost grows as epochs + bins.
    """
    first, last = _window_us(window_days)
    epochs = sorted_us(epochs_utc, "epochs")
    half = grid.step_us // 2
    edges = []
    for lag in (first, last):
        after_centre = epochs + (lag - grid.start_us - half)
        edges.append(np.clip(-(-after_centre // grid.step_us), 0, grid.n))
    change = np.bincount(edges[0], minlength=grid.n + 1)
    change -= np.bincount(edges[1], minlength=grid.n + 1)
    return np.asarray(np.cumsum(change[: grid.n]) > 0)


def bin_counts(grid: Grid, times_utc: ArrayLike) -> Counts:
    """Earthquakes per bin (n,), those outside the grid left out."""
    index = (sorted_us(times_utc, "earthquakes") - grid.start_us) // grid.step_us
    index = index[(index >= 0) & (index < grid.n)]
    return np.bincount(index, minlength=grid.n).astype(np.int64)


def merge_intervals(starts: Counts, ends: Counts) -> tuple[Counts, Counts]:
    """The union of half-open intervals [start, end) as sorted disjoint ones; touching ones join.

    Empty intervals (end <= start) vanish.
    """
    real = ends > starts
    order = np.argsort(starts[real], kind="stable")
    starts, ends = starts[real][order], ends[real][order]
    if not starts.size:
        return starts, ends
    reach = np.maximum.accumulate(ends)
    opens = np.concatenate(([True], starts[1:] > reach[:-1]))
    closes = np.concatenate((opens[1:], [True]))
    return starts[opens], reach[closes]


def union_us(epochs_utc: ArrayLike, window_days: WindowDays) -> tuple[Counts, Counts]:
    """Starts and ends of the union of all windows, int64 microseconds since 1970."""
    first, last = _window_us(window_days)
    epochs = sorted_us(epochs_utc, "epochs")
    return merge_intervals(epochs + first, epochs + last)


def hits_by_window(times_utc: ArrayLike, epochs_utc: ArrayLike, window_days: WindowDays) -> Counts:
    """Earthquakes (k,) in each of the k disjoint pieces of the union of all windows, in order."""
    starts, ends = union_us(epochs_utc, window_days)
    times = sorted_us(times_utc, "earthquakes")
    return np.asarray(np.searchsorted(times, ends) - np.searchsorted(times, starts))


def exact_hits(times_utc: ArrayLike, epochs_utc: ArrayLike, window_days: WindowDays) -> int:
    """Earthquakes inside the union of all windows, each counted once."""
    return int(hits_by_window(times_utc, epochs_utc, window_days).sum())


def coverage(epochs_utc: ArrayLike, window_days: WindowDays, span: Interval) -> float:
    """Share of the span [start, end) inside the union of all windows, by exact measure."""
    low, high = _us(span[0]), _us(span[1])
    starts, ends = union_us(epochs_utc, window_days)
    covered = np.clip(ends, low, high) - np.clip(starts, low, high)
    return int(covered.sum()) / (high - low)


def _reaching_us(epochs_utc: ArrayLike, window_days: WindowDays, span: Interval) -> Counts:
    first, last = _window_us(window_days)
    epochs = sorted_us(epochs_utc, "epochs")
    return epochs[(epochs + last > _us(span[0])) & (epochs + first < _us(span[1]))]


def epochs_reaching(epochs_utc: ArrayLike, window_days: WindowDays, span: Interval) -> Instants:
    """The epochs, sorted, whose window reaches into the span (the epoch may lie outside)."""
    return _reaching_us(epochs_utc, window_days, span).astype("datetime64[us]")


def summarise_epochs(
    *,
    claim: str,
    description: str,
    frame: str,
    ephemeris: str,
    searched: Interval,
    epochs_utc: ArrayLike,
    window_days: WindowDays,
    span: Interval,
    notes: tuple[str, ...] = (),
) -> EpochResult:
    """The event set of one claim in numbers: how many, how far apart, how much they cover.

    Gaps are between the epochs whose window reaches into the span; ``per_year`` counts those
    inside the span, a year without any included. Two windows overlap if their epochs are
    closer than the window is long.
    """
    first, last = _window_us(window_days)
    used = _reaching_us(epochs_utc, window_days, span)
    gaps = np.diff(used)
    inside = used[(used >= _us(span[0])) & (used < _us(span[1]))]
    years = inside.astype("datetime64[us]").astype("datetime64[Y]").astype(np.int64) + 1970
    first_year, last_year = (
        int(instant.astype("datetime64[Y]").astype(np.int64)) + 1970
        for instant in (span[0], span[1] - np.timedelta64(1, "us"))
    )
    tally = np.bincount(years - first_year, minlength=last_year - first_year + 1)
    return EpochResult(
        claim=claim,
        description=description,
        frame=frame,
        ephemeris=ephemeris,
        searched_from_utc=_iso(searched[0]),
        searched_to_utc=_iso(searched[1]),
        n_epochs=int(used.size),
        n_in_span=int(inside.size),
        per_year={str(first_year + k): int(count) for k, count in enumerate(tally)},
        mean_interval_days=float(gaps.mean()) / DAY_US if gaps.size else None,
        shortest_interval_days=int(gaps.min()) / DAY_US if gaps.size else None,
        longest_interval_days=int(gaps.max()) / DAY_US if gaps.size else None,
        coverage=coverage(epochs_utc, window_days, span),
        overlapping_windows=int((gaps < last - first).sum()),
        notes=notes,
    )


def _iso(instant: np.datetime64) -> str:
    return str(np.datetime_as_string(instant.astype("datetime64[us]"), unit="s")) + "Z"
