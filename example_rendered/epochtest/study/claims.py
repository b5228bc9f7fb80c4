"""Models of claims/*.toml: one falsifiable statement each, fixed before looking."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from epochtest.study.base import Strict
from epochtest.study.settings import RelativePath, Selection, inside_the_study

Body = Literal[
    "sun", "moon", "mercury", "venus", "earth", "mars",
    "jupiter", "saturn", "uranus", "neptune", "pluto",
]  # fmt: skip
Frame = Literal["geometric-J2000", "apparent-of-date"]
PhaseName = Literal["new", "first-quarter", "full", "last-quarter"]
NullName = Literal["circular-shift"]
Direction = Literal["more", "fewer", "either"]

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
        first, second = self.bodies
        if first == second:
            raise ValueError(f"{first!r} is named twice in bodies; name two different bodies")
        if self.centre in self.bodies:
            raise ValueError(
                f"{self.centre!r} is the centre and cannot be seen from itself; "
                "name another centre or another body"
            )
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


SkyEvent = Annotated[
    MoonPhase | MoonDistance | LongitudeDifference | ListedDates, Field(discriminator="kind")
]


class MinimumCounts(Strict):
    """Below these the finding is "cannot tell", whatever the p-value."""

    epochs: int = Field(10, ge=1)
    earthquakes: int = Field(50, ge=1)


class TimingClaim(Strict):
    """A claim that a sky event is followed (or preceded) by more, or fewer, earthquakes."""

    id: str = Field(pattern=r"^[a-z0-9]+(-[a-z0-9]+)*$", max_length=60)
    kind: Literal["timing"] = "timing"
    title: str = Field(min_length=1)
    statement: str = Field(min_length=1, description="The claim in words.")
    asserted_by: str = Field("", description="Who asserts it, free text.")
    event: SkyEvent
    window_days: tuple[float, float] = Field(
        description="[first, last] lag in days from the epoch; may be negative."
    )
    direction: Direction = "more"
    asserted_rate_ratio: float | None = Field(
        None, gt=0.0, description="Rate inside the window over rate outside, if one is asserted."
    )
    selection: Selection = Selection()
    minimum: MinimumCounts = MinimumCounts()
    nulls: tuple[NullName, ...] = Field(("circular-shift",), min_length=1)

    @model_validator(mode="after")
    def _consistent(self) -> TimingClaim:
        first, last = self.window_days
        if not first < last:
            raise ValueError(f"window_days is [first, last], first < last; found {first}, {last}")
        if max(abs(first), abs(last)) > 3660.0:
            raise ValueError("window_days reaches more than ten years from the epoch; shorten it")
        ratio = self.asserted_rate_ratio
        if ratio is not None:
            if self.direction == "more" and ratio <= 1.0:
                raise ValueError(f"direction is more but asserted_rate_ratio is {ratio}; give > 1")
            if self.direction == "fewer" and ratio >= 1.0:
                raise ValueError(f"direction is fewer but asserted_rate_ratio is {ratio}; give < 1")
            if ratio == 1.0:
                raise ValueError("asserted_rate_ratio 1 asserts no effect; leave it out")
        return self


Claim = TimingClaim
