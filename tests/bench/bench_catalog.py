"""How long reading and cleaning a catalog takes, how it grows, and against a plain loop.

Run from the repository root: ``python tests/bench/bench_catalog.py``. Each measurement has a
process of its own, so that its peak memory is its own. Times are CPU seconds of all threads,
which a busy machine distorts less than wall time; wall time stands beside the whole.
The ratio compares like with like: text to typed columns (read) against csv.DictReader with
datetime.fromisoformat and float. Cleaning has no plain counterpart here.
"""

from __future__ import annotations

import csv
import math
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path

import numpy as np

SIZES = (10_000, 100_000, 1_000_000)
SEED = 20260101
LIBRARY = Path(__file__).resolve().parents[2] / "{{cookiecutter.project_slug}}"


def write_catalog(path: Path, n: int) -> None:
    """An invented catalog of ``n`` rows: 50 years, 0.1 % repeated ids, 0.1 % faulty."""
    random = np.random.default_rng(SEED)
    start = np.datetime64("1970-01-01", "ms")
    times = start + np.sort(random.integers(0, 50 * 365 * 86_400_000, n)).astype("timedelta64[ms]")
    latitude, longitude = random.uniform(-80, 80, n), random.uniform(-180, 180, n)
    depth, magnitude = random.exponential(50, n), 4.0 + random.exponential(0.43, n)
    with path.open("w", newline="", encoding="utf-8") as stream:
        stream.write("time,latitude,longitude,depth,mag,magType,net,id,updated,place,type\n")
        for i, row in enumerate(
            zip(np.datetime_as_string(times), latitude, longitude, depth, magnitude, strict=True)
        ):
            t, lat, lon, d, m = row
            size = "" if i % 1000 == 7 else f"{m:.1f}"
            name = i - 1 if i % 1000 == 5 else i
            stream.write(
                f'{t}Z,{lat:.4f},{lon:.4f},{d:.1f},{size},mb,xx,xx{name:08d},{t}Z,"{i} km off, A",'
                "earthquake\n"
            )


def read_and_clean(path: Path) -> int:
    """The library's whole way; rows kept."""
    sys.path.insert(0, str(LIBRARY))
    from epochtest.catalog.clean import clean
    from epochtest.catalog.read import read_catalog
    from epochtest.study.settings import CatalogSettings

    settings = CatalogSettings(files=(path.name,))
    with clock():
        cleaned = clean(read_catalog(path, path.name, settings), settings)
    return len(cleaned.kept)


def read(path: Path) -> int:
    """The library's reading alone, to typed columns; rows read."""
    sys.path.insert(0, str(LIBRARY))
    from epochtest.catalog.fields import decimals, text_array
    from epochtest.catalog.read import read_catalog
    from epochtest.catalog.times import parse_times
    from epochtest.study.settings import CatalogSettings

    settings = CatalogSettings(files=(path.name,))
    with clock():
        raw = read_catalog(path, path.name, settings)
        times = parse_times(text_array(raw["time"]))
        for name in ("latitude", "longitude", "depth", "magnitude"):
            decimals(text_array(raw[name]))
    return len(times.utc)


def plain(path: Path) -> int:
    """Reading row by row, to typed tuples; rows read."""
    rows = []
    with clock(), path.open(newline="", encoding="utf-8") as stream:
        for row in csv.DictReader(stream):
            magnitude = float(row["mag"]) if row["mag"] else math.nan
            rows.append(
                (
                    row["id"], datetime.fromisoformat(row["time"]), float(row["latitude"]),
                    float(row["longitude"]), float(row["depth"]), magnitude, row["type"],
                )
            )  # fmt: skip
    return len(rows)


@contextmanager
def clock() -> Iterator[None]:
    """Print CPU and wall seconds of the block."""
    cpu, wall = time.process_time(), time.perf_counter()
    yield
    print(time.process_time() - cpu, time.perf_counter() - wall)


WAYS: dict[str, Callable[[Path], int]] = {"whole": read_and_clean, "read": read, "plain": plain}


def measure(way: str, path: Path) -> tuple[float, float, int, float]:
    """CPU and wall seconds, rows, and peak memory in MB of one way in a fresh process."""
    output = subprocess.run(
        [sys.executable, __file__, way, str(path)], check=True, capture_output=True, text=True
    ).stdout
    cpu, wall, rows, peak = output.split()
    return float(cpu), float(wall), int(rows), float(peak)


def main() -> None:
    """Print the table."""
    print("     rows  file MB | read+clean CPU s  wall s  peak MB | read CPU s  plain CPU s  ratio")
    taken = []
    with tempfile.TemporaryDirectory() as folder:
        for n in SIZES:
            path = Path(folder) / f"{n}.csv"
            write_catalog(path, n)
            cpu, wall, _, peak = measure("whole", path)
            fast, slow = measure("read", path), measure("plain", path)
            if fast[2] != slow[2]:
                raise SystemExit(f"the two ways read {fast[2]} and {slow[2]} rows")
            taken.append(cpu)
            print(
                f"{n:>9} {path.stat().st_size / 1e6:>8.1f} | {cpu:>16.2f} {wall:>7.2f} {peak:>8.0f}"
                f" | {fast[0]:>10.2f} {slow[0]:>12.2f} {slow[0] / fast[0]:>6.1f}"
            )
    exponents = np.diff(np.log(taken)) / np.diff(np.log(SIZES))
    print("growth exponent of read+clean:", ", ".join(f"{e:.2f}" for e in exponents))


if __name__ == "__main__":
    if len(sys.argv) == 3:
        count = WAYS[sys.argv[1]](Path(sys.argv[2]))
        print(count, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024)
    else:
        main()
