"""Groupings against published dates, other theories, closed forms and a plain fine grid."""

from __future__ import annotations

from itertools import pairwise
from typing import Any

import astronomy
import numpy as np
import pandas as pd
import pytest
from epochtest.errors import EphemerisSpanError, ProtocolError
from epochtest.sky import arcs
from epochtest.sky.arcs import smallest_arc
from epochtest.sky.directions import geometric_ecliptic
from epochtest.sky.ephemeris import Ephemeris, open_ephemeris
from epochtest.sky.groupings import find_groupings
from epochtest.sky.mean_motion import (
    chance_within_arc,
    entries_within_arc_per_day,
    mean_rate_deg_per_day,
)
from epochtest.timescale import J2000_JD, tdb_days_from_utc
from hypothesis import example, given, seed, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from pymeeus import Earth, Jupiter, Mars, Mercury, Saturn, Venus
from pymeeus.Epoch import Epoch

Values = NDArray[np.float64]
NAKED_EYE = ("mercury", "venus", "mars", "jupiter", "saturn")
PLANETS = (
    "mercury", "venus", "earth", "mars", "jupiter", "saturn", "uranus", "neptune",
)  # fmt: skip
ARCSECOND_DEG = 1.0 / 3600.0


def utc(text: str) -> np.datetime64:
    """One instant."""
    return np.datetime64(text, "us")


def plain_arc(longitudes_deg: Values, turn: float) -> Values:
    """The smallest arc by its definition: start at each body, go forward to the farthest."""
    ahead = (longitudes_deg[None] - longitudes_deg[:, None]) % turn
    width: Values = ahead.max(axis=1).min(axis=0)
    return width


@seed(31)
@settings(max_examples=300, deadline=None)
@example(angles=[-1.4567862692795757, -1.4567862692795757], line=False, turned=0.0)
@given(
    st.lists(st.floats(-720.0, 720.0), min_size=2, max_size=9),
    st.booleans(),
    st.floats(-360.0, 360.0),
)
def test_smallest_arc_by_its_definition(angles: list[float], line: bool, turned: float) -> None:
    """The width is that of the definition, turns with nothing, and its edges are where it says.

    1e-9 degrees: float64 keeps 1e-13 of 720 degrees, and a body on the very seam may fall a
    rounding beyond it, which the modulus in the definition makes a full turn.
    """
    turn = 180.0 if line else 360.0
    longitudes = np.array(angles)[:, None]
    arc = smallest_arc(longitudes, along_line=line)
    width = arc.width_deg[0]
    nudged = np.round(longitudes % turn, 9) % turn
    assert width == pytest.approx(plain_arc(nudged, turn)[0], abs=1e-8)
    assert smallest_arc(longitudes + turned, along_line=line).width_deg[0] == pytest.approx(
        width, abs=1e-9
    )
    assert 0.0 <= width < turn
    ahead = (longitudes[:, 0] - arc.start_deg[0] + 1e-9) % turn - 1e-9
    assert ahead.max() == pytest.approx(width, abs=1e-8)
    assert ahead[arc.trailing[0]] == pytest.approx(0.0, abs=1e-8)
    assert ahead[arc.leading[0]] == pytest.approx(width, abs=1e-8)


