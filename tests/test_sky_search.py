"""The root search against a slow, plain twin, on real bodies and on made-up functions."""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
import pytest
from epochtest.sky import ephemeris as ephemeris_module
from epochtest.sky.directions import geometric_vectors, longitude_difference_deg
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.events import find_epochs
from epochtest.sky.search import TOLERANCE_DAYS, find_roots, search_grid, wrap_deg
from epochtest.study.events import LongitudeDifference
from epochtest.timescale import J2000_JD, tdb_days_from_utc
from hypothesis import given, seed, settings
from hypothesis import strategies as st
from jplephem.spk import SPK
from numpy.typing import NDArray

Days = NDArray[np.float64]
SPAN = np.datetime64("1920-01-01", "us"), np.datetime64("1980-01-01", "us")
FINE_DAYS = 5000


def plain_roots(difference_deg: Days, grid_days: Days) -> Days:
    """Roots of the twin by linear interpolation between fine grid points."""
    wrapped = wrap_deg(difference_deg)
    before, after = wrapped[:-1], wrapped[1:]
    cell = np.nonzero(((before < 0.0) != (after < 0.0)) & (np.abs(before - after) < 180.0))[0]
    share = wrapped[cell] / (wrapped[cell] - wrapped[cell + 1])
    roots: Days = grid_days[cell] + share * (grid_days[cell + 1] - grid_days[cell])
    return roots


# Centre, pair, step of the twin in days. Retrograde loops from several centres, the slow outer
# pairs with triple events, and the Moon from within and without.
TWINS = [
    ("earth", ("mercury", "sun"), 0.25),
    ("earth", ("mercury", "venus"), 0.25),
    ("earth", ("venus", "mars"), 0.25),
    ("earth", ("mars", "jupiter"), 0.25),
    ("earth", ("jupiter", "saturn"), 0.5),
    ("earth", ("uranus", "neptune"), 0.5),
    ("mars", ("earth", "venus"), 0.25),
    ("jupiter", ("earth", "mars"), 0.25),
    ("jupiter", ("sun", "earth"), 0.25),
    ("neptune", ("mercury", "sun"), 0.25),
    ("pluto", ("earth", "moon"), 0.125),
    ("sun", ("moon", "earth"), 0.125),
    ("sun", ("moon", "venus"), 0.125),
    ("moon", ("earth", "jupiter"), 0.125),
    ("moon", ("venus", "mars"), 0.125),
    ("venus", ("moon", "earth"), 0.125),
    ("mercury", ("venus", "earth"), 0.125),
]


@pytest.mark.parametrize(("centre", "bodies", "step_days"), TWINS)
def test_finds_what_a_fine_grid_finds(
    centre: Any, bodies: tuple[Any, Any], step_days: float
) -> None:
    """Sixty years of each pair: the very roots of a grid 10 to 100 times finer, no more, no less.

    The twin interpolates linearly, so its instants are good to its step squared times the
    bending; a tenth of the step is ample away from stations, a whole step next to them.
    """
    ephemeris = open_ephemeris("DE421")
    first, last = tdb_days_from_utc(np.array(SPAN))
    grid = np.arange(first, last, step_days)
    difference = longitude_difference_deg(*geometric_vectors(ephemeris, centre, bodies, grid))
    for angle in (0.0, 180.0, 63.0):
        event = LongitudeDifference(centre=centre, bodies=bodies, angle_deg=angle)
        table = find_epochs(event, ephemeris, *SPAN)
        expected = plain_roots(difference - angle, grid)
        found = table["tdb_days"].to_numpy()
        found = found[found < grid[-1]]
        assert found.size == expected.size
        assert np.abs(found - expected).max(initial=0.0) < step_days


@cache
def fine_difference(centre: Any, bodies: tuple[Any, Any]) -> tuple[Days, Days]:
    """Unwrapped longitude difference, deg, on a grid of half an hour."""
    first = tdb_days_from_utc(SPAN[0])
    grid = np.arange(first + 1.0, first + FINE_DAYS - 1.0, 0.02)
    vectors = geometric_vectors(open_ephemeris("DE421"), centre, bodies, grid)
    return grid, np.unwrap(longitude_difference_deg(*vectors), period=360.0)


