"""Models of claims/*.toml: one falsifiable statement each, fixed before looking."""

from __future__ import annotations

from datetime import date, datetime
from typing import Annotated, Literal

from pydantic import Field, model_validator

from epochtest.study.base import Strict
from epochtest.study.events import Body, Configuration, LongitudeDifference, SkyEvent
from epochtest.study.settings import Selection, Span

NullName = Literal["circular-shift"]
Direction = Literal["more", "fewer", "either"]


class Asserted(Strict):
    """What every kind of claim says of itself."""

    id: str = Field(pattern=r"^[a-z0-9]+(-[a-z0-9]+)*$", max_length=60)
    title: str = Field(min_length=1)
    statement: str = Field(min_length=1, description="The claim in words.")
    asserted_by: str = Field("", description="Who asserts it, free text.")


class MinimumCounts(Strict):
    """Below these the finding is "cannot tell", whatever the p-value."""

    epochs: int = Field(10, ge=1)
    earthquakes: int = Field(50, ge=1)


class TimingClaim(Asserted):
    """A claim that a sky event is followed (or preceded) by more, or fewer, earthquakes."""

    kind: Literal["timing"] = "timing"
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


class Recurrence(Strict):
    """What is said about the return of a configuration; at least one sentence."""

    every_years: float | None = Field(None, gt=0.0, description="It happens every so many years.")
    tolerance_years: float = Field(
        0.5, ge=0.0, description="How far intervals and dates may lie from what is said."
    )
    last_happened: datetime | date | None = Field(None, description="It last happened then.")
    before: datetime | date | None = Field(
        None, description="The day that last and again are counted from."
    )
    not_again_for_years: float | None = Field(None, gt=0.0)
    one_event_within_days: float = Field(
        0.0, ge=0.0, description="Occurrences closer than this count as one (retrograde loops)."
    )

    @model_validator(mode="after")
    def _says_something(self) -> Recurrence:
        from_before = self.last_happened is not None or self.not_again_for_years is not None
        if self.every_years is None and not from_before:
            raise ValueError("say every_years, last_happened or not_again_for_years")
        if self.before is None and from_before:
            raise ValueError("last_happened and not_again_for_years need before: counted from when")
        return self


class RecurrenceClaim(Asserted):
    """A claim about how rare a configuration is; looks at no earthquake."""

    kind: Literal["recurrence"]
    event: Configuration
    recurrence: Recurrence

    @model_validator(mode="after")
    def _a_line(self) -> RecurrenceClaim:
        if isinstance(self.event, LongitudeDifference):
            if self.event.aspect is None:
                raise ValueError("a recurrence is of a conjunction, an opposition or a grouping")
            if self.event.frame != "geometric-J2000":
                raise ValueError("a recurrence is searched in frame geometric-J2000; leave it out")
        return self


class Place(Strict):
    """A point on the Earth."""

    latitude_deg: float = Field(ge=-90.0, le=90.0)
    longitude_deg: float = Field(ge=-180.0, le=360.0)


class ForcingAssertion(Strict):
    """A body said to pull at least so strongly, as a share of the Moon's mean pull."""

    body: Body
    at_least_share_of_moon: float = Field(gt=0.0)

    @model_validator(mode="after")
    def _not_the_earth(self) -> ForcingAssertion:
        if self.body == "earth":
            raise ValueError("'earth' raises no tide on itself; name the Moon, the Sun or a planet")
        return self


class ForcingClaim(Asserted):
    """A claim about how strong a body's tide is at a place; measured, not tested."""

    kind: Literal["forcing"]
    place: Place
    span: Span
    on: datetime | date | None = Field(None, description="An instant to look at by itself, UTC.")
    asserts: ForcingAssertion | None = None
    selection: Selection = Selection()
    friction: float = Field(0.4, ge=0.0, le=1.0, description="Apparent friction of faults.")


CLAIM_MODELS: dict[str, type[TimingClaim] | type[RecurrenceClaim] | type[ForcingClaim]] = {
    "timing": TimingClaim,
    "recurrence": RecurrenceClaim,
    "forcing": ForcingClaim,
}
Claim = Annotated[TimingClaim | RecurrenceClaim | ForcingClaim, Field(discriminator="kind")]
