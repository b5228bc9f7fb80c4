"""Charts: they hold for any input, state their numbers in words, and work without a network."""

import re
import subprocess
import sys
import xml.etree.ElementTree as ET
from collections.abc import Callable
from html.parser import HTMLParser
from pathlib import Path

import altair
import numpy as np
import pytest
from epochtest.charts import (
    EffectRow,
    Figure,
    cumulative_count,
    effect_chart,
    epicentre_map,
    epochs_per_year,
    interval_histogram,
    lag_chart,
    magnitude_frequency,
    magnitude_time,
    null_histogram,
    style,
    timeline,
)
from epochtest.charts.nulls import _bars
from epochtest.charts.projection import sheet_around, unwrap, west_edge
from epochtest.charts.timeline import calendar_counts
from epochtest.study.results import SizeDistribution

HUGE = 1_000_000
SPAN = (np.datetime64("1990-01-01", "us"), np.datetime64("2020-01-01", "us"))
SIZES = {"empty": 0, "one": 1, "typical": 500, "huge": HUGE}


def _catalog(n: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Times, latitudes, longitudes (an arc across the dateline) and magnitudes, invented."""
    rng = np.random.default_rng(20260101)
    width = (SPAN[1] - SPAN[0]).astype(np.int64)
    times = SPAN[0] + rng.integers(0, width, n).astype("timedelta64[us]")
    lon = (170.0 + 25.0 * rng.random(n) + 180.0) % 360.0 - 180.0
    mag = np.round(4.0 + rng.exponential(1 / np.log(10), n), 1)
    return times, 50.0 + 5.0 * rng.random(n), lon, mag


def _distribution(mag: np.ndarray) -> SizeDistribution:
    above = int(np.sum(mag >= 4.45))
    known = above > 1
    return SizeDistribution(
        bin_width=0.1,
        mc_maximum_curvature=4.3 if known else None,
        mc=4.5 if known else None,
        n_above=above,
        b=1.02 if known else None,
        b_error=0.03 if known else None,
    )


def _lags(n: int) -> Figure:
    counts = np.bincount(np.arange(n) % 30, minlength=30)
    even = np.full(30, n / 30)
    spread = 2 * np.sqrt(even)
    return lag_chart(
        "Invented claim",
        edges_days=np.arange(-15.0, 16.0),
        counts=counts,
        mean=even,
        pointwise=(even - spread, even + spread),
        simultaneous=(even - 2 * spread, even + 2 * spread),
        window_days=(0.0, 3.0),
        n_epochs=17,
    )


def _nulls(n: int) -> Figure:
    hits = np.random.default_rng(7).poisson(40, n)
    table = np.unique(hits, return_counts=True)
    return null_histogram(
        table, observed=49, mean=40.0, p=0.0412, direction="more", name="circular-shift"
    )


def _effects(n: int) -> Figure:
    row = EffectRow("Invented", 1.04, (0.93, 1.16), (0.86, None), 1.22, 1.25, "none detected")
    return effect_chart([row._replace(title=f"Invented {k}") for k in range(min(n, 12))])


DRAWN: dict[str, Callable[[int], Figure]] = {
    "lags": _lags,
    "null": _nulls,
    "timeline": lambda n: timeline(
        SPAN, _catalog(min(n, 2000))[0], _catalog(n)[0], _catalog(n)[3], (0.0, 3.0)
    ),
    "map": lambda n: epicentre_map(*(_catalog(n)[k] for k in (1, 2, 3)), box=(170, 50, -165, 55)),
    "sizes": lambda n: magnitude_frequency(_catalog(n)[3], _distribution(_catalog(n)[3])),
    "cumulative": lambda n: cumulative_count(_catalog(n)[0], SPAN),
    "history": lambda n: magnitude_time(_catalog(n)[0], _catalog(n)[3]),
    "epochs": lambda n: epochs_per_year({str(1500 + k): 12 for k in range(min(n, 1100))}),
    "intervals": lambda n: interval_histogram(np.full(n, 29.5) + np.arange(n) % 7),
    "effect": _effects,
}


class _Page(HTMLParser):
    """Collects what a browser would see of a page: ids, labels, tags."""

    def __init__(self) -> None:
        super().__init__()
        self.ids: list[str] = []
        self.labels: list[str] = []
        self.tags: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        for name, value in attrs:
            if name == "id":
                self.ids.append(value or "")
            if name == "aria-label":
                self.labels.append(value or "")


def _read(html: str) -> _Page:
    page = _Page()
    page.feed(html)
    return page


@pytest.fixture(scope="module")
def figures() -> dict[tuple[str, str], Figure]:
    """Every chart for no, one, 500 and a million events, drawn once."""
    return {(k, size): draw(n) for k, draw in DRAWN.items() for size, n in SIZES.items()}


def test_every_chart_is_well_formed_and_needs_no_network(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """Any input gives an XML document with no script and no address but the SVG namespace.

    Authority: SVG 1.1 (W3C, 2011) for the namespace; the XML parser for well-formedness.
    """
    for name, figure in figures.items():
        root = ET.fromstring(figure.svg)
        assert root.tag == "{http://www.w3.org/2000/svg}svg", name
        assert root.get("viewBox"), name
        assert "max-width:100%" in (root.get("style") or ""), name
        rest = figure.svg.replace('xmlns="http://www.w3.org/2000/svg"', "")
        assert not re.search(r"https?:|//[a-z]|<script|<image|@import", rest), name


def test_a_million_earthquakes_make_no_larger_a_picture_than_the_cells_allow(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """Binning happens before drawing: 20,000 unbinned points would be 5.7 MB.

    The limit of 0.6 MB is 3000 cells of the densest map at about 150 bytes with reserve.
    """
    for name in DRAWN:
        assert len(figures[name, "huge"].svg) < 600_000, name
    assert altair.data_transformers.options.get("max_rows", 5000) == 5000


def test_nothing_to_draw_is_said_in_words(figures: dict[tuple[str, str], Figure]) -> None:
    """An empty input gives a sentence, in the picture and in its words, and not an error."""
    for name in DRAWN:
        figure = figures[name, "empty"]
        assert re.search(r"\b(No|Fewer)\b", figure.caption), name
        assert figure.caption in figure.alt, name
        assert figure.caption in "".join(ET.fromstring(figure.svg).itertext()), name


def test_charts_on_one_page_share_no_id(figures: dict[tuple[str, str], Figure]) -> None:
    """Ids of all charts differ and every reference inside a chart points into that chart.

    Authority: HTML Living Standard, 3.2.6: an id is unique in its tree.
    """
    page = _read("".join(figure._repr_html_() for figure in figures.values()))
    assert page.ids
    assert len(page.ids) == len(set(page.ids))
    for name, figure in figures.items():
        own = set(_read(figure.svg).ids)
        assert set(re.findall(r"url\(#([^)]+)\)", figure.svg)) <= own, name
        assert all(one.startswith(name[0]) for one in own), name


def test_the_same_input_gives_the_same_bytes(figures: dict[tuple[str, str], Figure]) -> None:
    """Drawing again in the same process, after other charts, changes no byte."""
    for name, draw in DRAWN.items():
        assert draw(SIZES["typical"]) == figures[name, "typical"], name


def test_another_process_in_another_time_zone_gives_the_same_bytes(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """The time axis is UTC wherever the study runs (POSIX TZ rule, 9 h off)."""
    code = (
        "import sys, hashlib; sys.path[:0] = sys.argv[1:]\n"
        "import numpy as np; from epochtest.charts import cumulative_count\n"
        "t = np.datetime64('2001-01-01', 'us') + np.arange(0, 900, 9).astype('timedelta64[D]')\n"
        "print(hashlib.sha256(cumulative_count(t).svg.encode()).hexdigest())"
    )
    seen = {
        subprocess.run(
            [sys.executable, "-c", code, *sys.path],
            env={"TZ": zone, "PATH": "/usr/bin:/bin"},
            capture_output=True,
            text=True,
            check=True,
        ).stdout
        for zone in ("UTC0", "XXX-9")
    }
    assert len(seen) == 1


def test_the_words_state_the_numbers(figures: dict[tuple[str, str], Figure]) -> None:
    """The alternative text holds the numbers a sighted reader takes from the picture."""
    stated = {
        "lags": ["17 epochs", "500 counted", "null's mean"],
        "null": ["Observed 49", "p = 0.0412", "500 shifts"],
        "timeline": ["500 earthquakes", "500 epochs", "0 to 3 days"],
        "map": ["500 epicentres", "eastward"],
        "sizes": ["500 earthquakes", "Mc 4.5", "b = 1.02 ± 0.03"],
        "cumulative": ["500 earthquakes", "1990-01-01"],
        "history": ["500 earthquakes"],
        "epochs": ["6000 epochs"],
        "intervals": ["500 intervals", "shortest 29.50"],
        "effect": ["1.04", "0.86–∞", "1.22", "none detected"],
    }
    assert stated.keys() == DRAWN.keys()
    for name, parts in stated.items():
        figure = figures[name, "typical"]
        assert all(part in figure.alt for part in parts), (name, figure.alt)
        assert _read(figure._repr_html_()).labels == [figure.alt], name


def test_a_title_full_of_markup_stays_text(tmp_path: Path) -> None:
    """Titles come from claim files: quotes, angle brackets and ampersands cannot break a page."""
    nasty = 'A "quote" <script>alert(1)</script> & more'
    row = EffectRow(nasty, 1.0, (0.9, 1.1), (0.8, 1.2), 1.3, None, "cannot tell")
    figure = effect_chart([row])
    page = _read(figure._repr_html_())
    assert "script" not in page.tags
    assert nasty in page.labels[0]
    saved = ET.parse(figure.save_svg(tmp_path / "effect.svg")).getroot()
    assert nasty in (saved.findtext("{http://www.w3.org/2000/svg}desc") or "")
    assert [path.name for path in tmp_path.iterdir()] == ["effect.svg"]


def test_pictures_are_png_on_both_pages(tmp_path: Path) -> None:
    """`save_png` writes PNG files (signature of ISO/IEC 15948) that differ by page."""
    figure = _nulls(500)
    light = figure.save_png(tmp_path / "light.png", scale=1).read_bytes()
    dark = figure.save_png(tmp_path / "dark.png", scale=1, dark=True).read_bytes()
    assert light[:8] == dark[:8] == b"\x89PNG\r\n\x1a\n"
    assert light != dark


def _luminance(colour: str) -> float:
    """Relative luminance of WCAG 2.2."""
    parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_colours_stand_out_on_light_and_dark_pages() -> None:
    """Series colours reach 3:1 on white and on #121212: WCAG 2.2, criterion 1.4.11."""
    for colour in style.PALETTE:
        for page in ("#ffffff", "#121212"):
            pair = sorted((_luminance(colour), _luminance(page)))
            assert (pair[1] + 0.05) / (pair[0] + 0.05) >= 3.0, (colour, page)


def test_only_the_palette_and_the_ink_of_the_page_are_used(
    figures: dict[tuple[str, str], Figure],
) -> None:
    """No fixed black or white that would vanish on one of the two pages."""
    allowed = {*(c.lower() for c in style.PALETTE), "currentcolor", "none", "transparent"}
    for name, figure in figures.items():
        used = {c.lower() for c in re.findall(r'(?:fill|stroke)="([^"]+)"', figure.svg)}
        assert used <= allowed, (name, used - allowed)


def test_the_map_keeps_an_arc_across_the_dateline_whole() -> None:
    """Longitudes 170..195 east stay 25 degrees wide, wherever they were wrapped.

    Authority: closed form; the widest gap of such points is the other 335 degrees.
    """
    rng = np.random.default_rng(3)
    for _ in range(200):
        west = rng.uniform(-180, 180)
        lon = (west + np.append([0.0, 25.0], 25.0 * rng.random(30)) + 180.0) % 360.0 - 180.0
        flat = unwrap(lon, west_edge(lon))
        assert np.ptp(flat) == pytest.approx(25.0, abs=1e-9)
        np.testing.assert_allclose((flat - lon + 180.0) % 360.0, 180.0, atol=1e-9)


def test_the_map_labels_both_sides_of_the_dateline() -> None:
    """Past 180 the graticule reads west, as on any chart (common practice)."""
    figure = epicentre_map([50.0, 52.0, 54.0], [158.0, 179.0, -174.0], [5.0, 6.0, 7.0])
    words = [w for w in ET.fromstring(figure.svg).itertext() if w.endswith(("E", "W", "180°"))]
    assert words == ["160°E", "165°E", "170°E", "175°E", "180°", "175°W"]


def test_one_degree_of_longitude_takes_the_cosine_of_the_latitude() -> None:
    """The sheet's scales are in the ratio cos(middle latitude), to the pixel's thousandth.

    Authority: the equirectangular projection with a standard parallel (Snyder 1987, ch. 12).
    """
    for south, north, width in ((45, 55, 30), (-5, 5, 300), (30, 70, 4), (-60, -59, 40)):
        sheet = sheet_around(np.array([south, north], float), np.array([0.0, width]))
        per_lon = sheet.width / (sheet.east - sheet.west)
        per_lat = sheet.height / (sheet.north - sheet.south)
        middle = np.radians((sheet.south + sheet.north) / 2)
        assert per_lon / per_lat == pytest.approx(np.cos(middle), rel=1e-3)


def test_calendar_bins_lose_no_earthquake_and_respect_leap_years() -> None:
    """Counts per month and year are those of pandas' own resampling."""
    import pandas as pd

    times = _catalog(5000)[0]
    for unit, rule in (("M", "MS"), ("Y", "YS"), ("D", "D")):
        edges, counts = calendar_counts(times, *SPAN, unit)
        series = pd.Series(1, index=pd.DatetimeIndex(times)).resample(rule).sum()
        assert counts.sum() == 5000
        assert len(edges) == len(counts) + 1
        at = pd.Series(counts, index=pd.DatetimeIndex(edges[:-1]))
        np.testing.assert_array_equal(at[series.index].to_numpy(), series.to_numpy())


def test_the_marked_tail_is_the_counted_tail() -> None:
    """The bars at or beyond the observed number hold exactly the shifts at or beyond it.

    Authority: direct counting of 100,000 simulated hits with a span of several hundred.
    """
    hits = np.random.default_rng(11).poisson(5000, 100_000)
    values, weights = np.unique(hits, return_counts=True)
    for observed in (4870, 5001, 5133):
        for upward in (True, False):
            _, width, share, tail = _bars(values, weights, observed, upward=upward)
            assert width > 1
            counted = np.mean(hits >= observed if upward else hits <= observed)
            assert share[tail].sum() == pytest.approx(counted, abs=1e-12)
            assert share.sum() == pytest.approx(1.0, abs=1e-12)


def test_two_thousand_epochs_are_counted_per_year() -> None:
    """Ticks that would run together become counts, and the caption says so."""
    few = timeline(SPAN, _catalog(100)[0], _catalog(50)[0], _catalog(50)[3], (0, 3))
    many = timeline(SPAN, _catalog(2000)[0], _catalog(50)[0], _catalog(50)[3], (0, 3))
    assert "each tick is one epoch" in few.caption
    assert "epochs are counted per year" in many.caption


def test_high_counts_are_drawn_on_an_axis_that_says_it_is_cut() -> None:
    """Where bars from 0 would hide a difference of 1 %, the caption names the cut axis."""
    assert "does not start at 0" not in _lags(500).caption
    assert "does not start at 0" in _lags(HUGE).caption


def test_axes_of_counts_are_labelled_at_whole_numbers() -> None:
    """One earthquake gives the labels 0 and 1 and nothing between; steps are 1, 2 or 5."""
    words = list(ET.fromstring(epochs_per_year({"2001": 1}).svg).itertext())
    assert [word for word in words if word.isdigit()] == ["2001", "0", "1"]
    assert style.whole_ticks(-0.5, 1.5) == [0, 1]
    assert style.whole_ticks(13203, 17014, 10) == list(range(13500, 17001, 500))


def test_lags_that_do_not_fit_their_edges_are_refused() -> None:
    """A mismatch of counts and edges is a sentence, not a crooked picture."""
    with pytest.raises(ValueError, match="need 4 edges, found 3"):
        lag_chart(
            "x",
            edges_days=[0, 1, 2],
            counts=[1, 2, 3],
            mean=1,
            pointwise=(0, 2),
            simultaneous=None,
            window_days=(0, 1),
            n_epochs=1,
        )


def test_no_caption_sounds_like_a_forecast(figures: dict[tuple[str, str], Figure]) -> None:
    """Words of prediction appear only in the sentence that denies them."""
    from epochtest.study.results import CAUTION

    for name, figure in figures.items():
        text = f"{figure.title} {figure.caption} {figure.alt}".replace(CAUTION, "")
        assert not re.search(r"forecast|predict|warn|danger|risk|will ", text, re.I), name
    assert CAUTION in figures["effect", "typical"].caption


def test_importing_the_tables_does_not_import_altair() -> None:
    """Only charts pay for Altair: a fresh interpreter with the tables has not loaded it."""
    code = "import sys; sys.path[:0] = sys.argv[1:]\nimport epochtest.tables\n"
    code += "sys.exit('altair' in sys.modules or 'rich' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code, *sys.path], check=False)
    assert done.returncode == 0
