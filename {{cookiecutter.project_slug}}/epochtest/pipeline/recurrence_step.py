"""3_recurrence: every occurrence of a configuration in the kernel, against what is said of it."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from epochtest import charts, tables
from epochtest.pipeline.block import Block, opening, paragraph, stacked
from epochtest.pipeline.frames import artifact_folder, output_folder, read_result, result_text
from epochtest.pipeline.recurrence_result import (
    assertions_of,
    configuration_of,
    recurrence_result,
)
from epochtest.pipeline.store import RESULT
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.occurrences import occurrence_table
from epochtest.sky.recurrence import assess_recurrence
from epochtest.study.claims import RecurrenceClaim
from epochtest.study.events import LongitudeDifference
from epochtest.study.load import LoadedStudy, load_study
from epochtest.study.sky_results import OccurrenceRow, RecurrenceResult
from epochtest.timescale import utc_instant

OCCURRENCES_FILE = "occurrences.parquet"
SHOWN_ROWS = 30


@dataclass(frozen=True)
class RecurrenceStep:
    """One recurrence claim judged: ``result``, and ``table`` with every occurrence."""

    root: Path
    claim: RecurrenceClaim
    table: pd.DataFrame
    result: RecurrenceResult

    def decision(self) -> Block:
        """What was said, what is found, in words."""
        said = [
            paragraph(f"{ruling.verdict}: {ruling.said}. {ruling.reason}")
            for ruling in self.result.rulings
        ]
        return stacked(paragraph(self.result.sentence, "decision"), *said)

    def explanation(self) -> Block:
        """Mean motions in one sentence."""
        return paragraph(self.result.explanation.sentence)

    def numbers(self) -> tables.HtmlTable:
        """How often, over which span."""
        return tables.html(tables.recurrence_numbers(self.result), "The recurrence in numbers")

    def counter_examples(self) -> tables.HtmlTable:
        """Occurrences that speak against what was said."""
        rows = {row.time_utc: row for said in self.result.rulings for row in said.counter_examples}
        table = tables.occurrences_table([rows[time] for time in sorted(rows)])
        return tables.html(table, "Counter-examples (UTC)")

    def occurrences(self) -> tables.HtmlTable:
        """The occurrences, the first ones of many."""
        head = self.table.head(SHOWN_ROWS)
        rows = [_row_of_table(row) for row in head.itertuples(index=False)]
        caption = f"The first {len(rows)} of {len(self.table)} occurrences (UTC)"
        return tables.html(tables.occurrences_table(rows), caption)

    def extrapolation(self) -> Block:
        """What mean elements say beyond the kernel, labelled as such."""
        beyond = self.result.extrapolation
        if beyond is None:
            return paragraph(f"No extrapolation: {self.result.no_extrapolation}.")
        unsure = (
            "unknown (too few occurrences to measure it)"
            if beyond.uncertainty_days is None
            else f"{beyond.uncertainty_days:.3g} days"
        )
        rows = tables.occurrences_table(list(beyond.occurrences[:SHOWN_ROWS]))
        return stacked(
            paragraph(beyond.label, "warning"),
            paragraph(f"{beyond.derivation} Uncertainty of an instant: {unsure}."),
            tables.html(rows, "Extrapolated occurrences (UTC), not searched with the kernel"),
        )

    def chart(self) -> charts.Figure:
        """Every occurrence along the span searched."""
        event = self.claim.event
        grouping = not isinstance(event, LongitudeDifference)
        said = self.claim.recurrence.last_happened
        return charts.occurrences_chart(
            self.claim.title,
            self.table["time_utc"].to_numpy(),
            self.table["size_deg"].to_numpy() if grouping else None,
            event.below_deg if not isinstance(event, LongitudeDifference) else None,
            asserted_utc=[] if said is None else [utc_instant(said)],
            searched=(
                np.datetime64(self.result.searched_utc[0], "us"),
                np.datetime64(self.result.searched_utc[1], "us"),
            ),
        )

    def intervals_chart(self) -> charts.Figure:
        """Years from each occurrence to the next."""
        said = self.claim.recurrence
        return charts.return_intervals_chart(
            self.table["years_since_last"].to_numpy()[1:],
            said.every_years,
            said.tolerance_years if said.every_years is not None else None,
            self.result.explanation.expected_return_years,
        )

    def section(self) -> Block:
        """The claim's part of the report."""
        return stacked(
            opening(self.claim),
            self.decision(),
            self.chart(),
            self.intervals_chart(),
            self.numbers(),
            self.explanation(),
            self.counter_examples(),
            self.extrapolation(),
        )

    def save(self, output: str) -> str:
        """Write occurrences.parquet and result.json into ``output``; says what was done."""
        folder = output_folder(self.root, output)
        if folder is None:
            return "Nothing written: no output folder was given."
        self.table.to_parquet(folder / OCCURRENCES_FILE, index=False)
        (folder / RESULT).write_text(result_text(self.result), encoding="utf-8", newline="\n")
        return f"{len(self.table)} occurrences written."


def recurrence_of(study: LoadedStudy, claim: RecurrenceClaim) -> RecurrenceStep:
    """Search the whole kernel and judge by what is found."""
    ephemeris = open_ephemeris(study.settings.ephemeris.kernel)
    found = assess_recurrence(
        ephemeris,
        configuration_of(claim),
        assertions_of(claim),
        one_event_within_days=claim.recurrence.one_event_within_days,
    )
    return RecurrenceStep(
        study.root, claim, occurrence_table(found.occurrences), recurrence_result(claim, found)
    )


def compute(claim: str) -> RecurrenceStep:
    """The step for a notebook: the study around the working folder, one claim."""
    study = load_study()
    return recurrence_of(study, study.recurrence_claim(claim))


def load(root: Path, claim: RecurrenceClaim, given: str = "") -> RecurrenceStep:
    """The step as an artifact holds it."""
    folder = artifact_folder(root, given, f"3_recurrence.{claim.id}")
    table = pd.read_parquet(folder / OCCURRENCES_FILE)
    return RecurrenceStep(root, claim, table, read_result(RecurrenceResult, folder))


def _row_of_table(row: tuple[object, ...]) -> OccurrenceRow:
    times = [None if pd.isna(getattr(row, n)) else getattr(row, n).isoformat() for n in _TIMES]
    return OccurrenceRow(
        time_utc=str(times[0]),
        begins_utc=times[1],
        ends_utc=times[2],
        size_deg=float(getattr(row, "size_deg")),  # noqa: B009
        events=int(getattr(row, "events")),  # noqa: B009
    )


_TIMES = ("time_utc", "begins_utc", "ends_utc")
