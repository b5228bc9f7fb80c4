"""What each notebook may be given, checked before a kernel starts.

papermill checks no types and only warns of unknown names, so the models here decide, and the
names in a notebook's ``parameters`` cell must be exactly those of its model.
"""

from __future__ import annotations

import ast
from pathlib import Path
from typing import Any

import nbformat
from pydantic import Field, ValidationError

from epochtest.errors import ProtocolError
from epochtest.study.base import Strict, faults_of


class CatalogParameters(Strict):
    """1_catalog."""

    output: str = Field("", description="Folder for the artifact; empty: show, write nothing.")


class EpochsParameters(Strict):
    """2_epochs."""

    claim: str = Field(min_length=1)
    output: str = ""


class SuperposedEpochParameters(Strict):
    """3_superposed_epoch; empty folders mean the newest artifacts of the study."""

    claim: str = Field(min_length=1)
    catalog_artifact: str = ""
    epochs_artifact: str = ""
    output: str = ""


class RecurrenceParameters(Strict):
    """3_recurrence."""

    claim: str = Field(min_length=1)
    output: str = ""


class ForcingParameters(Strict):
    """3_forcing; an empty folder means the newest artifact of the study."""

    claim: str = Field(min_length=1)
    catalog_artifact: str = ""
    output: str = ""


class ReportParameters(Strict):
    """4_report; empty folders mean the newest artifacts of the study."""

    catalog_artifact: str = ""
    epochs_artifacts: dict[str, str] = Field(default_factory=dict)
    test_artifacts: dict[str, str] = Field(default_factory=dict)
    output: str = ""


PARAMETERS: dict[str, type[Strict]] = {
    "1_catalog": CatalogParameters,
    "2_epochs": EpochsParameters,
    "3_superposed_epoch": SuperposedEpochParameters,
    "3_recurrence": RecurrenceParameters,
    "3_forcing": ForcingParameters,
    "4_report": ReportParameters,
}


def declared_names(notebook: Path) -> set[str]:
    """Names assigned in the one cell tagged ``parameters``; ProtocolError if there is not one."""
    cells = [
        cell
        for cell in nbformat.read(notebook, as_version=4).cells
        if "parameters" in cell.metadata.get("tags", [])
    ]
    if len(cells) != 1:
        raise ProtocolError.of(
            [f"notebooks/{notebook.name}: {len(cells)} cells are tagged 'parameters'; tag one."]
        )
    try:
        tree = ast.parse(cells[0].source)
    except SyntaxError as error:
        raise ProtocolError.of(
            [f"notebooks/{notebook.name}: the parameters cell is not valid Python: {error}."]
        ) from None
    return {
        target.id
        for node in tree.body
        if isinstance(node, ast.Assign)
        for target in node.targets
        if isinstance(target, ast.Name)
    }


def checked(notebook: Path, values: dict[str, Any]) -> dict[str, Any]:
    """The values as plain JSON types, after comparing them with model and notebook."""
    name = f"notebooks/{notebook.name}"
    model = PARAMETERS.get(notebook.stem)
    if model is None:
        known = ", ".join(sorted(PARAMETERS))
        raise ProtocolError.of([f"{name}: is no step of a study; known steps: {known}."])
    if not notebook.is_file():
        raise ProtocolError.of([f"{name}: the notebook is missing; restore it."])
    faults = []
    expected, declared = set(model.model_fields), declared_names(notebook)
    for missing in sorted(expected - declared):
        faults.append(f"{name}: the parameters cell does not set {missing!r}; add it.")
    for extra in sorted(declared - expected):
        faults.append(
            f"{name}: the parameters cell sets {extra!r}, which no step gives; remove it."
        )
    try:
        plain = model.model_validate(values).model_dump(mode="json")
    except ValidationError as error:
        faults.extend(faults_of(model, error, name))
    if faults:
        raise ProtocolError.of(faults)
    return plain
