"""Every event kind of a claim reaches its search, its filter, its words and its table.

The instants themselves are proven in the tests of each search; here one published or
independently computed instant per kind shows that the right search answers.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
import pytest
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.events import find_epochs
from epochtest.sky.find import find_event
from epochtest.study.events import (
    Apsis,
    Body,
    ComputedEvent,
    Eclipse,
    GreatestElongation,
    Grouping,
    LineUp,
    LongitudeDifference,
    LunarDeclination,
    LunarNode,
    LunarStandstill,
    MoonPhase,
    PerigeanSpringTide,
    Season,
    SeparationMinimum,
    Station,
)
from epochtest.study.words import described, event_in_words, frame_of
from epochtest.timescale import J2000_JD, utc_from_tdb_days

COLUMNS = ["time_utc", "tdb_days", "label", "separation_deg", "distance_km"]
# Julian dates (TT or TD; a minute of Delta T matters to none), tolerance in days and source.
KNOWN: list[tuple[ComputedEvent, float, float, str]] = [
    # Meeus, Astronomical Algorithms (1998), example 54.a: solar eclipse of 1993 May 21.
    (Eclipse(of="sun"), 2449129.0978, 0.002, "partial eclipse of the Sun"),
    # Meeus, example 36.b: greatest western elongation of Mercury, 1993 November.
    (
        GreatestElongation(body="mercury", side="west"),
        2449314.14,
        0.02,
        "Mercury at greatest elongation west",
    ),
    # June solstice 1993-06-21 09:00 UTC: almanac value, from memory, to the minute.
    (Season(instants=("june-solstice",)), 2449159.8757, 0.001, "June solstice"),
    # Perihelion of the Earth 1993-01-04 03 h UT: almanac value, from memory, to the hour.
    (Apsis(body="earth", extreme="perihelion"), 2448991.63, 0.05, "perihelion of the Earth"),
    # Jupiter-Saturn, great conjunction of 2020 December 21: closest within hours of the
    # conjunction in longitude (JD 2459205.27, computed with DE440 and confirmed by VSOP87).
    (
        SeparationMinimum(centre="earth", bodies=("jupiter", "saturn"), below_deg=1.0),
        2459205.27,
        0.2,
        "closest jupiter and saturn",
    ),
]


@pytest.mark.parametrize(("event", "julian_date", "tolerance", "label"), KNOWN)
def test_the_right_search_answers(
    event: ComputedEvent, julian_date: float, tolerance: float, label: str
) -> None:
    """The instant nearest to a published one lies within its tolerance and carries the label."""
    days = julian_date - J2000_JD + np.array([-200.0, 200.0])
    table = find_event(event, open_ephemeris("DE421"), *utc_from_tdb_days(days))
    off = np.abs(table["tdb_days"].to_numpy() + J2000_JD - julian_date)
    assert off.min() < tolerance
    assert table["label"].iloc[int(off.argmin())] == label


EVERY: list[ComputedEvent] = [
    MoonPhase(phases=("full",)),
    LineUp(bodies=("sun", "venus", "jupiter", "uranus")),
    LineUp(bodies=("mars", "venus", "jupiter", "uranus"), middle="mars"),
    SeparationMinimum(centre="earth", bodies=("venus", "mars"), below_deg=10.0),
    Grouping(centre="sun", bodies=("jupiter", "uranus", "neptune"), below_deg=80.0),
    Eclipse(of="moon", types=("total", "partial")),
    LunarNode(passage="ascending"),
    LunarDeclination(extreme="north"),
    LunarStandstill(size="major"),
    PerigeanSpringTide(within_hours=36.0),
    Season(instants=("march-equinox", "september-equinox")),
    Apsis(body="mars"),
    Station(body="mercury", turns="retrograde"),
    GreatestElongation(body="venus"),
]


@pytest.mark.parametrize("event", EVERY, ids=lambda event: event.kind)
def test_every_kind_gives_a_sorted_table_and_words(event: ComputedEvent) -> None:
    """Sorted epochs inside the half-open span with the common columns, and words naming a frame."""
    ephemeris = open_ephemeris("DE421")
    start, end = np.datetime64("1980-01-01", "us"), np.datetime64("2010-01-01", "us")
    table = find_event(event, ephemeris, start, end)
    times = table["time_utc"].to_numpy()
    assert list(table.columns)[: len(COLUMNS)] == COLUMNS
    assert len(table) > 0
    assert (np.diff(times) >= np.timedelta64(0)).all()
    assert times[0] >= start
    assert times[-1] < end
    assert "DE421" in described(event, "DE421")
    assert event_in_words(event)
    assert frame_of(event) in ("geometric-J2000", "apparent-of-date")
    empty = find_event(event, ephemeris, start, start)
    assert len(empty) == 0
    assert empty["time_utc"].dtype == table["time_utc"].dtype


@pytest.mark.parametrize(
    ("some", "other", "both"),
    [
        (LunarNode(passage="ascending"), LunarNode(passage="descending"), LunarNode()),
        (Apsis(body="mars", extreme="perihelion"), Apsis(body="mars", extreme="aphelion"),
         Apsis(body="mars")),
        (Station(body="mars", turns="direct"), Station(body="mars", turns="retrograde"),
         Station(body="mars")),
        (GreatestElongation(body="venus", side="east"),
         GreatestElongation(body="venus", side="west"), GreatestElongation(body="venus")),
        (Eclipse(of="sun", types=("total", "hybrid")),
         Eclipse(of="sun", types=("partial", "annular")), Eclipse(of="sun")),
    ],
)  # fmt: skip
def test_filters_split_a_kind_without_loss(
    some: ComputedEvent, other: ComputedEvent, both: ComputedEvent
) -> None:
    """Each side by itself, taken together, is the unfiltered kind: no epoch lost, none doubled."""
    ephemeris = open_ephemeris("DE421")
    span = np.datetime64("1990-01-01", "us"), np.datetime64("2010-01-01", "us")
    parts = [find_event(event, ephemeris, *span) for event in (some, other)]
    whole = find_event(both, ephemeris, *span)
    assert all(len(part) > 0 for part in parts)
    joined = np.sort(np.concatenate([part["tdb_days"].to_numpy() for part in parts]))
    assert np.array_equal(joined, whole["tdb_days"].to_numpy())


@pytest.mark.parametrize(
    ("centre", "pair", "aspect"),
    [
        ("sun", ("venus", "earth"), "conjunction"),
        ("earth", ("mercury", "sun"), "conjunction"),
        ("earth", ("jupiter", "saturn"), "conjunction"),
        ("mars", ("venus", "jupiter"), "opposition"),
        ("earth", ("moon", "sun"), "opposition"),
    ],
)
def test_an_aspect_is_a_selection_of_the_line_ups(
    centre: Body, pair: tuple[Body, Body], aspect: Literal["conjunction", "opposition"]
) -> None:
    """Found as a line-up of three or as a longitude difference: the same instants to 1 ms.

    The two searches share neither function nor grid, so each is the other's twin; separations
    agree to 1e-6 degrees (the Moon moves 1.5e-7 degrees in a millisecond).
    """
    span = np.datetime64("1980-01-01", "us"), np.datetime64("2010-01-01", "us")
    event = LongitudeDifference(centre=centre, bodies=pair, aspect=aspect)
    ephemeris = open_ephemeris("DE421")
    one, other = find_event(event, ephemeris, *span), find_epochs(event, ephemeris, *span)
    assert len(one) == len(other) > 0
    off = np.abs(one["tdb_days"].to_numpy() - other["tdb_days"].to_numpy()) * 86400.0
    assert off.max() < 1e-3
    assert one["separation_deg"].to_numpy() == pytest.approx(
        other["separation_deg"].to_numpy(), abs=1e-6
    )
    assert one["label"].tolist() == other["label"].tolist()
