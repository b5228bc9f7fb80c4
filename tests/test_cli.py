"""The command line: what it prints, what it refuses, and its exit status.

Promises of DESIGN.md (Commands) and of the issue: `check` looks at no outcome.
"""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest
from epochtest.pipeline.check import check_study
from epochtest.study.load import load_study
from epochtest.study.results import CAUTION

from tests.studies import FULL_MOON, VENUS, command, small_study, tree, write_claim, write_sources


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A small study, not run."""
    return small_study(tmp_path / "study")


def test_check_says_what_each_claim_will_do_and_writes_nothing(study: Path) -> None:
    """Epochs, coverage and selection of every claim are printed; no file is made."""
    before = tree(study)
    done = command(study, "check")
    assert done.returncode == 0, done.stderr
    for words in ("full-moon", "venus", "epochs     124", "coverage   10.1 %", "400 earthquakes"):
        assert words in done.stdout.replace("\u202f", " ").replace("\u00a0", " ")
    assert "ready to run" in done.stdout
    assert tree(study) == before


def test_check_looks_at_no_outcome(study: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """With every function that could count hits made to fail, `check` still succeeds."""

    def outcome(*_: object, **__: object) -> None:
        raise AssertionError("an outcome was looked at")

    for module, names in {
        "superposed": ("hits_by_window", "hits_at_all_shifts", "lag_profile", "bin_counts"),
        "windows": ("exact_hits", "hits_by_window", "bin_counts"),
    }.items():
        for name in names:
            monkeypatch.setattr(f"epochtest.inference.{module}.{name}", outcome)
    report = check_study(load_study(study))
    assert report.faults == []
    assert len(report.lines) > 10


def test_check_lists_all_faults_with_status_one(study: Path) -> None:
    """Faults found beyond the protocol files (kernel span, region file, notebook) come together."""
    text = (study / "study.toml").read_text(encoding="utf-8")
    (study / "study.toml").write_text(
        text.replace("start = 2000-01-01", "start = 1800-01-01"), encoding="utf-8"
    )
    write_claim(study, "full-moon", FULL_MOON, extra='selection = {polygon = "claims/no.geojson"}')
    (study / "notebooks/3_superposed_epoch.ipynb").unlink()
    done = command(study, "check")
    assert done.returncode == 1
    assert "notebooks/3_superposed_epoch.ipynb: the notebook is missing" in done.stderr
    assert "1899-07-29" in done.stderr
    assert "DE440" in done.stderr
    assert "Traceback" not in done.stderr


def test_too_few_epochs_or_earthquakes_are_said_beforehand(study: Path) -> None:
    """A claim that cannot be decided by its own minimum counts is known before the run."""
    write_claim(study, "venus", VENUS, extra="minimum = {epochs = 50, earthquakes = 1000}")
    done = command(study, "check")
    assert done.returncode == 0
    assert "venus: 6 epochs are fewer than its own minimum of 50" in done.stdout
    assert "venus: 400 earthquakes are fewer than its own minimum of 1000" in done.stdout


def test_report_before_a_run_says_what_to_do(study: Path) -> None:
    """Asking for findings that were never made is status 1 and one sentence."""
    done = command(study, "report")
    assert done.returncode == 1
    assert "run `python -m epochtest run` first" in done.stderr


def test_commands_outside_a_study_and_unknown_claims_are_refused(
    study: Path, tmp_path: Path
) -> None:
    """No study here, or no such claim: the sentence names what is known; mistyping is status 2."""
    outside = command(tmp_path, "check")
    assert (outside.returncode, "Traceback" in outside.stderr) == (1, False)
    assert "change into the folder of a study" in outside.stderr
    unknown = command(study, "run", "full-mon")
    assert unknown.returncode == 1
    assert "known: full-moon, venus" in unknown.stderr
    assert command(study, "rum").returncode == 2


def test_every_command_has_help_and_the_caution_stands_there(study: Path) -> None:
    """`--help` exists for each command; the main one carries the caution."""
    main = command(study, "--help")
    assert " ".join(CAUTION.split()) in " ".join(main.stdout.split())
    for name in re.findall(r"^  ([a-z-]+)  ", main.stdout, re.MULTILINE):
        assert command(study, name, "--help").returncode == 0, name


def test_add_catalog_copies_and_writes_down_the_hash(study: Path, tmp_path: Path) -> None:
    """A file from elsewhere is copied, described, and usable; the original is untouched."""
    file = tmp_path / "new list.csv"
    file.write_text((study / "catalogs/small.csv").read_text(encoding="utf-8"), encoding="utf-8")
    done = command(
        study, "add-catalog", str(file), "--origin", 'a "quoted" origin', "--licence", "CC0"
    )
    assert done.returncode == 0, done.stderr
    assert 'files = ["catalogs/new list.csv"]' in done.stdout
    sources = tomllib.loads((study / "catalogs/sources.toml").read_text(encoding="utf-8"))
    assert sources["source"][-1]["origin"] == 'a "quoted" origin'
    assert (study / "catalogs/new list.csv").read_bytes() == file.read_bytes()
    again = command(study, "add-catalog", str(file), "--origin", "x", "--licence", "y")
    assert again.returncode == 1
    assert "already" in again.stderr


@pytest.mark.parametrize(
    ("name", "content", "words", "sentence"),
    [
        ("none.csv", None, ("x", "y"), "no such file"),
        ("small.csv", "time\n", ("x", "y"), "never overwritten"),
        ("a.csv", "time\n", (" ", "y"), "must not be empty"),
    ],
)
def test_add_catalog_refuses_and_leaves_nothing(
    study: Path,
    tmp_path: Path,
    name: str,
    content: str | None,
    words: tuple[str, str],
    sentence: str,
) -> None:
    """A missing file, a name already taken by other content, empty words: nothing is written."""
    before = tree(study)
    if content is not None:
        (tmp_path / name).write_text(content, encoding="utf-8")
    done = command(
        study, "add-catalog", str(tmp_path / name), "--origin", words[0], "--licence", words[1]
    )
    assert done.returncode == 1
    assert sentence in done.stderr
    assert tree(study) == before


def test_empty_catalog_is_checked_without_a_crash(study: Path) -> None:
    """A catalog with a header and no rows is said to be empty; check and its numbers survive."""
    header = "time,latitude,longitude,depth,mag,magType,id,type\n"
    (study / "catalogs/small.csv").write_text(header, encoding="utf-8")
    write_sources(study, "catalogs/small.csv")
    done = command(study, "check")
    assert "Traceback" not in done.stderr
    assert done.returncode in (0, 1)
    assert "0" in done.stdout + done.stderr
