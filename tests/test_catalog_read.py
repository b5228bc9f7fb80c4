"""Reading catalog files: formats, headers, times, line numbers, and files that are none."""

from __future__ import annotations

import csv
import io
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pyarrow as pa
import pytest
from epochtest.catalog.clean import Cleaned, clean
from epochtest.catalog.read import read_catalog
from epochtest.catalog.records import Dialect, fast_records, plain_records
from epochtest.catalog.schema import COLUMNS, empty_frame, read_parquet, write_parquet
from epochtest.catalog.times import MIDNIGHT_24, SECOND_60, parse_times
from epochtest.errors import CatalogError, MissingArtifactError
from epochtest.study.settings import CatalogSettings
from hypothesis import given, settings
from hypothesis import strategies as st

FILE = "catalogs/quakes.csv"
USUAL = "time,latitude,longitude,depth,mag,magType,id,type\n"
ROW = "2011-03-11T05:46:24.120Z,38.297,142.373,29,9.1,mww,a1,earthquake\n"


def read(tmp_path: Path, content: str | bytes, **options: object) -> Cleaned:
    """Write ``content`` as a catalog file, read it and clean it."""
    path = tmp_path / "quakes.csv"
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    settings = CatalogSettings.model_validate({"files": [FILE], **options})
    return clean(read_catalog(path, FILE, settings), settings)


def parsed(*texts: str) -> list[str]:
    """The texts as ISO instants, "NaT" where refused."""
    return [str(t) for t in parse_times(pa.array(texts, pa.large_string())).utc]


def test_fdsn_event_text(tmp_path: Path) -> None:
    """Event text as laid out in the FDSN Web Service Specifications 1.2 (2019), section event."""
    content = (
        "#EventID|Time|Latitude|Longitude|Depth/km|Author|Catalog|Contributor|ContributorID|"
        "MagType|Magnitude|MagAuthor|EventLocationName|EventType\n"
        '7|2011-03-11T05:46:24.12|38.297|-142.373|29.0|A|B|C|D|mww|9.1|E|A "b" c|earthquake\n'
        "# a comment\n"
        "8|2011-03-11T06:00:00||1|||||||4.1|||\n"
    )
    cleaned = read(tmp_path, content)
    row = cleaned.kept.iloc[0]
    assert (row["event_id"], row["magnitude"], row["magnitude_type"]) == ("7", 9.1, "mww")
    assert (row["latitude_deg"], row["longitude_deg"], row["depth_km"]) == (38.297, -142.373, 29.0)
    assert row["time_utc"].isoformat() == "2011-03-11T05:46:24.120000"
    assert (row["source_file"], row["source_line"]) == (FILE, 2)
    assert cleaned.quarantined["line"].tolist() == [4]


def test_fdsn_event_text_without_event_type(tmp_path: Path) -> None:
    """The column EventType is a later addition to the FDSN specification and may be absent."""
    content = (
        "#EventID | Time | Latitude | Longitude | Depth/km | Author | Catalog | Contributor | "
        "ContributorID | MagType | Magnitude | MagAuthor | EventLocationName\n"
        "7|2011-03-11T05:46:24|38.297|142.373|29.0|A|B|C|D|mww|9.1|E|Somewhere\n"
    )
    assert read(tmp_path, content).kept["event_type"].tolist() == [""]


@pytest.mark.parametrize("delimiter", [",", ";", "\t", "|"])
def test_delimiters_and_column_order(tmp_path: Path, delimiter: str) -> None:
    """The four usual delimiters and any order and case of columns (RFC 4180; common practice)."""
    header = ["ID", "MAG", "Lon", "Lat", "Origin Time", "Depth (km)"]
    values = ["a1", "9.1", "142.373", "38.297", "2011-03-11T05:46:24Z", "29"]
    text = delimiter.join(header) + "\n" + delimiter.join(values) + "\n"
    row = read(tmp_path, text).kept.iloc[0]
    assert (row["event_id"], row["magnitude"], row["depth_km"]) == ("a1", 9.1, 29.0)
    assert (row["latitude_deg"], row["longitude_deg"]) == (38.297, 142.373)


def test_byte_order_mark_and_crlf(tmp_path: Path) -> None:
    """A UTF-8 byte-order mark (Unicode 15, section 23.8) and CRLF (RFC 4180) change nothing."""
    plain = read(tmp_path, USUAL + ROW).kept
    dressed = b"\xef\xbb\xbf" + (USUAL + ROW).replace("\n", "\r\n").encode()
    assert read(tmp_path, dressed).kept.equals(plain)
    assert read(tmp_path, (USUAL + ROW).replace("\n", "\r")).kept.equals(plain)


