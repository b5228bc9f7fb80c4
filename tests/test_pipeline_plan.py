"""Keys: what a change touches and what it leaves alone; the store's own promises.

The authority is DESIGN.md: an artifact is keyed by the hash of its inputs, parameters and
library; unchanged artifacts are not recomputed.
"""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from epochtest.pipeline import hashing
from epochtest.pipeline.plan import Plan
from epochtest.pipeline.store import Slot, Store
from epochtest.study.load import load_study

from tests.studies import catalog_text, small_study, write_claim, write_sources

TESTS = {"3_superposed_epoch.full-moon", "3_superposed_epoch.venus"}
EPOCHS = {"2_epochs.full-moon", "2_epochs.venus"}
REPORT = {"4_report"}
CATALOG = {"1_catalog"}


def keys(root: Path) -> dict[str, str]:
    """Key of every step."""
    return {step.name: step.slot.key for step in Plan(load_study(root)).steps()}


def add(root: Path, name: str, old: str, new: str) -> None:
    """Edit one protocol file."""
    path = root / name
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")


CHANGES = {
    "a comment": (("study.toml", "[about]", "# words\n[about]"), REPORT),
    "the title": (("study.toml", "A small study", "Another"), REPORT),
    "alpha": (
        ("study.toml", "[selection]", "[inference]\nalpha = 0.01\n[selection]"),
        TESTS | REPORT,
    ),
    "the magnitude floor": (("study.toml", "= 4.0", "= 5.0"), TESTS | REPORT),
    "the kernel": (
        ("study.toml", "[selection]", '[ephemeris]\nkernel = "DE440"\n[selection]'),
        EPOCHS | TESTS | REPORT,
    ),
    "the span": (
        ("study.toml", "2010-01-01", "2009-01-01"),
        CATALOG | EPOCHS | TESTS | REPORT,
    ),
    "the same settings in other words": (
        ("study.toml", "[selection]", "[catalog.columns]\n[selection]"),
        REPORT,
    ),
    "one claim's words": (
        ("claims/venus.toml", "More earthquakes follow.", "Other words."),
        {"3_superposed_epoch.venus"} | REPORT,
    ),
    "one claim's window": (
        ("claims/venus.toml", "[0.0, 3.0]", "[0.0, 4.0]"),
        {"2_epochs.venus", "3_superposed_epoch.venus"} | REPORT,
    ),
}


@pytest.mark.parametrize("change", CHANGES)
def test_a_change_touches_exactly_what_depends_on_it(tmp_path: Path, change: str) -> None:
    """Each edit changes the keys of the steps that read it and of what follows, no others."""
    root = small_study(tmp_path / "study")
    before = keys(root)
    edit, expected = CHANGES[change]
    add(root, *edit)
    after = keys(root)
    assert {name for name in before if before[name] != after[name]} == expected


def test_catalog_content_and_listed_dates_enter_by_content(tmp_path: Path) -> None:
    """Another catalog touches everything but the epochs; other dates touch their own claim."""
    root = small_study(tmp_path / "study")
    (root / "claims/dates.csv").write_text("time\n2001-01-01\n", encoding="utf-8")
    write_claim(root, "listed", 'kind = "listed"\nfile = "claims/dates.csv"')
    before = keys(root)
    (root / "catalogs/small.csv").write_text(catalog_text(seed=6), encoding="utf-8")
    write_sources(root, "catalogs/small.csv")
    after = keys(root)
    assert {n for n in before if before[n] == after[n]} == EPOCHS | {"2_epochs.listed"}
    (root / "claims/dates.csv").write_text("time\n2001-01-02\n", encoding="utf-8")
    last = keys(root)
    assert {n for n in after if after[n] != last[n]} == REPORT | {
        "2_epochs.listed",
        "3_superposed_epoch.listed",
    }


def test_library_and_packages_enter_every_key(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Another library or package version makes every artifact anew."""
    root = small_study(tmp_path / "study")
    before = keys(root)
    monkeypatch.setattr("epochtest.pipeline.plan.library_sha256", lambda: "0" * 64)
    other_library = keys(root)
    monkeypatch.undo()
    versions = {**hashing.package_versions(), "numpy": "0.0"}
    monkeypatch.setattr("epochtest.pipeline.plan.package_versions", lambda: versions)
    other_numpy = keys(root)
    assert not set(before.values()) & set(other_library.values())
    assert not set(before.values()) & set(other_numpy.values())


def test_artifact_counts_only_while_its_files_match(tmp_path: Path) -> None:
    """Missing, changed or added files, or a broken manifest, make an artifact not made."""
    store, slot = Store(tmp_path), Slot("2_epochs.x", "0123456789abcdef")
    (store.begin(slot) / "result.json").write_text("{}", encoding="utf-8")
    assert not store.is_made(slot)
    folder = store.publish(slot, {"a": 1})
    assert store.is_made(slot)
    assert json.loads((folder / "manifest.json").read_text(encoding="utf-8"))["key"] == slot.key
    (folder / "extra").write_text("x", encoding="utf-8")
    assert not store.is_made(slot)
    (folder / "extra").unlink()
    assert store.is_made(slot)
    (folder / "result.json").write_text("{ }", encoding="utf-8")
    assert not store.is_made(slot)
    (folder / "manifest.json").write_text("[", encoding="utf-8")
    assert not store.is_made(slot)


def test_unused_artifacts_of_the_same_steps_go(tmp_path: Path) -> None:
    """Old states of a step are removed when the new one is in use; other steps stay."""
    store = Store(tmp_path)
    slots = [Slot("2_epochs.x", "a" * 16), Slot("2_epochs.x", "b" * 16), Slot("2_epochs.y", "c")]
    for slot in slots:
        store.begin(slot)
        store.publish(slot, {})
    assert store.remove_unused([slots[1]]) == 1
    assert [store.is_made(slot) for slot in slots] == [False, True, True]


def test_floats_are_cut_to_twelve_digits_and_nothing_else() -> None:
    """Rounding keeps integers, text and order, and is the same twice."""
    value = {"a": [0.1 + 0.2, 1, "0.30000000000000004", None, True], "b": (1e-300, 2.0)}
    once = hashing.rounded(value)
    assert once == {"a": [0.3, 1, "0.30000000000000004", None, True], "b": [1e-300, 2.0]}
    assert hashing.rounded(once) == once
