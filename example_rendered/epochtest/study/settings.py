"""Models of study.toml and catalogs/sources.toml: what holds for every claim of a study."""

from __future__ import annotations

import re
from datetime import date, datetime
from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from epochtest.study.base import Strict
from epochtest.timescale import utc_instant

Kernel = Literal["DE421", "DE440"]
Correction = Literal["maxT", "holm", "none"]
Sha256 = Annotated[str, Field(pattern=r"^[0-9a-f]{64}$")]
RelativePath = Annotated[str, Field(min_length=1)]


def inside_the_study(path: str) -> str:
    """Refuse absolute paths and paths that climb out of the study."""
    parts = re.split(r"[\\/]", path)
    if path.startswith(("/", "\\")) or ".." in parts or re.match(r"^[A-Za-z]:", path):
        raise ValueError("a path must be relative and stay inside the study; move the file there")
    return path


class About(Strict):
    """Who asks what."""

    title: str = Field(min_length=1, description="Name of the study.")
    question: str = Field("", description="The research question in words.")
    author: str = Field("", description="Who answers for the study.")
    lab: str = Field("", description="Group or institution.")


class Span(Strict):
    """The study span [start, end), UTC."""

    start: datetime | date = Field(description="First instant of the span, UTC.")
    end: datetime | date = Field(description="End of the span, UTC; itself not part of it.")

    @model_validator(mode="after")
    def _ordered(self) -> Span:
        if not utc_instant(self.start) < utc_instant(self.end):
            raise ValueError(
                f"the span ends ({self.end}) before it starts ({self.start}); mend the dates"
            )
        return self


class ColumnMap(Strict):
    """Which column of a delimited file holds what; a key left out is found by its usual name."""

    time: str | None = Field(None, description="Column with date and time together.")
    date: str | None = Field(None, description="Column with the date, where time stands apart.")
    time_of_day: str | None = Field(None, description="Column with the time of day.")
    latitude: str | None = Field(None, description="Degrees north.")
    longitude: str | None = Field(None, description="Degrees east, -180..180 or 0..360.")
    depth: str | None = Field(None, description="Kilometres, positive down.")
    magnitude: str | None = None
    magnitude_type: str | None = None
    event_id: str | None = None
    event_type: str | None = None
    strike: str | None = Field(None, description="Of one nodal plane, degrees (Aki & Richards).")
    dip: str | None = None
    rake: str | None = None

    @model_validator(mode="after")
    def _one_way_of_telling_time(self) -> ColumnMap:
        if self.time and (self.date or self.time_of_day):
            raise ValueError("give either time, or date and time_of_day, not both")
        if self.time_of_day and not self.date:
            raise ValueError("time_of_day needs date beside it")
        return self


class CatalogSettings(Strict):
    """Which files make the catalog and how they are read and cleaned."""

    files: tuple[RelativePath, ...] = Field(
        min_length=1, description="Catalog files, joined in this order."
    )
    format: Literal["auto", "fdsn-text", "delimited"] = "auto"
    delimiter: str = Field("auto", description="One character, or auto.")
    columns: ColumnMap = ColumnMap()
    keep_event_types: tuple[str, ...] = Field(
        ("earthquake",), description="Other event types are set aside; rows without a type stay."
    )
    duplicate_seconds: float = Field(2.0, ge=0.0)
    duplicate_km: float = Field(50.0, ge=0.0)
    duplicate_magnitude: float = Field(0.5, ge=0.0)

    @field_validator("files")
    @classmethod
    def _inside(cls, files: tuple[str, ...]) -> tuple[str, ...]:
        if len(set(files)) != len(files):
            raise ValueError("a catalog file is listed twice; list it once")
        return tuple(inside_the_study(file) for file in files)

    @field_validator("delimiter")
    @classmethod
    def _one_character(cls, delimiter: str) -> str:
        if delimiter != "auto" and len(delimiter) != 1:
            raise ValueError("a delimiter is one character, or auto")
        return delimiter


