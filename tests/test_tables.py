"""Tables: numbers written one way everywhere, and HTML that can be read aloud."""

import io
import math
from datetime import date
from html.parser import HTMLParser

import pandas as pd
import pytest
from epochtest import tables
from epochtest.study.claims import TimingClaim
from epochtest.study.events import LongitudeDifference, MoonPhase
from epochtest.study.results import (
    CAUTION,
    CatalogResult,
    ClaimResult,
    Effect,
    EpochResult,
    FamilyAdjustment,
    FileCount,
    NullResult,
    SizeDistribution,
    TestResult,
)
from epochtest.study.settings import About, CatalogSettings, Selection, Span, Study
from epochtest.tables import numbers
from epochtest.tables.protocol import event_in_words, selection_in_words, window_in_words
from hypothesis import given
from hypothesis import strategies as st
from rich.console import Console


def _claim() -> TimingClaim:
    return TimingClaim(
        id="full-moon",
        title="Full <Moon> & arc",
        statement="More earthquakes follow full Moon.",
        event=MoonPhase(phases=("full",)),
        window_days=(0.0, 3.0),
        asserted_rate_ratio=1.5,
        selection=Selection(minimum_magnitude=5.5),
    )


def _study() -> Study:
    return Study(
        about=About(title="Invented"),
        span=Span(start=date(1990, 1, 1), end=date(2020, 1, 1)),
        catalog=CatalogSettings(files=("invented.csv",)),
        selection=Selection(minimum_magnitude=4.5, box=(170.0, 45.0, 200.0, 60.0)),
    )


def _result() -> ClaimResult:
    epochs = EpochResult(
        claim="full-moon", description="full Moon", frame="geometric-J2000", ephemeris="DE421",
        searched_from_utc="1990-01-01", searched_to_utc="2020-01-01", n_epochs=371, n_in_span=371,
        per_year={"1990": 12, "1991": 13}, mean_interval_days=29.5306,
        shortest_interval_days=29.27, longest_interval_days=29.83, coverage=0.1016,
        overlapping_windows=0,
    )  # fmt: skip
    null = NullResult(
        name="circular-shift", shifts=262968, effective_shifts=3712.4, observed=1234,
        mean=1200.4, sd=51.2, inflation=2.43, p=0.2604, grid_hours=1.0,
    )  # fmt: skip
    effect = Effect(
        rate_ratio=1.031, exact_interval=(0.9716, 1.094), inflated_interval=(0.94, None),
        confidence=0.95, detectable_ratio=1.05, detectable_ratio_family=1.117,
        power=0.8,
    )  # fmt: skip
    test = TestResult(
        claim=_claim(), span_utc=("1990-01-01", "2020-01-01"), n_earthquakes=11815, n_epochs=371,
        coverage=0.1016, hits=1234, expected=1200.4, binomial_p=0.1571, nulls=(null,),
        effect=effect,
    )  # fmt: skip
    family = FamilyAdjustment(correction="maxT", claims=3, p_maxt=0.5, p_holm=0.6, p_used=0.00004)
    return ClaimResult(
        finding="none detected", sentence="x", test=test, epochs=epochs, family=family
    )


@pytest.mark.parametrize(
    ("p", "text"),
    [
        (0.0, "< 0.001"), (0.00099, "< 0.001"), (0.001, "0.00100"), (0.00412, "0.00412"),
        (0.0412, "0.0412"), (0.2604, "0.260"), (1.0, "1.00"), (None, "–"), (math.nan, "–"),
    ],
)  # fmt: skip
def test_p_values_keep_three_digits_and_are_never_zero(p: float | None, text: str) -> None:
    """A p-value of 0 is never printed (Phipson & Smyth 2010); three significant digits are."""
    assert numbers.p_value(p) == text


@given(st.floats(0.001, 1.0))
def test_a_printed_p_value_is_the_p_value(p: float) -> None:
    """Reading the text back gives p to half a unit of the third significant digit."""
    assert float(numbers.p_value(p)) == pytest.approx(p, rel=0.0051)


