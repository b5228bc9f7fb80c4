"""Minima of the true angle between two bodies, against Skyfield, published values and a grid."""

from __future__ import annotations

from contextlib import closing
from importlib.resources import files
from itertools import combinations
from typing import Any

import numpy as np
import pandas as pd
import pytest
from epochtest.errors import EphemerisSpanError, ProtocolError
from epochtest.sky import separation
from epochtest.sky.directions import separation_deg
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.separation import find_separation_minima
from epochtest.timescale import J2000_JD, tdb_days_from_utc
from skyfield.api import load, load_file
from skyfield.searchlib import find_minima

SPAN = np.datetime64("1920-01-01", "us"), np.datetime64("1980-01-01", "us")


def test_great_conjunction_of_2020() -> None:
    """Jupiter passed Saturn at 0.102 degrees on 2020-12-21, seen from the Earth.

    Computed with Skyfield from DE440; widely published as 6.1 arc minutes (from memory).
    """
    table = find_separation_minima(
        open_ephemeris("DE440"), "earth", ("saturn", "jupiter"), 1.0, "2020-01-01", "2022-01-01"
    )
    assert table[["first", "second"]].to_numpy().tolist() == [["jupiter", "saturn"]]
    assert table["separation_deg"].iloc[0] == pytest.approx(0.102, abs=5e-4)
    assert str(table["time_utc"].iloc[0].date()) == "2020-12-21"


@pytest.mark.parametrize(
    ("year", "day", "least_arcsec"), [(2004, "2004-06-08", 626.9), (2012, "2012-06-06", 554.4)]
)
def test_transits_of_venus(year: int, day: str, least_arcsec: float) -> None:
    """Least geocentric distance of Venus from the Sun's centre in the transits of this century.

    Values of Espenak's catalogue of transits (from memory). They are apparent: in the 144 s that
    light needs, Venus moves 24" in its own orbit, 5.5 degrees askew to its path across the Sun,
    so geometric distances are 2.3" off; 3" are allowed.
    """
    table = find_separation_minima(
        open_ephemeris("DE421"),
        "earth",
        ("sun", "venus"),
        0.27,
        f"{year}-01-01",
        f"{year + 1}-01-01",
    )
    assert [str(time.date()) for time in table["time_utc"]] == [day]
    assert table["separation_deg"].iloc[0] * 3600.0 == pytest.approx(least_arcsec, abs=3.0)


# Centre, pair, Skyfield's step in days, years from 1990.
PAIRS: list[tuple[Any, tuple[Any, Any], float, int]] = [
    ("earth", ("moon", "venus"), 1.0, 2),
    ("earth", ("jupiter", "saturn"), 20.0, 40),
    ("earth", ("uranus", "neptune"), 20.0, 20),
    ("mars", ("earth", "jupiter"), 15.0, 20),
    ("sun", ("mercury", "venus"), 5.0, 10),
    ("sun", ("saturn", "neptune"), 200.0, 55),
]


@pytest.mark.parametrize(("centre", "pair", "step_days", "years"), PAIRS)
def test_against_skyfield(centre: Any, pair: tuple[Any, Any], step_days: float, years: int) -> None:
    """Every minimum that Skyfield's own search finds, at the same angle, in DE421.

    Its search stops at 1 s (the default of ``epsilon``); the half second more is for us. The
    angles agree to Skyfield's 1e-7 degrees or so.
    """
    scale = load.timescale(builtin=True)
    edges = np.datetime64("1990-01-01", "us"), np.datetime64(f"{1990 + years - 1}-12-31", "us")
    first, last = (scale.tdb_jd(J2000_JD + day) for day in tdb_days_from_utc(np.array(edges)))
    with closing(load_file(str(files("skyfield_data").joinpath("data/de421.bsp")))) as kernel:
        eye, one, other = (
            kernel[name if name in ("sun", "earth", "moon") else f"{name} barycenter"]
            for name in (centre, *pair)
        )

        def angle_deg(when: Any) -> Any:
            from_eye = [(body - eye).at(when) for body in (one, other)]
            return from_eye[0].separation_from(from_eye[1]).degrees

        angle_deg.step_days = step_days  # type: ignore[attr-defined]
        instants, angles = find_minima(first, last, angle_deg)
    table = find_separation_minima(open_ephemeris("DE421"), centre, pair, 180.0, *edges)
    assert len(table) == len(angles) > 0
    assert np.abs(table["tdb_days"] - (instants.tdb - J2000_JD)).max() * 86400.0 < 1.5
    assert np.abs(table["separation_deg"] - angles).max() < 1e-6


