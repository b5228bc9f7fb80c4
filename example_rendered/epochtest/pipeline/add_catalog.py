"""Bringing a catalog file into a study: copied, never edited, written down with its hash."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

from epochtest.catalog.sources import append_source
from epochtest.errors import CatalogError, ProtocolError
from epochtest.files import sha256_of
from epochtest.study.settings import Source


def add_catalogs(root: Path, files: tuple[Path, ...], origin: str, licence: str) -> list[str]:
    """Copy ``files`` to catalogs/ and describe them in sources.toml; returns their names.

    All files are looked at before the first is copied. Raises CatalogError for a missing file
    or one that would replace another of the same name.
    """
    if not origin.strip() or not licence.strip():
        raise ProtocolError.of(["--origin and --licence: must not be empty; state both."])
    faults = []
    targets: dict[Path, Path] = {}
    for file in files:
        target = root / "catalogs" / file.name
        if not file.is_file():
            faults.append(f"{file}: no such file; check the name.")
        elif target in targets.values():
            faults.append(f"{file}: two files are named {file.name}; rename one.")
        elif target.exists() and sha256_of(target) != sha256_of(file):
            faults.append(
                f"{file}: catalogs/{file.name} exists with other content and is never "
                "overwritten; rename the new file."
            )
        targets[file] = target
    if faults:
        raise CatalogError("\n".join(faults), faults=faults)
    names = []
    for file, target in targets.items():
        if not target.exists():
            partial = target.with_name(f".{target.name}.partial")
            shutil.copyfile(file, partial)
            os.replace(partial, target)
        name = f"catalogs/{target.name}"
        source = Source(file=name, origin=origin, licence=licence, sha256=sha256_of(target))
        described = append_source(root, source)
        if described != source:
            raise ProtocolError.of(
                [
                    f"{name}: is already in the study, with the origin {described.origin!r}; "
                    "to change the words, edit catalogs/sources.toml."
                ]
            )
        names.append(name)
    return names
