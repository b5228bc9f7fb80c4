"""Epicentres on a plain map: equirectangular, no tiles, whole across the dateline."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import altair as alt
import numpy as np
from numpy.typing import ArrayLike

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.charts.projection import Sheet, axes, sheet_around, unwrap, west_edge
from epochtest.tables import numbers

MOST_POINTS = 3000
_MOST_CELLS = 3000
_HALF_DECADES = (1, 3, 10, 30, 100, 300)
_DECADES = (1, 10, 100, 1000, 10_000, 100_000)


def epicentre_map(
    lat_deg: ArrayLike,
    lon_deg: ArrayLike,
    magnitudes: ArrayLike,
    *,
    box: tuple[float, float, float, float] | None = None,
    outlines: Sequence[tuple[ArrayLike, ArrayLike]] = (),
) -> Figure:
    """Epicentres (n,) in degrees, with the study's box or outlines.

    The map is cut at the widest gap in longitude, so that an arc across the dateline stays
    whole; one degree of longitude is cos(middle latitude) times one of latitude. More than
    3000 epicentres are counted in cells. ``box`` is (west, south, east, north); ``outlines``
    holds rings as (lat (k,), lon (k,)). Epicentres with NaN are left out.
    """
    title = "Epicentres"
    lat, lon, mag = (np.asarray(v, dtype=float) for v in (lat_deg, lon_deg, magnitudes))
    known = np.isfinite(lat) & np.isfinite(lon)
    lat, lon, mag = lat[known], lon[known], mag[known]
    if len(lat) == 0:
        return Figure.saying("No earthquakes with a place.", kind="map", title=title)
    west = west_edge(lon)
    lon = unwrap(lon, west)
    rings = _rings(box, outlines, float(lon.min() + lon.max()) / 2)
    sheet = sheet_around(
        np.concatenate([lat, *(ring[0] for ring in rings)]),
        np.concatenate([lon, *(ring[1] for ring in rings)]),
    )
    x, y = axes(sheet)
    many = len(lat) > MOST_POINTS
    layers, keys = (_cells if many else _points)(lat, lon, mag, sheet, x, y)
    for number, (ring_lat, ring_lon) in enumerate(rings):
        data = style.frame(lon=ring_lon, lat=ring_lat, step=np.arange(len(ring_lat)))
        layers.append(
            alt.Chart(data)
            .mark_line(color=style.GREEN, strokeWidth=2, strokeDash=list(style.DASHED), clip=True)
            .encode(x=x, y=y, order="step:O")
        )
        if number == 0:
            keys.append(style.Key("region of the study", "line", style.GREEN, style.DASHED))
    largest = _largest(mag)
    if largest is not None:
        data = style.frame(lon=lon[[largest]], lat=lat[[largest]])
        layers.append(
            alt.Chart(data)
            .mark_point(shape="diamond", filled=True, size=130, color=style.VERMILION, opacity=1)
            .encode(x=x, y=y)
        )
        keys.append(
            style.Key(
                f"largest, M {mag[largest]:.1f}",
                "point",
                style.VERMILION,
                shape="diamond",
                size=110,
            )
        )
    drawn = style.key_layers(keys, 4)
    chart = alt.layer(*layers, *drawn).properties(
        width=sheet.width,
        height=sheet.height,
        padding={"top": style.EDGE_PX, "left": style.EDGE_PX, "right": 24, "bottom": style.EDGE_PX},
        view=alt.ViewConfig(stroke=style.INK, strokeOpacity=0.5),
    )
    shown = (
        "Each square counts the earthquakes of one cell: the larger and darker, the more"
        if many
        else "Each circle is one earthquake, larger for larger magnitude"
    )
    caption = (
        f"{numbers.counted(len(lat), 'earthquake')}. {shown}. Degrees of longitude are drawn to "
        "the scale of the middle latitude; there are no coastlines, so read places off the axes."
    )
    words = (
        f"Map of {numbers.counted(len(lat), 'epicentre', plain=True)} between "
        f"latitudes {lat.min():.1f} and {lat.max():.1f} and "
        f"from {_named_longitude(lon.min())} eastward to {_named_longitude(lon.max())}."
        + ("" if largest is None else f" Largest magnitude {mag[largest]:.1f}.")
    )
    return Figure.of(style.themed(chart), kind="map", title=title, caption=caption, alt=words)


def _named_longitude(lon: float) -> str:
    wrapped = (float(lon) + 180.0) % 360.0 - 180.0
    return f"{abs(wrapped):.1f} {'E' if wrapped >= 0 else 'W'}"


def _largest(mag: style.Floats) -> int | None:
    return None if not np.isfinite(mag).any() else int(np.nanargmax(mag))


def _rings(
    box: tuple[float, float, float, float] | None,
    outlines: Sequence[tuple[ArrayLike, ArrayLike]],
    middle: float,
) -> list[tuple[style.Floats, style.Floats]]:
    """Closed rings (lat, lon), each whole and moved by whole turns to the map's middle."""
    rings = []
    if box is not None:
        west, south, east, north = box
        east += 360.0 if east < west else 0.0
        rings.append(
            (
                np.array([south, south, north, north, south]),
                np.array([west, east, east, west, west]),
            )
        )
    for ring_lat, ring_lon in outlines:
        lat, lon = np.asarray(ring_lat, dtype=float), np.asarray(ring_lon, dtype=float)
        lon = np.unwrap(lon, period=360.0)
        rings.append((np.append(lat, lat[0]), np.append(lon, lon[0])))
    return [
        (lat, lon + 360.0 * round((middle - (lon.min() + lon.max()) / 2) / 360.0))
        for lat, lon in rings
        if len(lat) > 1
    ]


