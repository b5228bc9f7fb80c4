"""Models of the [event] table of a claim: which sky events are meant, to the letter."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, field_validator, model_validator

from epochtest.study.base import Strict
from epochtest.study.settings import RelativePath, inside_the_study

Body = Literal[
    "sun", "moon", "mercury", "venus", "earth", "mars",
    "jupiter", "saturn", "uranus", "neptune", "pluto",
]  # fmt: skip
Frame = Literal["geometric-J2000", "apparent-of-date"]
PhaseName = Literal["new", "first-quarter", "full", "last-quarter"]

PHASE_ELONGATION_DEG: dict[str, float] = {
    "new": 0.0,
    "first-quarter": 90.0,
    "full": 180.0,
    "last-quarter": 270.0,
}
ASPECT_ANGLE_DEG: dict[str, float] = {"conjunction": 0.0, "opposition": 180.0}


class MoonPhase(Strict):
    """The Moon at given elongations (geocentric ecliptic longitude, Moon minus Sun)."""

    kind: Literal["moon-phase"] = "moon-phase"
    phases: tuple[PhaseName, ...] = ()
    elongations_deg: tuple[float, ...] = Field(
        (), description="Any other elongations, degrees east of the Sun, 0..360."
    )
    frame: Frame = "geometric-J2000"

    @model_validator(mode="before")
    @classmethod
    def _seen_from_the_earth(cls, content: Any) -> Any:
        if isinstance(content, dict) and "centre" in content:
            raise ValueError(
                "a moon-phase is seen from the Earth: leave centre out, or write kind = "
                '"longitude-difference" with that centre and bodies = ["moon", "sun"]'
            )
        return content

    @model_validator(mode="after")
    def _something(self) -> MoonPhase:
        if not self.phases and not self.elongations_deg:
            raise ValueError("name at least one of phases, or give elongations_deg")
        return self

    @field_validator("elongations_deg")
    @classmethod
    def _on_the_circle(cls, angles: tuple[float, ...]) -> tuple[float, ...]:
        if not all(0.0 <= angle < 360.0 for angle in angles):
            raise ValueError("elongations lie in 0 <= angle < 360 degrees")
        return angles


class MoonDistance(Strict):
    """The Moon nearest to the Earth (perigee) or farthest from it (apogee), geometric."""

    kind: Literal["moon-distance"] = "moon-distance"
    extreme: Literal["perigee", "apogee"]


class LongitudeDifference(Strict):
    """Two bodies seen from a centre with a given difference of ecliptic longitude.

    The difference is first body minus second body. A conjunction is 0, an opposition 180.
    """

    kind: Literal["longitude-difference"] = "longitude-difference"
    centre: Body
    bodies: tuple[Body, Body]
    aspect: Literal["conjunction", "opposition"] | None = None
    angle_deg: float | None = Field(None, ge=0.0, lt=360.0)
    either_side: bool = Field(False, description="Also count the difference 360 - angle.")
    frame: Frame = "geometric-J2000"

    @model_validator(mode="after")
    def _possible(self) -> LongitudeDifference:
        _distinct(self.bodies)
        _not_the_centre(self.centre, self.bodies)
        if (self.aspect is None) == (self.angle_deg is None):
            raise ValueError("give either aspect (conjunction, opposition) or angle_deg")
        if self.frame == "apparent-of-date" and self.centre != "earth":
            raise ValueError(
                "apparent-of-date directions exist for centre 'earth' only; "
                f"use geometric-J2000 for centre {self.centre!r}"
            )
        return self

    def angles_deg(self) -> tuple[float, ...]:
        """The differences looked for, degrees in [0, 360)."""
        angle = ASPECT_ANGLE_DEG[self.aspect] if self.aspect else self.angle_deg
        assert angle is not None
        other = (360.0 - angle) % 360.0
        return (angle, other) if self.either_side and other != angle else (angle,)


class ListedDates(Strict):
    """A user's own dated list: a CSV file inside the study."""

    kind: Literal["listed"] = "listed"
    file: RelativePath
    column: str = Field("time", description="Column with UTC dates or instants.")

    @field_validator("file")
    @classmethod
    def _inside(cls, file: str) -> str:
        return inside_the_study(file)


def _distinct(bodies: tuple[str, ...]) -> None:
    for body in bodies:
        if bodies.count(body) > 1:
            raise ValueError(f"{body!r} is named twice in bodies; name each body once")


def _not_the_centre(centre: str, bodies: tuple[str, ...]) -> None:
    if centre in bodies:
        raise ValueError(
            f"{centre!r} is the centre and cannot be seen from itself; "
            "name another centre or another body"
        )


