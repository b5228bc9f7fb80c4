"""One notebook through papermill, and its normal form.

Success is what papermill raises or does not raise: an output notebook may mark cells of a dead
kernel as completed. A failing notebook is kept with the error in it.
"""

from __future__ import annotations

import json
import logging
import os
import tempfile
import warnings
from pathlib import Path
from typing import Any

import nbformat
from nbformat import NotebookNode

from epochtest.errors import NotebookError
from epochtest.pipeline.hashing import library_folder
from epochtest.pipeline.kernel import KERNEL_METADATA, OwnInterpreterManager, clean_environment

CELL_TIMEOUT_S = 24 * 3600
_TRACE_LINES = 12


def normalised(notebook: NotebookNode) -> NotebookNode:
    """The notebook without times, paths and random ids: equal numbers give equal bytes."""
    notebook.metadata = NotebookNode(
        kernelspec=NotebookNode(KERNEL_METADATA), language_info=NotebookNode(name="python")
    )
    for index, cell in enumerate(notebook.cells):
        cell.id = f"cell-{index:02d}"
        tags = [tag for tag in cell.metadata.get("tags", []) if tag != "papermill-error-cell-tag"]
        cell.metadata = NotebookNode(tags=tags) if tags else NotebookNode()
    return notebook


def write_normalised(path: Path) -> None:
    """Rewrite an executed notebook in its normal form."""
    notebook = normalised(nbformat.read(path, as_version=4))
    text = json.dumps(notebook, indent=1, ensure_ascii=False, sort_keys=True) + "\n"
    path.write_text(text, encoding="utf-8", newline="\n")


def execute(notebook: Path, output: Path, parameters: dict[str, Any], root: Path) -> None:
    """Run ``notebook`` with ``parameters`` in ``root``; the executed copy goes to ``output``.

    Changes the environment and the working folder of this process: call it in a worker.
    Raises NotebookError (with ``cell`` and the end of the traceback) when a cell fails or the
    kernel dies.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # deprecations inside Jupyter are not the user's concern
        import papermill
        from papermill.exceptions import PapermillException, PapermillExecutionError

    logging.getLogger("papermill").setLevel(logging.CRITICAL)
    with tempfile.TemporaryDirectory(prefix="epochtest-ipython-") as ipython_folder:
        os.environ.update(clean_environment(library_folder().parent, Path(ipython_folder)))
        os.chdir(root)
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")
                papermill.execute_notebook(
                    str(notebook),
                    str(output),
                    parameters=parameters,
                    kernel_name="python3",
                    language="python",
                    progress_bar=False,
                    execution_timeout=CELL_TIMEOUT_S,
                    kernel_manager_class=OwnInterpreterManager,
                    record_timing=False,
                    coalesce_streams=True,
                    shutdown_kernel="immediate",
                )
        except PapermillExecutionError as error:
            trace = "\n".join(_plain(line) for line in error.traceback)
            raise NotebookError(
                f"{notebook.name}: cell {error.cell_index} failed: {error.ename}: {error.evalue}",
                cell=error.cell_index,
                trace="\n".join(trace.splitlines()[-_TRACE_LINES:]),
            ) from None
        except (PapermillException, RuntimeError, OSError) as error:
            raise NotebookError(
                f"{notebook.name}: the kernel did not finish: {error}", cell=None, trace=""
            ) from None
    write_normalised(output)


def _plain(text: str) -> str:
    """Text without terminal colour codes."""
    from click import unstyle

    return unstyle(text)
