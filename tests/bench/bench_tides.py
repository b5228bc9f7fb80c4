"""Tidal stress around 10^5 earthquakes at 97 instants each, against a plain loop over them.

The loop does for one earthquake what a careful user would write: ask the kernel at the 97
instants, turn the bodies into the Earth's axes, resolve strain on both planes. It is timed on
the first earthquakes only and compared per earthquake. Each size has a process of its own, so
that its peak memory is its own. Times are CPU seconds, wall seconds beside them.
"""

from __future__ import annotations

import resource
import subprocess
import sys
import time
from pathlib import Path

import numpy as np

LIBRARY = Path(__file__).resolve().parents[2] / "{{cookiecutter.project_slug}}"
SIZES = (1_000, 10_000, 100_000)
SUBSET = 200
SEED = 20260110


def made_up(n: int):  # type: ignore[no-untyped-def]
    """Random instants 1970-2019, places and mechanisms of ``n`` earthquakes."""
    from epochtest.sky.fault import Mechanism

    random = np.random.default_rng(SEED)
    microseconds = np.sort(random.uniform(0.0, 50 * 365.25 * 86400e6, n))
    times = np.datetime64("1970-01-01", "us") + microseconds.astype("timedelta64[us]")
    lat = np.degrees(np.arcsin(random.uniform(-1.0, 1.0, n)))
    lon, depth = random.uniform(-180.0, 180.0, n), random.uniform(0.0, 70.0, n)
    strike, dip = random.uniform(0.0, 360.0, n), random.uniform(0.0, 90.0, n)
    return times, lat, lon, depth, Mechanism.of(strike, dip, random.uniform(-180.0, 180.0, n))


def plain_loop(ephemeris, times, lat, lon, _, mechanism):  # type: ignore[no-untyped-def]
    """Coulomb stress (2, n, 97) in Pa, one earthquake at a time, every instant from the kernel."""
    from epochtest.sky.body_tide import surface_strain, surface_stress
    from epochtest.sky.earth_fixed import earth_points
    from epochtest.sky.fault import Mechanism, auxiliary_plane, resolve
    from epochtest.timescale import tdb_days_from_utc

    hours = np.arange(-48.0, 49.0)
    found = np.empty((2, len(times), hours.size))
    for i, instant in enumerate(times):
        days = tdb_days_from_utc(instant) + hours / 24.0
        strain = surface_strain(ephemeris, days, earth_points(lat[i], lon[i]))
        stress = surface_stress(strain)
        tensor = np.zeros((3, 3, hours.size))
        tensor[0, 0], tensor[1, 1] = stress.nn[0], stress.ee[0]
        tensor[0, 1] = tensor[1, 0] = stress.ne[0]
        plane = Mechanism(*(angle[i : i + 1] for angle in mechanism))
        for k, each in enumerate((plane, auxiliary_plane(plane))):
            found[k, i] = resolve(tensor, each).coulomb_pa
    return found


def measure(way: str, n: int) -> None:
    """Print CPU and wall seconds and peak memory in MB, before and after, of one way."""
    sys.path.insert(0, str(LIBRARY))
    from epochtest.sky.ephemeris import open_ephemeris
    from epochtest.sky.tidal_phase import tidal_phase, tidal_series

    ephemeris = open_ephemeris("DE440")
    asked = made_up(n)
    few = (*(part[:5] for part in asked[:4]), type(asked[4])(*(a[:5] for a in asked[4])))
    tidal_phase(ephemeris, *few)  # imports and tables
    work = {"series": tidal_series, "phase": tidal_phase, "loop": plain_loop}[way]
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    cpu, wall = time.process_time(), time.perf_counter()
    result = work(ephemeris, *asked)
    cpu, wall = time.process_time() - cpu, time.perf_counter() - wall
    if way == "loop":
        apart = np.abs(result - tidal_series(ephemeris, *asked).stress_pa).max()
        if apart > 0.1:  # Pa
            raise SystemExit(f"the two ways differ by {apart} Pa")
    after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(cpu, wall, before, after)


def child(way: str, n: int) -> list[float]:
    """`measure` in a fresh process."""
    command = [sys.executable, __file__, way, str(n)]
    output = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    return [float(value) for value in output.split()]


def main() -> None:
    """Print the table and the ratio."""
    loop = child("loop", SUBSET)
    each = loop[0] / SUBSET
    print(f"plain loop, {SUBSET} earthquakes x 97: {loop[0]:.2f} s CPU, {1e3 * each:.2f} ms each")
    print("earthquakes x 97 |  series CPU s  wall s  peak MB (before) |   phases CPU s  wall s  "
          "peak MB (before) | loop / series per earthquake")  # fmt: skip
    taken = []
    for n in SIZES:
        series, phase = child("series", n), child("phase", n)
        taken.append(series[0])
        print(
            f"{n:>16} | {series[0]:>13.2f} {series[1]:>7.2f} {series[3]:>8.0f} ({series[2]:.0f})"
            f"    | {phase[0]:>14.2f} {phase[1]:>7.2f} {phase[3]:>8.0f} ({phase[2]:.0f})"
            f"    | {each * n / series[0]:>8.1f}"
        )
    exponents = np.diff(np.log(taken)) / np.diff(np.log(SIZES))
    print("growth exponent of the series:", ", ".join(f"{e:.2f}" for e in exponents))


if __name__ == "__main__":
    if len(sys.argv) == 3:
        measure(sys.argv[1], int(sys.argv[2]))
    else:
        main()
