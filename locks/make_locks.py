"""Compile the four hashed locks so that a package has one version in all of them.

The study's dependencies are read from its pyproject.toml, so they are stated once. One
resolution over everything comes first; each lock is then compiled under its pins. Needs uv
on the PATH, or its path in the variable UV. ``--upgrade`` takes newer versions where they
exist; without it the versions already locked are kept.
"""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import tempfile
import tomllib
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
STUDY = ROOT / "{{cookiecutter.project_slug}}"
DEMO = ["cookiecutter>=2.7"]
DEV = [
    "astronomy-engine>=2.1",
    "astropy>=7",
    "ephem>=4.2",
    "pysolid>=0.3",
    "hypothesis>=6.100",
    "jsonschema>=4.23",
    "mypy>=1.15",
    "pandas-stubs>=3",
    "pymeeus>=0.5.12",
    "pytest>=8.3",
    "pytest-xdist>=3.6",
    "pyyaml>=6",
    "ruff>=0.9",
]
HEADER = "# Made by `make lock`; do not edit. Runs on Python 3.11 and later.\n"


def study_dependencies() -> tuple[list[str], list[str]]:
    """The run dependencies and the lab group of the study's pyproject.toml.

    The file is a template, and valid TOML as it stands because its Jinja stays inside strings.
    """
    content = tomllib.loads((STUDY / "pyproject.toml").read_text(encoding="utf-8"))
    return content["project"]["dependencies"], content["dependency-groups"]["lab"]


def compile_lock(uv: str, wanted: list[str], pins: Path | None, lock: Path) -> None:
    """Resolve ``wanted`` for all platforms and write the hashed ``lock``."""
    command = [uv, "pip", "compile", "-", "--universal", "--python-version", "3.11"]
    # One version for every Python: artifacts are keyed by versions, and a reviewer's Python must
    # not change the numbers.
    command += ["--fork-strategy", "fewest"]
    command += ["--generate-hashes", "--no-annotate", "--no-header", "--no-emit-index-url"]
    command += ["--output-file", str(lock), "--quiet"]
    if pins is not None:
        command += ["--constraint", str(pins)]
    subprocess.run(command, input="\n".join(wanted) + "\n", text=True, check=True)


def main(arguments: list[str]) -> None:
    """Make all locks; existing pins are the preferred versions unless ``--upgrade``."""
    uv = os.environ.get("UV") or shutil.which("uv")
    if uv is None:
        raise SystemExit("make lock needs uv: install it, or name its path in UV=...")
    run, lab = study_dependencies()
    targets = {
        STUDY / "requirements.lock": run,
        STUDY / "requirements-lab.lock": run + lab,
        ROOT / "requirements-demo.lock": run + DEMO,
        ROOT / "requirements-dev.lock": run + DEMO + DEV,
    }
    with tempfile.TemporaryDirectory() as scratch:
        everything = Path(scratch) / "everything.txt"
        if "--upgrade" not in arguments:
            known = [lock.read_text(encoding="utf-8") for lock in targets if lock.is_file()]
            everything.write_text("".join(known), encoding="utf-8")
        compile_lock(uv, run + lab + DEMO + DEV, None, everything)
        for lock, wanted in targets.items():
            fresh = Path(scratch) / lock.name
            compile_lock(uv, wanted, everything, fresh)
            lock.write_text(HEADER + fresh.read_text(encoding="utf-8"), encoding="utf-8")
            print(f"{lock.relative_to(ROOT)}: {lock.read_text(encoding='utf-8').count('==')} pins")


if __name__ == "__main__":
    main(sys.argv[1:])
