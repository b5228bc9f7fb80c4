"""Provenance of input files: hashes, descriptions, and adding one."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest
from epochtest import files as files_module
from epochtest.catalog.sources import SOURCES_FILE, append_source, verify_sources
from epochtest.errors import CatalogError, ChangedInputError, ProtocolError
from epochtest.files import sha256_of, write_whole
from epochtest.study.settings import Source, Sources

FILE = "catalogs/quakes.csv"
ABC = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


@pytest.fixture
def root(tmp_path: Path) -> Path:
    """A study folder with one input file that holds "abc"."""
    (tmp_path / "catalogs").mkdir()
    (tmp_path / FILE).write_bytes(b"abc")
    return tmp_path


def source(**changes: str) -> Source:
    """The description of the file "abc"."""
    fields = {"file": FILE, "origin": "invented", "licence": "CC0", "sha256": ABC}
    return Source.model_validate(fields | changes)


def test_sha256(root: Path) -> None:
    """The one-block example of FIPS 180-4 (NIST, SHA-256 example 1): "abc"."""
    assert sha256_of(root / FILE) == ABC


def test_unchanged_file_is_verified(root: Path) -> None:
    """A described and unchanged file comes back with its description."""
    assert verify_sources(root, [FILE], Sources(source=(source(),))) == {FILE: source()}


def test_changed_file_is_named_with_both_hashes(root: Path) -> None:
    """One changed byte is an error with file and heads of both hashes."""
    (root / FILE).write_bytes(b"abd")
    with pytest.raises(ChangedInputError) as caught:
        verify_sources(root, [FILE], Sources(source=(source(),)))
    found = sha256_of(root / FILE)
    assert FILE in str(caught.value)
    assert ABC[:12] in str(caught.value)
    assert found[:12] in str(caught.value)
    assert caught.value.facts == {"file": FILE, "expected": ABC, "found": found}


def test_undescribed_file_gets_a_block_to_paste(root: Path) -> None:
    """The error holds TOML that, pasted into sources.toml, makes the file verified."""
    with pytest.raises(ProtocolError) as caught:
        verify_sources(root, [FILE], Sources())
    block = str(caught.value).split("\n\n", 1)[1]
    pasted = Sources.model_validate(tomllib.loads(block))
    assert verify_sources(root, [FILE], pasted)[FILE].sha256 == ABC


def test_missing_file(root: Path) -> None:
    """A file that is not there is a catalog error, not a stack trace of the system."""
    with pytest.raises(CatalogError, match=r"catalogs/none\.csv: the file is missing"):
        verify_sources(root, ["catalogs/none.csv"], Sources())


def test_append_keeps_what_stands_there(root: Path) -> None:
    """Comments stay, awkward words survive (TOML 1.0), and the result is valid."""
    path = root / SOURCES_FILE
    path.write_text("# by hand, no final line end", encoding="utf-8")
    words = 'A "quoted" \\ back\u007fslash, Pérou\nsecond line'
    assert append_source(root, source(origin=words)) == source(origin=words)
    text = path.read_text(encoding="utf-8")
    assert text.startswith("# by hand, no final line end\n\n[[source]]\n")
    append_source(root, source(file="catalogs/other.csv"))
    described = Sources.model_validate(tomllib.loads(path.read_text(encoding="utf-8")))
    assert [s.file for s in described.source] == [FILE, "catalogs/other.csv"]
    assert described.source[0].origin == words


def test_append_makes_the_file_and_is_repeatable(root: Path) -> None:
    """Without a sources.toml one is made; the same file with the same content adds nothing."""
    append_source(root, source())
    once = (root / SOURCES_FILE).read_bytes()
    assert append_source(root, source(origin="somebody else")) == source()
    assert (root / SOURCES_FILE).read_bytes() == once


@pytest.mark.parametrize(
    ("existing", "words"),
    [
        (
            f'[[source]]\nfile="{FILE}"\norigin="x"\nlicence="y"\nsha256="{"0" * 64}"\n',
            "another SHA",
        ),
        ("source = []\n", "cannot be added"),
        ("[[source]\n", "cannot be added"),
        ("[[sauce]]\n", "unknown key 'sauce'"),
    ],
)
def test_append_refuses_without_writing(root: Path, existing: str, words: str) -> None:
    """A contradiction or an invalid file is told, and the file keeps its bytes."""
    (root / SOURCES_FILE).write_text(existing)
    with pytest.raises(ProtocolError, match=words):
        append_source(root, source())
    assert (root / SOURCES_FILE).read_text() == existing


def test_a_failed_write_leaves_the_old_file(root: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """If the disk fails half-way, the old content and no scratch file remain."""

    def fail(_: int) -> None:
        raise OSError("disk full")

    monkeypatch.setattr(files_module.os, "fsync", fail)
    with pytest.raises(OSError, match="disk full"):
        write_whole(root / FILE, b"new")
    assert (root / FILE).read_bytes() == b"abc"
    assert [path.name for path in (root / "catalogs").iterdir()] == ["quakes.csv"]
