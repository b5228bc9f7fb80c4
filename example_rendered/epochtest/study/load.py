"""Reading a study from disk: study.toml, claims/*.toml, catalogs/sources.toml."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import TypeVar

from pydantic import ValidationError

from epochtest.errors import ProtocolError
from epochtest.study.base import Strict, faults_of
from epochtest.study.claims import Claim
from epochtest.study.settings import Selection, Sources, Study

Model = TypeVar("Model", bound=Strict)


@dataclass(frozen=True)
class LoadedStudy:
    """A study that is valid as far as its own files tell."""

    root: Path
    settings: Study
    claims: tuple[Claim, ...]
    sources: Sources

    def claim(self, claim_id: str) -> Claim:
        """The claim with that id; raises ProtocolError naming the known ones."""
        for claim in self.claims:
            if claim.id == claim_id:
                return claim
        known = ", ".join(claim.id for claim in self.claims) or "none"
        raise ProtocolError.of([f"claims/: no claim has the id {claim_id!r}; known: {known}."])

    def selection_of(self, claim: Claim) -> Selection:
        """The study's selection with the claim's overrides."""
        return self.settings.selection.overridden_by(claim.selection)


def study_root(start: Path | None = None) -> Path:
    """The folder at or above ``start`` (the working folder) that holds study.toml."""
    here = (start or Path.cwd()).resolve()
    for folder in (here, *here.parents):
        if (folder / "study.toml").is_file():
            return folder
    raise ProtocolError.of(
        ["study.toml: not found here or above; change into the folder of a study first."]
    )


def _read(model: type[Model], root: Path, name: str, faults: list[str]) -> Model | None:
    path = root / name
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        faults.append(f"{name}: the file is missing; restore it.")
    except UnicodeDecodeError as error:
        faults.append(f"{name}: is not UTF-8 text (byte {error.start}); save it as UTF-8.")
    except tomllib.TOMLDecodeError as error:
        faults.append(f"{name}: is not valid TOML: {error}; mend that line.")
    else:
        try:
            return model.model_validate(content)
        except ValidationError as error:
            faults.extend(faults_of(model, error, name))
    return None


def load_study(root: Path | None = None) -> LoadedStudy:
    """Read and validate every protocol file; raise one ProtocolError with all faults."""
    folder = study_root(root)
    faults: list[str] = []
    settings = _read(Study, folder, "study.toml", faults)
    sources = _read(Sources, folder, "catalogs/sources.toml", faults)
    claims: list[Claim] = []
    for path in sorted((folder / "claims").glob("*.toml")):
        name = f"claims/{path.name}"
        claim = _read(Claim, folder, name, faults)
        if claim is None:
            continue
        if claim.id != path.stem:
            faults.append(f"{name}: id {claim.id!r} is not the file's name; rename one of them.")
        claims.append(claim)
    if not list((folder / "claims").glob("*.toml")):
        faults.append("claims/: holds no claim; write one, claims/example.toml.txt shows how.")
    if faults or settings is None or sources is None:
        raise ProtocolError.of(faults)
    return LoadedStudy(folder, settings, tuple(claims), sources)