@pytest.mark.parametrize(
    ("centre", "bodies", "step_days"),
    [
        ("earth", ("mercury", "venus", "mars"), 0.1),
        ("earth", ("sun", "jupiter", "saturn"), 0.25),
        ("venus", ("earth", "moon", "mercury"), 0.05),
        ("pluto", ("uranus", "neptune", "sun"), 1.0),
    ],
)
def test_holds_every_minimum_of_a_fine_grid(
    centre: Any, bodies: tuple[Any, ...], step_days: float
) -> None:
    """Sixty years: the minima below 60 degrees are those of a grid 20 to 200 times finer."""
    ephemeris = open_ephemeris("DE421")
    first, last = tdb_days_from_utc(np.array(SPAN))
    grid = np.arange(first, last, step_days)
    table = find_separation_minima(ephemeris, centre, bodies, 60.0, *SPAN)
    assert len(table) > 0
    for pair in combinations(bodies, 2):
        angle = separation_deg(*ephemeris.vectors_km(centre, pair, grid))
        lowest = (angle[1:-1] < angle[:-2]) & (angle[1:-1] <= angle[2:])
        rows = table[table[["first", "second"]].isin(pair).all(axis=1)]
        found = rows["tdb_days"].to_numpy()
        expected = grid[1:-1][lowest]
        # At the grid point next to a minimum just below the threshold the angle may exceed it.
        near = np.abs(expected[:, None] - found[None]).min(axis=1, initial=np.inf) < step_days
        assert near.sum() == found.size
        assert (angle[1:-1][lowest][~near] > 60.0).all()


def test_minima_are_minima_to_a_tenth_of_a_second() -> None:
    """A minute off either way the angle is larger by the same amount: the minimum is centred.

    The parabola through both sides has its vertex within 0.1 s of the instant returned, for a
    swift pair. (The angle may have a corner in a close pass, its square has none.)
    """
    ephemeris = open_ephemeris("DE440")
    table = find_separation_minima(
        ephemeris, "earth", ("moon", "venus"), 3.0, "1990-01-01", "2010-01-01"
    )
    assert len(table) > 60
    away = 60.0 / 86400.0
    days = table["tdb_days"].to_numpy()
    left, middle, right = (
        separation_deg(*ephemeris.vectors_km("earth", ("moon", "venus"), days + off)) ** 2
        for off in (-away, 0.0, away)
    )
    vertex_days = 0.5 * away * (left - right) / (left - 2.0 * middle + right)
    assert np.abs(vertex_days).max() * 86400.0 < 0.1


def test_chunks_and_halves_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """Cut at a minimum's very microsecond, and in small chunks, the table is the same."""
    ephemeris = open_ephemeris("DE421")
    ask: Any = (ephemeris, "earth", ("sun", "moon", "mars"), 180.0)
    whole = find_separation_minima(*ask, *SPAN)
    cut = whole["time_utc"].to_numpy()[700]
    monkeypatch.setattr(separation, "CHUNK_POINTS", 100)
    parts = [
        find_separation_minima(*ask, SPAN[0], cut),
        find_separation_minima(*ask, cut, SPAN[1]),
    ]
    joined = pd.concat(parts, ignore_index=True)
    assert joined[["first", "second"]].equals(whole[["first", "second"]])
    assert np.abs(joined["tdb_days"] - whole["tdb_days"]).max() * 86400.0 < 1e-3
    assert whole["time_utc"].is_monotonic_increasing


@pytest.mark.parametrize(
    ("centre", "pair", "day"),
    [
        ("earth", ("mercury", "venus"), "1923-06-22"),
        ("earth", ("venus", "uranus"), "1958-01-14"),
        ("mercury", ("venus", "mars"), "1925-07-10"),
        ("mercury", ("venus", "pluto"), "1932-03-30"),
    ],
)
def test_shallow_minima_at_the_edge_of_a_chunk(
    centre: Any, pair: tuple[Any, Any], day: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A minimum and a maximum between two grid points are found in whichever cell of a chunk.

    Four such minima, which a search for changes of sign on the grid misses; every cell is
    searched as a chunk of its own.
    """
    monkeypatch.setattr(separation, "CHUNK_POINTS", 1)
    reach = np.timedelta64(40, "D")
    edges = np.datetime64(day, "us") - reach, np.datetime64(day, "us") + reach
    table = find_separation_minima(open_ephemeris("DE421"), centre, pair, 180.0, *edges)
    assert day in [str(time.date()) for time in table["time_utc"]]


def test_empty_span_and_ends_of_the_kernel() -> None:
    """An empty span keeps the column types; outside the kernel is refused."""
    ephemeris = open_ephemeris("DE421")
    full = find_separation_minima(ephemeris, "earth", ("sun", "moon"), 2.0, *ephemeris.covered_utc)
    empty = find_separation_minima(ephemeris, "earth", ("sun", "moon"), 2.0, SPAN[0], SPAN[0])
    assert empty.empty
    assert empty.dtypes.equals(full.dtypes)
    with pytest.raises(EphemerisSpanError, match="covers"):
        find_separation_minima(ephemeris, "earth", ("sun", "moon"), 2.0, SPAN[0], "2060-01-01")


@pytest.mark.parametrize(
    ("centre", "bodies", "below", "words"),
    [
        ("earth", ("mars",), 1.0, "at least two bodies, but found mars"),
        ("earth", ("mars", "earth"), 1.0, "cannot be seen from itself"),
        ("earth", ("mars", "nibiru"), 1.0, "'nibiru'.* name some of sun"),
        ("earth", ("mars", "venus"), 0.0, "below_deg = 0 can select nothing"),
        ("earth", ("mars", "venus"), 181.0, "below_deg = 181"),
    ],
)
def test_impossible_pairs_are_refused(
    centre: Any, bodies: tuple[Any, ...], below: float, words: str
) -> None:
    """One sentence with what was found and what can be chosen."""
    with pytest.raises(ProtocolError, match=words):
        find_separation_minima(open_ephemeris("DE421"), centre, bodies, below, *SPAN)
