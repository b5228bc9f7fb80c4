"""Groupings of the whole kernel, against a plain grid fine enough to find short visits.

Run from the repository root: ``python -m tests.bench.bench_groupings``.
"""

from __future__ import annotations

import resource
import time
from typing import Any

import numpy as np
from epochtest.sky.directions import geometric_vectors, spherical
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.groupings import find_groupings
from epochtest.timescale import tdb_days_from_utc

PLANETS: Any = (
    "mercury", "venus", "earth", "mars", "jupiter", "saturn", "uranus", "neptune",
)  # fmt: skip
SEEN: Any = ("moon", "sun", "mercury", "venus", "mars", "jupiter", "saturn", "uranus", "neptune")
# A minute is still 600,000 times coarser than the instants of the search. The twin is timed over
# a share of the span and scaled by its length.
TWIN_STEP_DAYS = 1.0 / 1440.0
TWIN_DAYS = 365.25
FIRST_DAY = -160000.0  # in 1561
EPHEMERIS = open_ephemeris("DE440")


def _twin_s(centre: Any, bodies: Any, first: float) -> float:
    """Time per day of span for the widths on the twin's grid."""
    start = time.perf_counter()
    for day in np.arange(first, first + TWIN_DAYS, 10.0):
        grid = day + np.arange(0.0, 10.0, TWIN_STEP_DAYS)
        vectors = geometric_vectors(EPHEMERIS, centre, bodies, grid)
        longitudes = np.sort([spherical(xyz)[0] for xyz in vectors], axis=0)
        gaps = np.diff(longitudes, axis=0, append=longitudes[:1] + 360.0)
        (360.0 - gaps.max(axis=0)).min()
    return (time.perf_counter() - start) / TWIN_DAYS


def main() -> None:
    """Print one line per case: rows, time, and the ratio to the twin's time."""
    whole = EPHEMERIS.covered_utc
    tenth = whole[0], whole[0] + (whole[1] - whole[0]) // 10
    find_groupings(EPHEMERIS, "sun", PLANETS, 90.0, *tenth)  # warm
    for centre, bodies, below in (
        ("sun", PLANETS, 90.0),
        ("sun", PLANETS, 180.0),
        ("earth", SEEN, 90.0),
        ("earth", SEEN, 180.0),
        ("earth", SEEN[:1] + SEEN[4:6], 30.0),
    ):
        took, rows = [], []
        for span in (tenth, whole):
            start = time.perf_counter()
            rows.append(len(find_groupings(EPHEMERIS, centre, bodies, below, *span)))  # type: ignore[arg-type]
            took.append(time.perf_counter() - start)
        days = float(np.diff(tdb_days_from_utc(np.array(whole)))[0])
        twin = _twin_s(centre, bodies, FIRST_DAY) * days
        print(
            f"groupings: {len(bodies)} bodies within {below:g} deg from the {centre}, 1,100 years: "
            f"{rows[1]} visits in {took[1]:.2f} s ({took[0]:.2f} s for a tenth of the span), "
            f"{twin / took[1]:.0f} times as fast as a grid of one minute (scaled from a year), "
            f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6:.2f} GB"
        )


if __name__ == "__main__":
    main()
