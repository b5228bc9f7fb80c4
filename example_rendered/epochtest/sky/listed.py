"""Epochs from a user's own dated list, a CSV file inside the study."""

from __future__ import annotations

import csv
from datetime import date
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pandas as pd

from epochtest.errors import ProtocolError
from epochtest.sky.events import epoch_table
from epochtest.study.base import nearest
from epochtest.study.events import ListedDates
from epochtest.timescale import tdb_days_from_utc, utc_instant

LABEL_COLUMN = "label"
UNLABELLED = "listed date"
_NOON = np.timedelta64(12, "h")
_DELIMITERS = ",;\t"


class _Row(NamedTuple):
    line: int
    cells: list[str]


def read_listed(
    path: Path, event: ListedDates, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """The listed dates with ``from_utc <= time < to_utc``, sorted, columns as `find_epochs`.

    The file is UTF-8 text with a header line, separated by comma, semicolon or tab. Values of
    the column ``event.column`` are ISO 8601; an offset is honoured, none means UTC. A date
    without a time of day stands for 12:00 UTC, the middle of that day. A column ``label``, if
    there is one, names the epochs.

    An instant listed twice counts once: ``attrs["duplicates_dropped"]`` says how many rows went,
    ``attrs["outside_span"]`` how many instants lie outside the span.

    Raises ProtocolError with one sentence per fault (file, line, value found, what to do).
    """
    header, rows = _read(path)
    column = _column(path, header, event.column)
    label_column = header.index(LABEL_COLUMN) if LABEL_COLUMN in header else len(header)
    faults: list[str] = []
    instants: list[np.datetime64] = []
    labels: list[str] = []
    for row in rows:
        text = row.cells[column].strip() if column < len(row.cells) else ""
        try:
            instants.append(_instant(text))
        except ValueError:
            found = repr(text) if text else "nothing"
            faults.append(
                f"{path.name}: line {row.line}, column {event.column!r}: found {found} where a "
                "date or instant belongs; write it like 2020-12-21 or 2020-12-21T18:20:00Z."
            )
            continue
        name = row.cells[label_column].strip() if label_column < len(row.cells) else ""
        labels.append(name or UNLABELLED)
    if faults:
        raise ProtocolError.of(faults)
    times = np.array(instants, dtype="datetime64[us]")
    unique, first_row = np.unique(times, return_index=True)
    inside = (unique >= utc_instant(from_utc)) & (unique < utc_instant(to_utc))
    kept = unique[inside]
    names = [labels[row] for row in first_row[inside]]
    unknown = np.full(kept.size, np.nan)
    table = epoch_table(kept, tdb_days_from_utc(kept), names, unknown, unknown)
    table.attrs["duplicates_dropped"] = int(times.size - unique.size)
    table.attrs["outside_span"] = int(unique.size - kept.size)
    return table


def _read(path: Path) -> tuple[list[str], list[_Row]]:
    """Header and non-blank rows; the byte-order mark and CRLF are taken off."""
    try:
        with path.open(encoding="utf-8-sig", newline="") as stream:
            first = stream.readline()
            delimiter = max(_DELIMITERS, key=first.count)
            stream.seek(0)
            reader = csv.reader(stream, delimiter=delimiter, strict=True)
            filled = [
                _Row(reader.line_num, cells) for cells in reader if any(map(str.strip, cells))
            ]
    except FileNotFoundError as error:
        raise ProtocolError(
            f"{path.name}: there is no such file at {path}; put it there or mend the key file."
        ) from error
    except UnicodeDecodeError as error:
        raise ProtocolError(
            f"{path.name}: the file is not UTF-8 text (byte {error.start}); save it as UTF-8."
        ) from error
    except csv.Error as error:
        raise ProtocolError(
            f"{path.name}: line {reader.line_num}: not readable as CSV ({error}); mend the quotes."
        ) from error
    if not filled:
        raise ProtocolError(f"{path.name}: the file is empty; give a header line and dates.")
    return [name.strip() for name in filled[0].cells], filled[1:]


def _column(path: Path, header: list[str], wanted: str) -> int:
    if header.count(wanted) == 1:
        return header.index(wanted)
    if wanted in header:
        raise ProtocolError(
            f"{path.name}: the header names column {wanted!r} {header.count(wanted)} times; "
            "rename all but one."
        )
    guess = nearest(wanted, header)
    hint = f"did you mean {guess!r}?" if guess else f"its columns are: {', '.join(header)}."
    raise ProtocolError(f"{path.name}: there is no column {wanted!r}; {hint}", column=wanted)


def _instant(text: str) -> np.datetime64:
    try:
        day = date.fromisoformat(text)
    except ValueError:
        return utc_instant(text)
    return utc_instant(day) + _NOON
