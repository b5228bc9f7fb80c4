"""All hourly shifts of a century by one transform, against plain shifts by searching.

Run as ``python -m tests.bench.bench_shifts`` or call `main`. Two plain ways are timed: moving
every earthquake and looking up its window, and moving the merged windows over the sorted
catalog. Both shift 999 times; the transform does all 876,600 hourly shifts.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

try:
    from epochtest.inference.windows import Grid, bin_counts, union_us, window_mask
except ModuleNotFoundError:  # run as a script from the repository root
    library = Path(__file__).parents[2] / "{{cookiecutter.project_slug}}"
    sys.path.insert(0, str(library))
    from epochtest.inference.windows import Grid, bin_counts, union_us, window_mask

from epochtest.inference.shift import hits_at_all_shifts

START = np.datetime64("1920-01-01", "us")
SPAN_US = 876_600 * 3_600_000_000
PLAIN_SHIFTS = 999


def timed(work: Callable[[], Any]) -> tuple[float, Any]:
    """Seconds and result of one call."""
    begin = time.perf_counter()
    result = work()
    return time.perf_counter() - begin, result


def moving_earthquakes(
    times: np.ndarray, starts: np.ndarray, ends: np.ndarray, shifts: np.ndarray
) -> list[int]:
    """Hits at the given shifts (microseconds): every earthquake is moved and looked up."""
    edges = np.stack((starts, ends), axis=1).ravel()
    hits = []
    for shift in shifts:
        moved = (times - shift) % SPAN_US
        hits.append(int((np.searchsorted(edges, moved, side="right") % 2).sum()))
    return hits


def moving_windows(
    times: np.ndarray, starts: np.ndarray, ends: np.ndarray, shifts: np.ndarray
) -> list[int]:
    """The same hits: the windows are moved over the sorted catalog, laid out twice."""
    twice = np.concatenate((times, times + SPAN_US))
    return [
        int((np.searchsorted(twice, ends + s) - np.searchsorted(twice, starts + s)).sum())
        for s in shifts
    ]


def main() -> None:
    """Time the three ways at 10^4, 10^5 and 10^6 earthquakes and print the ratios."""
    rng = np.random.default_rng(7)
    grid = Grid.over((START, START + np.timedelta64(SPAN_US, "us")), 1.0)
    # Everything on whole hours, so that the three ways must agree to the last hit.
    epochs = START + np.sort(rng.choice(grid.n - 72, 1237, replace=False)).astype("timedelta64[h]")
    starts, ends = (edge - grid.start_us for edge in union_us(epochs, (0.0, 3.0)))
    for size in (10_000, 100_000, 1_000_000):
        times = np.sort(rng.integers(0, SPAN_US, size))
        instants = START + times.astype("timedelta64[us]")
        all_s, hits = timed(
            lambda instants=instants: hits_at_all_shifts(
                window_mask(grid, epochs, (0.0, 3.0)), bin_counts(grid, instants)
            )
        )
        chosen = rng.choice(grid.n, PLAIN_SHIFTS, replace=False)
        shifts = chosen * grid.step_us
        move_s, moved = timed(
            lambda times=times, s=shifts: moving_earthquakes(times, starts, ends, s)
        )
        slide_s, slid = timed(lambda times=times, s=shifts: moving_windows(times, starts, ends, s))
        assert hits[chosen].tolist() == moved == slid
        more = grid.n / PLAIN_SHIFTS
        print(
            f"{size:>9,} earthquakes: all {grid.n:,} shifts {all_s:.2f} s; {PLAIN_SHIFTS} plain "
            f"shifts moving earthquakes {move_s:.2f} s (ratio {move_s / all_s:.1f}, per shift "
            f"{more * move_s / all_s:,.0f}), moving windows {slide_s:.2f} s (ratio "
            f"{slide_s / all_s:.2f}, per shift {more * slide_s / all_s:,.0f})"
        )


if __name__ == "__main__":
    main()
