"""Regions from GeoJSON (RFC 7946): reading, unwrapping at the dateline, points inside.

Edges are straight in longitude and latitude (RFC 7946, 3.1.1). A ring is made continuous
first, so that a region may be cut at the antimeridian (as RFC 7946, 3.1.9 recommends), be
written with longitudes beyond 180, or simply jump from 179 to -179::

    given      170 ---- -170        unwrapped   170 ---- 190
                |         |                      |        |      points are tried at lon - 360,
               170 ---- -170                    170 ---- 190     lon and lon + 360

The price: an edge longer than 180 degrees is always taken the short way round, except one of
exactly 360 from antimeridian to antimeridian. Put a corner in between where the long way is
meant.
"""

from __future__ import annotations

import json
import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from epochtest.errors import ProtocolError

_POLE_DEG = 90.0 - 1e-9
"""A point at the pole is moved this near to it, or no polygon reaching the pole would hold it."""

Ring = NDArray[np.float64]


@dataclass(frozen=True)
class Region:
    """A union of polygons; each is a list of rings (k, 2) lon, lat: the outer, then the holes."""

    polygons: tuple[tuple[Ring, ...], ...]

    def contains(
        self, latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]
    ) -> NDArray[np.bool_]:
        """Mask (n,) of points inside.

        Even-odd rule; of the points exactly on an edge, those on the western and southern side
        are inside, so adjoining polygons share no point. Cost: a sort, plus the points in each
        edge's band of latitude.
        """
        inside = np.zeros(np.shape(latitude_deg), dtype=bool)
        for outer, *holes in self.polygons:
            within = _in_ring(outer, latitude_deg, longitude_deg)
            for hole in holes:
                within &= ~_in_ring(hole, latitude_deg, longitude_deg)
            inside |= within
        return inside


def _in_ring(
    ring: Ring, latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]
) -> NDArray[np.bool_]:
    inside = np.zeros(latitude_deg.shape, dtype=bool)
    (west, south), (east, north) = ring.min(axis=0), ring.max(axis=0)
    latitude_deg = np.minimum(latitude_deg, _POLE_DEG)
    for turn in (-360.0, 0.0, 360.0):
        longitude = longitude_deg + turn
        near = np.flatnonzero(
            (longitude >= west) & (longitude <= east)
            & (latitude_deg >= south) & (latitude_deg <= north)
        )  # fmt: skip
        inside[near] |= _even_odd(ring, latitude_deg[near], longitude[near])
    return inside


def _even_odd(
    ring: Ring, latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]
) -> NDArray[np.bool_]:
    """Points (n,) from which a ray to the east crosses the ring an odd number of times."""
    order = np.argsort(latitude_deg, kind="stable")
    y, x = latitude_deg[order], longitude_deg[order]
    odd = np.zeros(y.size, dtype=bool)
    low = np.searchsorted(y, np.minimum(ring[:-1, 1], ring[1:, 1]), side="left")
    high = np.searchsorted(y, np.maximum(ring[:-1, 1], ring[1:, 1]), side="left")
    for (x0, y0), (x1, y1), first, last in zip(ring[:-1], ring[1:], low, high, strict=True):
        if first < last:
            band = slice(first, last)
            odd[band] ^= x[band] < x0 + (y[band] - y0) * ((x1 - x0) / (y1 - y0))
    inside = np.empty(y.size, dtype=bool)
    inside[order] = odd
    return inside


def read_region(root: Path, file: str) -> Region:
    """The region in GeoJSON ``file`` (relative to ``root``).

    A Polygon or MultiPolygon, bare, as Feature or as FeatureCollection (their union). Raises
    ProtocolError with one sentence for anything else.
    """
    try:
        content = json.loads((root / file).read_text(encoding="utf-8-sig"))
    except FileNotFoundError:
        raise _bad(file, "the file is missing; put it there or mend selection.polygon") from None
    except (UnicodeDecodeError, json.JSONDecodeError) as error:
        raise _bad(file, f"is not JSON text ({error}); export the region as GeoJSON") from error
    except OSError as error:
        raise _bad(file, f"cannot be read ({error.strerror})") from error
    polygons = [
        tuple(_ring(ring, file, f"polygon {p + 1}, ring {r + 1}") for r, ring in enumerate(rings))
        for p, rings in enumerate(_polygons(content, file))
    ]
    if not polygons or not all(polygons):
        raise _bad(file, "holds an empty polygon; draw the region")
    return Region(tuple(polygons))


def _polygons(content: Any, file: str) -> list[list[Any]]:
    """Lists of rings, still unchecked."""
    kind = content.get("type") if isinstance(content, dict) else None
    if kind == "FeatureCollection" and isinstance(content.get("features"), list):
        return [rings for feature in content["features"] for rings in _polygons(feature, file)]
    if kind == "Feature":
        return _polygons(content.get("geometry"), file)
    coordinates = content.get("coordinates") if isinstance(content, dict) else None
    if kind == "Polygon" and isinstance(coordinates, list):
        return [coordinates]
    if (
        kind == "MultiPolygon"
        and isinstance(coordinates, list)
        and all(isinstance(rings, list) for rings in coordinates)
    ):
        return coordinates
    raise _bad(file, f"holds {kind or 'no geometry'!r}; a Polygon or MultiPolygon is needed")


def _ring(positions: Any, file: str, where: str) -> Ring:
    if not isinstance(positions, list) or not all(_is_position(p) for p in positions):
        raise _bad(file, f"{where}: a position is [longitude, latitude] in degrees; mend it")
    ring = np.array([[float(p[0]), float(p[1])] for p in positions]).reshape(-1, 2)
    if len(ring) < 4 or not np.array_equal(ring[0], ring[-1]):
        raise _bad(file, f"{where}: a ring has four or more positions and ends where it began")
    outside = (np.abs(ring[:, 1]) > 90.0) | (np.abs(ring[:, 0]) > 540.0)
    if outside.any():
        worst = ring[outside][0].tolist()
        raise _bad(file, f"{where}: {worst} is not on the Earth; order is [longitude, latitude]")
    step = np.diff(ring[:, 0])
    from_edge_to_edge = (np.abs(step) == 360.0) & (np.abs(ring[:-1, 0]) == 180.0)
    turns = np.where(from_edge_to_edge, 0.0, np.round(step / 360.0))
    turns[np.abs(step) <= 180.0] = 0.0
    ring[1:, 0] -= 360.0 * np.cumsum(turns)
    if ring[0, 0] != ring[-1, 0]:
        raise _bad(file, f"{where}: goes round a pole; cut it at the antimeridian")
    middle = (ring[:, 0].min() + ring[:, 0].max()) / 2.0
    ring[:, 0] -= 360.0 * round(middle / 360.0)
    return ring


def _is_position(position: Any) -> bool:
    return (
        isinstance(position, list)
        and len(position) >= 2
        and all(
            isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)
            for value in position[:2]
        )
    )


def _bad(file: str, what: str) -> ProtocolError:
    return ProtocolError.of([f"{file}: {what}."])