class LineUp(Strict):
    """Any three of the bodies on one line in J2000 ecliptic projection, whatever the centre."""

    kind: Literal["line-up"] = "line-up"
    bodies: tuple[Body, ...] = Field(min_length=3)
    middle: Body | None = Field(None, description="Only line-ups with this body in the middle.")

    @model_validator(mode="after")
    def _possible(self) -> LineUp:
        _distinct(self.bodies)
        if self.middle is not None and self.middle not in self.bodies:
            raise ValueError(f"middle is {self.middle!r}, which is not among bodies; add it there")
        return self


class SeparationMinimum(Strict):
    """Two bodies closest to each other in the sky of a centre: minima of the true angle."""

    kind: Literal["separation-minimum"] = "separation-minimum"
    centre: Body
    bodies: tuple[Body, Body]
    below_deg: float = Field(gt=0.0, le=180.0, description="Only minima below this angle.")

    @model_validator(mode="after")
    def _possible(self) -> SeparationMinimum:
        _distinct(self.bodies)
        _not_the_centre(self.centre, self.bodies)
        return self


class Grouping(Strict):
    """Three or more bodies within an arc of ecliptic longitude, tightest instant of each visit."""

    kind: Literal["grouping"] = "grouping"
    centre: Body
    bodies: tuple[Body, ...] = Field(min_length=3)
    below_deg: float = Field(gt=0.0, lt=180.0, description="Width of the arc, degrees.")
    along_line: bool = Field(False, description="Longitudes modulo 180: either side of a line.")

    @model_validator(mode="after")
    def _possible(self) -> Grouping:
        _distinct(self.bodies)
        _not_the_centre(self.centre, self.bodies)
        if self.along_line and self.below_deg >= 90.0:
            raise ValueError("along a line the arc is below 90 degrees; give a smaller below_deg")
        return self


class Eclipse(Strict):
    """Eclipses of the Sun or the Moon, at greatest eclipse."""

    kind: Literal["eclipse"] = "eclipse"
    of: Literal["sun", "moon"]
    types: tuple[Literal["partial", "annular", "hybrid", "total", "penumbral"], ...] = Field(
        (), description="Only these types; empty: all."
    )

    @model_validator(mode="after")
    def _possible(self) -> Eclipse:
        impossible = {"sun": {"penumbral"}, "moon": {"annular", "hybrid"}}[self.of]
        for kind in self.types:
            if kind in impossible:
                raise ValueError(f"there is no {kind} eclipse of the {self.of}; name another type")
        return self


class LunarNode(Strict):
    """The Moon crossing the ecliptic."""

    kind: Literal["lunar-node"] = "lunar-node"
    passage: Literal["ascending", "descending", "either"] = "either"


class LunarDeclination(Strict):
    """The Moon farthest north or south of the equator in each month."""

    kind: Literal["lunar-declination"] = "lunar-declination"
    extreme: Literal["north", "south", "either"] = "either"


class LunarStandstill(Strict):
    """The largest (major) or smallest (minor) monthly extreme of the Moon's declination."""

    kind: Literal["lunar-standstill"] = "lunar-standstill"
    size: Literal["major", "minor", "either"] = "either"


class PerigeanSpringTide(Strict):
    """New or full Moon within some hours of perigee (a criterion in use, not a standard)."""

    kind: Literal["perigean-spring-tide"] = "perigean-spring-tide"
    within_hours: float = Field(24.0, gt=0.0, le=24.0 * 14)


class Season(Strict):
    """Equinoxes and solstices."""

    kind: Literal["season"] = "season"
    instants: tuple[
        Literal["march-equinox", "june-solstice", "september-equinox", "december-solstice"], ...
    ] = Field(min_length=1)


class Apsis(Strict):
    """A planet nearest to the Sun or farthest from it."""

    kind: Literal["apsis"] = "apsis"
    body: Literal[
        "mercury", "venus", "earth", "mars", "jupiter", "saturn", "uranus", "neptune", "pluto"
    ]
    extreme: Literal["perihelion", "aphelion", "either"] = "either"


class Station(Strict):
    """A planet standing still in geocentric apparent longitude, turning back or forth."""

    kind: Literal["station"] = "station"
    body: Literal["mercury", "venus", "mars", "jupiter", "saturn", "uranus", "neptune", "pluto"]
    turns: Literal["retrograde", "direct", "either"] = "either"


class GreatestElongation(Strict):
    """Mercury or Venus farthest from the Sun in the sky."""

    kind: Literal["greatest-elongation"] = "greatest-elongation"
    body: Literal["mercury", "venus"]
    side: Literal["east", "west", "either"] = "either"


ComputedEvent = (
    MoonPhase
    | MoonDistance
    | LongitudeDifference
    | LineUp
    | SeparationMinimum
    | Grouping
    | Eclipse
    | LunarNode
    | LunarDeclination
    | LunarStandstill
    | PerigeanSpringTide
    | Season
    | Apsis
    | Station
    | GreatestElongation
)
SkyEvent = Annotated[ComputedEvent | ListedDates, Field(discriminator="kind")]
Configuration = Annotated[LongitudeDifference | Grouping, Field(discriminator="kind")]
