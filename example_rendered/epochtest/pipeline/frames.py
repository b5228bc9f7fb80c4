"""Where a notebook or a command stands: the study around it, its upstream artifacts."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TypeVar

from pydantic import BaseModel

from epochtest.errors import MissingArtifactError
from epochtest.pipeline.hashing import rounded
from epochtest.pipeline.store import RESULT, Store

Model = TypeVar("Model", bound=BaseModel)


def artifact_folder(root: Path, given: str, step: str) -> Path:
    """The folder named by a notebook parameter, or the newest artifact of ``step``."""
    folder = root / given if given else Store(root).current(step)
    if not (folder / RESULT).is_file():
        raise MissingArtifactError(
            f"{step}: no result in {folder.relative_to(root).as_posix()}; "
            "run `python -m epochtest run` first.",
            step=step,
        )
    return folder


def read_result(model: type[Model], folder: Path) -> Model:
    """The result of an artifact."""
    return model.model_validate(json.loads((folder / RESULT).read_text(encoding="utf-8")))


def result_text(result: BaseModel) -> str:
    """A result as it is written: readable JSON, floats to 12 significant digits."""
    plain = rounded(result.model_dump(mode="json"))
    return json.dumps(plain, indent=1, ensure_ascii=False) + "\n"


def output_folder(root: Path, output: str) -> Path | None:
    """The folder to write into, or None when a notebook is only being looked at."""
    if not output:
        return None
    folder = root / output
    folder.mkdir(parents=True, exist_ok=True)
    return folder
