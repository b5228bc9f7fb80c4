"""The line-up atlas against a fine grid, other libraries, published instants and itself."""

from __future__ import annotations

from contextlib import closing
from functools import cache
from importlib.resources import files
from itertools import combinations
from typing import Any

import numpy as np
import pandas as pd
import pytest
from epochtest.errors import EphemerisSpanError, ProtocolError
from epochtest.sky import atlas
from epochtest.sky.atlas import SUN_AND_PLANETS, find_lineups, select_aspect
from epochtest.sky.base_rates import base_rates, number_within
from epochtest.sky.directions import geometric_vectors, longitude_difference_deg
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.events import find_epochs
from epochtest.sky.lineup_geometry import BODIES, Triples
from epochtest.sky.slope_search import roots_in_cells, together, undecided_cells
from epochtest.study.events import LongitudeDifference
from epochtest.timescale import J2000_JD, tdb_days_from_utc
from hypothesis import given, seed, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from skyfield.api import load, load_file

Values = NDArray[np.float64]
LONG_SPAN = np.datetime64("1900-01-01", "us"), np.datetime64("2050-01-01", "us")
SPAN = np.datetime64("1925-03-01", "us"), np.datetime64("1955-03-01", "us")
MILLISECOND_DAYS = 1e-3 / 86400.0
NAMES = ["first", "middle", "last"]


@cache
def lineups_1900_2050() -> pd.DataFrame:
    """The 84 triples of Sun and planets."""
    return find_lineups(open_ephemeris("DE421"), SUN_AND_PLANETS, *LONG_SPAN)


@cache
def lineups_of_all_bodies() -> pd.DataFrame:
    """All 165 triples, Moon and Pluto included, in thirty years."""
    return find_lineups(open_ephemeris("DE421"), BODIES, *SPAN)


def of_three(lineups: pd.DataFrame, three: tuple[str, ...]) -> pd.DataFrame:
    """The rows of one triple."""
    return lineups[lineups[NAMES].isin(three).all(axis=1)]


def plain_lineups(
    places: dict[Any, Values], centre: Any, pair: tuple[Any, Any], grid: Values
) -> tuple[Values, NDArray[Any]]:
    """Instants, by linear interpolation, and whether each is an opposition: the slow, plain twin.

    It looks at longitudes from one of the three, not at areas.
    """
    one, other = (places[body] - places[centre] for body in pair)
    turns = longitude_difference_deg(one, other) / 180.0
    found, opposed = [], []
    for half in (0.0, 1.0):
        off = (turns - half + 1.0) % 2.0 - 1.0
        before, after = off[:-1], off[1:]
        cell = np.nonzero(((before < 0.0) != (after < 0.0)) & (np.abs(before - after) < 0.5))[0]
        share = off[cell] / (off[cell] - off[cell + 1])
        found.append(grid[cell] + share * (grid[cell + 1] - grid[cell]))
        opposed.append(np.full(cell.size, half == 1.0))
    days, is_opposition = np.concatenate(found), np.concatenate(opposed)
    order = np.argsort(days)
    return days[order], is_opposition[order]


@pytest.mark.parametrize(("moon", "years", "step"), [(True, 5, 0.03), (False, 30, 0.2)])
def test_holds_what_a_fine_grid_finds_for_every_triple(moon: bool, years: int, step: float) -> None:
    """All 165 triples: the same line-ups as a grid 27 to 57 times finer than that of the atlas.

    No more and no less, double roots next to stations included. The twin interpolates linearly,
    so near a station its instant is good to about a step.
    """
    first, last = tdb_days_from_utc(np.array(SPAN))
    last = min(last, first + 365.25 * years)
    grid = np.linspace(first, last, int((last - first) / step))
    vectors = geometric_vectors(open_ephemeris("DE421"), "sun", BODIES, grid)
    places = dict(zip(BODIES, vectors, strict=True))
    lineups = lineups_of_all_bodies()
    lineups = lineups[lineups["tdb_days"] < last]
    compared = 0
    for three in combinations(BODIES, 3):
        if ("moon" in three) != moon:
            continue
        expected, opposed = plain_lineups(places, three[2], three[:2], grid)
        rows = of_three(lineups, three)
        assert len(rows) == expected.size, three
        assert np.abs(rows["tdb_days"].to_numpy() - expected).max(initial=0.0) < step, three
        assert ((rows["middle"] == three[2]).to_numpy() == opposed).all(), three
        compared += expected.size
    assert compared > 1000