def test_five_naked_eye_planets(de440: Ephemeris) -> None:
    """Mercury to Saturn within 9.25 degrees on 2040-09-08 and 19.42 on 2000-05-17.

    The first value and both dates: METHODS A, computed on a grid of days. That list has 19.66
    degrees for 2000, the width at 0h TT (checked below); the minimum is a kink at 10:25 UTC and
    narrower by a quarter of a degree. 0.005: one half of the last printed place.
    """
    table = find_groupings(de440, "earth", NAKED_EYE, 25.0, utc("1990-01-01"), utc("2050-01-01"))
    assert table["width_deg"].to_numpy() == pytest.approx([19.42, 9.25], abs=0.005)
    instants = table["time_utc"].to_numpy()
    listed = np.array([utc("2000-05-17T10:25"), utc("2040-09-08T00:00")])
    # The minimum of 2040 lies 10 min before midnight UTC, and 64 s + Delta T after it in TT.
    assert (np.abs(instants - listed) < np.timedelta64(15, "m")).all()
    longitudes = [geometric_ecliptic(de440, "earth", body, 137.5 - 1.0)[0] for body in NAKED_EYE]
    assert plain_arc(np.array(longitudes), 360.0)[0] == pytest.approx(19.66, abs=0.005)
    assert table["trailing_bodies"].tolist() == ["venus+jupiter", "mercury+jupiter"]
    assert table["leading_bodies"].tolist() == ["mars", "mars"]


# Theories that are independent of the JPL kernels, with the error of a longitude: the stated
# truncation of astronomy-engine, and half an arcsecond for VSOP87 (METHODS A).
VSOP87 = {
    "mercury": Mercury.Mercury, "venus": Venus.Venus, "earth": Earth.Earth, "mars": Mars.Mars,
    "jupiter": Jupiter.Jupiter, "saturn": Saturn.Saturn,
}  # fmt: skip


def truncated(body: str, tdb_days: float) -> Values:
    """Heliocentric vector in au, J2000 ecliptic, from astronomy-engine."""
    time = astronomy.Time.FromTerrestrialTime(tdb_days)
    vector = astronomy.HelioVector(astronomy.Body[body.capitalize()], time)
    tilt = np.radians(84381.448 / 3600.0)
    y, z = vector.y, vector.z
    return np.array(
        [vector.x, y * np.cos(tilt) + z * np.sin(tilt), z * np.cos(tilt) - y * np.sin(tilt)]
    )


def vsop87(body: str, tdb_days: float) -> Values:
    """Heliocentric vector in au, ecliptic of date, from PyMeeus: widths do not mind precession."""
    if body == "sun":
        return np.zeros(3)
    lon, lat, radius = VSOP87[body].geometric_heliocentric_position(
        Epoch(J2000_JD + tdb_days), tofk5=False
    )
    lon_rad, lat_rad = np.radians(float(lon)), np.radians(float(lat))
    across = np.cos(lat_rad)
    direction = (across * np.cos(lon_rad), across * np.sin(lon_rad), np.sin(lat_rad))
    return float(radius) * np.array(direction)


def theory_width(theory: Any, centre: str, bodies: tuple[str, ...], days: float) -> float:
    """Smallest arc in degrees as another theory has it."""
    start = theory(centre, days)
    vectors = [theory(body, days) - start for body in bodies]
    longitudes = np.degrees([np.arctan2(v[1], v[0]) for v in vectors])
    return float(plain_arc(longitudes[:, None], 360.0)[0])


@pytest.mark.parametrize(
    ("theory", "arcseconds"), [(truncated, 40.0), (vsop87, 3.0)], ids=["astronomy", "pymeeus"]
)
@pytest.mark.parametrize(
    ("centre", "bodies", "below_deg"),
    [
        ("earth", NAKED_EYE, 60.0),
        ("sun", ("mercury", "venus", "earth", "jupiter"), 25.0),
        ("mars", ("mercury", "venus", "earth", "saturn"), 15.0),
    ],
)
def test_instants_in_other_theories(
    de440: Ephemeris,
    theory: Any,
    arcseconds: float,
    centre: Any,
    bodies: tuple[Any, ...],
    below_deg: float,
) -> None:
    """At our minima and crossings the other theory has the same width, and nothing narrower near.

    astronomy-engine 2.1: 20" a body (its documentation warrants 60"; 25" is the most seen here
    for two); PyMeeus (VSOP87): 0.5" a body, and up to 1" a degree of
    width and century for the turn of the ecliptic of date against that of J2000. Two bodies make
    a width. A quarter of a day on either side the other theory must be wider.
    """
    span = utc("1960-01-01"), utc("2045-01-01")
    table = find_groupings(de440, centre, bodies, below_deg, *span)
    assert len(table) >= 2
    limit = arcseconds * ARCSECOND_DEG
    for row in table.head(4).itertuples():
        days: Any = row.tdb_days
        width = theory_width(theory, centre, bodies, days)
        assert width == pytest.approx(row.width_deg, abs=limit)
        beside = [theory_width(theory, centre, bodies, days + d) for d in (-0.25, 0.25)]
        assert min(beside) > width - limit
        entered = float(tdb_days_from_utc(np.datetime64(row.entered_utc, "us")))
        for edge in (entered, entered + row.duration_days):
            assert theory_width(theory, centre, bodies, edge) == pytest.approx(below_deg, abs=limit)


