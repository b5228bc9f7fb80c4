"""Protocol files: strict models, sentences that repair, overrides, JSON Schema.

These are promises of this project (issue: unknown keys are errors that suggest the nearest
known key); JSON Schema is checked with the jsonschema package against draft 2020-12.
"""

from __future__ import annotations

import json
import pickle
import tomllib
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from epochtest.errors import EphemerisSpanError, NotebookError, ProtocolError
from epochtest.study.claims import TimingClaim
from epochtest.study.load import load_study
from epochtest.study.schema import SCHEMAS, schema_text
from epochtest.study.settings import Selection, Study

from tests.studies import FULL_MOON, TEMPLATE, VENUS, small_study, write_claim


def faults(root: Path) -> list[str]:
    """Every sentence that loading the study gives."""
    with pytest.raises(ProtocolError) as caught:
        load_study(root)
    return list(caught.value.facts["faults"])


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A small study that is valid."""
    return small_study(tmp_path / "study")


def append(path: Path, text: str) -> None:
    """Add text at the end of a file."""
    path.write_text(path.read_text(encoding="utf-8") + text, encoding="utf-8")


def replace(path: Path, old: str, new: str) -> None:
    """Replace text that must be there."""
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")


def test_a_valid_study_loads_from_any_folder_below_it(study: Path) -> None:
    """The study is found from its notebooks folder too, as JupyterLab starts there."""
    loaded = load_study(study / "notebooks")
    assert [claim.id for claim in loaded.claims] == ["full-moon", "venus"]
    assert loaded.root == study.resolve()


def test_unknown_keys_suggest_the_nearest_known_one(study: Path) -> None:
    """A misspelt key is an error that names the key meant, in its own table."""
    append(study / "study.toml", "\n[inference]\nalhpa = 0.1\n")
    replace(study / "claims/venus.toml", "aspect =", "aspct =")
    found = faults(study)
    assert any("study.toml: inference.alhpa" in line and "'alpha'" in line for line in found)
    assert any("claims/venus.toml: event.aspct" in line and "'aspect'" in line for line in found)


def test_all_faults_come_at_once(study: Path) -> None:
    """Faults of several files are listed together, one sentence each."""
    replace(study / "study.toml", "end = 2010-01-01", "end = 1990-01-01")
    replace(study / "claims/venus.toml", '"venus", "earth"', '"venus", "sun"')
    replace(study / "claims/full-moon.toml", "[0.0, 3.0]", "[3.0, 0.0]")
    found = faults(study)
    assert len(found) == 3
    assert any("1990-01-01" in line and "before it starts" in line for line in found)
    assert any("cannot be seen from itself" in line for line in found)
    assert any("first < last" in line for line in found)


@pytest.mark.parametrize(
    ("event", "sentence"),
    [
        ('kind = "moon-phase"\nphases = ["ful"]', "Did you mean 'full'?"),
        ('kind = "moon-phases"\nphases = ["full"]', "Did you mean 'moon-phase'?"),
        ('kind = "moon-phase"', "at least one of phases"),
        ('kind = "moon-phase"\nphases = ["full"]\ncentre = "mars"', "seen from the Earth"),
        ('kind = "moon-phase"\nelongations_deg = [360.0]', "0 <= angle < 360"),
        ('kind = "moon-distance"\nextreme = "perige"', "Did you mean 'perigee'?"),
        (VENUS.replace('"venus"', '"venuss"'), "Did you mean 'venus'?"),
        (VENUS.replace('"venus"', '"earth"'), "named twice"),
        (VENUS.replace('aspect = "conjunction"', ""), "either aspect"),
        (VENUS + "\nangle_deg = 90.0", "either aspect"),
        (VENUS + '\nframe = "apparent-of-date"', "centre 'earth' only"),
        ('kind = "listed"\nfile = "../dates.csv"', "stay inside the study"),
        ('kind = "listed"\nfile = "/dates.csv"', "stay inside the study"),
    ],
)
def test_impossible_events_are_refused_with_a_way_out(
    study: Path, event: str, sentence: str
) -> None:
    """An event that cannot exist, or is misspelt, gives one sentence with what to do."""
    write_claim(study, "full-moon", event)
    found = faults(study)
    assert len(found) == 1
    assert sentence in found[0]
    assert found[0].startswith("claims/full-moon.toml: ")


@pytest.mark.parametrize(
    ("extra", "sentence"),
    [
        ('direction = "more"\nasserted_rate_ratio = 0.5', "give > 1"),
        ('direction = "fewer"\nasserted_rate_ratio = 1.5', "give < 1"),
        ('direction = "either"\nasserted_rate_ratio = 1.0', "asserts no effect"),
        ("nulls = []", "at least 1 item"),
        ("selection = {box = [170.0, -30.0, 190.0, -100.0]}", "-90 <= south < north <= 90"),
        ("selection = {minimum_magnitude = 6.0, maximum_magnitude = 5.0}", "is empty"),
        ("selection = {minimum_magnitude = nan}", "finite"),
        ("minimum = {epochs = 0}", "greater than or equal to 1"),
    ],
)
def test_contradictions_of_a_claim_are_refused(study: Path, extra: str, sentence: str) -> None:
    """Values that contradict each other or mean nothing are refused with the value found."""
    write_claim(study, "full-moon", FULL_MOON, extra=extra)
    found = faults(study)
    assert len(found) == 1
    assert sentence in found[0]


def test_missing_and_broken_files_are_named(study: Path) -> None:
    """No study, no claims, invalid TOML, another encoding: one sentence each, with the file."""
    with pytest.raises(ProtocolError, match="change into the folder of a study"):
        load_study(study.parent)
    (study / "catalogs/sources.toml").unlink()
    (study / "claims/venus.toml").write_text("id = ", encoding="utf-8")
    (study / "claims/full-moon.toml").write_bytes(b'id = "\xff"')
    found = faults(study)
    assert any("catalogs/sources.toml: the file is missing" in line for line in found)
    assert any("claims/venus.toml: is not valid TOML" in line for line in found)
    assert any("claims/full-moon.toml: is not UTF-8" in line for line in found)
    for path in (study / "claims").iterdir():
        path.unlink()
    assert any("holds no claim" in line for line in faults(study))


def test_claim_id_is_its_file_name(study: Path) -> None:
    """Two names for one claim would let two files speak of the same id."""
    (study / "claims/venus.toml").rename(study / "claims/venus-earth.toml")
    assert "is not the file's name" in faults(study)[0]


def test_selection_overrides_key_by_key() -> None:
    """A claim's keys replace the study's, and a region of one kind replaces any other."""
    mine = Selection(minimum_magnitude=4.5, maximum_depth_km=70.0, box=(170, -30, -170, 0))
    merged = mine.overridden_by(Selection(minimum_magnitude=6.0, polygon="claims/r.geojson"))
    assert merged.minimum_magnitude == 6.0
    assert merged.maximum_depth_km == 70.0
    assert merged.box is None
    assert merged.polygon == "claims/r.geojson"
    assert mine.overridden_by(Selection()) == mine


@pytest.mark.parametrize("name", SCHEMAS)
def test_schemas_in_the_template_are_current_and_valid(name: str) -> None:
    """The JSON Schema files for editors are what the models say, and valid draft 2020-12."""
    path = TEMPLATE / "schemas" / name
    assert path.read_text(encoding="utf-8") == schema_text(name)
    jsonschema.Draft202012Validator.check_schema(json.loads(schema_text(name)))


def test_schema_and_model_agree_on_a_claim(study: Path) -> None:
    """What the model accepts the schema accepts; a misspelt key is refused by both."""
    schema = json.loads(schema_text("claim.schema.json"))
    claim = tomllib.loads((study / "claims/venus.toml").read_text(encoding="utf-8"))
    jsonschema.validate(claim, schema)
    TimingClaim.model_validate(claim)
    claim["event"]["aspct"] = claim["event"].pop("aspect")
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(claim, schema)


def test_every_model_field_has_a_default_or_is_required_by_name() -> None:
    """study.toml needs only about, span and catalog: everything else has a visible default."""
    required = {name for name, field in Study.model_fields.items() if field.is_required()}
    assert required == {"about", "span", "catalog"}


def test_errors_survive_pickling_with_their_facts() -> None:
    """Workers send errors home: class, sentence and facts arrive (also as builtins)."""
    error = EphemerisSpanError("out of range.", mask=np.array([True]), covered=("a", "b"))
    again = pickle.loads(pickle.dumps(error))
    assert isinstance(again, ValueError)
    assert str(again) == "out of range."
    assert again.facts["covered"] == ("a", "b")
    assert pickle.loads(pickle.dumps(NotebookError("x", cell=3))).facts == {"cell": 3}
