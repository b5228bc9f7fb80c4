"""Selecting earthquakes: limits, boxes, GeoJSON regions, the span."""

from __future__ import annotations

import json
from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from epochtest.catalog.polygon import read_region
from epochtest.catalog.select import in_box, in_span, select
from epochtest.errors import ProtocolError
from epochtest.study.settings import Selection
from hypothesis import given, settings
from hypothesis import strategies as st

HERE = Path()


def table(**columns: list[Any]) -> pd.DataFrame:
    """A table of earthquakes with the given columns and harmless others."""
    n = len(next(iter(columns.values())))
    fields: dict[str, Any] = {
        "latitude_deg": [0.0] * n, "longitude_deg": [0.0] * n, "depth_km": [10.0] * n,
        "magnitude": [5.0] * n, "time_utc": np.full(n, np.datetime64("2000-01-01", "us")),
    }  # fmt: skip
    return pd.DataFrame(fields | columns)


def chosen(frame: pd.DataFrame, **selection: Any) -> list[bool]:
    """The mask as a list."""
    return select(frame, Selection(**selection), HERE).tolist()


def region(tmp_path: Path, geometry: Any) -> Path:
    """``geometry`` written as region.json."""
    (tmp_path / "region.json").write_text(json.dumps(geometry))
    return tmp_path


def held(tmp_path: Path, geometry: Any, points: list[tuple[float, float]]) -> list[bool]:
    """Which (longitude, latitude) points the geometry holds."""
    longitude, latitude = np.array(points, dtype=float).T
    read = read_region(region(tmp_path, geometry), "region.json")
    return read.contains(latitude, longitude).tolist()


def polygon(*rings: list[list[float]]) -> dict[str, Any]:
    """A GeoJSON polygon."""
    return {"type": "Polygon", "coordinates": list(rings)}


def square(west: float, south: float, east: float, north: float) -> list[list[float]]:
    """A closed ring, counter-clockwise."""
    return [[west, south], [east, south], [east, north], [west, north], [west, south]]


def test_magnitude_floor_forgives_binary_noise() -> None:
    """A floor of 4.5 admits 4.5 however it was computed (IEEE 754), and not 4.499."""
    noisy = [4.5, 45 * 0.1, 4.4 + 0.1, 0.1 * 3 + 4.2, 4.499, float("nan")]
    assert chosen(table(magnitude=noisy), minimum_magnitude=4.5) == [True] * 4 + [False] * 2
    below = [4.5 - 1e-12, 4.5 + 1e-12, 4.501]
    assert chosen(table(magnitude=below), minimum_magnitude=4.5) == [True, True, True]
    assert chosen(table(magnitude=below), maximum_magnitude=4.5) == [True, True, False]


def test_unknown_depth_fails_any_depth_limit() -> None:
    """NaN depth is excluded by a limit, and admitted without one."""
    frame = table(depth_km=[float("nan"), 69.9, 70.0, 70.1])
    assert chosen(frame, maximum_depth_km=70) == [False, True, True, False]
    assert chosen(frame, minimum_depth_km=70) == [False, False, True, True]
    assert chosen(frame) == [True] * 4


@pytest.mark.parametrize(
    ("box", "inside"),
    [
        ((170, -10, -170, 10), [170, 180, -180, -175, -170]),
        ((170, -10, 190, 10), [170, 180, -180, -175, -170]),
        ((-180, -10, 180, 10), [170, 180, -180, -175, -170, 0, 10, -90]),
        ((0, -10, 360, 10), [170, 180, -180, -175, -170, 0, 10, -90]),
        ((350, -10, 10, 10), [0, 10]),
        ((-90, -10, 0, 10), [0, -90]),
        ((-100, -10, 10, 10), [0, 10, -90]),
    ],
)
def test_boxes(box: tuple[float, float, float, float], inside: list[float]) -> None:
    """West > east crosses the dateline (RFC 7946, 5.2); 0..360 and signed longitudes may mix."""
    longitudes = [170.0, 180.0, -180.0, -175.0, -170.0, 0.0, 10.0, -90.0]
    frame = table(longitude_deg=longitudes)
    mask = chosen(frame, box=box)
    assert sorted(np.array(longitudes)[mask]) == sorted(inside)
    assert not any(chosen(frame.assign(latitude_deg=10.1), box=box))


LONGITUDE = st.floats(-180, 360).map(lambda x: round(x, 3))


