"""Small studies for tests: real protocol files, a made-up catalog, the notebooks as shipped."""

from __future__ import annotations

import hashlib
import os
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np

REPOSITORY = Path(__file__).resolve().parent.parent
TEMPLATE = REPOSITORY / "{{cookiecutter.project_slug}}"
PYTHON_ENVIRONMENT = {**os.environ, "PYTHONPATH": str(TEMPLATE), "PYTHONWARNINGS": "default"}

STUDY = """
[about]
title = "A small study"
question = "Does anything happen?"

[span]
start = 2000-01-01
end = 2010-01-01

[catalog]
files = ["catalogs/small.csv"]

[selection]
minimum_magnitude = 4.0
"""

CLAIM = """
id = "{id}"
title = "{title}"
statement = "More earthquakes follow."
window_days = [0.0, 3.0]
{extra}
[event]
{event}
"""

FULL_MOON = 'kind = "moon-phase"\nphases = ["full"]'
VENUS = (
    'kind = "longitude-difference"\ncentre = "sun"\nbodies = ["venus", "earth"]\n'
    'aspect = "conjunction"'
)


def catalog_text(n: int = 400, seed: int = 5) -> str:
    """``n`` made-up earthquakes of 2000-2010 across the dateline, as a delimited file."""
    rng = np.random.default_rng(seed)
    seconds = np.sort(rng.integers(0, 3653 * 86400, n))
    times = np.datetime64("2000-01-01T00:00:00") + seconds.astype("timedelta64[s]")
    magnitudes = 4.0 + np.floor(rng.exponential(0.43, n) * 10) / 10
    longitudes = np.mod(178.0 + rng.uniform(0, 4, n) + 180.0, 360.0) - 180.0
    lines = ["time,latitude,longitude,depth,mag,magType,id,type"]
    lines += [
        f"{time}Z,{-20 + k % 7 * 0.5:.2f},{lon:.3f},{10 + k % 50},{mag:.1f},mw,s{k:05d},earthquake"
        for k, (time, lon, mag) in enumerate(zip(times, longitudes, magnitudes, strict=True))
    ]
    return "\n".join(lines) + "\n"


def write_claim(root: Path, name: str, event: str = FULL_MOON, title: str = "", extra: str = ""):
    """Write claims/<name>.toml."""
    text = CLAIM.format(id=name, title=title or name, event=event, extra=extra)
    (root / "claims" / f"{name}.toml").write_text(text, encoding="utf-8")


def write_sources(root: Path, *names: str) -> None:
    """Write catalogs/sources.toml with the true hashes of the files named."""
    blocks = []
    for name in names:
        sha256 = hashlib.sha256((root / name).read_bytes()).hexdigest()
        blocks.append(
            f'[[source]]\nfile = "{name}"\norigin = "made up for a test"\n'
            f'licence = "CC0"\nsha256 = "{sha256}"\n'
        )
    (root / "catalogs" / "sources.toml").write_text("\n".join(blocks), encoding="utf-8")


def small_study(root: Path) -> Path:
    """A study of two claims and 400 earthquakes in ``root``."""
    (root / "claims").mkdir(parents=True)
    (root / "catalogs").mkdir()
    shutil.copytree(TEMPLATE / "notebooks", root / "notebooks")
    (root / "study.toml").write_text(STUDY, encoding="utf-8")
    (root / "catalogs" / "small.csv").write_text(catalog_text(), encoding="utf-8")
    write_sources(root, "catalogs/small.csv")
    write_claim(root, "full-moon")
    write_claim(root, "venus", VENUS, extra="minimum = {epochs = 5, earthquakes = 5}")
    return root


def command(root: Path, *words: str, **environment: str) -> subprocess.CompletedProcess[str]:
    """Run ``python -m epochtest WORDS`` in ``root``."""
    return subprocess.run(
        [sys.executable, "-m", "epochtest", *words],
        cwd=root,
        env={**PYTHON_ENVIRONMENT, **environment},
        capture_output=True,
        text=True,
        check=False,
        timeout=300,
    )


def tree(root: Path) -> dict[str, bytes]:
    """Every file below ``root`` with its content."""
    return {
        path.relative_to(root).as_posix(): path.read_bytes()
        for path in sorted(root.rglob("*"))
        if path.is_file()
    }
