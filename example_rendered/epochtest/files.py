"""Files: SHA-256 in a stream, and writing that either happens whole or not at all."""

from __future__ import annotations

import hashlib
import os
import tempfile
from pathlib import Path


def sha256_of(path: Path) -> str:
    """SHA-256 of a file's bytes as 64 hex digits, read in blocks; OSError if unreadable."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def write_whole(path: Path, content: bytes) -> None:
    """Replace ``path`` by ``content`` in one step; a failure leaves the old file as it was."""
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(content)
            stream.flush()
            os.fsync(stream.fileno())
        mode = path.stat().st_mode & 0o777 if path.exists() else 0o644
        Path(name).chmod(mode)
        Path(name).replace(path)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise
