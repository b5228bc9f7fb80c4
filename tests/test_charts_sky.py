"""Charts of line-ups, recurrences, tides and phases: any input, in words, without a network."""

import re
import xml.etree.ElementTree as ET
from collections.abc import Callable
from datetime import date, datetime, timedelta, timezone

import numpy as np
import pytest
from epochtest.charts import (
    Figure,
    crowding_chart,
    forcing_chart,
    lineup_chart,
    occurrences_chart,
    phase_histogram,
    return_intervals_chart,
    style,
    tide_series,
)
from epochtest.charts.forcing import _stretches
from epochtest.charts.lineups import _LOOKS
from epochtest.charts.recurrence import _LABEL_SHARE, _label_rows
from epochtest.study.events import Body
from scipy import stats

HUGE = 200_000
SIZES = {"empty": 0, "one": 1, "typical": 300, "huge": HUGE}
SEARCHED = (np.datetime64("1550-01-01", "us"), np.datetime64("2650-01-01", "us"))
NOTE = "Invented note: the load of the ocean is left out."
BODIES = sorted(_LOOKS)


def _instants(n: int) -> np.ndarray:
    """Invented instants, in order, over the whole span that kernels of planets may cover."""
    width = (SEARCHED[1] - SEARCHED[0]).astype(np.int64)
    shifts = np.random.default_rng(20260202).integers(0, width, n)
    return SEARCHED[0] + np.sort(shifts).astype("timedelta64[us]")


def _lineups(n: int) -> Figure:
    rng = np.random.default_rng(4)
    names = np.array(BODIES)[np.arange(n) % len(BODIES)].tolist()
    return lineup_chart("Invented line-ups", _instants(n), rng.normal(0.0, 3.0, n), names)


def _crowding(n: int) -> Figure:
    ks = range(min(n, 12)) if n < HUGE else range(20_000)
    shares = stats.poisson.pmf(list(ks), 3.0)
    return crowding_chart(list(zip(ks, shares.tolist(), strict=True)), window_days=2.0)


def _occurrences(n: int, *, wide: bool) -> Figure:
    widths = 30.0 * np.random.default_rng(5).random(n) if wide else None
    asserted = [datetime(1962, 2, 5), date(2000, 5, 5)] if n else []
    return occurrences_chart(
        "Invented grouping", _instants(n), widths, 30.0 if wide else None, asserted, SEARCHED
    )


def _returns(n: int) -> Figure:
    years = 19.86 + np.random.default_rng(6).normal(0.0, 0.5, n)
    return return_intervals_chart(years, 20.0, 0.5, 19.859)


def _forcing(n: int) -> Figure:
    rows = [(f"row {k}", 10.0 ** (5.0 - k % 13), ("body", "load")[k % 2]) for k in range(n)]
    return forcing_chart(rows[:20_000] if n > 300 else rows[:9], "Pa", note=NOTE, moon_mean=1987.0)


def _tide(n: int) -> Figure:
    times = np.datetime64("2026-01-01", "us") + np.arange(n) * np.timedelta64(30, "m")
    hours = 0.5 * np.arange(n)
    lines = {"Moon": 900 * np.cos(hours / 1.977), "Sun": 400 * np.cos(hours / 1.91)}
    return tide_series("Invented tide", times, lines if n else {}, "Pa", note=NOTE)


def _phases(n: int) -> Figure:
    phases = np.random.default_rng(8).uniform(-180.0, 180.0, n)
    return phase_histogram(np.append(phases, [np.nan] * 7), title="Invented phases", note=NOTE)


DRAWN: dict[str, Callable[[int], Figure]] = {
    "lineups": _lineups,
    "crowding": _crowding,
    "grouping": lambda n: _occurrences(n, wide=True),
    "ticks": lambda n: _occurrences(n, wide=False),
    "returns": _returns,
    "forcing": _forcing,
    "tide": _tide,
    "phases": _phases,
}
NOTED = ("forcing", "tide", "phases")


@pytest.fixture(scope="module")
def figures() -> dict[tuple[str, str], Figure]:
    """Every chart for no, one, 300 and 200,000 rows, drawn once."""
    return {(k, size): draw(n) for k, draw in DRAWN.items() for size, n in SIZES.items()}


def _texts(figure: Figure) -> list[str]:
    """Lettering of the picture."""
    return [word for word in ET.fromstring(figure.svg).itertext() if word.strip()]


def test_every_chart_is_well_formed_and_needs_no_network(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """Any input gives an XML document with no script and no address but the SVG namespace.

    Authority: SVG 1.1 (W3C, 2011) for the namespace; the XML parser for well-formedness.
    """
    for name, figure in figures.items():
        root = ET.fromstring(figure.svg)
        assert root.tag == "{http://www.w3.org/2000/svg}svg", name
        rest = figure.svg.replace('xmlns="http://www.w3.org/2000/svg"', "")
        assert not re.search(r"https?:|//[a-z]|<script|<image|@import|NaN", rest), name


def test_many_rows_make_no_larger_a_picture_than_the_cells_allow(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """Rows are counted before drawing: 80 x 28 cells of about 150 bytes are 0.34 MB."""
    for name in DRAWN:
        assert len(figures[name, "huge"].svg) < 400_000, name


def test_nothing_to_draw_is_said_in_words(figures: dict[tuple[str, str], Figure]) -> None:
    """An empty input gives a sentence, in the picture and in its words, and not an error."""
    for name in DRAWN:
        figure = figures[name, "empty"]
        drawn = "".join(_texts(figure))
        assert re.match(r"(No|Fewer)\b", drawn), name
        assert figure.caption.startswith(drawn), name
        assert drawn in figure.alt, name


def test_no_inner_id_can_clash_on_a_page(figures: dict[tuple[str, str], Figure]) -> None:
    """These charts have no inner ids and refer to none, so that no two can be alike.

    Authority: HTML Living Standard, 3.2.6: an id is unique in its tree.
    """
    page = "".join(figure._repr_html_() for figure in figures.values())
    assert re.findall(r'\bid="|url\(#|href="', page) == []


def test_the_same_input_gives_the_same_bytes(figures: dict[tuple[str, str], Figure]) -> None:
    """Drawing again in the same process, after other charts, changes no byte."""
    for name, draw in DRAWN.items():
        assert draw(SIZES["typical"]) == figures[name, "typical"], name


def test_the_words_state_the_numbers(figures: dict[tuple[str, str], Figure]) -> None:
    """The alternative text holds the numbers a sighted reader takes from the picture."""
    stated = {
        "lineups": ["300 line-ups", "Sun 27", "Jupiter 28", "degrees"],
        "crowding": ["k from 0 to 11", "mean 3.00", "95.0 %", "±2 days"],
        "grouping": ["300 occurrences", "1550-01-01 to 2650-01-01", "threshold 30", "1962-02-05"],
        "ticks": ["300 occurrences", "2 asserted dates", "2000-05-05"],
        "returns": ["300 intervals", "20 ± 0.5", "19.86", "of 300 lie within"],
        "forcing": ["row 0 (body) 1e+05", "row 1 (load) 1e+04", "1.99e+03"],
        "tide": ["Moon -900 to 900", "2026-01-01 00:00", "300 instants"],
        "phases": ["300 earthquakes", "24 bins", "12.5", "6 to 20", "7 without a phase"],
    }
    assert stated.keys() == DRAWN.keys()
    for name, parts in stated.items():
        figure = figures[name, "typical"]
        assert all(part in figure.alt for part in parts), (name, figure.alt)


def test_only_the_palette_and_the_ink_of_the_page_are_used(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """No fixed black or white that would vanish on one of the two pages."""
    allowed = {*(c.lower() for c in style.PALETTE), "currentcolor", "none", "transparent"}
    for name, figure in figures.items():
        used = {c.lower() for c in re.findall(r'(?:fill|stroke)="([^"]+)"', figure.svg)}
        assert used <= allowed, (name, used - allowed)


def test_what_is_left_out_always_stands_in_the_caption(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """Every chart of stress ends its caption with the note on ocean loading, drawn or empty."""
    for name in NOTED:
        for size in SIZES:
            assert figures[name, size].caption.endswith(NOTE), (name, size)
    bare = tide_series("x", _instants(2), {"Moon": [1.0, 2.0]}, "Pa")
    assert "ocean tides is left out" in bare.caption


def test_no_caption_sounds_like_a_forecast(figures: dict[tuple[str, str], Figure]) -> None:
    """Words of prediction appear nowhere."""
    for name, figure in figures.items():
        text = f"{figure.title} {figure.caption} {figure.alt}"
        assert not re.search(r"forecast|predict|warn|danger|risk|will ", text, re.I), name


def test_every_body_has_a_mark_of_its_own() -> None:
    """Shape and filling tell all bodies of claims apart without colour (WCAG 2.2, 1.4.1)."""
    assert set(_LOOKS) == set(Body.__args__)
    marks = [(shape, filled) for shape, filled, _ in _LOOKS.values()]
    assert len(set(marks)) == len(marks)


def test_line_ups_are_counted_whole_when_they_are_many() -> None:
    """More than 1500 line-ups lose their shapes; the number of each body stays in the words."""
    few, many = _lineups(1500), _lineups(1501)
    assert "Each mark is one line-up" in few.caption
    assert "Each square counts" in many.caption
    assert sum(int(n) for n in re.findall(r"[A-Z][a-z]+ (\d+)[,.]", many.alt)) == 1501


def test_a_line_up_without_an_angle_is_counted_as_left_out() -> None:
    """NaN and NaT vanish from the picture but not from the caption."""
    times = np.append(_instants(2), np.datetime64("NaT"))
    figure = lineup_chart("x", times, [1.0, np.nan, 2.0], ["sun", "Sun", "mars"])
    assert "1 line-up." in figure.caption
    assert "2 without an angle or a time" in figure.caption


def test_crowding_gives_the_mean_and_share_of_a_poisson_distribution() -> None:
    """For Poisson shares the caption states mean 3 and 1 - exp(-3) = 95.0 %: closed form."""
    caption = _crowding(300).caption
    part = stats.poisson.pmf(np.arange(12), 3.0)
    at_least_one = 100 * part[1:].sum()
    assert f"{at_least_one:.1f}\u00a0%" in caption
    assert "3.00 on average" in caption


def test_wide_bars_of_crowding_lose_no_time() -> None:
    """20,000 values of k become 40 bars of 500, and the average stays 9999.5: closed form."""
    shares = [(k, 1 / 20_000) for k in range(20_000)]
    figure = crowding_chart(shares, window_days=400)
    bars = re.findall(rf'<path[^>]*fill="{style.GREEN}"', figure.svg)
    assert len(bars) == 40
    assert "bars of 500" in " ".join(_texts(figure))
    assert "9\u2009999.50 on average" in figure.caption


def test_impossible_shares_are_refused() -> None:
    """Shares of more than the whole time, or a negative k, are a sentence and no picture."""
    for counts in ([(0, 0.7), (1, 0.7)], [(-1, 0.5)], [(0, -0.1)]):
        with pytest.raises(ValueError, match="give k of 0 or more"):
            crowding_chart(counts, window_days=1)


def test_asserted_dates_name_their_nearest_occurrence() -> None:
    """The caption says how far each asserted date is from what was found: by subtraction."""
    times = np.array(["1990-01-01", "2010-01-01"], dtype="datetime64[us]")
    span = (np.datetime64("1900-01-01"), date(2053, 1, 1))
    zone = timezone(timedelta(hours=9))
    said = [datetime(1990, 1, 31, 9, tzinfo=zone), date(2020, 1, 1), date(1583, 5, 1)]
    figure = occurrences_chart("x", times, None, None, said, span)
    assert "asserted 1990-01-31: 1990-01-01, 30.0 days away" in figure.caption
    assert "asserted 2020-01-01: 2010-01-01, 10.0 years away" in figure.caption
    assert "1583-05-01 was asserted but lies outside the span searched" in figure.caption
    assert {"1990-01-31", "2020-01-01"} <= set(_texts(figure))
    assert "1583-05-01" not in _texts(figure)


def test_the_axis_covers_the_whole_span_searched() -> None:
    """One occurrence in 1100 years stands on an axis with every century from 1600 to 2600."""
    texts = _texts(_occurrences(1, wide=True))
    assert {str(year) for year in range(1600, 2601, 100)} <= set(texts)


def test_an_occurrence_outside_the_span_is_refused() -> None:
    """A span that was not the one searched would show false gaps."""
    with pytest.raises(ValueError, match="2700-01-01 lies outside the span searched"):
        occurrences_chart("x", [np.datetime64("2700-01-01")], None, None, [], SEARCHED)
    with pytest.raises(ValueError, match="swap them"):
        occurrences_chart("x", [], None, None, [], SEARCHED[::-1])
    with pytest.raises(ValueError, match="2 times and 1 widths"):
        occurrences_chart("x", _instants(2), [1.0], 5.0, [], SEARCHED)


def test_labels_of_asserted_dates_never_meet_a_label_or_a_later_rule() -> None:
    """On 300 random sets of dates no two labels of a row overlap and no rule crosses a label."""
    rng = np.random.default_rng(9)
    for _ in range(300):
        places = np.sort(rng.random(rng.integers(1, 12)))
        rows = _label_rows(places)
        assert rows[-1] == 0
        for k, row in enumerate(rows):
            covered = rows[k + 1 :][places[k + 1 :] < places[k] + _LABEL_SHARE]
            assert row == -1 or (covered < row).all()


def test_many_ticks_become_counts() -> None:
    """More than 300 ticks would run together: bars count all of them, and the caption says so."""
    assert "Each tick is one" in _occurrences(300, wide=False).caption
    assert "Each bar counts" in _occurrences(301, wide=False).caption


def test_returns_count_what_lies_within_the_tolerance() -> None:
    """Agreement is counted by hand: 3 of 5 intervals are within half a year of 20."""
    figure = return_intervals_chart([19.4, 19.5, 20.0, 20.5, 20.6, np.nan], 20.0, 0.5, None)
    assert "3 of them lie within the 20 ± 0.5 years asserted" in figure.caption
    assert "does not start at 0" in figure.caption
    assert "does not start at 0" not in return_intervals_chart([0.2, 19.0], 20, 1, None).caption


def test_a_value_that_a_log_axis_cannot_hold_is_named() -> None:
    """Zero and NaN are named in the caption; an unknown kind is refused."""
    rows = [("Moon", 2000.0, "body"), ("Pluto", 0.0, "body"), ("rain", np.nan, "load")]
    figure = forcing_chart(rows, "Pa", note=NOTE)
    assert "not drawn: Pluto, rain." in figure.caption
    assert "2\u2009000" in _texts(figure)
    with pytest.raises(ValueError, match="of kind 'star'"):
        forcing_chart([("Vega", 1.0, "star")], "Pa", note=NOTE)


def test_the_tide_of_years_keeps_its_extremes() -> None:
    """Lowest and highest value of 200,000 instants survive the 600 parts: NumPy's own."""
    ms = np.arange(HUGE, dtype=float)
    values = np.random.default_rng(10).normal(size=HUGE)
    values[300:3000] = np.nan
    at, low, high = _stretches(ms, values)
    assert len(at) == len(low) == len(high) == 600
    assert (np.nanmin(low), np.nanmax(high)) == (np.nanmin(values), np.nanmax(values))
    assert np.isnan(low[1:5]).all()


def test_series_that_do_not_fit_are_refused() -> None:
    """Five lines, unequal lengths and falling times are sentences, not crooked pictures."""
    times = _instants(3)
    with pytest.raises(ValueError, match="5 lines do not fit"):
        tide_series("x", times, {str(k): [0.0] * 3 for k in range(5)}, "Pa")
    with pytest.raises(ValueError, match="'a' has 2 values for 3 times"):
        tide_series("x", times, {"a": [0.0, 1.0]}, "Pa")
    with pytest.raises(ValueError, match="have to rise"):
        tide_series("x", times[::-1], {"a": [0.0] * 3}, "Pa")


def test_the_band_of_phases_is_that_of_the_poisson_distribution() -> None:
    """The band holds 95 % or more of even counts, and would not if it were one narrower.

    Authority: SciPy's cumulative Poisson distribution.
    """
    for n in (24, 300, 4800):
        alt = _phases(n).alt
        low, high = (int(x) for x in re.findall(r"band is (\d+) to (\d+)", alt)[0])
        below = stats.poisson(n / 24).cdf
        assert below(high) - below(low - 1) >= 0.95
        assert below(high - 1) < 0.975
        assert low == 0 or below(low) >= 0.025


def test_phases_at_both_ends_share_no_bin_and_none_is_lost() -> None:
    """180 and -180 are one moment, counted in the first bin; phases beyond are refused."""
    figure = phase_histogram([-180.0, -180.0, 180.0, 0.0], 4, title="x", note=NOTE)
    assert "4 earthquakes in 4 bins of tidal phase, 0 to 3 per bin" in figure.alt
    assert "1 lie within 90 degrees" in figure.alt
    with pytest.raises(ValueError, match="a phase of 181 degrees"):
        phase_histogram([181.0], title="x", note=NOTE)
    with pytest.raises(ValueError, match="0 bins"):
        phase_histogram([1.0], 0, title="x", note=NOTE)


def test_the_histogram_of_phases_calls_itself_no_test(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """Caption and words say so, count what is missing, and name a cut axis."""
    for size in ("one", "typical", "huge"):
        figure = figures["phases", size]
        assert "no test" in figure.caption
        assert "no test" in figure.alt
        assert "7 earthquakes without a phase are left out" in figure.caption
    assert "does not start at 0" in figures["phases", "huge"].caption
    assert "does not start at 0" not in figures["phases", "typical"].caption
