"""Reading a study from disk: study.toml, claims/*.toml, catalogs/sources.toml."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar

from pydantic import ValidationError

from epochtest.errors import ProtocolError
from epochtest.study.base import Strict, faults_of, nearest
from epochtest.study.claims import (
    CLAIM_MODELS,
    Asserted,
    Claim,
    ForcingClaim,
    RecurrenceClaim,
    TimingClaim,
)
from epochtest.study.settings import Selection, Sources, Study

Model = TypeVar("Model", bound=Strict)
OneClaim = TypeVar("OneClaim", bound=Asserted)


@dataclass(frozen=True)
class LoadedStudy:
    """A study that is valid as far as its own files tell."""

    root: Path
    settings: Study
    claims: tuple[Claim, ...]
    sources: Sources

    def claim(self, claim_id: str) -> Claim:
        """The claim with that id; raises ProtocolError naming the known ones."""
        return _named(claim_id, self.claims, "claim")

    @property
    def timing_claims(self) -> tuple[TimingClaim, ...]:
        """The claims that are tested on earthquakes: the family that the correction pays for."""
        return tuple(claim for claim in self.claims if isinstance(claim, TimingClaim))

    @property
    def recurrence_claims(self) -> tuple[RecurrenceClaim, ...]:
        """The claims about how rare a configuration is."""
        return tuple(claim for claim in self.claims if isinstance(claim, RecurrenceClaim))

    @property
    def forcing_claims(self) -> tuple[ForcingClaim, ...]:
        """The claims about how strong a tide is."""
        return tuple(claim for claim in self.claims if isinstance(claim, ForcingClaim))

    def timing_claim(self, claim_id: str) -> TimingClaim:
        """The timing claim with that id; raises ProtocolError naming the known ones."""
        return _named(claim_id, self.timing_claims, "timing claim")

    def recurrence_claim(self, claim_id: str) -> RecurrenceClaim:
        """The recurrence claim with that id; raises ProtocolError naming the known ones."""
        return _named(claim_id, self.recurrence_claims, "recurrence claim")

    def forcing_claim(self, claim_id: str) -> ForcingClaim:
        """The forcing claim with that id; raises ProtocolError naming the known ones."""
        return _named(claim_id, self.forcing_claims, "forcing claim")

    def selection_of(self, claim: TimingClaim | ForcingClaim) -> Selection:
        """The study's selection with the claim's overrides."""
        return self.settings.selection.overridden_by(claim.selection)


def _named(claim_id: str, claims: tuple[OneClaim, ...], what: str) -> OneClaim:
    for claim in claims:
        if claim.id == claim_id:
            return claim
    known = ", ".join(claim.id for claim in claims) or "none"
    raise ProtocolError.of([f"claims/: no {what} has the id {claim_id!r}; known: {known}."])


def study_root(start: Path | None = None) -> Path:
    """The folder at or above ``start`` (the working folder) that holds study.toml."""
    here = (start or Path.cwd()).resolve()
    for folder in (here, *here.parents):
        if (folder / "study.toml").is_file():
            return folder
    raise ProtocolError.of(
        ["study.toml: not found here or above; change into the folder of a study first."]
    )


def _content(root: Path, name: str, faults: list[str]) -> dict[str, Any] | None:
    try:
        return tomllib.loads((root / name).read_text(encoding="utf-8"))
    except FileNotFoundError:
        faults.append(f"{name}: the file is missing; restore it.")
    except UnicodeDecodeError as error:
        faults.append(f"{name}: is not UTF-8 text (byte {error.start}); save it as UTF-8.")
    except tomllib.TOMLDecodeError as error:
        faults.append(f"{name}: is not valid TOML: {error}; mend that line.")
    return None


def _read(model: type[Model], root: Path, name: str, faults: list[str]) -> Model | None:
    content = _content(root, name, faults)
    try:
        return None if content is None else model.model_validate(content)
    except ValidationError as error:
        faults.extend(faults_of(model, error, name))
    return None


def _read_claim(root: Path, name: str, faults: list[str]) -> Claim | None:
    content = _content(root, name, faults)
    if content is None:
        return None
    kind = content.get("kind", "timing")
    model = CLAIM_MODELS.get(kind) if isinstance(kind, str) else None
    if model is None:
        guess = nearest(str(kind), CLAIM_MODELS)
        hint = f" Did you mean {guess!r}?" if guess else ""
        faults.append(f"{name}: kind: {kind!r} is not one of {', '.join(CLAIM_MODELS)}.{hint}")
        return None
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
        claim = _read_claim(folder, name, faults)
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