@settings(max_examples=300, deadline=None, derandomize=True)
@given(LONGITUDE, LONGITUDE, st.floats(-180, 180).map(lambda x: round(x, 3)))
def test_boxes_equal_walking_east(west: float, east: float, longitude: float) -> None:
    """Twin in whole thousandths of a degree: some point of the eastward walk is the longitude."""
    if west == east:
        return
    start, stop = round(west * 1000), round(east * 1000)
    stop += 360_000 if stop < start else 0
    copies = (round(longitude * 1000) + turn * 360_000 for turn in range(-3, 4))
    expected = any(start <= copy <= stop for copy in copies)
    found = in_box(np.zeros(1), np.array([longitude]), (west, -1.0, east, 1.0))
    assert found.tolist() == [expected]


def test_polygon_with_a_hole(tmp_path: Path) -> None:
    """The polygon with a hole of RFC 7946, appendix A.3."""
    outer = [[100.0, 0.0], [101.0, 0.0], [101.0, 1.0], [100.0, 1.0], [100.0, 0.0]]
    hole = [[100.8, 0.8], [100.8, 0.2], [100.2, 0.2], [100.2, 0.8], [100.8, 0.8]]
    points = [(100.1, 0.5), (100.5, 0.5), (100.9, 0.9), (99.9, 0.5), (100.5, 1.1), (-259.5, 0.1)]
    expected = [True, False, True, False, False, True]
    assert held(tmp_path, polygon(outer, hole), points) == expected


def test_multipolygon_cut_at_the_antimeridian(tmp_path: Path) -> None:
    """The multipolygon of RFC 7946, section 3.1.9: cut at 180, both sides, and 180 itself."""
    geometry = {
        "type": "MultiPolygon",
        "coordinates": [
            [[[180.0, 40.0], [180.0, 50.0], [170.0, 50.0], [170.0, 40.0], [180.0, 40.0]]],
            [[[-170.0, 40.0], [-170.0, 50.0], [-180.0, 50.0], [-180.0, 40.0], [-170.0, 40.0]]],
        ],
    }
    points = [(175, 45), (-175, 45), (180, 45), (-180, 45), (165, 45), (-165, 45), (0, 45)]
    assert held(tmp_path, geometry, points) == [True] * 4 + [False] * 3


@pytest.mark.parametrize(
    "ring",
    [
        square(170, 40, 190, 50),
        square(-190, 40, -170, 50),
        [[170, 40], [-170, 40], [-170, 50], [170, 50], [170, 40]],
        [[-170, 50], [170, 50], [170, 40], [-170, 40], [-170, 50]],
    ],
)
def test_one_region_across_the_dateline_in_four_spellings(
    tmp_path: Path, ring: list[list[float]]
) -> None:
    """Longitudes beyond 180 and edges that jump over it mean the same strip."""
    points = [(175, 45), (-175, 45), (180, 45), (-180, 45), (165, 45), (-165, 45), (0, 45)]
    assert held(tmp_path, polygon(ring), points) == [True] * 4 + [False] * 3


def test_hole_across_the_dateline_in_another_branch(tmp_path: Path) -> None:
    """Outer ring written to 190, its hole with signed longitudes."""
    geometry = polygon(square(170, 0, 190, 10), square(-178, 4, -172, 6))
    points = [(-175, 5), (-175, 2), (185, 5), (175, 5)]
    assert held(tmp_path, geometry, points) == [False, True, False, True]


def test_whole_earth_and_polar_cap(tmp_path: Path) -> None:
    """Edges of exactly 360 degrees stay long; both poles are inside."""
    points = [(0, 0), (180, 10), (-180, -10), (20, 90), (20, -90)]
    assert held(tmp_path, polygon(square(-180, -90, 180, 90)), points) == [True] * 5
    cap = held(tmp_path, polygon(square(-180, 60, 180, 90)), [(0, 61), (0, 59), (90, 90)])
    assert cap == [True, False, True]


def test_adjoining_polygons_share_no_point(tmp_path: Path) -> None:
    """Every grid point of a square lies in exactly one of its two triangles or four quarters."""
    grid = [(x / 4, y / 4) for x in range(16) for y in range(16)]
    lower = [[0, 0], [4, 0], [4, 4], [0, 0]]
    upper = [[0, 0], [4, 4], [0, 4], [0, 0]]
    parts = [lower, upper]
    counts = sum(np.array(held(tmp_path, polygon(ring), grid), dtype=int) for ring in parts)
    assert (counts == 1).all()
    quarters = [square(x, y, x + 2, y + 2) for x in (0, 2) for y in (0, 2)]
    counts = sum(np.array(held(tmp_path, polygon(ring), grid), dtype=int) for ring in quarters)
    assert (counts == 1).all()


def winding_number(ring: np.ndarray, x: float, y: float) -> int:
    """Turns of the ring round a point by summing signed angles; the plain twin."""
    directions = np.arctan2(ring[:, 1] - y, ring[:, 0] - x)
    turns = (np.diff(directions) + np.pi) % (2 * np.pi) - np.pi
    return round(float(turns.sum()) / (2 * np.pi))