@pytest.mark.parametrize(
    ("centre", "bodies"),
    [
        ("earth", ("mercury", "sun")),
        ("earth", ("mars", "saturn")),
        ("earth", ("jupiter", "saturn")),
        ("earth", ("venus", "jupiter")),
        ("venus", ("mercury", "mars")),
    ],
)
@pytest.mark.parametrize("short_of_station_deg", [1e-2, 1e-4, 1e-6])
def test_double_roots_next_to_stations(
    centre: Any, bodies: tuple[Any, Any], short_of_station_deg: float
) -> None:
    """A target just short of the difference at a station is met on both sides of the station.

    The two roots may lie minutes apart; the step of the search is days. Just beyond the
    station's value the same target is met by neither.
    """
    ephemeris = open_ephemeris("DE421")
    grid, difference = fine_difference(centre, bodies)
    span = SPAN[0], SPAN[0] + np.timedelta64(FINE_DAYS, "D")
    turn = np.nonzero(np.diff(np.sign(np.diff(difference))))[0] + 1
    assert turn.size >= 10
    for station in turn[1:9]:
        # The station's own value, from a parabola through the three fine points about it.
        left, middle, right = difference[station - 1 : station + 2]
        bend = left - 2.0 * middle + right
        offset = 0.5 * (left - right) / bend
        top = middle - 0.25 * (left - right) * offset
        inward = np.sign(left - middle)
        for side, count in ((1.0, 2), (-1.0, 0)):
            target = (top + side * inward * short_of_station_deg) % 360.0
            event = LongitudeDifference(centre=centre, bodies=bodies, angle_deg=target)
            table = find_epochs(event, ephemeris, *span)
            half_width = 0.02 * np.sqrt(2.0 * short_of_station_deg / abs(bend))
            about = grid[station] + 0.02 * offset
            near = np.abs(table["tdb_days"] - about) < 1.5 * half_width + 0.01
            assert near.sum() == count, (station, side)


@seed(11)
@settings(max_examples=150, deadline=None)
@given(
    amplitude=st.floats(1.0, 40.0),
    period=st.floats(20.0, 300.0),
    drift=st.floats(-3.0, 3.0),
    phase=st.floats(0.0, 6.28),
    target=st.floats(0.0, 360.0, exclude_max=True),
)
def test_made_up_angles_against_the_twin(
    amplitude: float, period: float, drift: float, phase: float, target: float
) -> None:
    """Drift plus a swing, with and without retrograde loops: as many roots as a fine grid has.

    Where the twin's own grid comes within 1e-4 deg of a station the twin is no authority, and
    the example is left out of the count but not of the check that each root is one.
    """
    omega = 2.0 * np.pi / period

    def angle(days: Days, series: NDArray[np.intp]) -> Days:
        return drift * days + amplitude * np.sin(omega * days + phase) - target

    step = min(period / 12.0, 60.0 / (abs(drift) + amplitude * omega))
    grid = search_grid(0.0, 1000.0, step)
    roots = find_roots(angle, grid, angle(grid, np.zeros(grid.size, dtype=np.intp)))
    assert np.abs(wrap_deg(angle(roots.days, roots.series))).max(initial=0.0) < (
        2.0 * TOLERANCE_DAYS * (abs(drift) + amplitude * omega) + 1e-11
    )
    fine = np.linspace(0.0, 1000.0, 200_001)
    value = angle(fine, np.zeros(fine.size, dtype=np.intp))
    turns = np.nonzero(np.diff(np.sign(np.diff(value))))[0] + 1
    at_turns = np.abs(wrap_deg(value[turns]))
    if (at_turns > 1e-4).all() and np.abs(wrap_deg(value[[0, -1]])).min() > 1e-6:
        expected = plain_roots(value, fine)
        assert roots.days.size == expected.size
        assert np.abs(roots.days - expected).max(initial=0.0) < 0.005
        slope = drift + amplitude * omega * np.cos(omega * roots.days + phase)
        assert (roots.rising == (slope > 0.0)).all()


@seed(12)
@settings(max_examples=100, deadline=None)
@given(
    offset=st.floats(0.05, 9.95),
    half_width=st.floats(1e-4, 2.0),
    flip=st.sampled_from([-1.0, 1.0]),
)
def test_a_parabola_anywhere_between_grid_points(
    offset: float, half_width: float, flip: float
) -> None:
    """Two roots of a parabola are found wherever they lie in a grid of steps of one day.

    Its extremum is worth 0.5 half_width^2 deg, down to 5e-9; the first and the last cell count.
    """

    def parabola(days: Days, series: NDArray[np.intp]) -> Days:
        return flip * 0.5 * ((days - offset) ** 2 - half_width**2)

    grid = search_grid(0.0, 10.0, 1.0)
    roots = find_roots(parabola, grid, parabola(grid, np.zeros(grid.size, dtype=np.intp)))
    expected = np.array([offset - half_width, offset + half_width])
    expected = expected[(expected >= 0.0) & (expected <= 10.0)]
    assert roots.days.size == expected.size
    # float64 noise of 1e-15 on a slope of half_width
    assert np.allclose(roots.days, expected, atol=2.0 * TOLERANCE_DAYS + 1e-14 / half_width)


