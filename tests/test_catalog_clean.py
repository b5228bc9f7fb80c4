"""Cleaning: reasons, duplicates, and the conservation of rows."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from epochtest.catalog import clean as cleaning
from epochtest.catalog.clean import QUARANTINE_COLUMNS, Cleaned, check_conservation, clean
from epochtest.catalog.duplicates import Located, near_duplicates
from epochtest.catalog.geometry import great_circle_km
from epochtest.catalog.load import load_catalog
from epochtest.catalog.read import RAW_TEXT_COLUMNS
from epochtest.catalog.schema import COLUMNS
from epochtest.catalog.sources import sha256_of
from epochtest.catalog.summary import summarise
from epochtest.errors import CatalogError
from epochtest.study.settings import CatalogSettings, Source, Sources
from hypothesis import given, settings
from hypothesis import strategies as st

SOUND = {
    "event_id": "a", "time": "2011-03-11T05:46:24Z", "latitude": "38.3", "longitude": "142.4",
    "depth": "29", "magnitude": "9.1", "magnitude_type": "mww", "event_type": "earthquake",
    "strike": "", "dip": "", "rake": "", "updated": "", "fault": "", "source_file": "f.csv",
}  # fmt: skip
TIGHT = {"duplicate_seconds": 2.0, "duplicate_km": 50.0, "duplicate_magnitude": 0.5}


def raw(*rows: dict[str, str]) -> pd.DataFrame:
    """Raw rows made of SOUND with changes, on lines 2, 3, ..."""
    frame = pd.DataFrame([SOUND | row for row in rows], columns=list(RAW_TEXT_COLUMNS), dtype="str")
    return frame.assign(source_line=np.arange(2, len(rows) + 2, dtype="int64"))


def cleaned(*rows: dict[str, str], **options: object) -> Cleaned:
    """`raw` rows, cleaned with the tight duplicate tolerances unless told otherwise."""
    return clean(
        raw(*rows), CatalogSettings.model_validate({"files": ["f.csv"], **TIGHT, **options})
    )


@pytest.mark.parametrize(
    ("change", "reason", "detail"),
    [
        ({"fault": "3 fields"}, cleaning.WRONG_FIELDS, "3 fields"),
        ({"time": "11/03/2011"}, cleaning.NO_TIME, "11/03/2011"),
        ({"latitude": ""}, cleaning.NO_PLACE, ", 142.4"),
        ({"longitude": "142,4"}, cleaning.NO_PLACE, "38.3, 142,4"),
        ({"latitude": "90.01"}, cleaning.OFF_EARTH, "90.01, 142.4"),
        ({"longitude": "360.01"}, cleaning.OFF_EARTH, "38.3, 360.01"),
        ({"longitude": "-180.01"}, cleaning.OFF_EARTH, "38.3, -180.01"),
        ({"magnitude": " "}, cleaning.NO_MAGNITUDE, " "),
        ({"magnitude": "NaN"}, cleaning.NO_MAGNITUDE, "NaN"),
        ({"magnitude": "5.1 mb"}, cleaning.ODD_MAGNITUDE, "5.1 mb"),
        ({"magnitude": "inf"}, cleaning.ODD_MAGNITUDE, "inf"),
        ({"magnitude": "-9.9"}, cleaning.WILD_MAGNITUDE, "-9.9"),
        ({"depth": "10f"}, cleaning.ODD_DEPTH, "10f"),
        ({"depth": "-999"}, cleaning.WILD_DEPTH, "-999"),
        ({"event_type": "quarry blast"}, cleaning.OTHER_TYPE, "quarry blast"),
    ],
)
def test_each_reason(change: dict[str, str], reason: str, detail: str) -> None:
    """One faulty row gives its reason, the value found and its place (common practice)."""
    result = cleaned({"event_id": "b", "time": "1999-01-01"}, change)
    assert tuple(result.quarantined.columns) == QUARANTINE_COLUMNS
    row = result.quarantined.iloc[0].to_dict()
    text = SOUND | change
    assert row == {
        "file": "f.csv", "line": 3, "reason": reason, "detail": detail,
        "event_id": text["event_id"], "time": text["time"], "magnitude": text["magnitude"],
    }  # fmt: skip
    assert result.kept["event_id"].tolist() == ["b"]


def test_what_is_kept() -> None:
    """Blank types and depths stay, types are compared without case, longitudes become signed."""
    result = cleaned(
        {"event_id": "a", "event_type": "", "depth": "", "longitude": "181.5"},
        {"event_id": "b", "event_type": "Earthquake", "time": "2010-01-01", "longitude": "180"},
        {"event_id": "", "time": "2010-01-01", "longitude": "-180", "magnitude": "+4e0"},
    )
    assert list(result.kept.columns) == list(COLUMNS)
    assert {name: str(kind) for name, kind in result.kept.dtypes.items()} == {
        name: kind for name, (kind, _) in COLUMNS.items()
    }
    assert result.kept["event_id"].tolist() == ["b", "f.csv:4", "a"]
    assert result.kept["longitude_deg"].tolist() == [180.0, -180.0, -178.5]
    assert result.kept["depth_km"].isna().tolist() == [False, False, True]
    assert result.kept["magnitude"].tolist() == [9.1, 4.0, 9.1]


def test_order_is_by_time_then_id_whatever_the_files_order() -> None:
    """The kept table does not depend on the order of rows, when there are no duplicates."""
    rows = [
        {"event_id": name, "time": f"2011-03-1{day}T00:00:00Z", "latitude": str(place)}
        for name, day, place in [("b", 2, 0), ("a", 2, 30), ("z", 1, 60), ("c", 3, -60)]
    ]
    assert cleaned(*rows).kept["event_id"].tolist() == ["z", "a", "b", "c"]
    columns = [name for name in COLUMNS if name != "source_line"]
    assert cleaned(*rows[::-1]).kept[columns].equals(cleaned(*rows).kept[columns])


def test_same_id_keeps_the_latest_update_then_the_first() -> None:
    """The rule of `duplicates`: latest `updated`, without it last, then file order."""
    rows = [
        {"magnitude": "8.8"},
        {"magnitude": "9.0", "updated": "2012-01-01"},
        {"magnitude": "9.1", "updated": "2014-01-01"},
        {"magnitude": "8.9", "updated": "2014-01-01"},
    ]
    result = cleaned(*rows)
    assert result.kept["magnitude"].tolist() == [9.1]
    assert result.quarantined["reason"].tolist() == ["duplicate id"] * 3
    assert set(result.quarantined["detail"]) == {"kept: a (f.csv, line 4)"}
    assert cleaned(rows[0], rows[0]).kept["source_line"].tolist() == [2]


def test_a_faulty_row_does_not_oust_a_sound_one_of_the_same_id() -> None:
    """Duplicates are judged among sound rows only."""
    result = cleaned({"magnitude": "x", "updated": "2020-01-01"}, {})
    assert result.kept["source_line"].tolist() == [3]


def test_an_id_used_twice_is_told_from_a_duplicate() -> None:
    """Two agencies that both number from 1: the reason is not "duplicate"."""
    result = cleaned({}, {"time": "2001-01-01", "source_file": "g.csv"})
    assert result.quarantined["reason"].tolist() == ["id already used by another event"]


def test_near_duplicates_within_all_three_tolerances() -> None:
    """2 s, 50 km (0.45 deg of latitude) and 0.5, bounds included; the first in file order stays."""
    near = {"event_id": "b", "time": "2011-03-11T05:46:26Z", "magnitude": "8.6"}
    for change, expected in [
        ({}, ["a"]),
        ({"time": "2011-03-11T05:46:26.001Z"}, ["a", "b"]),
        ({"magnitude": "8.5"}, ["a", "b"]),
        ({"latitude": "38.74"}, ["a"]),
        ({"latitude": "38.76"}, ["a", "b"]),
        ({"latitude": "38.76", "longitude": "142.4"}, ["a", "b"]),
    ]:
        assert cleaned({}, near | change).kept["event_id"].tolist() == expected, change
    assert cleaned(near, {}).kept["event_id"].tolist() == ["b"]
    assert 1.1 - 0.6 > 0.5
    assert len(cleaned({"magnitude": "1.1"}, near | {"magnitude": "0.6"}).kept) == 1


def test_near_duplicates_across_the_dateline() -> None:
    """179.9 E and 179.9 W lie 22 km apart on the equator (6371 km radius, closed form)."""
    rows = [
        {"event_id": "a", "latitude": "0", "longitude": "179.9"},
        {"event_id": "b", "latitude": "0", "longitude": "180.1"},
        {"event_id": "c", "latitude": "0", "longitude": "-179.9", "magnitude": "2"},
    ]
    assert cleaned(*rows).kept["event_id"].tolist() == ["a", "c"]


def test_near_duplicates_form_no_chain() -> None:
    """B repeats A and C is near B only: C stays, because B was not kept."""
    rows = [
        {"event_id": name, "time": f"2011-03-11T05:46:2{second}Z"}
        for name, second in [("a", "0"), ("b", "1.5"), ("c", "3")]
    ]
    assert cleaned(*rows).kept["event_id"].tolist() == ["a", "c"]


def test_day_only_rows_are_no_near_duplicates() -> None:
    """Two shocks of one day without times both stand at 12:00 and both stay."""
    rows = [{"event_id": name, "time": "1906-04-18"} for name in "ab"]
    assert len(cleaned(*rows, {"event_id": "c", "time": "1906-04-18T12:00:00"}).kept) == 3


def plain_near_duplicates(
    rows: Located, seconds: float, kilometres: float, magnitude: float
) -> list[tuple[int, int]]:
    """Every row against every kept one before it; the twin of `near_duplicates`."""
    kept: list[int] = []
    aside: list[tuple[int, int]] = []
    for i in range(rows.time_utc.size):
        for j in kept if rows.comparable[i] else []:
            if (
                rows.comparable[j]
                and abs((rows.time_utc[i] - rows.time_utc[j]) / np.timedelta64(1, "us"))
                <= seconds * 1e6
                and abs(rows.magnitude[i] - rows.magnitude[j]) <= magnitude + 1e-9
                and great_circle_km(
                    rows.latitude_deg[i], rows.longitude_deg[i],
                    rows.latitude_deg[j], rows.longitude_deg[j],
                ) <= kilometres
            ):  # fmt: skip
                aside.append((i, j))
                break
        else:
            kept.append(i)
    return aside


@settings(max_examples=150, deadline=None, derandomize=True)
@given(st.integers(0, 2**32 - 1), st.integers(0, 60), st.sampled_from([0.0, 2.0, 16.0]))
def test_near_duplicates_equal_the_plain_twin(seed: int, n: int, seconds: float) -> None:
    """Sliding comparison in time order gives the pairs of comparing every row with every other."""
    random = np.random.default_rng(seed)
    rows = Located(
        np.datetime64("2011-03-11", "us") + random.integers(0, 80, n).astype("timedelta64[s]"),
        random.uniform(-0.5, 0.5, n),
        random.choice([-1.0, 1.0], n) * random.uniform(179.5, 180.0, n),
        np.round(random.uniform(4.0, 5.5, n), 1),
        random.random(n) < 0.9,
    )
    aside, instead = near_duplicates(rows, seconds, 60.0, 0.5)
    assert list(zip(aside.tolist(), instead.tolist(), strict=True)) == plain_near_duplicates(
        rows, seconds, 60.0, 0.5
    )


def test_great_circle_distance() -> None:
    """On the sphere: a quarter meridian, one degree of a meridian, antipodes, a chord of 60 N.

    Closed form: radius times angle, radius 6371.0088 km (Moritz 2000); tolerance 1 mm, float64.
    """
    radius = 6371.0088
    found = great_circle_km(
        [0.0, 10.0, -45.0], [0.0, 359.0, 100.0], [90.0, 11.0, 45.0], [0.0, -1.0, -80.0]
    )
    np.testing.assert_allclose(found, radius * np.radians([90.0, 1.0, 180.0]), rtol=0, atol=1e-3)
    parallel = great_circle_km(60.0, 179.5, 60.0, -179.5)
    expected = 2 * radius * np.arcsin(0.5 * np.sin(np.radians(0.5)))
    np.testing.assert_allclose(parallel, expected, rtol=0, atol=1e-3)


TEXTS = st.sampled_from(["", "x", "1", "-5", "38.3", "nan", "1e400", "360", "９", "5,1", " 4.5 "])
TIMES = st.sampled_from(
    ["", "2011-03-11", "2011-03-11T05:46:24Z", "2011-03-11T05:46:25+00:00", "x", "2011-02-30",
     "2016-12-31T23:59:60Z", "1500-01-01T00:00", "2011"],
)  # fmt: skip
MESSY = st.fixed_dictionaries(
    {},
    optional={
        "event_id": st.sampled_from(["", "a", "b", "c", "ü"]), "time": TIMES, "latitude": TEXTS,
        "longitude": TEXTS, "depth": TEXTS, "magnitude": TEXTS, "updated": TIMES,
        "event_type": st.sampled_from(["", "earthquake", "explosion", " EARTHQUAKE "]),
        "fault": st.sampled_from(["", "2 fields"]),
        "source_file": st.sampled_from(["f.csv", "g.csv"]),
    },
)  # fmt: skip


@settings(max_examples=120, deadline=None, derandomize=True)
@given(st.lists(MESSY, max_size=12))
def test_every_row_is_kept_or_set_aside_exactly_once(rows: list[dict[str, str]]) -> None:
    """Conservation: file and line of what went in equal those of kept plus quarantined."""
    table = raw(*rows)
    result = clean(table, CatalogSettings(files=("f.csv",)))
    went_in = sorted(zip(table["source_file"], table["source_line"], strict=True))
    came_out = list(zip(result.kept["source_file"], result.kept["source_line"], strict=True))
    came_out += list(zip(result.quarantined["file"], result.quarantined["line"], strict=True))
    assert sorted(came_out) == went_in
    assert result.rows_read == len(rows)
    assert set(result.quarantined["reason"]) <= set(cleaning.REASONS)
    assert result.kept["event_id"].is_unique
    numbers = result.kept[["latitude_deg", "longitude_deg", "magnitude"]].to_numpy()
    assert np.isfinite(numbers).all()
    assert result.kept["time_utc"].notna().all()
    assert result.kept["time_utc"].is_monotonic_increasing


def test_a_lost_row_is_an_error() -> None:
    """The guard itself raises when a row is missing."""
    sound = cleaned({}, {"event_id": "b", "time": "1999-01-01"})
    lost = Cleaned(sound.kept.iloc[1:], sound.quarantined, sound.rows_by_file, {})
    with pytest.raises(CatalogError, match=r"f\.csv: 2 rows were read, but 1 kept and 0 set aside"):
        check_conservation(lost)


def test_load_and_summarise(tmp_path: Path) -> None:
    """One call from settings to catalog; the summary counts per file and speaks plainly."""
    header = "time,latitude,longitude,depth,mag,magType,id,type\n"
    rows = (
        "1906-04-18,37.7,-122.5,,7.9,mw,a,\n"
        "2016-12-31T23:59:60Z,10,10,5,5.0,mb,b,earthquake\n"
        "2016-12-31T23:59:59Z,10,10,5,,mb,c,earthquake\n"
        "2001-01-01T00:00:00Z,10,10,5,3.0,mb,d,quarry blast\n"
    )
    (tmp_path / "one.csv").write_text(header + rows)
    (tmp_path / "two.csv").write_text(header + rows.splitlines()[1].replace(",b,", ",e,") + "\n")
    files = ("one.csv", "two.csv")
    sources = Sources(
        source=tuple(
            Source(file=f, origin="invented", licence="CC0", sha256=sha256_of(tmp_path / f))
            for f in files
        )
    )
    loaded = load_catalog(tmp_path, CatalogSettings(files=files), sources)
    span = (np.datetime64("2000-01-01"), np.datetime64("2020-01-01"))
    result = summarise(loaded, sources, span)
    assert [(f.file, f.rows_read, f.kept, f.quarantined) for f in result.files] == [
        ("one.csv", 4, 2, 2),
        ("two.csv", 1, 0, 1),
    ]
    assert result.reasons == {
        "missing magnitude": 1, "event type not kept": 1, "near duplicate": 1,
    }  # fmt: skip
    assert (result.rows_read, result.kept, result.day_only, result.in_span) == (5, 2, 1, 1)
    assert (result.first_utc, result.last_utc) == (
        "1906-04-18T12:00:00.000000Z",
        "2017-01-01T00:00:00.000000Z",
    )
    assert result.magnitude_types == {"mb": 1, "mw": 1}
    notes = "\n".join(result.notes)
    for words in [
        "1 kept rows give a day without a time", "second 60 read", "of 2 types (mb 1, mw 1)",
        "1 kept rows have no depth", "quarry blast 1", "1 rows were set aside as near duplicates",
        "Too few earthquakes",
    ]:  # fmt: skip
        assert words in notes


def test_mechanisms_are_whole_or_absent() -> None:
    """Strike, dip and rake come together and in range (Aki & Richards 2002), else none of them.

    Rakes 180..360 are the same as -180..0; the earthquake of a broken mechanism stays.
    """
    result = clean(
        raw(
            {"event_id": "a", "strike": "360", "dip": "30", "rake": "270"},
            {"event_id": "b", "time": "2011-03-12", "strike": "10", "dip": "95", "rake": "0"},
            {"event_id": "c", "time": "2011-03-13", "strike": "10", "dip": "", "rake": "0"},
            {"event_id": "d", "time": "2011-03-14"},
        ),
        CatalogSettings(files=("f.csv",)),
    )
    kept = result.kept.set_index("event_id")[["strike_deg", "dip_deg", "rake_deg"]]
    assert kept.loc["a"].tolist() == [0.0, 30.0, -90.0]
    assert kept.loc[["b", "c", "d"]].isna().all(axis=None)
    assert result.repairs["incomplete or impossible mechanism dropped"] == 2


def test_a_catalog_that_does_not_fill_the_span_is_named() -> None:
    """Monthly earthquakes of 1990-2010 in a span from 1950 to 2011 begin 40 years late.

    The end, eleven months of the usual one between two, is within what a steady rate gives.
    """
    rows = [
        {"event_id": f"e{year}{month:02d}", "time": f"{year}-{month:02d}-05T00:00:00Z"}
        for year in range(1990, 2010)
        for month in range(1, 13)
    ]
    sources = Sources(source=(Source(file="f.csv", origin="x", licence="x", sha256="0" * 64),))
    cleaned = clean(raw(*rows), CatalogSettings(files=("f.csv",)))
    span = np.datetime64("1950-01-01", "us"), np.datetime64("2010-12-01", "us")
    notes = " ".join(summarise(cleaned, sources, span).notes)
    assert "begins 14614 days inside" in notes
    assert "ends" not in notes.split("shorten the span")[0].split("begins")[0]
    full = np.datetime64("1990-01-01", "us"), span[1]
    assert "inside the study's span" not in " ".join(summarise(cleaned, sources, full).notes)
