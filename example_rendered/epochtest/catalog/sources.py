"""Where input files came from, and whether they are still the files that were described."""

from __future__ import annotations

import tomllib
from collections.abc import Sequence
from pathlib import Path

import tomli_w
from pydantic import ValidationError

from epochtest.errors import CatalogError, ChangedInputError, ProtocolError
from epochtest.files import sha256_of, write_whole
from epochtest.study.base import faults_of
from epochtest.study.settings import Source, Sources

SOURCES_FILE = "catalogs/sources.toml"


def source_block(source: Source) -> str:
    """The [[source]] block of TOML text that describes one file."""
    return tomli_w.dumps({"source": [source.model_dump()]})


def verify_sources(root: Path, files: Sequence[str], sources: Sources) -> dict[str, Source]:
    """The description of each of ``files`` (relative to ``root``), after checking its SHA-256.

    Raises CatalogError for a missing file, ProtocolError with the block to add for a file that
    sources.toml does not describe, ChangedInputError for a file whose bytes have changed.
    """
    described = {source.file: source for source in sources.source}
    faults: list[str] = []
    verified: dict[str, Source] = {}
    for file in files:
        found = _hash(root, file)
        source = described.get(file)
        if source is None:
            faults.append(_undescribed(file, found))
            continue
        if source.sha256 != found:
            raise ChangedInputError(
                f"{file}: has changed since it was described: its SHA-256 begins {found[:12]}, "
                f"{SOURCES_FILE} says {source.sha256[:12]}; restore the file, or describe the new "
                "one there and run the study again.",
                file=file, expected=source.sha256, found=found,
            )  # fmt: skip
        verified[file] = source
    if faults:
        raise ProtocolError.of(faults)
    return verified


def _hash(root: Path, file: str) -> str:
    try:
        return sha256_of(root / file)
    except FileNotFoundError:
        raise CatalogError(
            f"{file}: the file is missing; put it there or mend catalog.files in study.toml.",
            file=file,
        ) from None
    except OSError as error:
        raise CatalogError(f"{file}: cannot be read ({error.strerror}).", file=file) from error


def _undescribed(file: str, sha256: str) -> str:
    block = source_block(
        Source(
            file=file,
            origin="WHO PUBLISHED IT, AND HOW IT WAS OBTAINED",
            licence="TERMS OF USE",
            sha256=sha256,
        )
    )
    return f"{SOURCES_FILE}: does not describe {file}; add this block, words filled in:\n\n{block}"


def append_source(root: Path, source: Source) -> Source:
    """Add the block of one file to sources.toml, in one step; what stands there stays as it is.

    A file that is described already with the same SHA-256 needs no second block: the block in
    place is returned. Raises ProtocolError, and writes nothing, if another SHA-256 is written
    down for the file or if the text would not be a valid sources.toml afterwards.
    """
    path = root / SOURCES_FILE
    existing = path.read_text(encoding="utf-8") if path.is_file() else ""
    for known in _parsed(existing).source:
        if known.file == source.file and known.sha256 == source.sha256:
            return known
        if known.file == source.file:
            raise ProtocolError.of(
                [
                    f"{SOURCES_FILE}: {source.file} is described with another SHA-256 (it begins "
                    f"{known.sha256[:12]}, not {source.sha256[:12]}); mend or delete that block."
                ]
            )
    gap = "" if not existing else "\n" if existing.endswith("\n") else "\n\n"
    text = existing + gap + source_block(source)
    _parsed(text)
    path.parent.mkdir(parents=True, exist_ok=True)
    write_whole(path, text.encode("utf-8"))
    return source


def _parsed(text: str) -> Sources:
    try:
        return Sources.model_validate(tomllib.loads(text))
    except tomllib.TOMLDecodeError as error:
        raise ProtocolError.of(
            [f"{SOURCES_FILE}: a block cannot be added ({error}); mend the file first."]
        ) from error
    except ValidationError as error:
        raise ProtocolError.of(faults_of(Sources, error, SOURCES_FILE)) from error