def test_grid_of_twice_the_step_finds_the_same(monkeypatch: pytest.MonkeyPatch) -> None:
    """The step has a margin of two: half as many steps per period lose and add nothing."""
    monkeypatch.setattr(atlas, "STEPS_PER_PERIOD", atlas.STEPS_PER_PERIOD // 2)
    coarse = find_lineups(open_ephemeris("DE421"), BODIES, *SPAN)
    usual = lineups_of_all_bodies()
    assert len(coarse) == len(usual)
    assert coarse[NAMES].equals(usual[NAMES])
    apart = coarse["tdb_days"].to_numpy() - usual["tdb_days"].to_numpy()
    assert np.abs(apart).max() < MILLISECOND_DAYS


@pytest.mark.parametrize(
    "three",
    [("earth", "mars", "saturn"), ("mercury", "venus", "mars"), ("earth", "uranus", "neptune")],
)
def test_double_roots_next_to_stations(three: tuple[Any, Any, Any]) -> None:
    """A level just short of a station of the area is met twice, one just beyond it never.

    The roots lie down to minutes apart; the cells of the grid span days, and all of them change
    sign nowhere. (Real line-ups of one triple come no nearer than 4.9 hours in 1550-2650.)
    """
    system = Triples(open_ephemeris("DE421"), three, np.array([[0, 1, 2]]))
    none = np.zeros(4000, dtype=np.intp)
    grid = np.linspace(0.0, 8000.0, 4000)
    area, rate = system.area(grid, none), system.area_rate(grid, none)
    turns = np.nonzero((rate[:-1] < 0.0) & (rate[1:] > 0.0))[0]
    assert turns.size >= 8
    for turn in turns[:8]:
        ends = grid[turn : turn + 2]
        zero = np.zeros(2, dtype=np.intp)
        cell = undecided_cells(
            ends, system.area_rate(ends, zero)[None], np.ones((1, 2)), np.zeros(1, dtype=np.intp)
        )
        station = roots_in_cells(system.area_rate, lambda d, _: np.ones_like(d), cell).days
        floor = float(system.area(station, zero[:1])[0])
        depth = float(area[turn : turn + 2].min() - floor)
        for short in (1e-2, 1e-4, 1e-6):
            for level, count in ((floor + short * depth, 2), (floor - short * depth, 0)):

                def value(days: Values, series: Any, level: float = level) -> Values:
                    return system.area(days, series) - level

                cells = undecided_cells(
                    ends,
                    (area[turn : turn + 2] - level)[None],
                    rate[turn : turn + 2][None],
                    np.zeros(1, dtype=np.intp),
                )
                roots = roots_in_cells(value, system.area_rate, cells)
                assert roots.days.size == count
                if count:
                    assert roots.days[0] < station[0] < roots.days[1]
                    assert roots.rising.tolist() == [False, True]


def test_roots_on_grid_points_count_once() -> None:
    """Zero at a grid point, in either direction, and a mere touch between: closed form."""
    grid = np.arange(-4.0, 5.0)

    def value(days: Values, series: Any) -> Values:
        return np.where(series == 0, days * (days - 2.0) * (days + 2.0), (days - 0.5) ** 2)

    def slope(days: Values, series: Any) -> Values:
        return np.where(series == 0, 3.0 * days**2 - 4.0, 2.0 * (days - 0.5))

    cells = [
        undecided_cells(
            grid,
            value(grid, np.full(grid.size, row))[None],
            slope(grid, np.full(grid.size, row))[None],
            np.array([row]),
        )
        for row in (0, 1)
    ]
    roots = roots_in_cells(value, slope, together(cells))
    assert roots.days == pytest.approx([-2.0, 0.0, 0.5, 2.0], abs=1e-9)
    assert roots.series.tolist() == [0, 0, 1, 0]
    assert roots.rising.tolist() == [True, False, False, True]  # a touch from above rises not


@pytest.mark.parametrize("centre", ["sun", "mercury", "earth", "mars", "saturn"])
def test_a_pair_seen_from_a_centre_is_a_selection(centre: Any) -> None:
    """`find_epochs` and the rows of the atlas are the same instants, for every pair and aspect.

    Both are good to 0.1 ms of the ephemeris, and tdb_days resolves 0.001 ms.
    """
    ephemeris = open_ephemeris("DE421")
    for pair in combinations([body for body in SUN_AND_PLANETS if body != centre], 2):
        for aspect in ("conjunction", "opposition"):
            event = LongitudeDifference(centre=centre, bodies=pair, aspect=aspect)
            epochs = find_epochs(event, ephemeris, *SPAN)["tdb_days"].to_numpy()
            rows = select_aspect(lineups_of_all_bodies(), centre, pair, aspect)
            assert len(rows) == epochs.size, (pair, aspect)
            apart = np.abs(rows["tdb_days"].to_numpy() - epochs).max(initial=0.0)
            assert apart < 0.3 * MILLISECOND_DAYS, (pair, aspect)


# Heliocentric conjunctions, JD (TT): computed with Skyfield 1.55 from DE440, printed to 1e-5 day.
@pytest.mark.parametrize(
    ("pair", "jd"),
    [
        (("venus", "earth"), 2447910.44202),
        (("mercury", "earth"), 2449297.64390),
        (("earth", "mars"), 2452880.24482),
        (("mercury", "venus"), 2455279.71012),
        (("mars", "jupiter"), 2458986.14141),
        (("jupiter", "saturn"), 2459156.27198),
        (("jupiter", "uranus"), 2455463.63256),
        (("saturn", "uranus"), 2447322.15072),
    ],
)
def test_heliocentric_conjunctions(pair: tuple[Any, Any], jd: float) -> None:
    """The atlas of DE440 holds them, to the last printed place (0.9 s)."""
    middle = np.datetime64("2000-01-01T12:00", "us") + np.timedelta64(round(jd - J2000_JD), "D")
    edges = middle - np.timedelta64(30, "D"), middle + np.timedelta64(30, "D")
    lineups = find_lineups(open_ephemeris("DE440"), ("sun", *pair), *edges)
    rows = select_aspect(lineups, "sun", pair, "conjunction")
    assert np.abs(rows["tdb_days"] + J2000_JD - jd).min() < 1e-5


def test_jupiter_and_saturn_over_a_millennium() -> None:
    """55 heliocentric conjunctions 1560-2640, 19.134 to 20.520 years apart (DE440, Skyfield)."""
    lineups = find_lineups(
        open_ephemeris("DE440"), ("sun", "jupiter", "saturn"), "1560-01-01", "2640-01-01"
    )
    rows = select_aspect(lineups, "sun", ("jupiter", "saturn"), "conjunction")
    years = np.diff(rows["tdb_days"]) / 365.25
    assert len(rows) == 55
    assert (years.min(), years.max()) == pytest.approx((19.134, 20.520), abs=5e-4)


def test_geometry_against_skyfield() -> None:
    """Misses and distances of 40 random rows equal Skyfield's separations in DE421.

    Skyfield's angle of two vectors is good to about 1e-7 degrees; so are its times (0.04 ms).
    """
    scale = load.timescale(builtin=True)
    rows = lineups_of_all_bodies().sample(40, random_state=3)
    with closing(load_file(str(files("skyfield_data").joinpath("data/de421.bsp")))) as kernel:
        compare_with_skyfield(rows, kernel, scale)


def compare_with_skyfield(rows: pd.DataFrame, kernel: Any, scale: Any) -> None:
    """Angles and distances of each row, from Skyfield's positions."""
    names = {"sun": "sun", "moon": "moon", "earth": "earth"}
    for row in rows.itertuples():
        when = scale.tdb_jd(J2000_JD, row.tdb_days)
        first, middle, last = (
            kernel[names.get(name, f"{name} barycenter")].at(when)
            for name in (row.first, row.middle, row.last)
        )
        from_first = (middle - first).separation_from(last - first).degrees
        from_middle = 180.0 - (first - middle).separation_from(last - middle).degrees
        from_last = (middle - last).separation_from(first - last).degrees
        assert row.miss_from_first_deg == pytest.approx(from_first, abs=1e-6)
        assert row.miss_from_middle_deg == pytest.approx(from_middle, abs=1e-6)
        assert row.miss_from_last_deg == pytest.approx(from_last, abs=1e-6)
        assert row.distance_first_middle_au == pytest.approx((middle - first).distance().au)
        assert row.distance_middle_last_au == pytest.approx((last - middle).distance().au)


def test_misses_are_the_angles_of_a_triangle() -> None:
    """The misses from the ends add up to the one from the middle, which is the signed bend.

    The angles of a triangle make 180 degrees (Euclid, Elements I.32); the bend equals them
    because a line-up lies in one plane with the pole of the ecliptic.
    """
    rows = lineups_of_all_bodies()
    bend = rows["miss_from_middle_deg"]
    assert np.allclose(rows["miss_from_first_deg"] + rows["miss_from_last_deg"], bend, atol=1e-9)
    # Half a millisecond of the Moon beside the Earth is 2e-9 of a turn.
    assert np.allclose(rows["out_of_plane_deg"].abs(), bend, atol=1e-6)
    order = {name: place for place, name in enumerate(BODIES)}
    assert (rows["first"].map(order) < rows["last"].map(order)).all()


@pytest.mark.parametrize(("year", "north"), [(2004, False), (2012, True)])
def test_sign_of_the_out_of_plane_angle(year: int, north: bool) -> None:
    """Venus crossed the Sun's southern half in 2004 and its northern half in 2012.

    Common knowledge of the two transits (from memory): north of the Sun's centre for us means
    north of the line from the Sun to the Earth.
    """
    lineups = find_lineups(
        open_ephemeris("DE421"), ("sun", "venus", "earth"), f"{year}-06-01", f"{year}-06-15"
    )
    assert lineups[NAMES].to_numpy().tolist() == [["sun", "venus", "earth"]]
    assert bool(lineups["out_of_plane_deg"].iloc[0] > 0.0) == north
    assert lineups["miss_from_last_deg"].iloc[0] < 0.267  # the Sun's radius seen from the Earth


def test_spans_that_share_an_end_share_nothing_else(monkeypatch: pytest.MonkeyPatch) -> None:
    """Cut at a line-up's very microsecond, and in chunks of another size, the table is the same."""
    ephemeris = open_ephemeris("DE421")
    bodies = (*SUN_AND_PLANETS, "moon")
    edges = SPAN[0], SPAN[0] + np.timedelta64(1500, "D")
    whole = find_lineups(ephemeris, bodies, *edges)
    cut = whole["time_utc"].to_numpy()[len(whole) // 2]
    parts = [find_lineups(ephemeris, bodies, edges[0], cut)]
    monkeypatch.setattr(atlas, "CHUNK_POINTS", 512)
    parts.append(find_lineups(ephemeris, bodies, cut, edges[1]))
    joined = pd.concat(parts, ignore_index=True)
    assert joined[NAMES].equals(whole[NAMES])
    assert np.abs(joined["tdb_days"] - whole["tdb_days"]).max() < MILLISECOND_DAYS
    assert whole["time_utc"].is_monotonic_increasing


def test_named_triples_are_rows_of_the_whole() -> None:
    """Triples in any order, named twice, give the rows of these three alone."""
    triples: Any = [
        ("saturn", "sun", "jupiter"),
        ("sun", "jupiter", "saturn"),
        ("moon", "earth", "sun"),
    ]
    found = find_lineups(open_ephemeris("DE421"), BODIES, *SPAN, triples=triples)
    everything = lineups_of_all_bodies()
    expected = pd.concat([of_three(everything, three) for three in triples[1:]])
    expected = expected.sort_values("tdb_days").reset_index(drop=True)
    assert found[NAMES].equals(expected[NAMES])
    assert np.abs(found["tdb_days"] - expected["tdb_days"]).max() < MILLISECOND_DAYS
    assert find_lineups(open_ephemeris("DE421"), BODIES, *SPAN, triples=[]).empty


def test_whole_kernel_and_empty_span() -> None:
    """To the very ends of the kernel and no further; an empty span keeps the column types."""
    ephemeris = open_ephemeris("DE421")
    three = ("sun", "earth", "moon")
    whole = find_lineups(ephemeris, three, *ephemeris.covered_utc)
    first, last = ephemeris.covered_utc
    month = np.timedelta64(15, "D")
    assert whole["time_utc"].iloc[0] < first + month
    assert whole["time_utc"].iloc[-1] > last - month
    with pytest.raises(EphemerisSpanError, match="DE440") as caught:
        find_lineups(ephemeris, three, "1890-01-01", "1950-01-01")
    assert caught.value.outside.tolist() == [True, False]
    empty = find_lineups(ephemeris, three, "1950-01-01", "1950-01-01")
    assert empty.empty
    assert empty.dtypes.equals(whole.dtypes)


@pytest.mark.parametrize(
    ("bodies", "triples", "words"),
    [
        (("sun", "earth"), None, "at least three bodies, but found sun, earth"),
        (("sun", "earth", "vulcan"), None, "'vulcan'.* name some of sun, mercury"),
        (("sun", "earth", "earth"), None, "named twice in sun, earth, earth"),
        (("sun", "earth", "mars"), [("sun", "earth", "moon")], "'moon'.* name some of sun, earth"),
        (("sun", "earth", "mars"), [("sun", "earth")], "three bodies, but found sun, earth"),
        (("sun", "earth", "mars"), [("sun", "earth", "sun")], "named twice"),
    ],
)
def test_impossible_lineups_are_refused(bodies: Any, triples: Any, words: str) -> None:
    """One sentence with what was found and what can be chosen."""
    with pytest.raises(ProtocolError, match=words):
        find_lineups(open_ephemeris("DE421"), bodies, *SPAN, triples=triples)


def test_a_body_is_never_its_own_centre() -> None:
    """A selection of three bodies of which two are the same is refused."""
    with pytest.raises(ProtocolError, match="cannot be seen from itself"):
        select_aspect(lineups_1900_2050(), "earth", ("earth", "mars"), "conjunction")


def test_rates_of_the_family_of_84() -> None:
    """143 line-ups a year; 55 % of instants within 1 day of one, 80 % within 2 days.

    DE421, 1900-2050, computed independently on a grid; to the printed places.
    """
    rates = base_rates(lineups_1900_2050(), *LONG_SPAN, half_widths_days=(1.0, 2.0))
    assert rates.lineups == len(lineups_1900_2050())
    assert rates.per_year == pytest.approx(143.0, abs=0.5)
    assert rates.nearby["share_of_time"].to_numpy() == pytest.approx([0.55, 0.80], abs=0.005)


def test_number_nearby_of_even_events() -> None:
    """Events every 10 days, +-12 days: three of them in 4/10 of the time, two in the rest.

    Closed form: an open interval of 24 days holds 2 or 3 marks of a scale of 10.
    """
    table = number_within(np.arange(0.0, 1001.0, 10.0), 12.0, 0.0, 1024.0 - 24.0)
    assert table["number"].tolist() == [0, 1, 2, 3]
    # From 12 to 988: 97 whole periods and 6 days, from 2 to 8 after a mark, with two marks near.
    three = 97 * 4.0 / 976.0
    assert table["share_of_time"].to_numpy() == pytest.approx([0.0, 0.0, 1.0 - three, three])
    assert table["share_at_least"].to_numpy() == pytest.approx([1.0, 1.0, 1.0, three])


@seed(5)
@settings(max_examples=50, deadline=None)
@given(
    st.lists(st.integers(0, 400), max_size=30),
    st.integers(1, 40),
)
def test_number_nearby_against_counting(events: list[int], half_width: int) -> None:
    """The sweep equals counting at the middle of every quarter day, where nothing can change."""
    days = np.array(events, dtype=float) / 4.0
    width = half_width / 4.0
    middles = np.arange(width, 100.0 - width, 0.25) + 0.125
    counts = (np.abs(middles[:, None] - days[None]) < width).sum(axis=1)
    expected = np.bincount(counts) / counts.size
    table = number_within(days, width, 0.0, 100.0)
    assert table["share_of_time"].to_numpy() == pytest.approx(expected)
    assert table["share_at_least"].iloc[0] == pytest.approx(1.0)


@pytest.mark.parametrize("half_width", [0.0, -1.0, 60.0, np.nan])
def test_widths_that_cannot_be_counted(half_width: float) -> None:
    """A width that leaves no instant, or none at all, is refused with both numbers."""
    with pytest.raises(ProtocolError, match=r"span of 100 days; give a positive half width"):
        number_within([50.0], half_width, 0.0, 100.0)
