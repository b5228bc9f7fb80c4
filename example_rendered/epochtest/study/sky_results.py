"""Models of what claims about the sky alone come to: how rare, and how strong.

As in `results`: plain numbers, ISO 8601 UTC text, None where there is no such number.
"""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from epochtest.study.base import Strict
from epochtest.study.claims import ForcingClaim, RecurrenceClaim
from epochtest.study.results import CAUTION

RecurrenceWord = Literal["agree", "disagree", "cannot be decided within the kernel"]
ForcingWord = Literal["agree", "disagree", "measured"]


class OccurrenceRow(Strict):
    """One occurrence; begins and ends are None where the kernel's end cuts a visit."""

    time_utc: str
    begins_utc: str | None
    ends_utc: str | None
    size_deg: float = Field(description="Width of the arc, or miss of the exact line in space.")
    events: int


class IntervalRow(Strict):
    """Years between successive occurrences."""

    count: int
    mean_years: float
    shortest_years: float
    longest_years: float
    sd_years: float | None


class CycleRow(Strict):
    """A commensurability of two mean motions and how fast it drifts."""

    bodies: tuple[str, str]
    meeting_years: float | None
    cycle: str | None = Field(description="The best cycle in words, None if there is none.")


class ExplanationRow(Strict):
    """Why it comes back when it does: mean motions."""

    sentence: str
    expected_return_years: float | None
    pairs: tuple[CycleRow, ...]


class RulingRow(Strict):
    """One thing said, and what the occurrences say to it."""

    said: str
    verdict: RecurrenceWord
    reason: str
    counter_examples: tuple[OccurrenceRow, ...]


class ExtrapolationRow(Strict):
    """Beyond the kernel: from mean elements, with what they are worth."""

    label: str
    from_utc: str
    to_utc: str
    occurrences: tuple[OccurrenceRow, ...]
    uncertainty_days: float | None
    missed: int
    spurious: int
    derivation: str
    rulings: tuple[RulingRow, ...]


class RecurrenceResult(Strict):
    """One recurrence claim, decided: results/<claim>.json."""

    schema_version: Literal["epochtest.recurrence/1"] = "epochtest.recurrence/1"
    claim: RecurrenceClaim
    finding: RecurrenceWord
    sentence: str
    description: str
    ephemeris: str
    searched_utc: tuple[str, str]
    searched_years: float
    n_occurrences: int = Field(description="All of them stand in occurrences.parquet.")
    intervals: IntervalRow | None
    explanation: ExplanationRow
    rulings: tuple[RulingRow, ...]
    extrapolation: ExtrapolationRow | None
    no_extrapolation: str
    caution: str = CAUTION


class PullRow(Strict):
    """The strongest tide of one body over the span: under it anywhere, and at the place."""

    name: str
    acceleration_m_s2: float = Field(description="At its nearest, where it stands in the zenith.")
    share_of_moon: float = Field(description="Over the Moon's at its mean distance.")
    stress_pa: float = Field(description="Horizontal stress at the surface, solid tide only.")
    at_utc: str
    here_acceleration_m_s2: float = Field(description="Largest vertical one at the place.")
    here_stress_pa: float
    here_at_utc: str
    on_date_m_s2: float | None = Field(description="On the day looked at, None if none is.")


class LoadRow(Strict):
    """An everyday load to compare with."""

    name: str
    stress_pa: float
    source: str


class PhaseSummary(Strict):
    """Tidal phases of the selected earthquakes; the rows stand in phases.parquet."""

    earthquakes: int
    with_mechanism: int
    with_phase: int
    of: str = Field(description="What the phase is of: stress on a plane, or volumetric strain.")
    median_amplitude: float | None = Field(description="Daily amplitude: Pa, or strain.")


class ForcingResult(Strict):
    """One forcing claim, measured: results/<claim>.json."""

    schema_version: Literal["epochtest.forcing/1"] = "epochtest.forcing/1"
    claim: ForcingClaim
    finding: ForcingWord
    sentence: str
    description: str
    ephemeris: str
    pulls: tuple[PullRow, ...]
    loads: tuple[LoadRow, ...]
    phases: PhaseSummary
    left_out: str = Field(description="What the stresses leave out: ocean loading.")
    caution: str = CAUTION
