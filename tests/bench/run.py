"""All benchmarks, one after another: `make bench`, or `python tests/bench/run.py NAME ...`.

Each compares two ways of doing the same in one run and prints the ratio; nothing is asserted,
because machines differ.
"""

from __future__ import annotations

import importlib
import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
TEMPLATE = HERE.parent.parent / "{{cookiecutter.project_slug}}"


def main() -> None:
    """Run the benchmarks named on the command line, or all."""
    sys.path[:0] = [str(HERE), str(TEMPLATE), str(HERE.parent.parent)]
    found = sorted(path.stem for path in HERE.glob("bench_*.py"))
    wanted = [f"bench_{name.removeprefix('bench_')}" for name in sys.argv[1:]] or found
    if unknown := [name for name in wanted if name not in found]:
        sys.exit(f"no benchmark {', '.join(unknown)}; known: {', '.join(found)}")
    for name in wanted:
        print(f"== {name.removeprefix('bench_')}", flush=True)
        importlib.import_module(name).main()


if __name__ == "__main__":
    main()
