"""A flat map without tiles: equirectangular, cut where no data are, with a graticule.

Latitude runs up, longitude right; one degree of longitude takes cos(middle latitude) of the
length of one degree of latitude (plate carree with that standard parallel).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import altair as alt
import numpy as np
from numpy.typing import ArrayLike

from epochtest.charts import style

_WIDEST_PX, _NARROWEST_PX = 600.0, 360.0
_TALLEST_PX, _FLATTEST_PX = 480.0, 150.0
_HAIR_DEG = 1e-6
_STEPS_DEG = (0.1, 0.2, 0.5, 1, 2, 5, 10, 15, 20, 30, 45, 60)
_WEST_OR_EAST = (
    "format(abs((datum.value + 900) % 360 - 180), '~g') + '°' + "
    "((datum.value + 900) % 360 == 180 || (datum.value + 900) % 360 == 0 ? '' : "
    "((datum.value + 900) % 360 > 180 ? 'E' : 'W'))"
)
_SOUTH_OR_NORTH = (
    "format(abs(datum.value), '~g') + '°' + (datum.value == 0 ? '' : (datum.value > 0 ? 'N' : 'S'))"
)


def west_edge(lon_deg: ArrayLike) -> float:
    """The longitude just east of the widest empty gap, in -180..180: where a map may be cut."""
    circle = np.unique(np.asarray(lon_deg, dtype=float) % 360.0)
    if len(circle) == 0:
        return -180.0
    gaps = np.diff(np.append(circle, circle[0] + 360.0))
    start = float(circle[(int(np.argmax(gaps)) + 1) % len(circle)])
    # A hair to the west: rounding must not throw the first epicentre a turn to the east.
    return (start if start < 180.0 else start - 360.0) - _HAIR_DEG


def unwrap(lon_deg: ArrayLike, west_deg: float) -> style.Floats:
    """Longitudes moved by whole turns into [west, west + 360)."""
    lon = np.asarray(lon_deg, dtype=float)
    return west_deg + (lon - west_deg) % 360.0


@dataclass(frozen=True)
class Sheet:
    """Bounds of the map in unwrapped degrees and its size in pixels."""

    west: float
    east: float
    south: float
    north: float
    width: float
    height: float


def sheet_around(lat: style.Floats, lon: style.Floats) -> Sheet:
    """Bounds a little wider than the data; as many pixels as the proportions leave."""
    pad_lat = max(0.3, 0.04 * np.ptp(lat))
    pad_lon = max(0.6, 0.04 * np.ptp(lon))
    south, north = max(-90.0, lat.min() - pad_lat), min(90.0, lat.max() + pad_lat)
    west, east = lon.min() - pad_lon, lon.max() + pad_lon
    if east - west > 360.0:
        middle = (west + east) / 2
        west, east = middle - 180.0, middle + 180.0
    shrink = max(0.15, float(np.cos(np.radians((south + north) / 2))))
    height = _WIDEST_PX * (north - south) / ((east - west) * shrink)
    width = _WIDEST_PX
    if height > _TALLEST_PX:  # a tall region: a narrower sheet, with some room on both sides
        width = max(_NARROWEST_PX, _WIDEST_PX * _TALLEST_PX / height)
        height = _TALLEST_PX
        wanted = min(360.0, (north - south) * width / (height * shrink))
        middle = (west + east) / 2
        west, east = middle - wanted / 2, middle + wanted / 2
    if height < _FLATTEST_PX:  # a flat region: show more to the north and south
        wanted = (north - south) * _FLATTEST_PX / height
        middle = (south + north) / 2
        south, north = max(-90.0, middle - wanted / 2), min(90.0, middle + wanted / 2)
        height = _WIDEST_PX * (north - south) / ((east - west) * shrink)
    return Sheet(float(west), float(east), float(south), float(north), width, float(height))


def _ticks(low: float, high: float, most: int) -> list[float]:
    step = next((s for s in _STEPS_DEG if (high - low) / s <= most), 90)
    first = int(np.ceil(low / step - 1e-9))
    return [round(k * step, 6) for k in range(first, int(np.floor(high / step + 1e-9)) + 1)]


def axes(sheet: Sheet) -> tuple[Any, Any]:
    """The x and y channels of ``lon`` and ``lat`` with labelled meridians and parallels."""
    shape = {"title": None, "gridDash": [2, 3], "gridOpacity": 0.25}
    x_ticks = _ticks(sheet.west, sheet.east, max(2, int(sheet.width // 75)))
    y_ticks = _ticks(sheet.south, sheet.north, max(2, int(sheet.height // 45)))
    x = alt.X(
        "lon:Q",
        scale=alt.Scale(domain=[sheet.west, sheet.east], nice=False, zero=False),
        axis=alt.Axis(values=x_ticks, labelExpr=_WEST_OR_EAST, **shape),
    )
    y = alt.Y(
        "lat:Q",
        scale=alt.Scale(domain=[sheet.south, sheet.north], nice=False, zero=False),
        axis=alt.Axis(values=y_ticks, labelExpr=_SOUTH_OR_NORTH, **shape),
    )
    return x, y