def test_many_series_share_one_grid() -> None:
    """k series give the roots that each gives alone, sorted by instant, with their numbers."""
    targets = np.arange(0.0, 360.0, 7.0)

    def angle(days: Days, series: NDArray[np.intp]) -> Days:
        return 1.1 * days + 25.0 * np.sin(days / 9.0) - targets[series]

    grid = search_grid(-300.0, 300.0, 3.0)
    samples = np.stack([angle(grid, np.full(grid.size, k)) for k in range(targets.size)])
    together = find_roots(angle, grid, samples)
    assert (np.diff(together.days) >= 0.0).all()
    for k in range(targets.size):

        def alone(days: Days, series: NDArray[np.intp], k: int = k) -> Days:
            return angle(days, np.full(days.size, k))

        single = find_roots(alone, grid, samples[k])
        assert np.allclose(single.days, together.days[together.series == k], atol=1e-12)


def test_the_jump_at_180_degrees_is_no_root() -> None:
    """A full turn has one root at 0, none where the wrapped angle jumps from +180 to -180."""
    grid = search_grid(0.0, 360.0, 40.0)
    roots = find_roots(lambda days, _: days - 200.0, grid, grid - 200.0)
    assert roots.days == pytest.approx([200.0], abs=2 * TOLERANCE_DAYS)
    assert roots.rising.all()


def test_roots_on_grid_points_and_touching_ones() -> None:
    """An exact zero on a grid point counts once, at the ends too, and so does a mere touch."""
    grid = search_grid(0.0, 10.0, 1.0)
    for root in (0.0, 5.0, 10.0):
        found = find_roots(lambda days, _, root=root: days - root, grid, grid - root)
        assert found.days.tolist() == [root]
        assert found.rising.tolist() == [True]
    touch = find_roots(lambda days, _: (days - 5.0) ** 2, grid, (grid - 5.0) ** 2)
    assert touch.days.tolist() == [5.0]


def test_plain_numbers_are_not_wrapped() -> None:
    """With angle=False 360 is not 0, and large values keep their bracket."""
    grid = search_grid(0.0, 10.0, 1.0)
    found = find_roots(
        lambda days, _: 500.0 * (days - 4.3), grid, 500.0 * (grid - 4.3), angle=False
    )
    assert found.days == pytest.approx([4.3], abs=2 * TOLERANCE_DAYS)
    none = find_roots(lambda days, _: days + 360.0, grid, grid + 360.0, angle=False)
    assert none.days.size == 0


def test_empty_and_tiny_intervals() -> None:
    """An empty grid has no roots; an interval shorter than a step is searched all the same."""
    assert search_grid(3.0, 3.0, 1.0).size == 0
    assert search_grid(3.0, 2.0, 1.0).size == 0
    nothing = find_roots(lambda days, _: days, np.empty(0), np.empty((2, 0)))
    assert nothing.days.size == 0
    assert nothing.series.dtype == np.intp
    grid = search_grid(4.0, 4.001, 5.0)
    found = find_roots(lambda days, _: days - 4.0004, grid, grid - 4.0004)
    assert found.days == pytest.approx([4.0004], abs=2 * TOLERANCE_DAYS)


@pytest.mark.parametrize("kernel", ["DE421", "DE440"])
def test_segments_against_jplephem(kernel: Any) -> None:
    """Positions and velocities equal jplephem 2.24's, ends of the kernel and cells included.

    jplephem goes through seconds, which blurs its instants by 2 microseconds at the ends of
    DE440: 1e-4 km at Mercury's 50 km/s, and an acceleration of 3e5 km/day per day on velocities.
    """
    ours = open_ephemeris(kernel)
    first, last = ours.covered_tdb_days
    days = np.concatenate(
        (
            np.random.default_rng(8).uniform(first, last, 500),
            first + 16.0 * np.arange(20),
            last - 8.0 * np.arange(20),
        )
    )
    module, inside, _ = ephemeris_module._PACKAGED[kernel]
    with SPK.open(str(ephemeris_module.files(module).joinpath(inside))) as reference:
        for body, chain in ephemeris_module._CHAIN.items():
            position, velocity = ours.state(body, days)  # type: ignore[arg-type]
            parts = [reference[link].compute_and_differentiate(J2000_JD, days) for link in chain]
            assert np.abs(position - sum(part[0] for part in parts)).max() < 2e-4
            assert np.abs(velocity - sum(part[1] for part in parts)).max() < 1e-4
            assert np.array_equal(position, ours.position_km(body, days))  # type: ignore[arg-type]
