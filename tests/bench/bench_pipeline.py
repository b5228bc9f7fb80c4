"""The pipeline's overhead per notebook, and an unchanged re-run against a first run."""

from __future__ import annotations

import tempfile
import time
import warnings
from pathlib import Path

import nbformat

from tests.studies import command, small_study

REPEATS = 5


def _timed(work, repeats: int = REPEATS) -> float:  # type: ignore[no-untyped-def]
    """Median wall time in seconds."""
    spent = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        spent.append(time.perf_counter() - start)
    return sorted(spent)[len(spent) // 2]


def main() -> None:
    """Print both ratios."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import papermill
        from epochtest.pipeline.execute import execute

        with tempfile.TemporaryDirectory() as scratch:
            folder = Path(scratch)
            empty = folder / "empty.ipynb"
            cell = nbformat.v4.new_code_cell("x = 1", metadata={"tags": ["parameters"]})
            nbformat.write(
                nbformat.v4.new_notebook(
                    cells=[cell],
                    metadata={
                        "kernelspec": {
                            "name": "python3",
                            "display_name": "Python 3",
                            "language": "python",
                        }
                    },
                ),
                empty,
            )
            output = folder / "out.ipynb"

            def ours() -> None:
                execute(empty, output, {"x": 2}, folder)

            def plain() -> None:
                papermill.execute_notebook(
                    str(empty), str(output), {"x": 2}, kernel_name="python3", progress_bar=False
                )

            ours(), plain()
            one, other = _timed(ours), _timed(plain)
            print(
                f"empty notebook, own interpreter and normal form: {one:.2f} s; plain papermill: "
                f"{other:.2f} s; ratio {one / other:.2f}"
            )
    with tempfile.TemporaryDirectory() as scratch:
        study = small_study(Path(scratch) / "study")
        first = _timed(lambda: command(study, "run").check_returncode(), 1)
        again = _timed(lambda: command(study, "run").check_returncode(), 3)
        print(
            f"first run of a small study (6 artifacts): {first:.1f} s; unchanged re-run: "
            f"{again:.1f} s; ratio {first / again:.1f}"
        )


if __name__ == "__main__":
    main()