@pytest.mark.parametrize("p", [-0.01, 1.01])
def test_a_number_that_is_no_p_value_is_refused(p: float) -> None:
    """A p-value outside 0..1 is a fault upstream and is not dressed up."""
    with pytest.raises(ValueError, match=r"lies in 0\.\.1"):
        numbers.p_value(p)


def test_numbers_are_written_one_way() -> None:
    """Thin spaces part thousands (ISO 80000-1, 7.3.1); minus is a minus; no end is infinity."""
    assert numbers.count(46716) == "46\u2009716"
    assert numbers.count(999) == "999"
    assert numbers.decimal(-1234.56) == "\u22121\u2009234.6"
    assert numbers.decimal(-0.01) == "0.0"
    assert numbers.interval((0.84, 1.2149)) == "0.84–1.21"
    assert numbers.interval((0.84, None)) == "0.84–∞"
    assert numbers.interval((0.0, math.inf)) == "0.00–∞"
    assert numbers.percent(0.1016) == "10.2\u00a0%"
    assert numbers.counted(1, "epoch") == "1 epoch"
    assert numbers.counted(2000, "epoch", plain=True) == "2000 epochs"
    assert numbers.days(-0.5) == "\u22120.5"


def test_the_findings_table_holds_the_numbers_that_decided() -> None:
    """p is the family's p, not the claim's own; an open interval shows as open."""
    (row,) = tables.findings_table([_result()]).to_dict("records")
    assert row["p"] == "< 0.001"
    assert row["Finding"] == "none detected"
    assert row["Rate ratio"] == "1.03"
    assert row["Exact interval"] == "0.97–1.09"
    assert row["Inflated interval"] == "0.94–∞"
    assert row["Detectable"] == "1.12"
    assert row["Hits / expected"] == "1\u2009234 / 1\u2009200.4"


class _Cells(HTMLParser):
    """Start tags with their attributes, and the text of each cell."""

    def __init__(self) -> None:
        super().__init__()
        self.found: list[tuple[str, dict[str, str | None]]] = []
        self.text = ""

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.found.append((tag, dict(attrs)))

    def handle_data(self, data: str) -> None:
        self.text += data


def test_html_tables_can_be_read_aloud() -> None:
    """A caption, and a scope on every heading cell (WCAG 2.2 techniques H39 and H63)."""
    frame = tables.findings_table([_result()])
    cells = _Cells()
    cells.feed(tables.html(frame, 'Findings "all"')._repr_html_())
    heads = [attrs for tag, attrs in cells.found if tag == "th"]
    assert [tag for tag, _ in cells.found].count("caption") == 1
    assert [head["scope"] for head in heads] == ["col"] * 10 + ["row"]
    assert "Full <Moon> & arc" in cells.text
    assert "moon" not in [tag for tag, _ in cells.found]


def test_numbers_stand_flush_right_and_words_left() -> None:
    """Columns marked as numbers, and numeric dtypes, are aligned right; text is not."""
    frame = tables.findings_table([_result()])
    cells = _Cells()
    cells.feed(tables.html(frame, "x")._repr_html_())
    sides = [a["style"].split(";")[0] for t, a in cells.found if t == "th" and a["scope"] == "col"]
    assert sides == ["text-align:left"] * 2 + ["text-align:right"] * 8
    plain = tables.html(pd.DataFrame({"a": ["x"], "n < 2": [1]}), "x")._repr_html_()
    assert plain.count("text-align:right") == 2
    assert ">n &lt; 2</th>" in plain


def test_an_empty_table_says_none() -> None:
    """No rows is a statement: the table keeps its headings and says "none"."""
    for frame in (
        tables.findings_table([]), tables.nulls_table([]), tables.quarantine_table({}),
        tables.base_rates_table([]),
    ):  # fmt: skip
        html = tables.html(frame, "x")._repr_html_()
        assert ">none</td>" in html
        assert html.count('scope="col"') == len(frame.columns)


