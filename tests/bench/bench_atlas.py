"""The atlas of all line-ups, against one event search after another with Skyfield.

Run from the repository root: ``python tests/bench/run.py atlas``.
"""

from __future__ import annotations

import subprocess
import sys
import time
from collections.abc import Callable
from importlib.resources import files
from pathlib import Path
from typing import Any

import numpy as np
from epochtest.sky.atlas import BODIES, STEPS_PER_PERIOD, SUN_AND_PLANETS, find_lineups
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.events import LONGEST_STEP_DAYS, PERIOD_DAYS
from epochtest.timescale import J2000_JD, tdb_days_from_utc
from skyfield.api import load, load_file
from skyfield.framelib import ecliptic_J2000_frame
from skyfield.searchlib import find_discrete

SPAN = np.datetime64("1900-01-01", "us"), np.datetime64("2050-01-01", "us")
REPEATS = 5
WITH_MOON = (*SUN_AND_PLANETS, "moon")
# Centre, pair, and how many of the 84 triples have the same fastest body: the sample stands for
# these. Seen from one of the three, conjunctions and oppositions of the other two are all the
# line-ups of a triple, so that 84 searches find what the atlas finds.
SAMPLE: list[tuple[str, tuple[str, str], int]] = [
    ("sun", ("mercury", "jupiter"), 14),
    ("earth", ("mercury", "venus"), 14),
    ("sun", ("venus", "earth"), 11),
    ("mars", ("venus", "jupiter"), 10),
    ("sun", ("earth", "uranus"), 8),
    ("earth", ("saturn", "neptune"), 7),
    ("jupiter", ("mars", "saturn"), 10),
    ("sun", ("jupiter", "saturn"), 10),
]
_LONG_RUN = """
import resource, sys, time
sys.path.insert(0, sys.argv[1])
from epochtest.sky.atlas import find_lineups
from epochtest.sky.ephemeris import open_ephemeris
ephemeris = open_ephemeris("DE440")
first, last = ephemeris.covered_utc
start = time.perf_counter()
until = first + (last - first) // int(sys.argv[2])
rows = len(find_lineups(ephemeris, sys.argv[3].split(","), first, until))
unit = 2**20 if sys.platform == "darwin" else 2**10
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / unit
print(rows, time.perf_counter() - start, peak)
"""
assert sum(stands_for for *_, stands_for in SAMPLE) == 84


def _best_s(call: Callable[[], Any], repeats: int) -> tuple[float, Any]:
    """Shortest wall time of ``repeats`` calls, and the last result."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        result = call()
        times.append(time.perf_counter() - start)
    return min(times), result


def _skyfield_search(
    kernel: Any, edges: tuple[Any, Any], centre: str, pair: tuple[str, str]
) -> tuple[float, Any]:
    """Seconds and instants (days of TDB since J2000.0) of one search, with the atlas's step."""

    def place(name: str) -> Any:
        return kernel[name if name in ("sun", "earth") else f"{name} barycenter"]

    seen = [place(name) - place(centre) for name in pair]

    def half(instants: Any) -> Any:
        one, other = (
            vector.at(instants).frame_latlon(ecliptic_J2000_frame)[1].degrees for vector in seen
        )
        return (one - other) % 360.0 < 180.0

    shortest = min(PERIOD_DAYS[name] for name in (centre, *pair) if name != "sun")
    half.step_days = min(LONGEST_STEP_DAYS, shortest / STEPS_PER_PERIOD)  # type: ignore[attr-defined]
    seconds, (instants, _) = _best_s(lambda: find_discrete(*edges, half), 2)
    return seconds, instants.tdb - J2000_JD


def _long_run(bodies: tuple[str, ...], parts: int) -> tuple[int, float, float]:
    """Rows, seconds and peak memory (MB) of a process that searches a part of DE440."""
    template = Path(sys.modules["epochtest"].__path__[0]).parent
    done = subprocess.run(
        [sys.executable, "-c", _LONG_RUN, str(template), str(parts), ",".join(bodies)],
        capture_output=True,
        text=True,
        check=True,
    )
    rows, seconds, peak_mb = done.stdout.split()
    return int(rows), float(seconds), float(peak_mb)


def main() -> None:
    """Print the ratio of times for 84 triples, and time and memory of the whole long kernel."""
    ephemeris = open_ephemeris("DE421")
    find_lineups(ephemeris, SUN_AND_PLANETS, *SPAN)  # warm
    ours_s, atlas = _best_s(lambda: find_lineups(ephemeris, SUN_AND_PLANETS, *SPAN), REPEATS)

    scale = load.timescale(builtin=True)
    kernel = load_file(str(files("skyfield_data").joinpath("data/de421.bsp")))
    edges = tuple(scale.tdb_jd(J2000_JD + d) for d in tdb_days_from_utc(np.array(SPAN)))
    theirs_s, apart_s, missed = 0.0, 0.0, 0
    for centre, pair, stands_for in SAMPLE:
        seconds, theirs = _skyfield_search(kernel, edges, centre, pair)
        theirs_s += seconds * stands_for
        three = {centre, *pair}
        rows = atlas[atlas[["first", "middle", "last"]].isin(three).all(axis=1)]
        ours = rows["tdb_days"].to_numpy()
        missed += ours.size - theirs.size
        nearest = np.abs(ours[:, None] - theirs).min(axis=0)
        apart_s = max(apart_s, nearest.max() * 86400.0)
    ratio = theirs_s / ours_s
    print(
        f"atlas: {len(atlas)} line-ups of 84 triples in 150 years {ratio:.0f} times as fast as "
        f"Skyfield's event search ({ours_s:.3f} s against {theirs_s:.1f} s for 84 searches, scaled "
        f"by number from {len(SAMPLE)} that were timed, with the same steps; these lack {missed} "
        f"line-ups; instants {apart_s * 1e3:.1f} ms apart at most). Against a search for each of "
        f"252 pairs and centres, which finds every line-up three times: {3.0 * ratio:.0f} times"
    )
    for parts, bodies in ((4, WITH_MOON), (2, WITH_MOON), (1, WITH_MOON), (1, BODIES)):
        count, seconds, peak_mb = _long_run(bodies, parts)
        print(
            f"atlas: {count} line-ups of {len(bodies)} bodies in {1100 // parts} years of DE440 in "
            f"{seconds:.1f} s, peak memory {peak_mb:.0f} MB"
        )


if __name__ == "__main__":
    main()
