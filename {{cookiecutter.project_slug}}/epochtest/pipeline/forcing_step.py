"""3_forcing: the tides of every body at a place, and the tidal phase of each earthquake."""

from __future__ import annotations

from collections.abc import Hashable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from epochtest import charts, tables
from epochtest.inference.windows import span_instants
from epochtest.pipeline import catalog_step
from epochtest.pipeline.block import Block, opening, paragraph, stacked
from epochtest.pipeline.catalog_step import CatalogStep
from epochtest.pipeline.frames import artifact_folder, output_folder, read_result, result_text
from epochtest.pipeline.store import RESULT
from epochtest.pipeline.superposed_step import selected_earthquakes
from epochtest.sky.body_tide import OCEAN_LOADING_NOTE
from epochtest.sky.ephemeris import Ephemeris, open_ephemeris
from epochtest.sky.fault import Mechanism
from epochtest.sky.forcing import EVERYDAY_LOADS, forcing_budget
from epochtest.sky.tidal_phase import TidalModel, tidal_phase, tidal_series
from epochtest.study.claims import ForcingClaim
from epochtest.study.load import LoadedStudy, load_study
from epochtest.study.sky_results import (
    ForcingResult,
    ForcingWord,
    LoadRow,
    PhaseSummary,
    PullRow,
)
from epochtest.study.words import body_in_words
from epochtest.tables.protocol import assertion_in_words, place_in_words
from epochtest.timescale import utc_instant

PHASES_FILE = "phases.parquet"


@dataclass(frozen=True)
class ForcingStep:
    """One forcing claim measured: ``result``, and ``table`` with the phase of each earthquake."""

    study: LoadedStudy
    claim: ForcingClaim
    selected: pd.DataFrame
    table: pd.DataFrame
    result: ForcingResult

    def decision(self) -> Block:
        """What was said, what is measured, in words."""
        return paragraph(self.result.sentence, "decision")

    def chart(self) -> charts.Figure:
        """Stress of every body's strongest tide beside everyday loads, on a log axis."""
        rows = [(body_in_words(row.name), row.stress_pa, "body") for row in self.result.pulls]
        rows += [(row.name, row.stress_pa, "load") for row in self.result.loads]
        moon = next(row for row in self.result.pulls if row.name == "moon")
        return charts.forcing_chart(
            rows,
            "Pa",
            note=self.result.left_out,
            moon_mean=moon.stress_pa / moon.share_of_moon,
            title="Stress of the strongest tides beside everyday loads",
        )

    def pulls(self) -> tables.HtmlTable:
        """The forcing budget in numbers."""
        caption = f"Strongest tides, and those at {place_in_words(self.claim.place)}"
        return tables.html(tables.pulls_table(self.result.pulls), caption)

    def loads(self) -> tables.HtmlTable:
        """What the ground bears every day."""
        return tables.html(tables.loads_table(self.result.loads), "Everyday loads")

    def phases(self) -> Block:
        """How many earthquakes have a phase, and of what."""
        phases = self.result.phases
        amplitude = (
            "unknown" if phases.median_amplitude is None else f"{phases.median_amplitude:.3g}"
        )
        return paragraph(
            f"{phases.with_phase} of {phases.earthquakes} selected earthquakes have a tidal phase, "
            f"{phases.with_mechanism} a mechanism; drawn: {phases.of}, median daily amplitude "
            f"{amplitude}. Instants at random are not spread evenly over these phases, so the flat "
            "line of the histogram is no null: compare with the same earthquakes at shifted times "
            "before reading anything into it."
        )

    def phases_chart(self) -> charts.Figure:
        """Histogram of the tidal phases."""
        column = _phase_column(self.result.phases)
        return charts.phase_histogram(
            self.table[column].to_numpy(dtype=float),
            title=f"Tidal phase: {self.result.phases.of}",
            note=self.result.left_out,
        )

    def series_chart(self) -> charts.Figure:
        """The tide around the largest selected earthquake, two days on either side."""
        selected = self.selected
        title = "Tide around the largest selected earthquake"
        if selected.empty:
            return charts.tide_series(title, [], {}, "strain", note=self.result.left_out)
        row = selected.nlargest(1, "magnitude").iloc[0]
        time = np.datetime64(row["time_utc"], "us")
        mechanism = Mechanism.of(row["strike_deg"], row["dip_deg"], row["rake_deg"])
        tide = tidal_series(
            open_ephemeris(self.result.ephemeris),
            time,
            row["latitude_deg"],
            row["longitude_deg"],
            row["depth_km"],
            mechanism,
            model=TidalModel(friction=self.claim.friction),
        )
        hours = np.round(tide.offset_hours * 3.6e9).astype("timedelta64[us]")
        times = time + hours
        if np.isfinite(tide.stress_pa).all():
            planes = zip(("plane given", "auxiliary plane"), tide.stress_pa[:, 0], strict=True)
            return charts.tide_series(title, times, dict(planes), "Pa", note=self.result.left_out)
        strain = {"volumetric strain": 1e9 * tide.volumetric_strain[0]}
        return charts.tide_series(title, times, strain, "1e-9", note=self.result.left_out)

    def left_out(self) -> Block:
        """What every stress here leaves out."""
        return paragraph(self.result.left_out, "warning")

    def section(self) -> Block:
        """The claim's part of the report."""
        return stacked(
            opening(self.claim),
            self.decision(),
            self.chart(),
            self.pulls(),
            self.loads(),
            self.phases(),
            self.phases_chart(),
            self.series_chart(),
            self.left_out(),
        )

    def save(self, output: str) -> str:
        """Write phases.parquet and result.json into ``output``; says what was done."""
        folder = output_folder(self.study.root, output)
        if folder is None:
            return "Nothing written: no output folder was given."
        self.table.to_parquet(folder / PHASES_FILE, index=False)
        (folder / RESULT).write_text(result_text(self.result), encoding="utf-8", newline="\n")
        return f"{len(self.table)} phases written."