class Selection(Strict):
    """Which earthquakes count. A claim's selection overrides the study's, key by key."""

    minimum_magnitude: float | None = Field(None, ge=-5.0, le=11.0)
    maximum_magnitude: float | None = Field(None, ge=-5.0, le=11.0)
    minimum_depth_km: float | None = Field(None, ge=-10.0, le=1000.0)
    maximum_depth_km: float | None = Field(None, ge=-10.0, le=1000.0)
    box: tuple[float, float, float, float] | None = Field(
        None,
        description="[west, south, east, north] in degrees; west > east crosses the dateline.",
    )
    polygon: RelativePath | None = Field(
        None, description="GeoJSON file (Polygon or MultiPolygon), relative to the study."
    )

    @model_validator(mode="after")
    def _sensible(self) -> Selection:
        for low, high, what in (
            (self.minimum_magnitude, self.maximum_magnitude, "magnitude"),
            (self.minimum_depth_km, self.maximum_depth_km, "depth"),
        ):
            if low is not None and high is not None and low > high:
                raise ValueError(f"the {what} range {low}..{high} is empty; swap the limits")
        if self.box is not None and self.polygon is not None:
            raise ValueError("give box or polygon, not both")
        return self

    @field_validator("box")
    @classmethod
    def _box_on_earth(
        cls, box: tuple[float, float, float, float] | None
    ) -> tuple[float, float, float, float] | None:
        if box is None:
            return None
        west, south, east, north = box
        if not (-90.0 <= south < north <= 90.0):
            raise ValueError("a box is [west, south, east, north] with -90 <= south < north <= 90")
        if not all(-180.0 <= lon <= 360.0 for lon in (west, east)) or west == east:
            raise ValueError("longitudes of a box lie in -180..360 and differ")
        return box

    @field_validator("polygon")
    @classmethod
    def _inside(cls, polygon: str | None) -> str | None:
        return None if polygon is None else inside_the_study(polygon)

    def overridden_by(self, other: Selection) -> Selection:
        """This selection with the keys that ``other`` sets; a region replaces a region."""
        mine, theirs = self.model_dump(), other.model_dump(exclude_none=True)
        if "box" in theirs or "polygon" in theirs:
            mine["box"] = mine["polygon"] = None
        return Selection(**{**mine, **theirs})


class EphemerisSettings(Strict):
    """Which packaged kernel the positions come from."""

    kernel: Kernel = Field("DE421", description="DE421: 1899-2053; DE440: 1549-2650.")


class InferenceSettings(Strict):
    """The decision rule, fixed before looking."""

    alpha: float = Field(0.05, gt=0.0, le=0.5, description="Level of every decision.")
    correction: Correction = Field(
        "maxT", description="Price of testing several claims: Westfall-Young maxT, Holm or none."
    )
    power: float = Field(0.8, gt=0.0, lt=1.0, description="Power of the detectable rate ratio.")
    confidence: float = Field(0.95, gt=0.5, lt=1.0, description="Level of the intervals.")
    grid_hours: float = Field(
        1.0, gt=0.0, le=24.0, description="Step of the shift grid, hours; 24 is a multiple of it."
    )
    seed: int = Field(20260101, ge=0, description="Seed of every random number of the study.")

    @field_validator("grid_hours")
    @classmethod
    def _divides_a_day(cls, hours: float) -> float:
        steps = 24.0 / hours
        if abs(steps - round(steps)) > 1e-9:
            raise ValueError("grid_hours must divide 24, for example 0.5, 1, 2, 6")
        return hours


class Study(Strict):
    """study.toml."""

    about: About
    span: Span
    catalog: CatalogSettings
    selection: Selection = Selection()
    ephemeris: EphemerisSettings = EphemerisSettings()
    inference: InferenceSettings = InferenceSettings()


class Source(Strict):
    """Where one input file came from, and the content it must still have."""

    file: RelativePath
    origin: str = Field(min_length=1, description="Who published it, and how it was obtained.")
    licence: str = Field(min_length=1, description="Terms under which it may be passed on.")
    sha256: Sha256

    @field_validator("file")
    @classmethod
    def _inside(cls, file: str) -> str:
        return inside_the_study(file)


class Sources(Strict):
    """catalogs/sources.toml."""

    source: tuple[Source, ...] = ()

    @model_validator(mode="after")
    def _each_once(self) -> Sources:
        names = [source.file for source in self.source]
        twice = sorted({name for name in names if names.count(name) > 1})
        if twice:
            raise ValueError(f"{twice[0]} is described twice; keep one [[source]] block")
        return self