@settings(max_examples=60, deadline=None, derandomize=True)
@given(st.integers(0, 2**32 - 1), st.integers(3, 25), st.floats(-180, 180))
def test_star_shapes_equal_the_winding_number(
    tmp_path_factory: pytest.TempPathFactory, seed: int, corners: int, centre: float
) -> None:
    """Random star-shaped rings about any longitude, against the sum of angles (common practice)."""
    random = np.random.default_rng(seed)
    angle = np.sort(random.uniform(0, 2 * np.pi, corners))
    radius = random.uniform(1, 30, corners)
    ring = np.column_stack([centre + radius * np.cos(angle), radius * np.sin(angle)])
    ring = np.vstack([ring, ring[:1]])
    points = np.column_stack([centre + random.uniform(-35, 35, 60), random.uniform(-35, 35, 60)])
    signed = (points[:, 0] + 180) % 360 - 180
    written = ring.copy()
    written[:, 0] = (ring[:, 0] + 180) % 360 - 180
    folder = tmp_path_factory.mktemp("star", numbered=True)
    found = held(folder, polygon(written.tolist()), list(zip(signed, points[:, 1], strict=True)))
    assert found == [winding_number(ring, x, y) % 2 == 1 for x, y in points]


def test_features_and_collections(tmp_path: Path) -> None:
    """Feature and FeatureCollection (RFC 7946, 3.2 and 3.3) are read as the union of polygons."""
    features = [
        {"type": "Feature", "properties": None, "geometry": polygon(square(x, 0, x + 1, 1))}
        for x in (0, 5)
    ]
    collection = {"type": "FeatureCollection", "features": features}
    assert held(tmp_path, collection, [(0.5, 0.5), (5.5, 0.5), (3, 0.5)]) == [True, True, False]
    frame = table(longitude_deg=[0.5, 3.0], latitude_deg=[0.5, 0.5], magnitude=[5.0, 5.0])
    mask = select(frame, Selection(polygon="region.json"), tmp_path)
    assert mask.tolist() == [True, False]


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ("{", "is not JSON"),
        ("[]", "holds 'no geometry'"),
        ('{"type": "Point", "coordinates": [0, 0]}', "holds 'Point'"),
        ('{"type": "FeatureCollection", "features": []}', "empty polygon"),
        ('{"type": "Feature", "geometry": null}', "no geometry"),
        ('{"type": "Polygon", "coordinates": []}', "empty polygon"),
        ('{"type": "Polygon", "coordinates": [[[0, 0], [1, 0], [1, 1]]]}', "ends where it began"),
        ('{"type": "Polygon", "coordinates": [[[0, 0], [1, 0], [1, 1], [0, 1]]]}', "ends where"),
        ('{"type": "Polygon", "coordinates": [[[0, 0], [1, "x"], [1, 1], [0, 0]]]}', "a position"),
        ('{"type": "Polygon", "coordinates": [[[0, 0], [NaN, 0], [1, 1], [0, 0]]]}', "a position"),
        ('{"type": "Polygon", "coordinates": [[[0, 0], [0, 142], [1, 1], [0, 0]]]}',
         "order is [longitude, latitude]"),
        ('{"type": "Polygon", "coordinates": [[[0, 60], [120, 60], [-120, 60], [0, 60]]]}',
         "goes round a pole"),
        ('{"type": "MultiPolygon", "coordinates": [5]}', "holds 'MultiPolygon'"),
    ],
)  # fmt: skip
def test_bad_regions_give_one_sentence(tmp_path: Path, content: str, words: str) -> None:
    """Anything but polygons on the Earth is refused with file, ring and what is wrong."""
    (tmp_path / "region.json").write_text(content)
    with pytest.raises(ProtocolError) as caught:
        read_region(tmp_path, "region.json")
    assert str(caught.value).startswith("region.json: ")
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_missing_region(tmp_path: Path) -> None:
    """A missing GeoJSON file is told as such."""
    with pytest.raises(ProtocolError, match=r"none\.json: the file is missing"):
        read_region(tmp_path, "none.json")


def test_span_is_half_open() -> None:
    """The start belongs to the span, the end does not; a date is its first instant, UTC."""
    times = ["1999-12-31T23:59:59.999999", "2000-01-01", "2000-12-31T23:59:59", "2001-01-01"]
    frame = table(time_utc=np.array(times, dtype="datetime64[us]"))  # type: ignore[arg-type]
    assert in_span(frame, date(2000, 1, 1), "2001-01-01").tolist() == [False, True, True, False]
