"""2_epochs: the complete event set of one claim and its base rates."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from epochtest import charts, tables
from epochtest.inference.windows import DAY_US, Interval, span_instants, summarise_epochs
from epochtest.pipeline.block import Block, paragraph, stacked
from epochtest.pipeline.frames import artifact_folder, output_folder, read_result, result_text
from epochtest.pipeline.store import RESULT
from epochtest.sky.atlas import SUN_AND_PLANETS, find_lineups
from epochtest.sky.base_rates import base_rates, number_within
from epochtest.sky.ephemeris import Ephemeris, open_ephemeris
from epochtest.sky.events import clip_to_kernel, search_span
from epochtest.sky.find import find_event
from epochtest.sky.listed import read_listed
from epochtest.study.claims import TimingClaim
from epochtest.study.events import LineUp, ListedDates, LongitudeDifference
from epochtest.study.load import LoadedStudy, load_study
from epochtest.study.results import EpochResult, FamilyRates, NearbyRow
from epochtest.study.words import described, frame_of
from epochtest.timescale import Instants, tdb_days_from_utc

EPOCHS_FILE = "epochs.parquet"
FIRST_ROWS = 10


@dataclass(frozen=True)
class EpochsStep:
    """An event set: ``frame`` has one row per epoch, ``result`` its base rates."""

    root: Path
    claim: TimingClaim
    frame: pd.DataFrame
    result: EpochResult

    @property
    def times_utc(self) -> Instants:
        """The epochs (n,), UTC ``datetime64[us]``."""
        return self.frame["time_utc"].to_numpy(dtype="datetime64[us]")

    def base_rates(self) -> tables.HtmlTable:
        """How often the event happens and how much of the span its windows cover."""
        return tables.html(tables.base_rates_table([self.result]), "Base rate of the sky event")

    def notes(self) -> Block:
        """What is special about this event set."""
        return stacked(*(paragraph(note, "warning") for note in self.result.notes))

    def lineups(self) -> Block:
        """How exact each line-up is in space, if the claim is about several bodies at once."""
        if "out_of_plane_deg" not in self.frame:
            return paragraph("The claim is not of the event kind line-up: nothing to draw here.")
        angles = self.frame["out_of_plane_deg"].to_numpy()
        middle = self.frame["middle"].tolist()
        return stacked(charts.lineup_chart(self.claim.title, self.times_utc, angles, middle))

    def family(self) -> Block:
        """Base rates of the line-ups that the claim could have chosen from."""
        rates = self.result.family
        if rates is None:
            return paragraph("This event is no line-up of Sun and planets: it has no such family.")
        return stacked(
            paragraph(
                f"The claim chose one kind of line-up. The family is {rates.family}: "
                f"{rates.per_year:.0f} a year."
            ),
            tables.html(tables.nearby_table(rates), "Line-ups near an arbitrary instant"),
            charts.crowding_chart(
                list(enumerate(rates.number_shares)), window_days=rates.reach_days
            ),
        )

    def per_year(self) -> charts.Figure:
        """Epochs per calendar year."""
        return charts.epochs_per_year(self.result.per_year)

    def intervals(self) -> charts.Figure:
        """From each epoch to the next, days."""
        return charts.interval_histogram(np.diff(self.times_utc) / np.timedelta64(1, "D"))

    def first_rows(self) -> tables.HtmlTable:
        """The first epochs of the list."""
        frame = self.frame.head(FIRST_ROWS)
        return tables.html(tables.epochs_table(frame), f"The first {len(frame)} epochs (UTC)")

    def save(self, output: str) -> str:
        """Write epochs.parquet and result.json into ``output``; says what was done."""
        folder = output_folder(self.root, output)
        if folder is None:
            return "Nothing written: no output folder was given."
        self.frame.to_parquet(folder / EPOCHS_FILE, index=False)
        (folder / RESULT).write_text(result_text(self.result), encoding="utf-8", newline="\n")
        return f"{len(self.frame)} epochs written."


def padded_span(span: Interval, window_days: tuple[float, float]) -> Interval:
    """Where to look for epochs whose window [t + first, t + last) reaches into the span."""
    first, last = (np.timedelta64(round(days * DAY_US), "us") for days in window_days)
    return span[0] - last, span[1] - first


def epochs_of(study: LoadedStudy, claim: TimingClaim) -> EpochsStep:
    """Find every epoch of a claim whose window reaches into the study span."""
    span = span_instants(study.settings.span)
    wanted = padded_span(span, claim.window_days)
    notes = []
    if isinstance(claim.event, ListedDates):
        frame = read_listed(study.root / claim.event.file, claim.event, *wanted)
        ephemeris_name, family = "none", None
        notes += _notes_on_list(frame)
        searched = wanted
    else:
        ephemeris = open_ephemeris(study.settings.ephemeris.kernel)
        search_span(ephemeris, *span)  # raises where the kernel does not cover the span
        start, end, clipped = clip_to_kernel(ephemeris, *wanted)
        if clipped:
            notes.append(
                "The window reaches beyond the ephemeris at an end of the span; "
                "epochs out there could not be found."
            )
        searched = (start, end)
        frame = find_event(claim.event, ephemeris, start, end)
        family = family_rates(claim, ephemeris, span)
        ephemeris_name = ephemeris.name
    result = summarise_epochs(
        claim=claim.id,
        description=described(claim.event, ephemeris_name),
        frame=frame_of(claim.event),
        ephemeris=ephemeris_name,
        searched=searched,
        epochs_utc=frame["time_utc"].to_numpy(dtype="datetime64[us]"),
        window_days=claim.window_days,
        span=span,
        notes=tuple(notes),
    )
    return EpochsStep(study.root, claim, frame, result.model_copy(update={"family": family}))


def _notes_on_list(frame: pd.DataFrame) -> list[str]:
    """What was left out of a user's own list."""
    left_out = {
        "listed twice and counted once": frame.attrs["duplicates_dropped"],
        "listed outside the reach of the span and left out": frame.attrs["outside_span"],
    }
    return [f"{count} dates were {what}." for what, count in left_out.items() if count]


def family_rates(claim: TimingClaim, ephemeris: Ephemeris, span: Interval) -> FamilyRates | None:
    """Base rates of every line-up of Sun and planets, if the claim's event is one of them."""
    event = claim.event
    aspects = isinstance(event, LongitudeDifference) and event.aspect is not None
    if not (aspects or isinstance(event, LineUp)):
        return None
    atlas = find_lineups(ephemeris, SUN_AND_PLANETS, *span)
    rates = base_rates(atlas, *span)
    reach = max(abs(lag) for lag in claim.window_days)
    number = number_within(atlas["tdb_days"], reach, *tdb_days_from_utc(np.array(span)))
    return FamilyRates(
        family="every line-up of three among the Sun and eight planets, from any centre",
        lineups=rates.lineups,
        per_year=rates.per_year,
        nearby=tuple(NearbyRow.model_validate(row) for row in rates.nearby.to_dict("records")),
        reach_days=reach,
        number_shares=tuple(number["share_of_time"].tolist()),
    )


def compute(claim: str) -> EpochsStep:
    """The step for a notebook: the study around the working folder, one claim."""
    study = load_study()
    return epochs_of(study, study.timing_claim(claim))


def load(root: Path, claim: TimingClaim, given: str = "") -> EpochsStep:
    """The step as an artifact holds it."""
    folder = artifact_folder(root, given, f"2_epochs.{claim.id}")
    frame = pd.read_parquet(folder / EPOCHS_FILE)
    return EpochsStep(root, claim, frame, read_result(EpochResult, folder))
