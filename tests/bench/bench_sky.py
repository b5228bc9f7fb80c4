"""Searching one pair of bodies over 150 years, against Skyfield's general event search.

Run from the repository root: ``python -m tests.bench.bench_sky``.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from importlib.resources import files
from typing import Any

import numpy as np
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.events import find_epochs
from epochtest.sky.find import find_event
from epochtest.study.events import LongitudeDifference, MoonPhase
from epochtest.timescale import J2000_JD, tdb_days_from_utc
from skyfield import almanac
from skyfield.api import load, load_file
from skyfield.framelib import ecliptic_J2000_frame
from skyfield.searchlib import find_discrete

SPAN = np.datetime64("1900-01-01", "us"), np.datetime64("2050-01-01", "us")
STEP_DAYS = 40.0
REPEATS = 5


def _best_s(call: Callable[[], Any], repeats: int) -> tuple[float, Any]:
    """Shortest wall time of ``repeats`` calls, and the last result."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        result = call()
        times.append(time.perf_counter() - start)
    return min(times), result


def main() -> None:
    """Print one line: both ratios of times, and how far the instants lie apart."""
    scale = load.timescale(builtin=True)
    kernel = load_file(str(files("skyfield_data").joinpath("data/de421.bsp")))
    sun, venus, earth = kernel["sun"], kernel["venus"], kernel["earth"]
    first, last = (scale.tdb_jd(J2000_JD + d) for d in tdb_days_from_utc(np.array(SPAN)))

    def ahead(instants: Any) -> Any:
        one = (venus - sun).at(instants).frame_latlon(ecliptic_J2000_frame)[1].degrees
        other = (earth - sun).at(instants).frame_latlon(ecliptic_J2000_frame)[1].degrees
        return (one - other) % 360.0 < 180.0

    ahead.step_days = STEP_DAYS  # type: ignore[attr-defined]
    pair = LongitudeDifference(centre="sun", bodies=("venus", "earth"), aspect="conjunction")
    phases = MoonPhase(
        phases=("new", "first-quarter", "full", "last-quarter"), frame="apparent-of-date"
    )
    ephemeris = open_ephemeris("DE421")
    find_event(pair, ephemeris, *SPAN)  # all sides start warm
    find_epochs(pair, ephemeris, *SPAN)
    find_discrete(first, last, ahead)

    ours_s, ours = _best_s(lambda: find_epochs(pair, ephemeris, *SPAN), REPEATS)
    as_lineup_s, _ = _best_s(lambda: find_event(pair, ephemeris, *SPAN), REPEATS)
    theirs_s, (instants, now_ahead) = _best_s(lambda: find_discrete(first, last, ahead), REPEATS)
    theirs = (
        instants.tdb[np.asarray(now_ahead, dtype=bool)] - J2000_JD
    )  # the other half are oppositions
    assert len(theirs) == len(ours)
    apart_s = np.abs(theirs - ours["tdb_days"].to_numpy()).max() * 86400.0

    # A tenth of the span: with its nutation series Skyfield needs a while.
    short = SPAN[0], SPAN[0] + np.timedelta64(5479, "D")
    until = scale.tdb_jd(J2000_JD + float(tdb_days_from_utc(short[1])))
    moon_s, moon = _best_s(lambda: find_epochs(phases, ephemeris, *short), REPEATS)
    almanac_s, (quarters, _) = _best_s(
        lambda: almanac.find_discrete(first, until, almanac.moon_phases(kernel)), 1
    )
    assert len(quarters) == len(moon)
    moon_apart_s = np.abs(quarters.tdb - J2000_JD - moon["tdb_days"].to_numpy()).max() * 86400.0
    print(
        f"sky: {len(ours)} heliocentric Venus-Earth conjunctions in 150 years "
        f"{theirs_s / ours_s:.0f} times as fast as Skyfield's event search "
        f"({ours_s * 1e3:.1f} ms against {theirs_s * 1e3:.0f} ms, {apart_s * 1e3:.1f} ms apart), "
        f"{theirs_s / as_lineup_s:.0f} times as a selection of the line-ups, as a study does it "
        f"({as_lineup_s * 1e3:.1f} ms); "
        f"{len(moon)} apparent Moon phases in 15 years {almanac_s / moon_s:.0f} times "
        f"({moon_s * 1e3:.1f} ms against {almanac_s * 1e3:.0f} ms, {moon_apart_s * 1e3:.0f} ms "
        "apart)"
    )


if __name__ == "__main__":
    main()