def test_line_numbers_with_quoted_line_ends_and_blank_lines(tmp_path: Path) -> None:
    """Line numbers are those of a text editor: header, blank and quoted line ends are counted."""
    content = (
        "\ntime,latitude,longitude,mag,id,place\n"
        '2001-01-01,1,2,5,a,"one\ntwo"\n'
        "\n"
        "2001-01-02,1,2,5,b,x\n"
        '2001-01-03,1,2,5,c,"say ""no"", please"\n'
    )
    kept = read(tmp_path, content).kept
    assert dict(zip(kept["event_id"], kept["source_line"], strict=True)) == {"a": 3, "b": 6, "c": 7}


def test_a_quote_never_closed_swallows_no_row(tmp_path: Path) -> None:
    """Only the row with the open quote is set aside; those after it are read."""
    content = (
        "time,latitude,longitude,mag,place,id\n"
        '2001-01-01,1,2,5,"open,a\n2001-01-02,1,2,5,x,b\n2001-01-03,1,2,5,y,c\n'
    )
    cleaned = read(tmp_path, content)
    assert cleaned.kept["event_id"].tolist() == ["b", "c"]
    assert cleaned.quarantined[["line", "reason"]].to_numpy().tolist() == [
        [2, "wrong number of fields"]
    ]
    twice = read(tmp_path, content + '2001-01-04,1,2,5,"open,d\n2001-01-05,1,2,5,z,e\n')
    assert twice.kept["event_id"].tolist() == ["b", "c", "e"]
    assert twice.quarantined["line"].tolist() == [2, 5]
    in_turn = content.replace("x,b", '"open,b')
    assert read(tmp_path, in_turn).quarantined["line"].tolist() == [2, 3]
    too_wide = content.replace("2001-01-02,1,2,5,x,b", '2001-01-02",2,3')
    assert read(tmp_path, too_wide).quarantined["line"].tolist() == [2, 3]


def test_two_irregularities_that_cancel_do_not_shift_line_numbers() -> None:
    """A row on two lines and two rows on one (a bare CR) leave the count right, not the lines."""
    body = b'a,"x\ny",1\nb,c,2\rd,e,3\n'
    assert fast_records(body, 2, 3, [0], Dialect(",")) is None
    found = plain_records(body, 2, 3, [0], Dialect(","))
    assert found.line.tolist() == [2, 4]
    assert found.fault.to_pylist() == ["", "5 fields where the header has 3"]


def test_ragged_rows_are_set_aside_with_their_line(tmp_path: Path) -> None:
    """A row with too few or too many fields is one set-aside row, its neighbours are kept."""
    content = USUAL + ROW + "2011-03-11,1,2\n" + ROW.replace("a1", "a2,extra")
    cleaned = read(tmp_path, content)
    assert cleaned.quarantined["line"].tolist() == [3, 4]
    assert cleaned.quarantined["detail"].tolist() == [
        "3 fields where the header has 8",
        "9 fields where the header has 8",
    ]


CELLS = st.text(alphabet='ab ",\n;', max_size=4)


@settings(max_examples=200, deadline=None, derandomize=True)
@given(st.lists(st.tuples(CELLS, CELLS, CELLS), min_size=1, max_size=8))
def test_fast_and_plain_reading_agree(rows: list[tuple[str, str, str]]) -> None:
    """Arrow's reader and the line-by-line one give what Python's csv module wrote (RFC 4180).

    With a line end inside quotes Arrow's is not used.
    """
    stream = io.StringIO()
    csv.writer(stream, lineterminator="\n", quoting=csv.QUOTE_ALL).writerows(rows)
    body = stream.getvalue().encode()
    plain = plain_records(body, 2, 3, [0, 2], Dialect(","))
    assert [column.to_pylist() for column in plain.fields] == [
        [row[0] for row in rows],
        [row[2] for row in rows],
    ]
    fast = fast_records(body, 2, 3, [0, 2], Dialect(","))
    assert (fast is None) == any("\n" in cell for row in rows for cell in row)
    if fast is None:
        return
    assert fast.fields == plain.fields
    assert fast.line.tolist() == plain.line.tolist()


