"""Which column of a file holds what: by the study's column map, else by its usual name."""

from __future__ import annotations

import re
from collections.abc import Sequence

from epochtest.errors import CatalogError
from epochtest.study.base import nearest
from epochtest.study.settings import ColumnMap

USUAL_NAMES: dict[str, tuple[str, ...]] = {
    "time": (
        "time", "time_utc", "utc_time", "utc", "datetime", "date_time", "datetime_utc",
        "origintime", "origin_time", "event_time",
    ),
    "date": ("date", "date_utc", "utc_date", "origin_date"),
    "time_of_day": ("time", "time_utc", "utc_time", "time_of_day", "origin_time"),
    "latitude": ("latitude", "latitude_deg", "lat"),
    "longitude": ("longitude", "longitude_deg", "lon", "long", "lng"),
    "depth": ("depth", "depth_km"),
    "magnitude": ("magnitude", "mag"),
    "magnitude_type": ("magnitude_type", "magtype", "mag_type", "magnitudetype"),
    "event_id": ("event_id", "eventid", "id"),
    "event_type": ("event_type", "eventtype", "type"),
    "strike": ("strike", "strike_deg", "strike1"),
    "dip": ("dip", "dip_deg", "dip1"),
    "rake": ("rake", "rake_deg", "rake1"),
    "updated": ("updated", "last_modified"),
}  # fmt: skip
"""Usual names (common practice), compared without case, units and punctuation."""

_DATE_AND_TIME = ("datetime", "date_time", "datetime_utc")
_NEEDED = ("latitude", "longitude", "magnitude")


def plain_name(name: str) -> str:
    """A header's name in lower case, unit in brackets dropped, punctuation as underscores."""
    bare = re.sub(r"[(\[].*?[)\]]", "", name.strip().lower())
    return re.sub(r"[^\w]+", "_", bare).strip("_")


def match_columns(
    header: Sequence[str], mapping: ColumnMap, file: str, line: int
) -> dict[str, int]:
    """Index of each recognised field in ``header``.

    Raises CatalogError where a needed field (a time or date, latitude, longitude, magnitude) or
    a mapped column is missing, or where two columns could be meant.
    """
    place = f"{file}, line {line}"
    mapped = {field: name for field, name in mapping.model_dump().items() if name is not None}
    found = {field: _mapped(header, field, name, place) for field, name in mapped.items()}
    plain = [plain_name(name) for name in header]
    for field in _fields_to_find(plain, mapped):
        if field in found:
            continue
        hits = [i for i, name in enumerate(plain) if name in USUAL_NAMES[field]]
        if len(hits) > 1:
            names = " and ".join(repr(header[i].strip()) for i in hits)
            raise CatalogError(
                f"{place}: both {names} could be the {_words(field)}; say which in study.toml: "
                f'[catalog.columns] {field} = "{header[hits[0]].strip()}".',
                file=file, field=field,
            )  # fmt: skip
        if hits:
            found[field] = hits[0]
    for field in _NEEDED:
        if field not in found:
            raise _missing(header, field, place, file)
    if "time" not in found and "date" not in found:
        raise _missing(header, "time", place, file)
    return found


def _fields_to_find(plain: Sequence[str], mapped: dict[str, str]) -> list[str]:
    """A date column beside it makes "time" a time of day, unless a third column holds both."""
    dated = any(name in USUAL_NAMES["date"] for name in plain)
    dated &= not any(name in _DATE_AND_TIME for name in plain)
    apart = "date" in mapped or ("time" not in mapped and dated)
    left_out = {"time"} if apart else {"date", "time_of_day"}
    return [field for field in USUAL_NAMES if field not in left_out]


def _mapped(header: Sequence[str], field: str, name: str, place: str) -> int:
    stripped = [column.strip() for column in header]
    hits = [i for i, column in enumerate(stripped) if column == name]
    hits = hits or [i for i, column in enumerate(stripped) if column.lower() == name.lower()]
    if len(hits) == 1:
        return hits[0]
    if hits:
        raise CatalogError(f"{place}: {len(hits)} columns are called {name!r}; rename one of them.")
    guess = nearest(name, stripped)
    hint = f"did you mean {guess!r}? " if guess else ""
    raise CatalogError(
        f"{place}: study.toml says {field} = {name!r} in [catalog.columns], but the header is: "
        f"{_shown(header)}; {hint}mend that line of study.toml.",
        field=field,
    )


def _missing(header: Sequence[str], field: str, place: str, file: str) -> CatalogError:
    stripped = [column.strip() for column in header]
    by_plain = {plain_name(column): column for column in stripped}
    guesses = (nearest(usual, by_plain) for usual in USUAL_NAMES[field] if len(usual) > 2)
    guess = next((by_plain[name] for name in guesses if name), None)
    hint = f"did you mean {guess!r}? " if guess else ""
    return CatalogError(
        f"{place}: no column for the {_words(field)}; the header is: {_shown(header)}; {hint}"
        f'Add to study.toml: [catalog.columns] {field} = "{guess or "NAME OF THE COLUMN"}".',
        file=file, field=field, header=stripped,
    )  # fmt: skip


def _shown(header: Sequence[str]) -> str:
    text = ", ".join(column.strip() for column in header)
    return text if len(text) <= 300 else text[:300] + "..."


def _words(field: str) -> str:
    return field.replace("_", " ")