# Centre, bodies, threshold, line, twin's step in days: direct and looping bodies, the Moon from
# within and from without, and thresholds next to the half circle, where the largest gap changes.
TWINS = [
    ("sun", PLANETS, 150.0, False, 0.05),
    ("sun", PLANETS, 80.0, True, 0.05),
    ("sun", ("mercury", "venus", "neptune"), 178.0, False, 0.125),
    ("sun", ("mercury", "venus", "neptune"), 180.0, False, 0.125),
    ("sun", ("mercury", "mars", "jupiter"), 89.0, True, 0.125),
    ("earth", NAKED_EYE, 120.0, False, 0.25),
    ("earth", ("sun", *NAKED_EYE), 170.0, False, 0.25),
    ("earth", ("venus", "jupiter", "saturn"), 60.0, True, 0.25),
    ("earth", ("moon", "mars", "saturn"), 20.0, False, 0.03125),
    ("earth", ("moon", "sun", "venus"), 30.0, True, 0.03125),
    ("mars", ("earth", "moon", "jupiter"), 15.0, False, 0.02),
    ("neptune", ("sun", "mercury", "earth", "saturn"), 10.0, False, 0.125),
]


@pytest.mark.parametrize(("centre", "bodies", "below_deg", "line", "step_days"), TWINS)
def test_finds_what_a_fine_grid_finds(
    centre: Any, bodies: tuple[Any, ...], below_deg: float, line: bool, step_days: float
) -> None:
    """Twelve years: the very minima, entries and exits of a grid 10 to 100 times finer.

    The twin's instants are those of its grid, so a step is all that ours may differ by, and our
    minima are never wider than its.
    """
    ephemeris = open_ephemeris("DE421")
    span = utc("1986-01-01"), utc("1998-01-01")
    ends = tdb_days_from_utc(np.array(span))
    grid = np.arange(ends[0], ends[1], step_days)
    longitudes = np.stack([geometric_ecliptic(ephemeris, centre, b, grid)[0] for b in bodies])
    width = plain_arc(longitudes, 180.0 if line else 360.0)
    lowest = (width[1:-1] < width[:-2]) & (width[1:-1] <= width[2:]) & (width[1:-1] < below_deg)
    keys: dict[str, Any] = {"along_line": line}

    found = find_groupings(ephemeris, centre, bodies, below_deg, *span, each_minimum=True, **keys)
    assert lowest.sum() >= 5
    assert len(found) == lowest.sum()
    assert np.abs(found["tdb_days"].to_numpy() - grid[1:-1][lowest]).max() < step_days
    assert (found["width_deg"].to_numpy() <= width[1:-1][lowest] + 1e-9).all()

    visits = find_groupings(ephemeris, centre, bodies, below_deg, *span, **keys)
    lows = found["tdb_days"].to_numpy()
    for row in visits.dropna().itertuples():  # the tightest of its visit, and how many there are
        entered, left = tdb_days_from_utc(np.array([row.entered_utc, row.left_utc]))
        if entered > grid[0] and left < grid[-1]:
            mine = (lows > entered) & (lows < left)
            assert row.minima == mine.sum()
            assert row.width_deg == pytest.approx(found["width_deg"][mine].min(), abs=1e-9)
            assert row.duration_days == pytest.approx(left - entered, abs=1e-9)
    inside = width < below_deg
    begins, ends_at = (
        grid[1:][change] for change in (~inside[:-1] & inside[1:], inside[:-1] & ~inside[1:])
    )
    # Visits that are on at an end of the span may have their minimum, and so their row, outside.
    for name, expected in (("entered_utc", begins), ("left_utc", ends_at)):
        days = tdb_days_from_utc(visits[name].to_numpy())
        days = days[(days > grid[0]) & (days < grid[-1])]
        assert abs(days.size - expected.size) <= int(inside[0]) + int(inside[-1])
        nearest = np.abs(days[:, None] - expected[None]).min(axis=1)
        assert nearest.max() <= step_days


