"""What was decided beforehand, in words a reader needs no TOML for."""

from __future__ import annotations

import pandas as pd

from epochtest.study.claims import ForcingAssertion, Place, Recurrence, TimingClaim
from epochtest.study.settings import Selection, Study
from epochtest.study.words import body_in_words, event_in_words, frame_in_words
from epochtest.tables import numbers

_DIRECTION = {
    "more": "more earthquakes inside the windows than outside (one-sided)",
    "fewer": "fewer earthquakes inside the windows than outside (one-sided)",
    "either": "more or fewer earthquakes inside the windows (two-sided)",
}
_NULL = {
    "circular-shift": "circular shift: all epochs moved together through the span, which keeps "
    "the clustering of the earthquakes and the spacing of the epochs"
}
_CORRECTION = {
    "maxT": "Westfall-Young maxT over all claims of the study",
    "holm": "Holm's step-down over all claims of the study",
    "none": "none: each claim is tested as if it were the only one",
}


def selection_in_words(selection: Selection) -> str:
    """Which earthquakes count, as a phrase."""
    parts = [
        _limits("magnitude", "", selection.minimum_magnitude, selection.maximum_magnitude),
        _limits("depth", " km", selection.minimum_depth_km, selection.maximum_depth_km),
    ]
    if selection.box is not None:
        west, south, east, north = selection.box
        parts.append(
            f"longitude {_degrees(west, 'E', 'W')} to {_degrees(east, 'E', 'W')}, "
            f"latitude {_degrees(south, 'N', 'S')} to {_degrees(north, 'N', 'S')}"
        )
    if selection.polygon is not None:
        parts.append(f"inside the polygon of {selection.polygon}")
    said = [part for part in parts if part]
    return "; ".join(said) if said else "every earthquake of the catalog"


def window_in_words(window_days: tuple[float, float]) -> str:
    """A window as a phrase: "0 to 3 days after the epoch"."""
    first, last = window_days
    if first >= 0.0:
        return f"{numbers.days(first)} to {_days(last)} after the epoch"
    if last <= 0.0:
        return f"{numbers.days(-last)} to {_days(-first)} before the epoch"
    return f"{_days(-first)} before to {_days(last)} after the epoch"


def _days(value: float) -> str:
    return f"{numbers.days(value)} {'day' if value == 1.0 else 'days'}"


def recurrence_in_words(said: Recurrence) -> list[str]:
    """What a recurrence claim says, one phrase each."""
    give = f"within {said.tolerance_years:g} years"
    parts = []
    if said.every_years is not None:
        parts.append(f"it happens every {said.every_years:g} years, {give}")
    if said.last_happened is not None:
        parts.append(f"before {said.before} it last happened on {said.last_happened}, {give}")
    if said.not_again_for_years is not None:
        parts.append(
            f"after {said.before} it does not happen for {said.not_again_for_years:g} years"
        )
    return parts


def place_in_words(place: Place) -> str:
    """A place as latitude and longitude."""
    latitude = _degrees(place.latitude_deg, "N", "S")
    return f"{latitude}, {_degrees(place.longitude_deg, 'E', 'W')}"


def assertion_in_words(asserts: ForcingAssertion | None) -> str:
    """What a forcing claim says of one body."""
    if asserts is None:
        return "nothing; the tides are measured"
    share = f"{asserts.at_least_share_of_moon:g} times the Moon's mean pull"
    return f"{body_in_words(asserts.body)} pulls at least {share}"


def decided_before(claim: TimingClaim, study: Study) -> pd.DataFrame:
    """Everything about ``claim`` that was fixed before outcomes were seen, one row each."""
    inference = study.inference
    asserted = (
        "none asserted"
        if claim.asserted_rate_ratio is None
        else numbers.ratio(claim.asserted_rate_ratio)
    )
    rows = [
        ("Claim", claim.statement),
        ("Asserted by", claim.asserted_by or "not said"),
        ("Sky event", f"{event_in_words(claim.event)} ({frame_in_words(claim.event)})"),
        ("Ephemeris", study.ephemeris.kernel),
        ("Window", window_in_words(claim.window_days)),
        ("Direction", _DIRECTION[claim.direction]),
        ("Span", f"{study.span.start} to {study.span.end} (UTC, end not included)"),
        ("Earthquakes", selection_in_words(study.selection.overridden_by(claim.selection))),
        ("Nulls", "; ".join(_NULL[name] for name in claim.nulls)),
        ("Alpha", f"{inference.alpha:g}"),
        ("Price of several claims", _CORRECTION[inference.correction]),
        ("Asserted rate ratio", asserted),
        ("Power of the detectable ratio", numbers.percent(inference.power, 0)),
        (
            "Least counts",
            f"{numbers.count(claim.minimum.epochs)} epochs and "
            f"{numbers.count(claim.minimum.earthquakes)} earthquakes; with fewer: cannot tell",
        ),
    ]
    return pd.DataFrame(rows, columns=["What", "Decided beforehand"], dtype=object)


def _limits(what: str, unit: str, low: float | None, high: float | None) -> str:
    if low is None and high is None:
        return ""
    if high is None:
        return f"{what} {low:g}{unit} or more"
    if low is None:
        return f"{what} {high:g}{unit} or less"
    return f"{what} {low:g} to {high:g}{unit}"


def _degrees(value: float, positive: str, negative: str) -> str:
    wrapped = (value + 180.0) % 360.0 - 180.0 if positive == "E" else value
    side = "" if wrapped in (0.0, -180.0) else positive if wrapped > 0 else negative
    return f"{abs(wrapped):g}°{side}"
