"""Claims about the sky alone, through models, steps, notebooks and report.

The numbers are proven in the tests of the sky layer; here a study with such claims runs, and
what it says is held against METHODS-like published facts: Jupiter and Saturn meet about every
19.86 years and met on 2020 December 21 (common practice); the tide of Venus is at most some
hundred-thousandths of the Moon's (closed form 2 G M R / d^3).
"""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd
import pytest
from epochtest.errors import ProtocolError
from epochtest.pipeline import superposed_step
from epochtest.pipeline.catalog_step import catalog_of
from epochtest.pipeline.check import check_study
from epochtest.pipeline.epochs_step import epochs_of
from epochtest.pipeline.forcing_step import forcing_of
from epochtest.pipeline.recurrence_step import recurrence_of
from epochtest.pipeline.run import claim_results
from epochtest.study.load import load_study

from tests.studies import command, small_study, write_claim, write_sources

RECURRENCE = """
id = "giants"
kind = "recurrence"
title = "Jupiter passes Saturn"
statement = "Jupiter passes Saturn every twenty years or so."

[event]
kind = "longitude-difference"
centre = "sun"
bodies = ["jupiter", "saturn"]
aspect = "conjunction"

[recurrence]
{said}
"""
FORCING = """
id = "tides"
kind = "forcing"
title = "The pull of Venus"
statement = "Venus pulls as strongly as {share} of the Moon."
on = 2012-06-06

[place]
latitude_deg = 8.5
longitude_deg = 180.0

[span]
start = 2012-05-01
end = 2012-08-01

[asserts]
body = "venus"
at_least_share_of_moon = {share}
"""


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A small study with one claim of each kind about the sky, and some mechanisms."""
    root = small_study(tmp_path / "study")
    lines = (root / "catalogs/small.csv").read_text(encoding="utf-8").splitlines()
    tail = [",10,30,90" if k % 2 else ",,," for k in range(len(lines) - 1)]
    rows = [line + end for line, end in zip(lines[1:], tail, strict=True)]
    text = "\n".join([lines[0] + ",strike,dip,rake", *rows]) + "\n"
    (root / "catalogs/small.csv").write_text(text, encoding="utf-8")
    write_sources(root, "catalogs/small.csv")
    recurrence(root, "every_years = 19.86\ntolerance_years = 0.8")
    (root / "claims/tides.toml").write_text(FORCING.format(share=0.1), encoding="utf-8")
    return root


def recurrence(root: Path, said: str) -> None:
    """Write the recurrence claim with other assertions."""
    (root / "claims/giants.toml").write_text(RECURRENCE.format(said=said), encoding="utf-8")


@pytest.mark.parametrize(
    ("said", "finding"),
    [
        ("every_years = 19.86\ntolerance_years = 0.8", "agree"),
        ("every_years = 25.0\ntolerance_years = 0.8", "disagree"),
        ("last_happened = 2020-11-02\ntolerance_years = 0.1\nbefore = 2026-01-01", "agree"),
        ("last_happened = 2010-01-01\ntolerance_years = 1.0\nbefore = 2026-01-01", "disagree"),
        ("not_again_for_years = 10.0\nbefore = 2026-01-01", "agree"),
        ("not_again_for_years = 18.0\nbefore = 2026-01-01", "disagree"),
        (
            "not_again_for_years = 100.0\nbefore = 2045-01-01",
            "cannot be decided within the kernel",
        ),
    ],
)
def test_recurrence_is_judged_by_the_occurrences(study: Path, said: str, finding: str) -> None:
    """Each assertion is ruled by the conjunctions of DE421, heliocentric: the last before 2026 on
    2020 November 2 (JD 2459156.272, METHODS A computed value), the next in 2040."""
    recurrence(study, said)
    loaded = load_study(study)
    step = recurrence_of(loaded, loaded.recurrence_claim("giants"))
    assert step.result.finding == finding
    assert len(step.table) == step.result.n_occurrences == 8
    nearest = (step.table["time_utc"] - pd.Timestamp("2020-11-02 18:30")).abs().min()
    assert nearest < pd.Timedelta(hours=1)
    if finding == "disagree":
        assert any(ruling.counter_examples for ruling in step.result.rulings)
    if finding.startswith("cannot"):
        assert step.result.extrapolation is not None
        assert "extrapol" in step.result.extrapolation.label.lower()


@pytest.mark.parametrize(("share", "finding"), [(0.1, "disagree"), (1e-5, "agree")])
def test_forcing_is_measured_against_what_is_said(study: Path, share: float, finding: str) -> None:
    """Venus near inferior conjunction (0.2887 au, 2012 June 6) raises 2 G M R / d^3, some 4.7e-5
    of the mean Moon's 1.1011e-6 m/s2; half the earthquakes have a mechanism; what is left out
    is said."""
    (study / "claims/tides.toml").write_text(FORCING.format(share=share), encoding="utf-8")
    loaded = load_study(study)
    step = forcing_of(loaded, loaded.forcing_claim("tides"), catalog_of(loaded))
    result = step.result
    assert result.finding == finding
    venus = next(row for row in result.pulls if row.name == "venus")
    gm, radius, distance = 3.24859e14, 6378136.6, 0.2887 * 1.495978707e11
    assert venus.acceleration_m_s2 == pytest.approx(2 * gm * radius / distance**3, rel=0.01)
    assert venus.on_date_m_s2 == pytest.approx(venus.acceleration_m_s2, rel=0.01)
    assert venus.here_stress_pa <= venus.stress_pa * 1.1
    assert result.phases.with_mechanism == 200
    assert "ocean loading" in result.left_out.lower()
    assert len(step.table) == 400


def test_impossible_sky_claims_are_refused_with_the_nearest_spelling(study: Path) -> None:
    """Unknown bodies and kinds, the centre among its bodies, a tide of the Earth: one sentence."""
    claims = study / "claims"
    giants = RECURRENCE.format(said="every_years = 20.0")
    cases = {
        giants.replace('"saturn"]', '"satrun"]'): "Did you mean 'saturn'?",
        giants.replace('centre = "sun"', 'centre = "jupiter"'): "cannot be seen from itself",
        giants.replace('"recurrence"', '"recurence"'): "Did you mean 'recurrence'?",
        RECURRENCE.format(said="tolerance_years = 1.0"): "say every_years",
        RECURRENCE.format(said="not_again_for_years = 9.0"): "need before",
        giants.replace('aspect = "conjunction"', "angle_deg = 90.0"): "a conjunction",
    }
    for text, sentence in cases.items():
        (claims / "giants.toml").write_text(text, encoding="utf-8")
        with pytest.raises(ProtocolError) as caught:
            load_study(study)
        assert sentence in str(caught.value)
    recurrence(study, "every_years = 20.0")
    tides = FORCING.format(share=0.1).replace('body = "venus"', 'body = "earth"')
    (claims / "tides.toml").write_text(tides, encoding="utf-8")
    with pytest.raises(ProtocolError, match="raises no tide on itself"):
        load_study(study)


def test_listed_dates_reach_the_test_and_may_be_none(study: Path) -> None:
    """A dated list inside the study gives its epochs; an empty list gives none and no crash."""
    event = 'kind = "listed"\nfile = "claims/dates.csv"'
    write_claim(study, "listed", event)
    for text, expected in (
        ("time\n2001-02-03\n2001-02-03\n1990-01-01\n2005-06-07T08:09Z\n", 2),
        ("time\n", 0),
    ):
        (study / "claims/dates.csv").write_text(text, encoding="utf-8")
        loaded = load_study(study)
        claim = loaded.timing_claim("listed")
        epochs = epochs_of(loaded, claim)
        assert epochs.result.n_epochs == len(epochs.frame) == expected
        step = superposed_step.tested(loaded, claim, catalog_of(loaded), epochs)
        assert step.result.n_epochs == expected
        assert len(epochs.result.notes) == (2 if expected else 0)
        for figure in (step.lag_chart(), step.null_chart(), step.timeline(), epochs.intervals()):
            assert figure.alt
    assert step.result.hits == 0
    assert step.result.nulls[0].p == 1.0


def test_check_names_what_sky_claims_will_do(study: Path) -> None:
    """`check` says event, assertions, place and selection of each, and finds a bad span."""
    report = check_study(load_study(study))
    text = "\n".join(report.lines)
    assert report.faults == []
    assert "every 19.86 years, within 0.8 years" in text
    assert "looks at no earthquake" in text
    assert "Venus pulls at least 0.1 times the Moon's mean pull" in text
    tides = FORCING.format(share=0.1).replace("2012-05-01", "1700-05-01")
    (study / "claims/tides.toml").write_text(tides, encoding="utf-8")
    assert any("1899-07-29" in fault for fault in check_study(load_study(study)).faults)


def test_a_study_of_sky_claims_alone_runs_to_its_report(study: Path) -> None:
    """Without a timing claim the notebooks, results, findings and report are made all the same."""
    for name in ("full-moon", "venus"):
        (study / f"claims/{name}.toml").unlink()
    done = command(study, "run")
    assert done.returncode == 0, done.stdout + done.stderr
    tested, sky = claim_results(study)
    assert tested == []
    assert {result.claim.id: result.finding for result in sky} == {
        "giants": "agree",
        "tides": "disagree",
    }
    assert "forecast or warning" in done.stdout
    page = (study / "runs/report.html").read_text(encoding="utf-8")
    for words in ("Jupiter passes Saturn", "The pull of Venus", "cean loading is not modelled"):
        assert words in page
    for path in (study / "runs/results").iterdir():
        assert "forecast" in json.loads(path.read_text(encoding="utf-8"))["caution"]
