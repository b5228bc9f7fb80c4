"""The structure of DESIGN.md: imports point downwards, every module stands alone."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

from tests.studies import PYTHON_ENVIRONMENT, TEMPLATE

LIBRARY = TEMPLATE / "epochtest"
# Lower numbers are lower layers; a module may import its own layer and lower ones only.
LAYER = {
    "errors": 0,
    "timescale": 0,
    "files": 0,
    "study": 1,
    "catalog": 2,
    "sky": 2,
    "inference": 3,
    "charts": 4,
    "tables": 4,
    "pipeline": 5,
    "cli": 6,
    "__main__": 7,
}
STRANGERS = [{"catalog", "sky"}, {"charts", "tables"}]
ONLY_IN = {"altair": {"charts"}, "vl_convert": {"charts"}, "papermill": {"pipeline"}}
LONGEST_MODULE = 320


def modules() -> list[Path]:
    """Every module of the library."""
    return sorted(path for path in LIBRARY.rglob("*.py") if path != LIBRARY / "__init__.py")


def part(path: Path) -> str:
    """The layer a module belongs to: its first folder, or its own name."""
    return path.relative_to(LIBRARY).with_suffix("").parts[0]


def imported(path: Path) -> set[str]:
    """Full names of everything a module imports, also inside functions."""
    names = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            names |= {f"{node.module}.{alias.name}" for alias in node.names}
    return names


@pytest.mark.parametrize("path", modules(), ids=lambda p: p.relative_to(LIBRARY).as_posix())
def test_imports_point_downwards(path: Path) -> None:
    """A module imports its own layer or lower ones, and never a stranger beside it (DESIGN.md)."""
    mine = part(path)
    for name in imported(path):
        top = name.split(".")[0]
        if top in ONLY_IN:
            assert mine in ONLY_IN[top], f"{path.name} imports {top}"
        if top != "epochtest" or name == "epochtest.__version__":
            continue
        other = name.split(".")[1]
        assert LAYER[other] <= LAYER[mine], f"{mine} imports {name}"
        for pair in STRANGERS:
            if mine in pair and other != mine:
                assert other not in pair or mine == "charts", f"{mine} imports {name}"


def test_modules_stay_one_idea() -> None:
    """No module has grown beyond what one reading holds (STYLE.md: about 300 lines)."""
    lengths = {p.name: len(p.read_text(encoding="utf-8").splitlines()) for p in modules()}
    assert {name: n for name, n in lengths.items() if n > LONGEST_MODULE} == {}


ALONE = """
import importlib, os, sys
import numpy, pandas, pyarrow, scipy.fft, pydantic, click  # shared by nearly all: loaded once
failed = []
for name in sys.argv[1:]:
    child = os.fork()
    if child == 0:
        try:
            importlib.import_module(name)
        except BaseException as error:
            print(name, repr(error), flush=True)
            os._exit(1)
        os._exit(0)
    if os.waitpid(child, 0)[1] != 0:
        failed.append(name)
sys.exit(bool(failed))
"""


@pytest.mark.skipif(sys.platform == "win32", reason="needs fork to try 80 modules in seconds")
def test_every_module_imports_alone() -> None:
    """Each module can be the first one imported: no hidden order (STYLE.md)."""
    names = [
        "epochtest." + ".".join(path.relative_to(LIBRARY).with_suffix("").parts)
        for path in modules()
        if path.name not in ("__main__.py",)
    ]
    names = [name.removesuffix(".__init__") for name in names]
    done = subprocess.run(
        [sys.executable, "-c", ALONE, *names],
        env=PYTHON_ENVIRONMENT,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr[-2000:]
