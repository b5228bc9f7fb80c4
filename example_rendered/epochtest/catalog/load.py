"""From a study's settings to its clean catalog, in one call."""

from __future__ import annotations

from pathlib import Path

import pandas as pd

from epochtest.catalog.clean import Cleaned, clean
from epochtest.catalog.read import read_catalog
from epochtest.catalog.sources import verify_sources
from epochtest.study.settings import CatalogSettings, Sources


def load_catalog(root: Path, settings: CatalogSettings, sources: Sources) -> Cleaned:
    """Verify, read, join and clean the catalog files of the study in folder ``root``.

    Raises ProtocolError or ChangedInputError (`sources`) and CatalogError (`read`).
    """
    verify_sources(root, settings.files, sources)
    tables = [read_catalog(root / file, file, settings) for file in settings.files]
    return clean(pd.concat(tables, ignore_index=True), settings)
