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
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.events import clip_to_kernel, describe, find_epochs, require_covered
from epochtest.sky.listed import read_listed
from epochtest.study.claims import Claim, ListedDates
from epochtest.study.load import LoadedStudy, load_study
from epochtest.study.results import EpochResult
from epochtest.timescale import Instants

EPOCHS_FILE = "epochs.parquet"
FIRST_ROWS = 10


@dataclass(frozen=True)
class EpochsStep:
    """An event set: ``frame`` has one row per epoch, ``result`` its base rates."""

    root: Path
    claim: Claim
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

    def per_year(self) -> charts.Figure:
        """Epochs per calendar year."""
        return charts.epochs_per_year(self.result.per_year)

    def intervals(self) -> charts.Figure:
        """From each epoch to the next, days."""
        return charts.interval_histogram(np.diff(self.times_utc) / np.timedelta64(1, "D"))

    def first_rows(self) -> tables.HtmlTable:
        """The first epochs of the list."""
        frame = self.frame.head(FIRST_ROWS).drop(columns="tdb_days")
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


def epochs_of(study: LoadedStudy, claim: Claim) -> EpochsStep:
    """Find every epoch of a claim whose window reaches into the study span."""
    span = span_instants(study.settings.span)
    wanted = padded_span(span, claim.window_days)
    notes = []
    if isinstance(claim.event, ListedDates):
        frame = read_listed(study.root, claim.event, *wanted)
        frame_name, ephemeris_name = "dates as listed", "none"
        searched = wanted
        description = f"dates listed in {claim.event.file}"
    else:
        ephemeris = open_ephemeris(study.settings.ephemeris.kernel)
        require_covered(ephemeris, *span)
        start, end, clipped = clip_to_kernel(ephemeris, *wanted)
        if clipped:
            notes.append(
                "The window reaches beyond the ephemeris at an end of the span; "
                "epochs out there could not be found."
            )
        searched = (start, end)
        frame = find_epochs(claim.event, ephemeris, start, end)
        frame_name = getattr(claim.event, "frame", "geometric-J2000")
        ephemeris_name = ephemeris.name
        description = describe(claim.event, ephemeris)
    result = summarise_epochs(
        claim=claim.id,
        description=description,
        frame=frame_name,
        ephemeris=ephemeris_name,
        searched=searched,
        epochs_utc=frame["time_utc"].to_numpy(dtype="datetime64[us]"),
        window_days=claim.window_days,
        span=span,
        notes=tuple(notes),
    )
    return EpochsStep(study.root, claim, frame, result)


def compute(claim: str) -> EpochsStep:
    """The step for a notebook: the study around the working folder, one claim."""
    study = load_study()
    return epochs_of(study, study.claim(claim))


def load(root: Path, claim: Claim, given: str = "") -> EpochsStep:
    """The step as an artifact holds it."""
    folder = artifact_folder(root, given, f"2_epochs.{claim.id}")
    frame = pd.read_parquet(folder / EPOCHS_FILE)
    return EpochsStep(root, claim, frame, read_result(EpochResult, folder))
