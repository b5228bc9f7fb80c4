"""Times of a catalog: text to UTC ``datetime64[us]``, without ever guessing in silence.

Accepted (ISO 8601 calendar dates, and the unambiguous spelling with slashes)::

    2011-03-11T05:46:24.120Z   2011-03-11 05:46   2011/03/11 14:46:24+09:00
    20110311T054624            2011-03-11  (a day only: placed at 12:00 UTC and flagged)

No offset means UTC. A year or a year and month alone, and day-first or month-first dates,
are refused: a general-purpose parser would turn "2011" into 1 January in silence.
Two spellings are repaired and counted: 24:00 is midnight at the end of the day (ISO 8601:1988),
and second 60 (a leap second, or a rounded value) is labelled with the second that follows it,
as `timescale.utc_from_tt_days` does.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from epochtest.catalog.fields import integers, trimmed

_CALENDAR_TIME = (
    r"^(?P<year>\d{4})[-/](?P<month>\d{1,2})[-/](?P<day>\d{1,2})"
    r"(?:[Tt ]\s*(?P<hour>\d{1,2}):(?P<minute>\d{2})"
    r"(?::(?P<second>\d{1,2})(?:[.,](?P<fraction>\d*))?)?"
    r"\s*(?P<zone>[Zz]|UTC|GMT|[+-]\d{2}(?::?\d{2})?)?)?$"
)
_COMPACT_DATE = (r"^(\d{4})(\d{2})(\d{2})($|[Tt ])", r"\1-\2-\3\4")
_COMPACT_TIME = (r"([Tt ]\s*\d{2})(\d{2})(\d{2}(?:[.,]\d*)?)([Zz]|[+-].*|)$", r"\1:\2:\3\4")

MIDNIGHT_24 = "24:00 read as midnight at the end of the day"
SECOND_60 = "second 60 read as the second that follows"


@dataclass(frozen=True)
class ParsedTimes:
    """Instants (n,) with NaT where unparseable, day-only flags (n,), repair counts' masks (n,)."""

    utc: NDArray[np.datetime64]
    day_only: NDArray[np.bool_]
    repaired: dict[str, NDArray[np.bool_]]


def parse_times(texts: pa.Array) -> ParsedTimes:
    """Parse an Arrow array (n,) of texts; anything not understood is NaT, nothing is raised."""
    plain = trimmed(texts)
    parts = pc.extract_regex(plain, _CALENDAR_TIME)
    odd = pc.and_(pc.is_null(parts), pc.not_equal(plain, ""))
    if pc.any(odd).as_py():
        spelled = plain
        for pattern, replacement in (_COMPACT_DATE, _COMPACT_TIME):
            spelled = pc.replace_substring_regex(spelled, pattern=pattern, replacement=replacement)
        plain = pc.if_else(odd, spelled, plain)
        parts = pc.extract_regex(plain, _CALENDAR_TIME)
    return _assemble(parts)


def _assemble(parts: pa.Array) -> ParsedTimes:
    found = ~np.asarray(pc.is_null(parts))
    year, month, day, hour, minute, second = (
        integers(pc.struct_field(parts, name))
        for name in ("year", "month", "day", "hour", "minute", "second")
    )
    with_time = np.asarray(pc.fill_null(pc.not_equal(pc.struct_field(parts, "hour"), ""), False))
    micros = _microseconds(pc.struct_field(parts, "fraction"))
    first_of_month = ((year - 1970) * 12 + month - 1).astype("datetime64[M]")
    date = first_of_month.astype("datetime64[D]") + (day - 1)
    in_calendar = (month >= 1) & (month <= 12) & (day >= 1)
    in_calendar &= date.astype("datetime64[M]") == first_of_month
    end_of_day = with_time & (hour == 24) & (minute == 0) & (second == 0) & (micros == 0)
    in_day = ((hour < 24) | end_of_day) & (minute < 60) & (second <= 60)
    offset_s, known_zone = _offset_seconds(pc.struct_field(parts, "zone"))
    good = found & in_calendar & in_day & known_zone
    seconds = hour * 3600 + minute * 60 + second - offset_s
    seconds = np.where(with_time, seconds, 12 * 3600)
    utc = date.astype("datetime64[us]") + (seconds * 1_000_000 + micros).astype("timedelta64[us]")
    utc[~good] = np.datetime64("NaT")
    repaired = {MIDNIGHT_24: good & end_of_day, SECOND_60: good & (second == 60)}
    return ParsedTimes(utc, good & ~with_time, repaired)


def _microseconds(fraction: pa.Array) -> NDArray[np.int64]:
    """Digits behind the decimal sign as microseconds, the seventh and later cut off."""
    padded = pc.utf8_slice_codeunits(pc.utf8_rpad(pc.fill_null(fraction, ""), 6, "0"), 0, 6)
    return integers(padded)


def _offset_seconds(zone: pa.Array) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Offsets east of UTC in s; each distinct spelling is worked out once."""
    encoded = pc.dictionary_encode(pc.fill_null(zone, ""))
    offsets, known = [], []
    for text in encoded.dictionary.to_pylist():
        digits = text[1:].replace(":", "")
        signed = text[:1] in ("+", "-")
        hours, minutes = (int(digits[:2]), int(digits[2:] or 0)) if signed else (0, 0)
        offsets.append((hours * 3600 + minutes * 60) * (-1 if text[:1] == "-" else 1))
        known.append(hours < 24 and minutes < 60)
    codes = np.asarray(encoded.indices)
    return np.array(offsets, dtype=np.int64)[codes], np.array(known, dtype=bool)[codes]