def test_time_spellings() -> None:
    """ISO 8601-1:2019 dates and times, offsets applied; none means UTC."""
    assert parsed(
        "2011-03-11T05:46:24.120Z",
        "2011-03-11T14:46:24.12+09:00",
        "2011-03-11 05:46:24,12",
        "2011/03/11 00:16:24.12-0530",
        "20110311T054624.12",
        "2011-03-11T05:46",
    ) == ["2011-03-11T05:46:24.120000"] * 5 + ["2011-03-11T05:46:00.000000"]


@pytest.mark.parametrize(
    "text",
    [
        "", "2011", "2011-03", "1299822384", "11/03/2011", "2011-02-29", "2011-13-01",
        "2011-00-10", "2011-03-11T25:00:00", "2011-03-11T24:00:01", "2011-03-11T05:60:00",
        "2011-03-11T05:46:61", "yesterday", "2011-03-11T05:46:24+99:00", "2011-03-11X05:46",
    ],
)  # fmt: skip
def test_times_that_are_refused(text: str) -> None:
    """No calendar date or an ambiguous one is never guessed at (ISO 8601-1:2019)."""
    assert parsed(text) == ["NaT"]


@settings(max_examples=300, deadline=None, derandomize=True)
@given(
    st.datetimes(min_value=datetime(2, 1, 1), max_value=datetime(9998, 12, 31)),
    st.integers(-14 * 60, 14 * 60),
)
def test_times_agree_with_the_standard_library(moment: datetime, offset_minutes: int) -> None:
    """All years, with offsets, as datetime.fromisoformat reads them, to the microsecond."""
    sign = "-" if offset_minutes < 0 else "+"
    hours, minutes = divmod(abs(offset_minutes), 60)
    text = f"{moment.isoformat()}{sign}{hours:02d}:{minutes:02d}"
    expected = datetime.fromisoformat(text).astimezone(UTC).replace(tzinfo=None)
    assert parsed(text) == [str(np.datetime64(expected, "us"))]


def test_dates_outside_nanosecond_range(tmp_path: Path) -> None:
    """Events before 1677 and after 2262, the limits of 64-bit nanoseconds, keep their times."""
    content = USUAL + ROW.replace("2011", "1556") + ROW.replace("2011", "2650").replace("a1", "a2")
    times = read(tmp_path, content).kept["time_utc"]
    assert times.dtype == "datetime64[us]"
    assert [t.isoformat()[:10] for t in times] == ["1556-03-11", "2650-03-11"]


def test_midnight_24_and_second_60_are_repaired_and_counted(tmp_path: Path) -> None:
    """24:00 (ISO 8601:1988) is the next midnight; 23:59:60 (ITU-R TF.460-6) the next second."""
    content = (
        USUAL
        + ROW.replace("2011-03-11T05:46:24.120Z", "2016-12-31T23:59:60.25Z")
        + ROW.replace("2011-03-11T05:46:24.120Z", "2016-12-30T24:00Z").replace("a1", "a2")
    )
    cleaned = read(tmp_path, content)
    assert [t.isoformat() for t in cleaned.kept["time_utc"]] == [
        "2016-12-31T00:00:00",
        "2017-01-01T00:00:00.250000",
    ]
    assert cleaned.repairs == {MIDNIGHT_24: 1, SECOND_60: 1}


def test_separate_date_and_time_columns(tmp_path: Path) -> None:
    """Date and time of day apart are joined; a blank time of day is a day only, at 12:00 UTC."""
    header = "date,time,lat,lon,magnitude\n"
    rows = "2011/03/11,05:46:24.1,38,142,9.1\n2011/03/12,,38,142,5.0\n"
    kept = read(tmp_path, header + rows).kept
    assert [t.isoformat() for t in kept["time_utc"]] == [
        "2011-03-11T05:46:24.100000",
        "2011-03-12T12:00:00",
    ]
    assert kept["day_only"].tolist() == [False, True]
    mapped = read(
        tmp_path,
        header.replace("date,time", "D,T") + rows,
        columns={"date": "D", "time_of_day": "T"},
    )
    assert mapped.kept.equals(kept)


def test_column_map(tmp_path: Path) -> None:
    """Columns named in study.toml are used, whatever usual names stand beside them."""
    content = "t,phi,lambda,h,M,mag,kind\n2011-03-11T05:46:24Z,38,142,29,9.1,8.8,earthquake\n"
    columns = {
        "time": "t", "latitude": "phi", "longitude": "lambda", "depth": "h", "magnitude": "M",
        "event_type": "kind",
    }  # fmt: skip
    row = read(tmp_path, content, columns=columns).kept.iloc[0]
    assert (row["latitude_deg"], row["longitude_deg"], row["depth_km"]) == (38.0, 142.0, 29.0)
    assert (row["magnitude"], row["event_type"], row["event_id"]) == (
        9.1,
        "earthquake",
        f"{FILE}:2",
    )


