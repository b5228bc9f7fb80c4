"""Studies run for real: papermill, kernels, artifacts.

What is proven here are promises of this project (issue and DESIGN.md), so the authority of
each check is the sentence in its docstring; the numbers themselves are proven elsewhere.
"""

from __future__ import annotations

import json
import os
import shutil
import signal
import subprocess
import sys
from pathlib import Path

import pytest
from epochtest.errors import BusyError, ChangedInputError, ProtocolError
from epochtest.pipeline.run import claim_results, run
from epochtest.pipeline.store import Store
from epochtest.study.load import load_study
from epochtest.study.results import CAUTION

from tests.studies import PYTHON_ENVIRONMENT, command, small_study, tree, write_claim

ALL_STEPS = {
    "1_catalog",
    "2_epochs.full-moon",
    "2_epochs.venus",
    "3_superposed_epoch.full-moon",
    "3_superposed_epoch.venus",
    "4_report",
}


@pytest.fixture(scope="module")
def executed(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One small study, run from its own command line."""
    root = small_study(tmp_path_factory.mktemp("executed") / "study")
    done = command(root, "run")
    assert done.returncode == 0, done.stdout + done.stderr
    return root


@pytest.fixture
def copy(executed: Path, tmp_path: Path) -> Path:
    """The executed study in a folder of another name, free to be spoilt."""
    return Path(shutil.copytree(executed, tmp_path / "somebody elses copy"))


def edit(path: Path, old: str, new: str) -> None:
    """Replace text that must be there."""
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")


def add_cell(root: Path, notebook: str, source: str, position: int) -> None:
    """Insert a code cell into a notebook of the study."""
    path = root / "notebooks" / f"{notebook}.ipynb"
    content = json.loads(path.read_text(encoding="utf-8"))
    cell = {
        "cell_type": "code", "id": "added", "metadata": {}, "execution_count": None,
        "outputs": [], "source": [source],
    }  # fmt: skip
    content["cells"].insert(position, cell)
    path.write_text(json.dumps(content), encoding="utf-8")


def test_run_leaves_results_report_and_caution(executed: Path) -> None:
    """One command makes every artifact, the findings, the report; all carry the caution."""
    results, sky = claim_results(executed)
    assert sky == []
    assert [result.test.claim.id for result in results] == ["full-moon", "venus"]
    for result in results:
        assert result.caution == CAUTION
        assert result.test.n_earthquakes == 400
        assert 0.0 < result.test.nulls[0].p <= result.family.p_maxt <= 1.0
    assert not (executed / "runs" / "partial").exists()
    page = (executed / "runs" / "report.html").read_text(encoding="utf-8")
    assert CAUTION.split(".")[0] in page
    assert {p.name.rsplit(".", 1)[0] for p in (executed / "runs/artifacts").iterdir()} == ALL_STEPS


def test_notebooks_ran_without_warnings(executed: Path) -> None:
    """No executed notebook shows a warning or any other line on standard error."""
    for path in executed.glob("runs/artifacts/*/notebook.ipynb"):
        for cell in json.loads(path.read_text(encoding="utf-8"))["cells"]:
            streams = [o for o in cell.get("outputs", []) if o["output_type"] == "stream"]
            assert not streams, (path.parent.name, streams)


def test_unchanged_study_is_not_run_again(copy: Path) -> None:
    """A second run makes nothing, says so, and leaves every byte as it was."""
    before = tree(copy / "runs")
    done = command(copy, "run")
    assert done.returncode == 0
    assert "Nothing has changed: all 6 artifacts are as made" in done.stdout
    assert tree(copy / "runs") == before


def test_same_study_elsewhere_gives_the_same_bytes(executed: Path, tmp_path: Path) -> None:
    """Another folder, another number of workers, a hostile Jupyter set-up: the same bytes.

    A foreign kernelspec named python3 and an IPython start-up file that raises stand in the
    way, as PIPELINE-NOTES describes; the study's own interpreter must be used all the same.
    """
    root = small_study(tmp_path / "a" / "quite different name")
    foreign = tmp_path / "jupyter" / "kernels" / "python3"
    foreign.mkdir(parents=True)
    spec = {"argv": ["/bin/false"], "display_name": "foreign", "language": "python"}
    (foreign / "kernel.json").write_text(json.dumps(spec))
    startup = tmp_path / "ipython" / "profile_default" / "startup"
    startup.mkdir(parents=True)
    (startup / "00.py").write_text("raise SystemExit('a start-up file leaked in')")
    done = command(
        root,
        "run",
        "--workers",
        "1",
        JUPYTER_PATH=str(tmp_path / "jupyter"),
        IPYTHONDIR=str(tmp_path / "ipython"),
        PYTHONHASHSEED="77",
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert tree(root / "runs") == tree(executed / "runs")


def test_nothing_made_names_a_folder_of_this_machine(executed: Path) -> None:
    """No result, notebook or report holds an absolute path of the machine that made it."""
    for name, content in tree(executed / "runs").items():
        for path in (str(executed), str(Path.home()) + "/", sys.prefix, "/tmp/"):
            assert path.encode() not in content, name


def test_killed_run_resumes(copy: Path, tmp_path: Path) -> None:
    """After a kill -9 in the middle, the next run keeps what was made and removes the rest."""
    shutil.rmtree(copy / "runs")
    process = subprocess.Popen(
        [sys.executable, "-m", "epochtest", "run", "--workers", "1"],
        cwd=copy,
        env={**PYTHON_ENVIRONMENT, "PYTHONUNBUFFERED": "1"},
        stdout=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    assert process.stdout is not None
    for line in process.stdout:
        if line.startswith("made 2_epochs"):
            break
    os.killpg(process.pid, signal.SIGKILL)
    process.stdout.close()
    process.wait()
    made = set(os.listdir(copy / "runs/artifacts"))
    assert 2 <= len(made) < 6
    (copy / "runs/partial/left.behind").mkdir(parents=True, exist_ok=True)
    outcome = run(load_study(copy))
    assert {step.split(".0")[0] for step in outcome.skipped} == {
        name.rsplit(".", 1)[0] for name in made
    }
    assert set(outcome.made) | set(outcome.skipped) == ALL_STEPS
    assert not (copy / "runs/partial/left.behind").exists()


def test_failing_cell_is_kept_named_and_shown(copy: Path) -> None:
    """A failing notebook stops its own claim only; its error, cell and kept copy are named."""
    add_cell(copy, "3_superposed_epoch", "if claim == 'venus': 1 / 0", 3)
    done = command(copy, "run")
    assert done.returncode == 1
    assert "FAILED 3_superposed_epoch.venus" in done.stderr
    assert "ZeroDivisionError" in done.stderr
    assert "Kept as runs/failed/3_superposed_epoch.venus.ipynb" in done.stderr
    assert "made 3_superposed_epoch.full-moon" in done.stdout
    kept = (copy / "runs/failed/3_superposed_epoch.venus.ipynb").read_text(encoding="utf-8")
    assert "ZeroDivisionError" in kept
    assert not list((copy / "runs" / "partial").glob("*"))


def test_dead_kernel_is_a_failure(copy: Path) -> None:
    """A kernel that dies does not pass for success, although its notebook looks complete."""
    add_cell(copy, "1_catalog", "import os; os._exit(3)", 3)
    outcome = run(load_study(copy))
    assert "1_catalog" in outcome.failed
    assert "4_report" in outcome.blocked
    assert not outcome.reported


def test_spoilt_artifact_is_made_again(copy: Path) -> None:
    """A result edited by hand no longer matches its manifest, so it is recomputed."""
    store = Store(copy)
    folder = store.current("3_superposed_epoch.venus")
    honest = (folder / "result.json").read_text(encoding="utf-8")
    edit(folder / "result.json", '"n_earthquakes": 400', '"n_earthquakes": 401')
    outcome = run(load_study(copy))
    assert outcome.made == ["3_superposed_epoch.venus"]
    assert (folder / "result.json").read_text(encoding="utf-8") == honest


def test_one_claim_can_be_run_alone(copy: Path) -> None:
    """`run CLAIM` makes that claim only; the report waits until every claim is made."""
    shutil.rmtree(copy / "runs")
    done = command(copy, "run", "venus")
    assert done.returncode == 0
    assert "The report follows" in done.stdout
    steps = {name.rsplit(".", 1)[0] for name in os.listdir(copy / "runs/artifacts")}
    assert steps == {"1_catalog", "2_epochs.venus", "3_superposed_epoch.venus"}


def test_two_runs_at_once_are_refused(copy: Path) -> None:
    """A second run of the same study waits for nobody and spoils nothing: it is refused."""
    with Store(copy).lock(), pytest.raises(BusyError, match="another run"):
        run(load_study(copy))


def test_changed_input_is_refused_by_name(copy: Path) -> None:
    """A catalog that no longer has its SHA-256 stops the run before anything is computed."""
    edit(copy / "catalogs/small.csv", "mw,s00001", "mw,s90001")
    with pytest.raises(ChangedInputError, match=r"catalogs/small\.csv"):
        run(load_study(copy))


def test_unknown_parameter_stops_before_a_kernel(copy: Path) -> None:
    """A parameters cell that does not fit the library's model is refused at once."""
    edit(copy / "notebooks/2_epochs.ipynb", "output =", "outputt =")
    with pytest.raises(ProtocolError, match="does not set 'output'"):
        run(load_study(copy))


def test_removed_claim_leaves_no_result_behind(copy: Path) -> None:
    """The results folder holds the claims of the study as it stands, no others."""
    (copy / "claims/venus.toml").unlink()
    write_claim(copy, "new-moon", 'kind = "moon-phase"\nphases = ["new"]')
    outcome = run(load_study(copy))
    assert outcome.reported
    assert sorted(p.name for p in (copy / "runs/results").iterdir()) == [
        "full-moon.json",
        "new-moon.json",
    ]
