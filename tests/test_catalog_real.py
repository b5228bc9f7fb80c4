"""Two real catalogs, where they are at hand: nothing is lost, and known facts come out."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from epochtest.catalog.clean import Cleaned
from epochtest.catalog.load import load_catalog
from epochtest.catalog.summary import summarise
from epochtest.files import sha256_of
from epochtest.study.results import CatalogResult
from epochtest.study.settings import CatalogSettings, Source, Sources

FOLDER = Path(__file__).resolve().parents[2] / "shared" / "catalogs"
SPAN = (np.datetime64("2000-01-01"), np.datetime64("2021-01-01"))
TIGHT = {"duplicate_seconds": 2.0, "duplicate_km": 50.0, "duplicate_magnitude": 0.5}
WIDE = {"duplicate_seconds": 16.0, "duplicate_km": 100.0, "duplicate_magnitude": 0.5}

pytestmark = pytest.mark.skipif(
    not FOLDER.is_dir(), reason="the real catalogs (USGS listings) are not beside the repository"
)


def load(pattern: str, tolerances: dict[str, float] = TIGHT) -> tuple[Cleaned, CatalogResult]:
    """Load the files that match, as a study would."""
    files = tuple(sorted(p.relative_to(FOLDER).as_posix() for p in FOLDER.glob(pattern)))
    sources = Sources(
        source=tuple(
            Source(
                file=file,
                origin="US Geological Survey",
                licence="public domain",
                sha256=sha256_of(FOLDER / file),
            )
            for file in files
        )
    )
    settings = CatalogSettings(files=files, **tolerances)  # type: ignore[arg-type]
    cleaned = load_catalog(FOLDER, settings, sources)
    return cleaned, summarise(cleaned, sources, SPAN)


def lines_of(pattern: str) -> int:
    """Rows by counting line ends, headers taken off; no quoted field holds one."""
    return sum(path.read_bytes().count(b"\n") - 1 for path in FOLDER.glob(pattern))


def test_regional_catalog() -> None:
    """USGS, M >= 4, 2000-2020: 46,716 rows, ten of them no earthquakes, greatest 9.1 (Tohoku).

    Origin time 2011-03-11 05:46:24 UTC as the USGS lists it.
    """
    cleaned, result = load("regional-m4-2000-2020/*.csv")
    assert lines_of("regional-m4-2000-2020/*.csv") == result.rows_read == 46_716
    assert result.kept + result.quarantined == 46_716
    assert all(file.rows_read == file.kept + file.quarantined for file in result.files)
    assert result.reasons == {"event type not kept": 10, "near duplicate": 5}
    greatest = cleaned.kept.loc[cleaned.kept["magnitude"].idxmax()]
    assert greatest["magnitude"] == 9.1
    assert greatest["time_utc"].isoformat()[:19] == "2011-03-11T05:46:24"
    assert len({name.lower() for name in result.magnitude_types}) == 12
    assert result.sizes.bin_width == 0.1


def test_wide_tolerances_set_aside_one_agency_s_own_aftershocks() -> None:
    """USGS, March 2011, one agency's reviewed list: 16 s, 100 km, 0.5 takes 22 rows for repeats.

    A plain double loop over the month finds 23 pairs; one row stands in two of them, in the
    middle, so 22 rows repeat a kept one. 2 s, 50 km, 0.5 takes none.
    """
    pattern = "regional-m4-2000-2020/*.csv"
    counts = []
    for tolerances in (WIDE, TIGHT):
        aside = load(pattern, tolerances)[0].quarantined
        near = aside[aside["reason"] == "near duplicate"]
        counts.append(int(near["time"].str.startswith("2011-03").sum()))
    assert counts == [22, 0]


def test_one_month_catalog() -> None:
    """USGS, all magnitudes, one month of 2016: 8,552 rows, 32 without magnitude, 177 of them
    quarry blasts, explosions and other events.
    """
    _, result = load("one-month-all-magnitudes-2016.csv")
    assert lines_of("one-month-all-magnitudes-2016.csv") == result.rows_read == 8_552
    assert result.kept + result.quarantined == 8_552
    assert result.reasons == {
        "missing magnitude": 32,
        "event type not kept": 177,
        "near duplicate": 13,
    }
    assert result.sizes.bin_width == 0.01
