"""Delimited text to rows of fields, each with the line where it begins.

Two ways to the same rows. The fast one hands the whole text to Arrow and finds line numbers by
counting line ends. It gives up (returns None) when the file is irregular in any way: a row with
another number of fields, a line end inside quotes, a comment. Then the plain one goes line by
line and sets the odd rows aside instead of losing them or those after them.

The trap in the plain one: a quote that is opened and never closed would swallow the rest of the
file, or, if another one is never closed further down, all rows between. So a line with an open
quote is joined with following lines only if that yields a whole and well-formed row (RFC 4180:
after a closing quote comes a delimiter) within MAXIMUM_JOINED lines; otherwise it is alone::

    12,"Two        <- joined with the next line: 1 row, begins here
    lines",5.1
    13,"One,5.2    <- joining never gives a whole row: this line is faulty, the next is safe
    14,Two,5.3
"""

from __future__ import annotations

import csv
from array import array
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.csv as pacsv
from numpy.typing import NDArray

MAXIMUM_JOINED = 20
_BLOCK = 1 << 24
_ROWS_AS_OBJECTS = 1 << 16
_NEWLINE, _RETURN, _QUOTE, _HASH = 10, 13, 34, 35


@dataclass(frozen=True)
class Dialect:
    """How a file is cut up: delimiter, whether quotes count, whether # begins a comment line."""

    delimiter: str
    quoting: bool = True
    comments: bool = False


@dataclass(frozen=True)
class Records:
    """Wanted fields as text arrays (n,), first line (n,), and the fault of each row ("" if none).

    The fields of a faulty row are empty.
    """

    fields: list[pa.Array]
    line: NDArray[np.int64]
    fault: pa.Array


def read_records(
    body: bytes, first_line: int, width: int, wanted: Sequence[int], dialect: Dialect
) -> Records:
    """Rows of ``body``, the text after the header, whose first line has number ``first_line``.

    ``width`` is the number of columns in the header, ``wanted`` the indices to return.
    Blank lines are no rows.
    """
    records = fast_records(body, first_line, width, wanted, dialect)
    return plain_records(body, first_line, width, wanted, dialect) if records is None else records


def fast_records(
    body: bytes, first_line: int, width: int, wanted: Sequence[int], dialect: Dialect
) -> Records | None:
    """`read_records` by Arrow; None if the text is irregular."""
    view = np.frombuffer(body, dtype=np.uint8)
    lines = _record_lines(view, first_line, dialect)
    if lines is None:
        return None
    if lines.size == 0:
        return Records([pa.array([], pa.large_string()) for _ in wanted], lines, _no_fault(0))
    names = [str(i) for i in range(width)]
    used = [names[i] for i in dict.fromkeys(wanted)]
    try:
        table = pacsv.read_csv(
            pa.BufferReader(body),
            read_options=pacsv.ReadOptions(column_names=names),
            parse_options=pacsv.ParseOptions(
                delimiter=dialect.delimiter,
                quote_char='"' if dialect.quoting else False,
            ),
            convert_options=pacsv.ConvertOptions(
                include_columns=used,
                column_types=dict.fromkeys(used, pa.large_string()),
                strings_can_be_null=False,
            ),
        )
    except pa.ArrowInvalid:
        return None
    if table.num_rows != lines.size:
        return None
    fields = [table.column(names[i]).combine_chunks() for i in wanted]
    return Records(fields, lines, _no_fault(lines.size))


def _no_fault(n: int) -> pa.Array:
    return pa.repeat(pa.scalar("", pa.large_string()), n)


def _positions(view: NDArray[np.uint8], byte: int) -> NDArray[np.int64]:
    """Where ``byte`` stands, found in blocks so that no mask of the whole file is made."""
    found = [
        np.flatnonzero(view[start : start + _BLOCK] == byte) + start
        for start in range(0, view.size, _BLOCK)
    ]
    return np.concatenate(found) if found else np.empty(0, dtype=np.int64)


def _record_lines(
    view: NDArray[np.uint8], first_line: int, dialect: Dialect
) -> NDArray[np.int64] | None:
    """First line of every record that is not blank; None if that cannot be told by counting."""
    ends = _positions(view, _NEWLINE)
    if view.size and (ends.size == 0 or ends[-1] != view.size - 1):
        ends = np.append(ends, view.size)
    starts = np.concatenate(([0], ends[:-1] + 1)).astype(np.int64)[: ends.size]
    if dialect.comments and np.any(view[starts[starts < view.size]] == _HASH):
        return None
    if dialect.quoting and np.any(np.searchsorted(_positions(view, _QUOTE), ends) % 2):
        return None
    length = ends - starts
    only_return = (length == 1) & (view[np.minimum(starts, max(view.size - 1, 0))] == _RETURN)
    rows = (length > 0) & ~only_return
    return (np.flatnonzero(rows) + first_line).astype(np.int64)


def plain_records(
    body: bytes, first_line: int, width: int, wanted: Sequence[int], dialect: Dialect
) -> Records:
    """`read_records` line by line; slower, and tolerant of faulty rows."""
    lines = body.decode("utf-8").split("\n")
    found = [_Column() for _ in wanted]
    faults, numbers = _Column(), array("q")
    at = 0
    while at < len(lines):
        text, number, step = lines[at].removesuffix("\r"), first_line + at, 1
        if text.strip() == "" or (dialect.comments and text.startswith("#")):
            at += 1
            continue
        row = split_line(text, dialect)
        if dialect.quoting and text.count('"') % 2:
            row, step = _joined(lines, at, width, row, dialect)
        whole = len(row) == width
        for column, index in zip(found, wanted, strict=True):
            column.add(row[index] if whole else "")
        numbers.append(number)
        faults.add("" if whole else f"{len(row)} fields where the header has {width}")
        at += step
    return Records(
        [column.array() for column in found], np.array(numbers, dtype=np.int64), faults.array()
    )


class _Column:
    """A growing text column that holds only its last rows as Python objects."""

    def __init__(self) -> None:
        self.recent: list[str] = []
        self.parts = [pa.array([], pa.large_string())]

    def add(self, text: str) -> None:
        self.recent.append(text)
        if len(self.recent) == _ROWS_AS_OBJECTS:
            self._pack()

    def array(self) -> pa.Array:
        self._pack()
        return pa.concat_arrays(self.parts)

    def _pack(self) -> None:
        self.parts.append(pa.array(self.recent, pa.large_string()))
        self.recent = []


def _joined(
    lines: list[str], at: int, width: int, alone: list[str], dialect: Dialect
) -> tuple[list[str], int]:
    """The whole row that begins with the open quote on line ``at``, and how many lines it takes."""
    text = lines[at].removesuffix("\r")
    for count in range(2, MAXIMUM_JOINED + 1):
        if at + count > len(lines):
            break
        text += "\n" + lines[at + count - 1].removesuffix("\r")
        if text.count('"') % 2 == 0:
            row = split_line(text, dialect, strict=True)
            if len(row) == width:
                return row, count
            break
    return alone, 1


def split_line(text: str, dialect: Dialect, strict: bool = False) -> list[str]:
    """The fields of one row of text, which may hold line ends inside quotes.

    With ``strict``, a text that RFC 4180 does not allow has no fields at all.
    """
    if not dialect.quoting or '"' not in text:
        return text.split(dialect.delimiter)
    reader = csv.reader([text], delimiter=dialect.delimiter, skipinitialspace=True, strict=strict)
    try:
        return next(reader)
    except csv.Error:
        return [] if strict else text.split(dialect.delimiter)
