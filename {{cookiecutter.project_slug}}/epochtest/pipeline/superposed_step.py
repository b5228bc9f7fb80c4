"""3_superposed_epoch: one timing claim against the null, its charts and its numbers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from epochtest import charts, tables
from epochtest.catalog.select import in_span, select
from epochtest.inference.superposed import TimingSeries, test_timing
from epochtest.inference.windows import span_instants
from epochtest.pipeline import catalog_step, epochs_step
from epochtest.pipeline.block import Block, paragraph, stacked
from epochtest.pipeline.catalog_step import CatalogStep
from epochtest.pipeline.epochs_step import EpochsStep
from epochtest.pipeline.frames import output_folder, result_text
from epochtest.pipeline.store import RESULT
from epochtest.study.claims import ForcingClaim, TimingClaim
from epochtest.study.load import LoadedStudy, load_study
from epochtest.study.results import TestResult


@dataclass(frozen=True)
class SuperposedStep:
    """One claim tested: the numbers (``result``) and what its charts are drawn from."""

    study: LoadedStudy
    claim: TimingClaim
    selected: pd.DataFrame
    epochs: EpochsStep
    result: TestResult
    series: TimingSeries

    def decided_before(self) -> tables.HtmlTable:
        """What was fixed before any outcome was seen."""
        frame = tables.decided_before(self.claim, self.study.settings)
        return tables.html(frame, "Decided beforehand")

    def lag_chart(self) -> charts.Figure:
        """Counts by lag with the envelope of the null."""
        lags = self.series.lags
        return charts.lag_chart(
            f"Earthquakes by lag: {self.claim.title}",
            edges_days=lags.edges_days,
            counts=lags.counts,
            mean=lags.mean,
            pointwise=(lags.low, lags.high),
            simultaneous=(lags.simultaneous_low, lags.simultaneous_high),
            window_days=lags.window_days,
            n_epochs=lags.n_epochs,
        )

    def null_chart(self) -> charts.Figure:
        """Hits at every shift, the observed number marked."""
        null = self.result.nulls[0]
        return charts.null_histogram(
            np.unique(self.series.shifts.hits, return_counts=True),
            observed=null.observed,
            mean=null.mean,
            p=null.p,
            direction=self.claim.direction,
            name=f"{null.name}: {self.claim.title}",
        )

    def timeline(self) -> charts.Figure:
        """Earthquakes and epochs along the span."""
        return charts.timeline(
            span_instants(self.study.settings.span),
            self.epochs.times_utc,
            self.selected["time_utc"].to_numpy(),
            self.selected["magnitude"].to_numpy(),
            self.claim.window_days,
        )

    def numbers(self) -> tables.HtmlTable:
        """Hits, rate ratio and intervals, before the family of claims is paid for."""
        return tables.html(tables.test_table(self.result, None), "The test in numbers")

    def notes(self) -> Block:
        """What limits this test."""
        return stacked(*(paragraph(text, "warning") for text in self.result.warnings))

    def save(self, output: str) -> str:
        """Write result.json into ``output``; says what was done."""
        folder = output_folder(self.study.root, output)
        if folder is None:
            return "Nothing written: no output folder was given."
        (folder / RESULT).write_text(result_text(self.result), encoding="utf-8", newline="\n")
        return "Result written."


def selected_earthquakes(
    study: LoadedStudy, claim: TimingClaim | ForcingClaim, kept: pd.DataFrame
) -> pd.DataFrame:
    """The clean catalog's rows inside the span that count for a claim."""
    start, end = span_instants(study.settings.span)
    chosen = select(kept, study.selection_of(claim), study.root) & in_span(kept, start, end)
    return kept[chosen]


def floor_below_completeness(
    study: LoadedStudy, claim: TimingClaim, catalog: CatalogStep
) -> str | None:
    """A clause with floor and completeness if the claim counts where earthquakes are missed."""
    floor, mc = study.selection_of(claim).minimum_magnitude, catalog.result.sizes.mc
    if mc is None or (floor is not None and floor >= mc):
        return None
    shown = "none" if floor is None else f"{floor:g}"
    return f"magnitude floor ({shown}) is below the completeness of the catalog (about {mc:.2f})"


def tested(
    study: LoadedStudy, claim: TimingClaim, catalog: CatalogStep, epochs: EpochsStep
) -> SuperposedStep:
    """Test one claim on a cleaned catalog and its event set."""
    selected = selected_earthquakes(study, claim, catalog.kept)
    result, series = test_timing(
        claim,
        selected["time_utc"].to_numpy(),
        epochs.times_utc,
        span_instants(study.settings.span),
        study.settings.inference,
    )
    warnings = (*result.warnings, *_catalog_warnings(study, claim, catalog, selected))
    result = result.model_copy(update={"warnings": warnings})
    return SuperposedStep(study, claim, selected, epochs, result, series)


def _catalog_warnings(
    study: LoadedStudy, claim: TimingClaim, catalog: CatalogStep, selected: pd.DataFrame
) -> list[str]:
    found = []
    if (incomplete := floor_below_completeness(study, claim, catalog)) is not None:
        found.append(
            f"The {incomplete}: the rate depends on what was detected, which can follow season, "
            "hour and network rather than the Earth."
        )
    day_only = int(selected["day_only"].sum())
    if day_only:
        found.append(
            f"{day_only} selected earthquakes have a date but no time; they stand at 12:00 UTC, "
            "up to half a day from when they happened."
        )
    return found


def compute(claim: str, catalog_artifact: str = "", epochs_artifact: str = "") -> SuperposedStep:
    """The step for a notebook: one claim of the study around the working folder."""
    study = load_study()
    chosen = study.timing_claim(claim)
    return tested(
        study,
        chosen,
        catalog_step.load(study, catalog_artifact),
        epochs_step.load(study.root, chosen, epochs_artifact),
    )