@pytest.mark.parametrize(
    ("header", "options", "words"),
    [
        ("time,latitude,longitude,magnitud\n", {}, ["line 1", "magnitude", "'magnitud'",
         '[catalog.columns] magnitude = "magnitud"', "time, latitude, longitude"]),
        ("when,latitude,longitude,mag\n", {}, ["no column for the time", "[catalog.columns] time"]),
        ("time,latitude,longitude,mag\n", {"columns": {"depth": "dept"}},
         ["depth = 'dept'", "the header is: time"]),
        ("time,latitude,longitude,mag,magnitude\n", {}, ["both 'mag' and 'magnitude'"]),
    ],
)  # fmt: skip
def test_header_faults_say_what_to_add(
    tmp_path: Path, header: str, options: dict[str, object], words: list[str]
) -> None:
    """A missing or doubtful column is named with file, header and the line for study.toml."""
    with pytest.raises(CatalogError) as caught:
        read(tmp_path, header + "x,1,2,3\n", **options)
    for word in [FILE, *words]:
        assert word in str(caught.value)


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"", "is empty"),
        (b"\xef\xbb\xbf \n\n", "is empty"),
        (USUAL.encode(), "has a header but no rows"),
        (USUAL.encode() + "2011-03-11,1,2,3,4,mb,Pérou,x\n".encode("latin-1"),
         "line 2: is not UTF-8 text (byte 0xe9)"),
        ((USUAL + ROW).encode() + b"caf\xc3", "line 3: is not UTF-8"),
        ((USUAL + ROW).encode("utf-16"), "is UTF-16 text"),
        (b"PK\x03\x04rest", "is a ZIP or spreadsheet file"),
        (USUAL.encode() + b"\0\0", "line 2: is binary, not text"),
        (b"# only\n# comments\n", "holds comments only"),
    ],
)  # fmt: skip
def test_files_that_are_no_catalog(tmp_path: Path, content: bytes, words: str) -> None:
    """Empty, header-only, wrongly encoded and binary files each give one sentence."""
    with pytest.raises(CatalogError) as caught:
        read(tmp_path, content)
    assert str(caught.value).startswith(FILE)
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_missing_file_and_folder(tmp_path: Path) -> None:
    """A missing file and a folder are told apart."""
    settings = CatalogSettings(files=(FILE,))
    with pytest.raises(CatalogError, match="the file is missing"):
        read_catalog(tmp_path / "none.csv", FILE, settings)
    with pytest.raises(CatalogError, match="is a folder"):
        read_catalog(tmp_path, FILE, settings)


def test_parquet_round_trip_is_the_same_to_the_byte(tmp_path: Path) -> None:
    """Same rows, same bytes, whatever the frame's index or the path; read back unchanged."""
    kept = read(tmp_path, USUAL + ROW + ROW.replace("2011", "1556").replace("a1,", "é,")).kept
    first, second = tmp_path / "a.parquet", tmp_path / "sub" / "b.parquet"
    second.parent.mkdir()
    write_parquet(kept, first)
    write_parquet(kept.set_index(kept.index + 7).assign(extra=1), second)
    assert first.read_bytes() == second.read_bytes()
    assert b"pandas" not in first.read_bytes()
    assert read_parquet(first).equals(kept)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.parquet", "quakes.csv", "sub"]


def test_empty_table_round_trip(tmp_path: Path) -> None:
    """A table without rows keeps its columns and types."""
    empty = empty_frame()
    assert list(empty.columns) == list(COLUMNS)
    write_parquet(empty, tmp_path / "empty.parquet")
    back = read_parquet(tmp_path / "empty.parquet")
    assert back.dtypes.equals(empty.dtypes)
    assert len(back) == 0


def test_reading_what_is_no_table(tmp_path: Path) -> None:
    """A missing or foreign Parquet file is an error that says which step to run."""
    with pytest.raises(MissingArtifactError, match="run the catalog step"):
        read_parquet(tmp_path / "none.parquet")
    (tmp_path / "text.parquet").write_text("no table")
    with pytest.raises(CatalogError, match="no Parquet file"):
        read_parquet(tmp_path / "text.parquet")
