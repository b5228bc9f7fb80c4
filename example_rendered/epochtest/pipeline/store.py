"""The store of artifacts: ``runs/artifacts/<step>.<key>/``, whole or absent.

A step writes into ``runs/partial/<step>.<key>/``. When it has succeeded, a manifest with the
hash of every file is added and the folder is moved into place in one rename; a run that is
killed leaves only a partial folder, which the next run removes. An artifact counts as made
only while its files still match its manifest.
"""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import IO, Any

from epochtest.errors import BusyError, MissingArtifactError
from epochtest.files import sha256_of, write_whole

MANIFEST = "manifest.json"
RESULT = "result.json"
NOTEBOOK = "notebook.ipynb"


@dataclass(frozen=True)
class Slot:
    """The place of one artifact, made or not. Paths are relative to the study."""

    step: str
    key: str

    @property
    def name(self) -> str:
        """Folder name: step and key."""
        return f"{self.step}.{self.key}"

    @property
    def folder(self) -> str:
        """Where the finished artifact stands, relative to the study."""
        return f"runs/artifacts/{self.name}"

    @property
    def partial(self) -> str:
        """Where it is made, relative to the study."""
        return f"runs/partial/{self.name}"


class Store:
    """The artifacts of one study."""

    def __init__(self, root: Path) -> None:
        self.root = root
        self.runs = root / "runs"

    def is_made(self, slot: Slot) -> bool:
        """True if the artifact exists and every file still has the hash of its manifest."""
        folder = self.root / slot.folder
        try:
            manifest = json.loads((folder / MANIFEST).read_text(encoding="utf-8"))
            files = manifest["files"]
            present = {p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file()}
            if present - {MANIFEST} != set(files):
                return False
            return all(sha256_of(folder / name) == sha for name, sha in files.items())
        except (OSError, ValueError, KeyError):
            return False

    def begin(self, slot: Slot) -> Path:
        """An empty folder to make the artifact in."""
        folder = self.root / slot.partial
        shutil.rmtree(folder, ignore_errors=True)
        folder.mkdir(parents=True)
        return folder

    def publish(self, slot: Slot, ingredients: dict[str, Any]) -> Path:
        """Add the manifest and move the finished folder into place."""
        partial, final = self.root / slot.partial, self.root / slot.folder
        files = {
            path.relative_to(partial).as_posix(): sha256_of(path)
            for path in sorted(partial.rglob("*"))
            if path.is_file()
        }
        manifest = {
            "schema_version": "epochtest.manifest/1",
            "step": slot.step,
            "key": slot.key,
            "made_from": ingredients,
            "files": files,
        }
        text = json.dumps(manifest, indent=1, ensure_ascii=False) + "\n"
        write_whole(partial / MANIFEST, text.encode())
        final.parent.mkdir(parents=True, exist_ok=True)
        shutil.rmtree(final, ignore_errors=True)
        os.replace(partial, final)
        return final

    def keep_failed(self, slot: Slot) -> Path | None:
        """Move the notebook of a failed step to ``runs/failed/`` and return its path."""
        made = self.root / slot.partial / NOTEBOOK
        if not made.exists():
            return None
        kept = self.runs / "failed" / f"{slot.step}.ipynb"
        kept.parent.mkdir(parents=True, exist_ok=True)
        os.replace(made, kept)
        shutil.rmtree(self.root / slot.partial, ignore_errors=True)
        return kept

    def forget_failed(self, slot: Slot) -> None:
        """Remove the kept notebook of an earlier failure of the same step."""
        (self.runs / "failed" / f"{slot.step}.ipynb").unlink(missing_ok=True)

    def clear_partial(self) -> None:
        """Remove what a killed run left behind."""
        shutil.rmtree(self.runs / "partial", ignore_errors=True)

    def write_current(self, slots: list[Slot]) -> None:
        """Note which artifact of every step belongs to the study as it stands."""
        table = {slot.step: slot.folder for slot in sorted(slots, key=lambda slot: slot.step)}
        write_whole(self.runs / "current.json", (json.dumps(table, indent=1) + "\n").encode())

    def current(self, step: str) -> Path:
        """Folder of the newest artifact of a step; MissingArtifactError if none was made."""
        try:
            table = json.loads((self.runs / "current.json").read_text(encoding="utf-8"))
            return self.root / str(table[step])
        except (OSError, ValueError, KeyError):
            raise MissingArtifactError(
                f"runs/: no artifact of {step} yet; run `python -m epochtest run` first.",
                step=step,
            ) from None

    def remove_unused(self, used: list[Slot]) -> int:
        """Remove artifacts of earlier states of the steps in ``used``; returns how many."""
        keep = {slot.name for slot in used}
        steps = {slot.step for slot in used}
        removed = 0
        for folder in sorted((self.runs / "artifacts").glob("*")):
            if folder.name not in keep and folder.name.rsplit(".", 1)[0] in steps:
                shutil.rmtree(folder, ignore_errors=True)
                removed += 1
        return removed

    @contextmanager
    def lock(self) -> Iterator[None]:
        """Hold the study for one run; BusyError if another process has it."""
        self.runs.mkdir(parents=True, exist_ok=True)
        with (self.runs / ".lock").open("a") as stream:
            if not _try_lock(stream):
                raise BusyError("runs/: another run is at work in this study; wait for its end.")
            yield


def _try_lock(stream: IO[str]) -> bool:
    """Lock a file until it is closed. Without POSIX locks (Windows) nothing is held."""
    try:
        import fcntl
    except ImportError:
        return True
    try:
        fcntl.flock(stream, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        return False
    return True
