"""Catalog files as tables of raw text: FDSN event text and delimited files.

Nothing is judged here; every row of the file becomes one row of text with its file and line.
"""

from __future__ import annotations

import codecs
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from epochtest.catalog.columns import USUAL_NAMES, match_columns, plain_name
from epochtest.catalog.records import Dialect, read_records, split_line
from epochtest.errors import CatalogError
from epochtest.study.settings import CatalogSettings, ColumnMap

RAW_TEXT_COLUMNS = (
    "event_id", "time", "latitude", "longitude", "depth", "magnitude", "magnitude_type",
    "event_type", "strike", "dip", "rake", "updated", "fault", "source_file",
)  # fmt: skip
"""Columns of a raw table, all text; ``source_line`` (int64) follows. Absent columns are empty."""

DELIMITERS = (",", ";", "\t", "|")
_CHECK_BLOCK = 1 << 22
_BINARY_MAGIC = {
    b"PK\x03\x04": "a ZIP or spreadsheet file", b"\x1f\x8b": "a gzip file",
    b"PAR1": "a Parquet file", b"SQLite": "an SQLite file", b"%PDF": "a PDF file",
}  # fmt: skip


def read_catalog(path: Path, file: str, settings: CatalogSettings) -> pd.DataFrame:
    """One catalog file as raw text (n rows, columns RAW_TEXT_COLUMNS and ``source_line``).

    ``file`` is the name used in messages and in ``source_file``. Raises CatalogError for a
    file that cannot be read as a whole.
    """
    content = _text_bytes(path, file)
    header, line, body_at = _header(content, file)
    body = content[body_at:]
    fdsn = _is_fdsn(header) if settings.format == "auto" else settings.format == "fdsn-text"
    if fdsn:
        dialect = Dialect("|", quoting=False, comments=True)
        names = split_line(header.lstrip("# "), dialect)
        indices = match_columns(names, ColumnMap(), file, line)
    else:
        delimiter = settings.delimiter if settings.delimiter != "auto" else _delimiter(header)
        dialect = Dialect(delimiter)
        names = split_line(header, dialect)
        indices = match_columns(names, settings.columns, file, line)
    records = read_records(body, line + 1, len(names), list(indices.values()), dialect)
    if records.line.size == 0:
        raise CatalogError(f"{file}: has a header but no rows; give a file with earthquakes.")
    columns = dict(zip(indices, records.fields, strict=True))
    return _raw_frame(columns, records.fault, records.line, file)


def _raw_frame(
    columns: dict[str, pa.Array], fault: pa.Array, line: np.ndarray, file: str
) -> pd.DataFrame:
    n = line.size
    empty = pa.repeat(pa.scalar("", pa.large_string()), n)
    if "date" in columns:
        time_of_day = columns.get("time_of_day", empty)
        columns["time"] = pc.utf8_trim_whitespace(
            pc.binary_join_element_wise(
                pc.utf8_trim_whitespace(columns["date"]),
                pc.utf8_trim_whitespace(time_of_day),
                pa.scalar(" ", pa.large_string()),
            )
        )
    columns["fault"] = fault
    columns["source_file"] = pa.repeat(pa.scalar(file, pa.large_string()), n)
    arrays = {name: columns.get(name, empty) for name in RAW_TEXT_COLUMNS}
    frame = pd.DataFrame({name: _text_series(array) for name, array in arrays.items()})
    frame["source_line"] = line
    return frame


def _text_series(array: pa.Array) -> pd.Series:
    return pd.Series(pd.array(array, dtype="str"))


def _text_bytes(path: Path, file: str) -> bytes:
    """The file's UTF-8 bytes without a byte-order mark, line ends LF or CRLF."""
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        raise CatalogError(
            f"{file}: the file is missing; put it there or mend catalog.files in study.toml.",
            file=file,
        ) from None
    except IsADirectoryError:
        raise CatalogError(f"{file}: is a folder; name the files in it.", file=file) from None
    except OSError as error:
        raise CatalogError(f"{file}: cannot be read ({error.strerror}).", file=file) from error
    for magic, what in _BINARY_MAGIC.items():
        if content.startswith(magic):
            raise CatalogError(f"{file}: is {what}, not text; export it as CSV.", file=file)
    if content.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        raise CatalogError(f"{file}: is UTF-16 text; save it as UTF-8.", file=file)
    content = content.removeprefix(codecs.BOM_UTF8)
    if not content.strip():
        raise CatalogError(f"{file}: is empty; give a file with a header and rows.", file=file)
    nul = content.find(b"\0")
    if nul >= 0:
        line = content.count(b"\n", 0, nul) + 1
        raise CatalogError(
            f"{file}, line {line}: is binary, not text (a zero byte); export it as CSV.",
            file=file, line=line,
        )  # fmt: skip
    _check_utf8(content, file)
    return content if b"\n" in content else content.replace(b"\r", b"\n")


def _check_utf8(content: bytes, file: str) -> None:
    """Decode in blocks, so that no second copy of the file is held."""
    if content.isascii():
        return
    decoder = codecs.getincrementaldecoder("utf-8")()
    for start in range(0, len(content), _CHECK_BLOCK):
        try:
            block = content[start : start + _CHECK_BLOCK]
            decoder.decode(block, final=start + _CHECK_BLOCK >= len(content))
        except UnicodeDecodeError as error:
            line = content.count(b"\n", 0, start + error.start) + 1
            raise CatalogError(
                f"{file}, line {line}: is not UTF-8 text (byte 0x{error.object[error.start]:02x});"
                " save the file as UTF-8.",
                file=file, line=line,
            ) from None  # fmt: skip


def _header(content: bytes, file: str) -> tuple[str, int, int]:
    """The header line, its number, and where the body begins; comment lines above are skipped."""
    at, line = 0, 0
    while at < len(content):
        end = content.find(b"\n", at)
        end = len(content) if end < 0 else end
        line += 1
        text = content[at:end].decode("utf-8").removesuffix("\r")
        at = min(end + 1, len(content))
        if text.strip() and (not text.startswith("#") or _is_fdsn(text)):
            return text, line, at
    raise CatalogError(f"{file}: holds comments only; give a header and rows.", file=file)


def _is_fdsn(header: str) -> bool:
    first = header.lstrip("# ").split("|")[0].strip().lower()
    return header.startswith("#") and "|" in header and first == "eventid"


def _delimiter(header: str) -> str:
    """The delimiter that yields most columns of usual names, then most columns."""
    usual = {name for names in USUAL_NAMES.values() for name in names}

    def score(delimiter: str) -> tuple[int, int]:
        names = split_line(header, Dialect(delimiter))
        return sum(plain_name(name) in usual for name in names), len(names)

    return max(DELIMITERS, key=score)
