"""1_catalog: the catalog as read, cleaned and described, every row accounted for."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from epochtest import charts, tables
from epochtest.catalog.load import load_catalog
from epochtest.catalog.schema import read_parquet, write_parquet
from epochtest.catalog.select import in_span
from epochtest.catalog.summary import summarise
from epochtest.inference.windows import Interval, span_instants
from epochtest.pipeline.block import Block, paragraph, stacked
from epochtest.pipeline.frames import artifact_folder, output_folder, read_result, result_text
from epochtest.pipeline.store import RESULT
from epochtest.study.load import LoadedStudy, load_study
from epochtest.study.results import CatalogResult

CATALOG_FILE = "catalog.parquet"
QUARANTINE_FILE = "quarantine.csv"


@dataclass(frozen=True)
class CatalogStep:
    """A clean catalog (``kept``), what was set aside (``quarantined``), the ``result``."""

    root: Path
    span: Interval
    kept: pd.DataFrame
    quarantined: pd.DataFrame
    result: CatalogResult

    def files(self) -> tables.HtmlTable:
        """One row per input file."""
        return tables.html(tables.files_table(self.result), "Input files")

    def reasons(self) -> tables.HtmlTable:
        """Rows set aside, by reason."""
        return tables.html(tables.quarantine_table(self.result.reasons), "Rows set aside")

    def notes(self) -> Block:
        """What a reader should know of the catalog as a whole."""
        return stacked(*(paragraph(note, "warning") for note in self.result.notes))

    def map(self) -> charts.Figure:
        """Epicentres of the clean catalog."""
        columns = ("latitude_deg", "longitude_deg", "magnitude")
        return charts.epicentre_map(*(self.kept[name].to_numpy() for name in columns))

    def magnitude_frequency(self) -> charts.Figure:
        """Size distribution of the earthquakes in the span, with completeness and b."""
        return charts.magnitude_frequency(self._inside["magnitude"].to_numpy(), self.result.sizes)

    def cumulative(self) -> charts.Figure:
        """Cumulative number along time."""
        return charts.cumulative_count(self.kept["time_utc"].to_numpy())

    def magnitude_time(self) -> charts.Figure:
        """Magnitudes along time."""
        columns = ("time_utc", "magnitude")
        return charts.magnitude_time(*(self.kept[name].to_numpy() for name in columns))

    @property
    def _inside(self) -> pd.DataFrame:
        return self.kept[in_span(self.kept, *self.span)]

    def save(self, output: str) -> str:
        """Write catalog.parquet, quarantine.csv and result.json; says what was done."""
        folder = output_folder(self.root, output)
        if folder is None:
            return "Nothing written: no output folder was given."
        write_parquet(self.kept, folder / CATALOG_FILE)
        self.quarantined.to_csv(folder / QUARANTINE_FILE, index=False, lineterminator="\n")
        (folder / RESULT).write_text(result_text(self.result), encoding="utf-8", newline="\n")
        return f"{len(self.kept)} earthquakes and {len(self.quarantined)} set-aside rows written."


def catalog_of(study: LoadedStudy) -> CatalogStep:
    """Read, clean and describe the catalog of a study."""
    span = span_instants(study.settings.span)
    cleaned = load_catalog(study.root, study.settings.catalog, study.sources)
    result = summarise(cleaned, study.sources, span)
    return CatalogStep(study.root, span, cleaned.kept, cleaned.quarantined, result)


def compute() -> CatalogStep:
    """The step for a notebook: the study around the working folder."""
    return catalog_of(load_study())


def load(study: LoadedStudy, given: str = "") -> CatalogStep:
    """The step as an artifact holds it."""
    folder = artifact_folder(study.root, given, "1_catalog")
    return CatalogStep(
        study.root,
        span_instants(study.settings.span),
        read_parquet(folder / CATALOG_FILE),
        pd.read_csv(folder / QUARANTINE_FILE, dtype=str, keep_default_na=False),
        read_result(CatalogResult, folder),
    )
