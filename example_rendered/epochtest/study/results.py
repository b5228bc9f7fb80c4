"""Models of what the steps write: one versioned JSON document each.

Numbers are plain floats, instants ISO 8601 UTC text, so that a reader needs nothing but JSON.
A result holds no path of a machine and no time of running: the same study gives the same bytes.
"""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from epochtest.study.base import Strict
from epochtest.study.claims import TimingClaim

FindingWord = Literal["excess", "deficit", "none detected", "cannot tell"]

CAUTION = (
    "No finding here is an earthquake forecast or warning. For hazard and safety follow your "
    "national seismological and civil-protection authorities."
)


class FileCount(Strict):
    """Conservation per input file: rows_read = kept + quarantined."""

    file: str
    sha256: str
    origin: str
    licence: str
    rows_read: int
    kept: int
    quarantined: int


class SizeDistribution(Strict):
    """Completeness and b-value (Wiemer & Wyss 2000; Aki 1965; Utsu 1966; Shi & Bolt 1982)."""

    bin_width: float = Field(description="Detected step of the magnitudes.")
    mc_maximum_curvature: float | None
    mc: float | None = Field(description="Maximum curvature + 0.2 (Woessner & Wiemer 2005).")
    n_above: int
    b: float | None
    b_error: float | None


class CatalogResult(Strict):
    """What 1_catalog writes beside catalog.parquet and quarantine.csv."""

    schema_version: Literal["epochtest.catalog/1"] = "epochtest.catalog/1"
    files: tuple[FileCount, ...]
    rows_read: int
    kept: int
    quarantined: int
    reasons: dict[str, int]
    day_only: int = Field(description="Kept rows whose time is a date only; placed at 12:00 UTC.")
    first_utc: str | None
    last_utc: str | None
    in_span: int
    largest_magnitude: float | None
    magnitude_types: dict[str, int]
    sizes: SizeDistribution
    notes: tuple[str, ...] = ()


class NearbyRow(Strict):
    """How many line-ups of the family lie within +-half_width_days of an arbitrary instant."""

    half_width_days: float
    share_of_time: float = Field(description="Share of all instants with at least one.")
    mean_number: float
    median_number: int
    most: int


class FamilyRates(Strict):
    """Base rates of all line-ups that a claim could have chosen from."""

    family: str
    lineups: int
    per_year: float
    nearby: tuple[NearbyRow, ...]
    reach_days: float = Field(description="The farthest lag of the claim's window.")
    number_shares: tuple[float, ...] = Field(
        description="Share of all instants with 0, 1, 2, ... line-ups within +-reach_days."
    )


class EpochResult(Strict):
    """What 2_epochs writes beside epochs.parquet: an event set and its base rates."""

    schema_version: Literal["epochtest.epochs/1"] = "epochtest.epochs/1"
    claim: str
    description: str = Field(description="The event in words, with frame and ephemeris.")
    frame: str
    ephemeris: str
    searched_from_utc: str
    searched_to_utc: str
    n_epochs: int = Field(description="Epochs whose window reaches into the span.")
    n_in_span: int
    per_year: dict[str, int]
    mean_interval_days: float | None
    shortest_interval_days: float | None
    longest_interval_days: float | None
    coverage: float = Field(description="Share of the span inside the union of all windows.")
    overlapping_windows: int = Field(description="Windows that overlap the one before.")
    family: FamilyRates | None = Field(None, description="For line-ups: the family it is one of.")
    notes: tuple[str, ...] = ()


class NullResult(Strict):
    """One null's verdict on the observed number of hits."""

    name: str
    shifts: int = Field(description="Members of the group, the observed placement included.")
    effective_shifts: float = Field(description="Independent ones among them (Bretherton 1999).")
    observed: int = Field(description="Hits on the grid at shift 0.")
    mean: float
    sd: float
    inflation: float = Field(description="Null variance over binomial variance.")
    p: float
    grid_hours: float


class Effect(Strict):
    """Rate inside the windows over rate outside."""

    rate_ratio: float | None
    exact_interval: tuple[float, float | None]
    inflated_interval: tuple[float, float | None]
    confidence: float
    detectable_ratio: float | None = Field(
        description="Smallest ratio found with the stated power at this claim's own alpha."
    )
    detectable_ratio_family: float | None = None
    power: float


class TestResult(Strict):
    """What 3_superposed_epoch writes: one claim, before the family is paid for."""

    __test__ = False

    schema_version: Literal["epochtest.test/1"] = "epochtest.test/1"
    claim: TimingClaim
    span_utc: tuple[str, str]
    n_earthquakes: int
    n_epochs: int
    coverage: float
    hits: int
    expected: float
    binomial_p: float = Field(
        description="Plain binomial test, shown for comparison only: it ignores clustering."
    )
    nulls: tuple[NullResult, ...]
    effect: Effect
    warnings: tuple[str, ...] = ()


class FamilyAdjustment(Strict):
    """What the other claims of the study cost this one."""

    correction: str
    claims: int
    p_maxt: float
    p_holm: float
    p_used: float


class ClaimResult(Strict):
    """One claim, decided: results/<claim>.json."""

    schema_version: Literal["epochtest.claim/1"] = "epochtest.claim/1"
    finding: FindingWord
    sentence: str
    test: TestResult
    epochs: EpochResult
    family: FamilyAdjustment
    caution: str = CAUTION