def _points(
    lat: style.Floats, lon: style.Floats, mag: style.Floats, sheet: Sheet, x: Any, y: Any
) -> tuple[list[Any], list[style.Key]]:
    """One open circle per earthquake, largest first so that small ones stay visible."""
    size = np.nan_to_num(mag, nan=np.nanmin(mag) if np.isfinite(mag).any() else 0.0)
    low, high = float(size.min()), float(size.max())

    def area(value: float | style.Floats) -> Any:
        reach = max(high - low, 1.0)
        smallest = 6.0 if len(lat) > 500 else 14.0
        return smallest * (280.0 / smallest) ** ((value - low) / reach)

    order = np.argsort(-size, kind="stable")
    data = style.frame(lon=lon[order], lat=lat[order], area=area(size[order]))
    circles = (
        alt.Chart(data)
        .mark_point(
            shape="circle",
            color=style.BLUE,
            strokeWidth=1.2,
            filled=False,
            opacity=0.75,
            fill=style.BLUE,
            fillOpacity=0.15,
        )
        .encode(x=x, y=y, size=alt.Size("area:Q", scale=None))
    )
    whole = np.arange(np.ceil(low), np.floor(high) + 1)
    steps = whole if len(whole) <= 5 else whole[:: int(np.ceil(len(whole) / 5))]
    keys = [
        style.Key(f"M {step:.0f}", "point", style.BLUE, filled=False, size=float(area(step)))
        for step in steps
    ] or [style.Key("earthquake", "point", style.BLUE, filled=False)]
    return [circles], keys


def _cells(
    lat: style.Floats, lon: style.Floats, mag: style.Floats, sheet: Sheet, x: Any, y: Any
) -> tuple[list[Any], list[style.Key]]:
    """Squares in cells of the sheet; side and darkness grow with the class of the count."""
    side = max(6.0, np.sqrt(sheet.width * sheet.height / _MOST_CELLS))
    columns, rows = int(sheet.width // side), int(sheet.height // side)
    grid, lat_edges, lon_edges = np.histogram2d(
        lat,
        lon,
        bins=(rows, columns),
        range=((sheet.south, sheet.north), (sheet.west, sheet.east)),
    )
    i, j = np.nonzero(grid)
    classes = _HALF_DECADES if grid.max() < 1000 else _DECADES
    klass = np.searchsorted(classes, grid[i, j], side="right") - 1
    top = int(klass.max())
    steps = max(1, top)
    data = style.frame(
        lon=(lon_edges[j] + lon_edges[j + 1]) / 2,
        lat=(lat_edges[i] + lat_edges[i + 1]) / 2,
        area=_cell_area(klass / steps, side),
        opacity=_cell_opacity(klass / steps),
    )
    squares = (
        alt.Chart(data)
        .mark_point(shape="square", filled=True, color=style.BLUE)
        .encode(
            x=x,
            y=y,
            size=alt.Size("area:Q", scale=None),
            opacity=alt.Opacity("opacity:Q", scale=None),
        )
    )
    keys = []
    for number in range(top + 1):
        first = classes[number]
        last = classes[number + 1] - 1 if number < top else int(grid.max())
        label = f"{numbers.count(first)}–{numbers.count(last)}"
        label = label if last > first else numbers.count(first)
        keys.append(
            style.Key(
                label,
                "point",
                style.BLUE,
                shape="square",
                opacity=_cell_opacity(number / steps),
                size=_cell_area(number / steps, side),
            )
        )
    return [squares], keys


def _cell_area(depth: Any, side: float) -> Any:
    return (side * (0.5 + 0.5 * depth)) ** 2


def _cell_opacity(depth: Any) -> Any:
    return 0.5 + 0.5 * depth