def test_share_of_time_and_entries_of_independent_longitudes(de440: Ephemeris) -> None:
    """Time within an arc is n (W/360)^(n-1) of all, entries what the sum over edges says.

    Chance formula: common practice. Three pairs of bodies and arcs over 1,100 years; Venus, the
    Earth, Mars and Jupiter are near to circular. Ten per cent: some hundred visits of a process
    that is far more regular than a random one (the limit would be their square root, 8 per cent).
    """
    first, last = de440.covered_utc
    years = 1100.0
    for bodies, below in ((PLANETS[1:5], 60.0), (PLANETS[1:4], 30.0), (PLANETS[1:6], 90.0)):
        table = find_groupings(de440, "sun", bodies, below, first, last)  # type: ignore[arg-type]
        share = table["duration_days"].sum() / (years * 365.25)
        assert share == pytest.approx(chance_within_arc(len(bodies), below), rel=0.1)
        rates = [mean_rate_deg_per_day(body) for body in bodies]  # type: ignore[arg-type]
        expected = entries_within_arc_per_day(rates, below) * years * 365.25
        assert len(table) > 100
        assert len(table) == pytest.approx(expected, rel=0.1)


def test_spans_that_share_an_end_add_up(de440: Ephemeris) -> None:
    """Rows of adjoining spans, visits across their ends included, are those of the whole span."""
    cuts = [utc(f"{year}-05-17T03:00") for year in (1960, 1971, 1984, 2000)]
    slow = ("jupiter", "saturn", "uranus")
    for bodies, below, each in ((slow, 100.0, True), (slow, 100.0, False), (NAKED_EYE, 60.0, True)):
        keys: dict[str, Any] = {"each_minimum": each}
        whole = find_groupings(de440, "earth", bodies, below, cuts[0], cuts[-1], **keys)  # type: ignore[arg-type]
        parts = [
            find_groupings(de440, "earth", bodies, below, *ends, **keys)  # type: ignore[arg-type]
            for ends in pairwise(cuts)
        ]
        together = pd.concat(parts, ignore_index=True)
        assert len(whole) > 0
        tolerance = np.timedelta64(300, "us")  # grids differ; roots are good to 0.1 ms
        for name in ("time_utc", "entered_utc", "left_utc"):
            assert (np.abs(together[name].to_numpy() - whole[name].to_numpy()) < tolerance).all()
        assert (together["minima"] == whole["minima"]).all()


def test_chunks_do_not_show(de440: Ephemeris, monkeypatch: pytest.MonkeyPatch) -> None:
    """Seven grid points at a time give the very rows of one piece: the seams lose nothing."""
    span = utc("1990-01-01"), utc("2010-01-01")
    asked: Any = ("sun", ("mercury", "venus", "mars"), 120.0, *span)
    whole = find_groupings(de440, *asked, each_minimum=True)
    monkeypatch.setattr(arcs, "CHUNK_POINTS", 7)
    pieces = find_groupings(de440, *asked, each_minimum=True)
    assert len(whole) > 40
    assert len(pieces) == len(whole)
    for name in ("time_utc", "entered_utc", "left_utc"):
        off = np.abs(pieces[name].to_numpy() - whole[name].to_numpy())
        assert (off < np.timedelta64(300, "us")).all()
    assert (pieces["minima"] == whole["minima"]).all()


