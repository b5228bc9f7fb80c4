"""example_rendered/ is what the template makes today, and anybody gets the same numbers.

The authority is the project's own promise; the committed folder is the reference.
"""

from __future__ import annotations

import importlib.util
import json
import math
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest
from epochtest.pipeline.plan import Plan
from epochtest.pipeline.store import Store
from epochtest.study.load import load_study

from tests.studies import REPOSITORY, tree

EXAMPLE = REPOSITORY / "example_rendered"
REFRESH = "run `make example` and commit the result"
# Results are written with 12 significant digits; another processor may round the last sums
# differently, so numbers are compared to 9.
RELATIVE = 1e-9


@pytest.fixture(scope="module")
def maker() -> ModuleType:
    """The script behind `make example`."""
    spec = importlib.util.spec_from_file_location(
        "make_example", REPOSITORY / "demo" / "make_example.py"
    )
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def fresh(maker: ModuleType, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The demo study generated now, not yet run."""
    return Path(maker.generate(tmp_path_factory.mktemp("fresh")))


def same(one: Any, other: Any, where: str = "") -> None:
    """Assert that two JSON values agree, numbers to RELATIVE."""
    if isinstance(one, dict) and isinstance(other, dict):
        assert one.keys() == other.keys(), where
        for name in one:
            same(one[name], other[name], f"{where}.{name}")
    elif isinstance(one, list) and isinstance(other, list):
        assert len(one) == len(other), where
        for index, (a, b) in enumerate(zip(one, other, strict=True)):
            same(a, b, f"{where}[{index}]")
    elif isinstance(one, float) and isinstance(other, float):
        assert math.isclose(one, other, rel_tol=RELATIVE), (where, one, other)
    else:
        assert one == other, where


def test_generated_files_are_current(fresh: Path) -> None:
    """Every file that generating makes stands in example_rendered/ with the same bytes."""
    committed = {n: b for n, b in tree(EXAMPLE).items() if not n.startswith("runs/")}
    generated = {n: b for n, b in tree(fresh).items() if "__pycache__" not in n}
    committed = {n: b for n, b in committed.items() if "__pycache__" not in n}
    assert committed.keys() == generated.keys(), REFRESH
    assert [n for n in committed if committed[n] != generated[n]] == [], REFRESH


def test_artifacts_are_whole_and_keyed_by_what_the_study_is_now(fresh: Path) -> None:
    """The keys planned today name exactly the committed artifacts, and their hashes hold."""
    steps = Plan(load_study(fresh)).steps()
    store = Store(EXAMPLE)
    assert [step.slot.name for step in steps if not store.is_made(step.slot)] == [], REFRESH
    assert {path.name for path in (EXAMPLE / "runs/artifacts").iterdir()} == {
        step.slot.name for step in steps
    }, REFRESH


def test_a_stranger_gets_the_same_numbers(maker: ModuleType, fresh: Path) -> None:
    """Running the study again gives the committed results, to nine digits, and findings."""
    maker.execute(fresh)
    names = sorted(path.name for path in (EXAMPLE / "runs/results").iterdir())
    assert names == sorted(path.name for path in (fresh / "runs/results").iterdir())
    for name in names:
        one, other = (
            json.loads((root / "runs/results" / name).read_text(encoding="utf-8"))
            for root in (EXAMPLE, fresh)
        )
        same(one, other, name)
    for name in ("runs/findings.csv",):
        assert (EXAMPLE / name).read_bytes() == (fresh / name).read_bytes(), REFRESH


def test_the_demo_comes_out_as_planted() -> None:
    """One claim true, two false, one undecidable, two wrong about the sky (the demo's design)."""
    findings = {
        path.stem: json.loads(path.read_text(encoding="utf-8"))["finding"]
        for path in (EXAMPLE / "runs/results").iterdir()
    }
    assert findings == {
        "mercury-venus-conjunction": "excess",
        "full-moon": "none detected",
        "moon-perigee": "none detected",
        "mars-opposition": "cannot tell",
        "great-conjunctions": "disagree",
        "planet-tides": "disagree",
    }