def test_what_was_decided_before_is_said_in_words() -> None:
    """The claim's own selection overrides the study's, and the box across the dateline reads W."""
    frame = tables.decided_before(_claim(), _study())
    said = dict(zip(frame["What"], frame["Decided beforehand"], strict=True))
    assert said["Window"] == "0 to 3 days after the epoch"
    assert said["Sky event"].startswith("full Moon")
    assert "magnitude 5.5 or more" in said["Earthquakes"]
    assert "170°E to 160°W" in said["Earthquakes"]
    assert said["Alpha"] == "0.05"
    assert said["Asserted rate ratio"] == "1.50"
    assert "Westfall-Young" in said["Price of several claims"]
    assert "10 epochs and 50 earthquakes" in said["Least counts"]


def test_windows_events_and_selections_read_as_phrases() -> None:
    """Each kind of window, sky event and limit has its own phrase."""
    assert window_in_words((-5.0, -1.0)) == "1 to 5 days before the epoch"
    assert window_in_words((-1.5, 3.0)) == "1.5 days before to 3 days after the epoch"
    event = LongitudeDifference(centre="sun", bodies=("venus", "earth"), aspect="conjunction")
    assert "conjunction of Venus and the Earth seen from the Sun" in event_in_words(event)
    square = LongitudeDifference(
        centre="earth", bodies=("sun", "mars"), angle_deg=90.0, either_side=True
    )
    assert "90° or 270°" in event_in_words(square)
    assert selection_in_words(Selection()) == "every earthquake of the catalog"
    deep = Selection(minimum_depth_km=0.0, maximum_depth_km=70.0)
    assert selection_in_words(deep) == "depth 0 to 70 km"


def test_files_and_reasons_add_up() -> None:
    """Conservation shows: the sum row holds the catalog's totals; reasons go by frequency."""
    files = tuple(
        FileCount(
            file=f"{k}.csv", sha256=k * 64, origin="invented", licence="CC0",
            rows_read=1000, kept=990, quarantined=10,
        )
        for k in "ab"
    )  # fmt: skip
    catalog = CatalogResult(
        files=files, rows_read=2000, kept=1980, quarantined=20, reasons={}, day_only=0,
        first_utc=None, last_utc=None, in_span=0, largest_magnitude=None, magnitude_types={},
        sizes=SizeDistribution(
            bin_width=0.1, mc_maximum_curvature=None, mc=None, n_above=0, b=None, b_error=None
        ),
    )  # fmt: skip
    frame = tables.files_table(catalog)
    assert list(frame["Rows read"]) == ["1\u2009000", "1\u2009000", "2\u2009000"]
    assert list(frame["Kept"])[-1] == "1\u2009980"
    reasons = tables.quarantine_table({"no time": 2, "duplicate": 18})
    assert list(reasons["Reason"]) == ["duplicate", "no time"]


def test_base_rates_and_nulls_show_what_chance_gives() -> None:
    """Base rates per year are the mean over the calendar years listed; nulls show inflation."""
    (rates,) = tables.base_rates_table([_result().epochs]).to_dict("records")
    assert rates["Per calendar year"] == "12.5"
    assert rates["Shortest–longest (days)"] == "29.3–29.8"
    (null,) = tables.nulls_table([_result()]).to_dict("records")
    assert (null["Inflation"], null["p"], null["Effective shifts"]) == (
        "2.43",
        "0.260",
        "3\u2009712",
    )


@pytest.mark.parametrize("width", [80, 120])
def test_the_terminal_table_ends_with_the_caution(width: int) -> None:
    """The command line carries the claims by id, the findings and the caution."""
    out = io.StringIO()
    Console(file=out, width=width).print(tables.findings_text([_result()], width))
    text = out.getvalue()
    assert "full-moon" in text
    assert "none detected" in text
    assert "…" not in text
    assert ("Hits / expected" in text) is (width >= 110)
    assert " ".join(CAUTION.split()) in " ".join(text.split())


def test_findings_for_programs_are_plain_numbers() -> None:
    """The CSV of findings has one row per claim, raw numbers, and blanks where unbounded."""
    (row,) = tables.findings_numbers([_result()]).to_dict("records")
    assert row["claim"] == "full-moon"
    assert row["p_used"] == 0.00004
    assert row["p_circular-shift"] == 0.2604
    assert row["detectable_ratio_family"] == 1.117
    assert row["inflated_high"] is None
    assert row["hits"] == 1234
