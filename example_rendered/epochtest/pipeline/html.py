"""The report: an executed notebook as one HTML file that opens without a network."""

from __future__ import annotations

import warnings
from pathlib import Path

import nbformat

from epochtest.errors import EpochtestError
from epochtest.files import write_whole

TEMPLATE_FOLDER = Path(__file__).resolve().parent
TEMPLATE = "report_template"
LANGUAGE = "en"


def write_report(notebook: Path, output: Path) -> None:
    """Render ``notebook`` to ``output``; raises EpochtestError if the page would load anything."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # deprecations inside Jupyter are not the user's concern
        from nbconvert import HTMLExporter

        exporter = HTMLExporter(
            template_name=TEMPLATE,
            extra_template_basedirs=[str(TEMPLATE_FOLDER)],
            exclude_input_prompt=True,
            exclude_output_prompt=True,
            exclude_anchor_links=True,
            language_code=LANGUAGE,
        )
        node = nbformat.read(notebook, as_version=4)
        page, _ = exporter.from_notebook_node(node, {"metadata": {"name": _title(node)}})
    for forbidden in ("<script", 'src="http', 'href="http', "@import", "url(http"):
        if forbidden in page:
            raise EpochtestError(
                f"report: the page contains {forbidden!r}, which a page read without a network "
                "must not; remove it from the notebook's output."
            )
    write_whole(output, page.encode())


def _title(notebook: nbformat.NotebookNode) -> str:
    """The text of the notebook's title output, or its first heading."""
    for cell in notebook.cells:
        for output in cell.get("outputs", []):
            if "text/plain" in output.get("data", {}):
                return str(output["data"]["text/plain"]).splitlines()[0]
    return "Report"
