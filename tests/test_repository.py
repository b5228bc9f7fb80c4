"""The scaffolding: locks, Makefile and the script that makes the demo catalog."""

from __future__ import annotations

import ast
import importlib.util
import re
import subprocess
import sys
import tomllib
from pathlib import Path
from types import ModuleType

import pandas as pd
import pytest
from epochtest.study.settings import Sources
from packaging.requirements import Requirement

ROOT = Path(__file__).resolve().parent.parent
TEMPLATE = ROOT / "{{cookiecutter.project_slug}}"
LOCKS = [
    TEMPLATE / "requirements.lock",
    TEMPLATE / "requirements-lab.lock",
    ROOT / "requirements-demo.lock",
    ROOT / "requirements-dev.lock",
]


def script(folder: str, name: str) -> ModuleType:
    """A script of the repository as a module."""
    spec = importlib.util.spec_from_file_location(name, ROOT / folder / f"{name}.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def pins(lock: Path) -> dict[str, set[str]]:
    """Package name to its pinned requirement lines; every one must carry a SHA-256."""
    found: dict[str, set[str]] = {}
    for block in re.split(r"\n(?=\S)", lock.read_text(encoding="utf-8")):
        if block.startswith("#"):
            continue
        line = block.splitlines()[0].rstrip(" \\")
        assert re.search(r"--hash=sha256:[0-9a-f]{64}", block), line
        found.setdefault(Requirement(line).name, set()).add(line)
    return found


def test_a_package_has_one_version_in_all_locks() -> None:
    """What two locks share they pin alike, so one environment can serve both."""
    versions: dict[str, set[str]] = {}
    for lock in LOCKS:
        for name, lines in pins(lock).items():
            specifiers = {str(Requirement(line).specifier) for line in lines}
            assert len(specifiers) == 1, (lock.name, name)  # the same on every Python
            assert versions.setdefault(name, specifiers) == specifiers, (lock.name, name)
    assert len(versions) > 100


@pytest.mark.parametrize("lock", LOCKS, ids=lambda path: path.name)
def test_locks_name_no_machine_and_no_host(lock: Path) -> None:
    """No address, index option or absolute path stands in a lock."""
    text = lock.read_text(encoding="utf-8")
    assert not re.search(r"://|--index|--find-links|(^|\s)/", text)


def test_locks_satisfy_what_is_asked_for() -> None:
    """Each stated dependency is pinned at a version inside its range."""
    maker = script("locks", "make_locks")
    run, lab = maker.study_dependencies()
    wanted = [run, run + lab, run + maker.DEMO, run + maker.DEMO + maker.DEV]
    assert run
    assert lab
    for lock, requirements in zip(LOCKS, wanted, strict=True):
        pinned = pins(lock)
        for requirement in map(Requirement, requirements):
            for line in pinned[requirement.name]:
                [exact] = Requirement(line).specifier
                assert requirement.specifier.contains(exact.version), (lock.name, line)


def test_jupyterlab_stays_out_of_what_runs_a_study() -> None:
    """JupyterLab slows every notebook start, so only the lab lock holds it."""
    assert [lock.name for lock in LOCKS if "jupyterlab" in pins(lock)] == ["requirements-lab.lock"]


@pytest.mark.parametrize("target", ["demo", "test", "example", "bench", "lint", "lock", "clean"])
def test_make_knows_its_targets(target: str) -> None:
    """make can plan each target, with the braces of the study's folder in the paths."""
    done = subprocess.run(
        ["make", "--dry-run", "--always-make", target],
        cwd=ROOT, capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert "Nothing to be done" not in done.stdout


def test_make_without_a_fit_python_says_so(tmp_path: Path) -> None:
    """Where no interpreter is new enough, make fails with the versions it looked for."""
    old = tmp_path / "bin" / "python3"
    old.parent.mkdir()
    old.write_text("#!/bin/sh\nexit 1\n", encoding="utf-8")
    old.chmod(0o755)
    for name in ("python3.13", "python3.12", "python3.11"):
        (tmp_path / "bin" / name).symlink_to(old)
    done = subprocess.run(
        ["make", "--file", str(ROOT / "Makefile"), ".venv/pyvenv.cfg"],
        cwd=tmp_path, capture_output=True, text=True, check=False,
        env={"PATH": f"{tmp_path / 'bin'}:/usr/bin:/bin"},
    )  # fmt: skip
    assert done.returncode != 0
    assert "No Python 3.11 or later" in done.stderr
    assert not (tmp_path / ".venv").exists()


def test_make_demo_runs_what_the_prompts_propose() -> None:
    """The folder that make demo enters is the one that the default answers name."""
    makefile = (ROOT / "Makefile").read_text(encoding="utf-8")
    assert "\nDEMO := build/tessaline-arc\n" in makefile
    assert "cookiecutter --no-input --default-config --output-dir build ." in makefile


def test_demo_catalog_is_what_its_script_makes(tmp_path: Path) -> None:
    """Running the script anew gives the committed catalog and source block, byte for byte."""
    subprocess.run(
        [sys.executable, str(ROOT / "demo" / "make_catalog.py"), str(tmp_path)],
        check=True, capture_output=True,
    )  # fmt: skip
    for name in ("tessaline-arc.csv", "sources.toml"):
        made = (tmp_path / "catalogs" / name).read_bytes()
        assert made == (TEMPLATE / "catalogs" / name).read_bytes(), name
    Sources.model_validate(tomllib.loads((tmp_path / "catalogs" / "sources.toml").read_text()))


def test_demo_catalog_holds_what_its_scenario_says() -> None:
    """About 6,000 rows on both sides of the dateline, in the span, with the planted blemishes."""
    frame = pd.read_csv(TEMPLATE / "catalogs" / "tessaline-arc.csv")
    assert 5500 <= len(frame) <= 6500
    assert (frame["longitude"] > 170).any()
    assert (frame["longitude"] < -170).any()
    assert frame["longitude"].abs().between(165, 180).all()
    assert frame["id"].is_unique
    assert frame["mag"].isna().sum() == 8
    assert (frame["type"] == "explosion").sum() == 7
    assert (frame["type"] == "volcanic eruption").sum() == 5
    assert frame["id"].str.startswith("bta").sum() == 20
    assert (frame["latitude"] > 90).sum() == 1
    times = pd.to_datetime(frame["time"], errors="coerce", utc=True)
    assert times.isna().sum() == 1
    assert times.dropna().between("1970-01-01", "2020-01-02", inclusive="left").all()


def test_what_the_library_imports_is_declared() -> None:
    """Each foreign package that the library imports is among the study's stated dependencies."""
    run, _ = script("locks", "make_locks").study_dependencies()
    declared = {re.sub("[-_.]+", "_", Requirement(each).name).lower() for each in run}
    distributions = {"vl_convert": "vl_convert_python"}
    imported = set()
    for path in (TEMPLATE / "epochtest").rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Import):
                imported |= {each.name.partition(".")[0] for each in node.names}
            elif isinstance(node, ast.ImportFrom) and node.module and not node.level:
                imported.add(node.module.partition(".")[0])
    foreign = imported - set(sys.stdlib_module_names) - {"epochtest"}
    assert {"numpy", "papermill"} <= foreign
    assert {distributions.get(name, name) for name in foreign} <= declared
