"""Which earthquakes count: magnitude, depth, region, span."""

from __future__ import annotations

from datetime import date, datetime
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.catalog.polygon import read_region
from epochtest.study.settings import Selection
from epochtest.timescale import utc_instant

ROUNDING = 1e-6
"""Slack of every limit in magnitude and km: 0.1 * 45 must pass a floor of 4.5. Catalogs give
magnitudes to 0.001 at the finest, so nothing else can slip in."""

ROUNDING_DEG = 1e-9
"""Slack of a box's sides, 0.1 mm on the ground."""


def select(frame: pd.DataFrame, selection: Selection, root: Path) -> NDArray[np.bool_]:
    """Mask (n,) of the rows of ``frame`` that ``selection`` admits; all limits are inclusive.

    A row without a depth is excluded as soon as a depth limit is set. A box includes its sides;
    for points on a polygon's edge see `polygon.Region.contains`. ``root`` is the study's folder.
    Raises ProtocolError for a GeoJSON file that is missing or no region.
    """
    mask = _within(
        frame["magnitude"].to_numpy(), selection.minimum_magnitude, selection.maximum_magnitude
    )
    mask &= _within(
        frame["depth_km"].to_numpy(), selection.minimum_depth_km, selection.maximum_depth_km
    )
    latitude = frame["latitude_deg"].to_numpy()
    longitude = frame["longitude_deg"].to_numpy()
    if selection.box is not None:
        mask &= in_box(latitude, longitude, selection.box)
    if selection.polygon is not None:
        mask &= read_region(root, selection.polygon).contains(latitude, longitude)
    return mask


def _within(
    values: NDArray[np.float64], low: float | None, high: float | None
) -> NDArray[np.bool_]:
    """Limits with slack; NaN fails any limit and passes where there is none."""
    mask = np.ones(values.shape, dtype=bool)
    if low is not None:
        mask &= values >= low - ROUNDING
    if high is not None:
        mask &= values <= high + ROUNDING
    return mask


def in_box(
    latitude_deg: NDArray[np.float64],
    longitude_deg: NDArray[np.float64],
    box: tuple[float, float, float, float],
) -> NDArray[np.bool_]:
    """Mask (n,) of points in [west, south, east, north]; west > east crosses the dateline.

    Longitudes of points and box may be -180..180 or 0..360, also mixed.
    """
    west, south, east, north = box
    width = east - west if east > west else east - west + 360.0
    eastward = (longitude_deg - west + ROUNDING_DEG) % 360.0
    within = (eastward <= width + 2.0 * ROUNDING_DEG) | (width >= 360.0)
    return within & (latitude_deg >= south - ROUNDING_DEG) & (latitude_deg <= north + ROUNDING_DEG)


def in_span(
    frame: pd.DataFrame,
    start: date | datetime | str | np.datetime64,
    end: date | datetime | str | np.datetime64,
) -> NDArray[np.bool_]:
    """Mask (n,) of rows with start <= time < end; a bare date means its first instant, UTC."""
    time_utc = frame["time_utc"].to_numpy()
    mask: NDArray[np.bool_] = (time_utc >= utc_instant(start)) & (time_utc < utc_instant(end))
    return mask