def test_half_open_and_empty(de440: Ephemeris) -> None:
    """The first instant counts and the last does not (to 0.1 ms); empty tables keep their types."""
    table = find_groupings(de440, "earth", NAKED_EYE, 25.0, utc("1990-01-01"), utc("2050-01-01"))
    first, last = table["time_utc"].to_numpy()
    hair = np.timedelta64(200, "us")
    for shift, expected in ((-hair, first), (hair, last)):
        inside = find_groupings(de440, "earth", NAKED_EYE, 25.0, first + shift, last + shift)
        assert len(inside) == 1
        assert (np.abs(inside["time_utc"].to_numpy() - expected) < hair).all()
    for span in ((first, first), (last, first), (utc("2001-01-01"), utc("2001-02-01"))):
        none = find_groupings(de440, "earth", NAKED_EYE, 25.0, *span)
        assert len(none) == 0
        assert none.dtypes.to_dict() == table.dtypes.to_dict()
    assert table["time_utc"].dtype == "datetime64[us]"


def test_a_visit_cut_by_the_kernel() -> None:
    """Visits that are on when DE421 begins and ends have NaT and NaN there; their minima are rows.

    DE440, which goes on, has the same minima with all their edges. The kernels differ by less
    than 1" for these bodies then, which is 0.1 day of Uranus' pace at most.
    """
    ephemeris = open_ephemeris("DE421")
    first, last = ephemeris.covered_utc
    trio: Any = ("jupiter", "saturn", "uranus")
    table = find_groupings(ephemeris, "sun", trio, 179.0, first, last)
    cut = (table["left_utc"].isna() | table["entered_utc"].isna()).tolist()
    assert cut == [True, *[False] * (len(cut) - 2), True]
    assert table["duration_days"].isna().tolist() == cut
    longer = find_groupings(open_ephemeris("DE440"), "sun", trio, 179.0, first, last)
    assert np.allclose(longer["tdb_days"], table["tdb_days"], atol=0.5)
    assert longer["duration_days"].notna().all()


@pytest.mark.parametrize(
    ("centre", "bodies", "below_deg", "line", "words"),
    [
        ("earth", ("mars", "venus"), 10.0, False, "at least three"),
        ("earth", ("mars", "venus", "mars"), 10.0, False, "three different"),
        ("mars", ("mars", "venus", "sun"), 10.0, False, "cannot be seen from itself"),
        ("earth", ("mars", "venus", "vulcan"), 10.0, False, "'vulcan' is no body"),
        ("earth", ("mars", "venus", "sun"), 0.0, False, "more than 0"),
        ("earth", ("mars", "venus", "sun"), 181.0, False, "at most 180"),
        ("earth", ("mars", "venus", "sun"), 91.0, True, "at most 90"),
        ("earth", ("mars", "venus", "sun"), float("nan"), False, "more than 0"),
    ],
)
def test_what_cannot_be_is_refused(
    centre: Any, bodies: Any, below_deg: float, line: bool, words: str
) -> None:
    """Impossible bodies and thresholds get one sentence that names them."""
    with pytest.raises(ProtocolError, match=words):
        find_groupings(
            open_ephemeris("DE421"),
            centre,
            bodies,
            below_deg,
            utc("2000-01-01"),
            utc("2001-01-01"),
            along_line=line,
        )


def test_outside_the_kernel_is_refused() -> None:
    """A span that leaves the kernel raises the error that names its dates."""
    with pytest.raises(EphemerisSpanError, match="1899-07-29 to 2053-10-0"):
        find_groupings(
            open_ephemeris("DE421"), "sun", PLANETS, 90.0, utc("1800-01-01"), utc("2000-01-01")
        )
