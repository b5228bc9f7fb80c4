"""A user's own list of dates: what is read, and what is said about what is not."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from epochtest.errors import ProtocolError
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.events import find_epochs
from epochtest.sky.listed import read_listed
from epochtest.study.events import ListedDates, MoonPhase
from epochtest.timescale import tdb_days_from_utc

FIRST, LAST = np.datetime64("1900-01-01", "us"), np.datetime64("2050-01-01", "us")


def listed(tmp_path: Path, content: bytes, column: str = "time"):
    """Read ``content`` as a list."""
    path = tmp_path / "dates.csv"
    path.write_bytes(content)
    return read_listed(path, ListedDates(file="dates.csv", column=column), FIRST, LAST)


def test_reads_dates_instants_and_offsets(tmp_path: Path) -> None:
    """ISO 8601 with offset, with Z, without, and dates at noon; BOM, CRLF and blank lines pass."""
    table = listed(
        tmp_path,
        b"\xef\xbb\xbftime,id,label\r\n\r\n2020-12-21T18:20:00Z,1,great\r\n"
        b"2001-01-01T00:30:00+02:00,2,\r\n,,\r\n1999-08-11\r\n1950-01-01 06:00:00.5,4,early\r\n",
    )
    expected = np.array(
        ["1950-01-01T06:00:00.5", "1999-08-11T12:00", "2000-12-31T22:30", "2020-12-21T18:20"],
        dtype="datetime64[us]",
    )
    assert (table["time_utc"].to_numpy() == expected).all()
    assert list(table["label"]) == ["early", "listed date", "listed date", "great"]
    assert (table["tdb_days"].to_numpy() == tdb_days_from_utc(expected)).all()
    assert table[["separation_deg", "distance_km"]].isna().all(axis=None)
    event = MoonPhase(phases=("new",))
    found = find_epochs(event, open_ephemeris("DE421"), FIRST, FIRST + np.timedelta64(40, "D"))
    assert list(table.dtypes) == list(found.dtypes)


def test_counts_duplicates_and_dates_outside(tmp_path: Path) -> None:
    """Equal instants count once however written; the span is half-open; both are counted."""
    table = listed(
        tmp_path,
        b"time\n2000-01-01\n2000-01-01T12:00Z\n2000-01-01T13:00+01:00\n"
        b"1900-01-01T00:00Z\n2050-01-01T00:00Z\n1850-05-05\n",
    )
    assert list(table["time_utc"].astype(str)) == ["1900-01-01 00:00:00", "2000-01-01 12:00:00"]
    assert table.attrs == {"duplicates_dropped": 2, "outside_span": 2}


@pytest.mark.parametrize("delimiter", [";", "\t"])
def test_other_delimiters(tmp_path: Path, delimiter: str) -> None:
    """Semicolons and tabs separate as well, and quoted commas stay inside their value."""
    text = f'note{delimiter}when\n"a, b, c"{delimiter}2000-01-01\n'
    assert len(listed(tmp_path, text.encode(), column="when")) == 1


def test_all_faults_at_once(tmp_path: Path) -> None:
    """Every bad row is named with file, line and value; nothing is half-read."""
    with pytest.raises(ProtocolError) as caught:
        listed(tmp_path, b"n,time\n1,2000-01-01\n2,21/12/2020\n\n3,\n4\n5,2020-02-30\n")
    faults = caught.value.facts["faults"]
    assert [fault.split(",")[0] for fault in faults] == [
        f"dates.csv: line {line}" for line in (3, 5, 6, 7)
    ]
    assert "'21/12/2020'" in faults[0]
    assert "found nothing" in faults[1]
    assert "found nothing" in faults[2]
    assert "write it like 2020-12-21" in faults[3]


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (b"Time,mag\n2000-01-01,5\n", "no column 'time'; did you mean 'Time'"),
        (b"x,mag\n2000-01-01,5\n", "no column 'time'; its columns are: x, mag"),
        (b"time,time\n2000-01-01,2000-01-01\n", "column 'time' 2 times"),
        (b"", "is empty"),
        (b"\n \n", "is empty"),
        (b"time\n\xff\xfe\n", "not UTF-8"),
        (b'time\n"2000-01-01\n', "not readable as CSV"),
    ],
)
def test_unreadable_files(tmp_path: Path, content: bytes, sentence: str) -> None:
    """A file that cannot be read as a whole gets one sentence that says why."""
    with pytest.raises(ProtocolError, match=sentence):
        listed(tmp_path, content)


def test_missing_file(tmp_path: Path) -> None:
    """A missing file is named."""
    event = ListedDates(file="nowhere.csv")
    with pytest.raises(ProtocolError, match=r"nowhere\.csv: there is no such file"):
        read_listed(tmp_path / "nowhere.csv", event, FIRST, LAST)


def test_header_only(tmp_path: Path) -> None:
    """A list without dates is an empty table with the usual types."""
    table = listed(tmp_path, b"time\n")
    assert len(table) == 0
    assert str(table["time_utc"].dtype) == "datetime64[us]"
    assert str(table["label"].dtype) == "str"