def forcing_of(study: LoadedStudy, claim: ForcingClaim, catalog: CatalogStep) -> ForcingStep:
    """Measure the tides at the claim's place, and the phases of the earthquakes it selects."""
    ephemeris = open_ephemeris(study.settings.ephemeris.kernel)
    budget = forcing_budget(
        ephemeris,
        *span_instants(claim.span),
        on_date=None if claim.on is None else utc_instant(claim.on),
        place=(claim.place.latitude_deg, claim.place.longitude_deg),
    )
    pulls = tuple(_pull(row) for row in budget.to_dict("records"))
    selected = selected_earthquakes(study, claim, catalog.kept)
    table, summary = _phases(claim, selected, ephemeris)
    finding, sentence = _decide(claim, pulls)
    result = ForcingResult(
        claim=claim,
        finding=finding,
        sentence=sentence,
        description=f"tides at {place_in_words(claim.place)}, {claim.span.start} to "
        f"{claim.span.end}",
        ephemeris=ephemeris.name,
        pulls=pulls,
        loads=tuple(
            LoadRow(name=load.name.replace("_", " "), stress_pa=load.pascal, source=load.source)
            for load in EVERYDAY_LOADS
        ),
        phases=summary,
        left_out=OCEAN_LOADING_NOTE,
    )
    return ForcingStep(study, claim, selected, table, result)


def compute(claim: str, catalog_artifact: str = "") -> ForcingStep:
    """The step for a notebook: one claim of the study around the working folder."""
    study = load_study()
    return forcing_of(study, study.forcing_claim(claim), catalog_step.load(study, catalog_artifact))


def load(
    study: LoadedStudy, claim: ForcingClaim, catalog: CatalogStep, given: str = ""
) -> ForcingStep:
    """The step as an artifact holds it."""
    folder = artifact_folder(study.root, given, f"3_forcing.{claim.id}")
    table = pd.read_parquet(folder / PHASES_FILE)
    selected = selected_earthquakes(study, claim, catalog.kept)
    return ForcingStep(study, claim, selected, table, read_result(ForcingResult, folder))


def _pull(row: Mapping[Hashable, Any]) -> PullRow:
    return PullRow(
        name=str(row["body"]),
        acceleration_m_s2=float(row["acceleration_m_s2"]),
        share_of_moon=float(row["ratio_to_mean_moon"]),
        stress_pa=float(row["stress_pa"]),
        at_utc=f"{pd.Timestamp(row['time_utc']):%Y-%m-%dT%H:%M:%S}Z",
        here_acceleration_m_s2=float(row["here_acceleration_m_s2"]),
        here_stress_pa=float(row["here_stress_pa"]),
        here_at_utc=f"{pd.Timestamp(row['here_time_utc']):%Y-%m-%dT%H:%M:%S}Z",
        on_date_m_s2=float(row["on_date_acceleration_m_s2"])
        if "on_date_acceleration_m_s2" in row
        else None,
    )


def _phases(
    claim: ForcingClaim, selected: pd.DataFrame, ephemeris: Ephemeris
) -> tuple[pd.DataFrame, PhaseSummary]:
    mechanism = Mechanism.of(*(selected[f"{name}_deg"] for name in ("strike", "dip", "rake")))
    table = tidal_phase(
        ephemeris,
        selected["time_utc"].to_numpy(),
        selected["latitude_deg"].to_numpy(),
        selected["longitude_deg"].to_numpy(),
        selected["depth_km"].to_numpy(),
        mechanism,
        model=TidalModel(friction=claim.friction),
    )
    table.insert(0, "event_id", selected["event_id"].to_numpy())
    known = int(np.isfinite(mechanism.strike_deg).sum())
    summary = PhaseSummary(
        earthquakes=len(selected),
        with_mechanism=known,
        with_phase=0,
        of=_ON_PLANE if known else _VOLUMETRIC,
        median_amplitude=None,
    )
    phase = table[_phase_column(summary)].to_numpy(dtype=float)
    amplitude = table["plane1_amplitude_pa" if known else "volumetric_amplitude"].dropna()
    return table, summary.model_copy(
        update={
            "with_phase": int(np.isfinite(phase).sum()),
            "median_amplitude": float(amplitude.median()) if len(amplitude) else None,
        }
    )


_ON_PLANE = "Coulomb stress on the nodal plane given (Pa)"
_VOLUMETRIC = "volumetric strain, as no mechanism is known"


def _phase_column(phases: PhaseSummary) -> str:
    return "plane1_phase_deg" if phases.of == _ON_PLANE else "volumetric_phase_deg"


def _decide(claim: ForcingClaim, pulls: tuple[PullRow, ...]) -> tuple[ForcingWord, str]:
    moon = next(row for row in pulls if row.name == "moon")
    planets = [row for row in pulls if row.name not in ("moon", "sun")]
    together = sum(row.share_of_moon for row in planets)
    measured = (
        f"at their nearest in the span the Moon pulls {moon.share_of_moon:.3g} times its mean, all "
        f"planets together {together:.2g} times the Moon's mean (were they nearest all at once)"
    )
    if claim.asserts is None:
        return "measured", f"Measured: {measured}."
    said = assertion_in_words(claim.asserts)
    share = next(row.share_of_moon for row in pulls if row.name == claim.asserts.body)
    word: ForcingWord = "agree" if share >= claim.asserts.at_least_share_of_moon else "disagree"
    return word, (
        f"{word.capitalize()}: it is said that {said}; its strongest pull in the span is "
        f"{share:.3g} times the Moon's mean. For comparison, {measured}."
    )
