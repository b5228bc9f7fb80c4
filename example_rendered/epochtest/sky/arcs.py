"""The smallest arc of longitude that holds n bodies: its minima, and where it meets a threshold.

    width of the smallest arc                 geometric longitudes, ecliptic of J2000
      |  \\                  /
      |   \\        ,-.     /          below the threshold the arc is the largest of the
      |----e------x---e---x----      differences of two of its bodies, so it is smooth but for
      |     \\    /     \\ /            kinks where the outermost body changes
      |      `--'       v
      |       s         k            e entered, x left, s smooth minimum, k kink

A minimum is a station of the difference of the two outermost bodies (s), or a kink (k), which is
a conjunction of two bodies on the same edge of the arc. Both are roots of differences of *two*
longitudes or of their rates, and `epochtest.sky.search` finds them all. (Where the arc changes
from one largest gap to another it has a crest, never a minimum, and it is wider than a half turn;
that passage is an opposition of two bodies.) Between two neighbours among these instants and the
grid points the arc only grows or only shrinks, so that the minima and the crossings of the
threshold can be read off. Nothing depends on a grid point hitting a visit.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import combinations
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from epochtest.sky.directions import ECLIPTIC_J2000, geometric_vectors, spherical
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import (
    LONGEST_STEP_DAYS,
    PERIOD_DAYS,
    STEPS_PER_PERIOD,
    STEPS_PER_PERIOD_DIRECT,
)
from epochtest.sky.search import Series, find_roots, search_grid, wrap_deg
from epochtest.study.events import Body
from epochtest.timescale import Days

Values = NDArray[np.float64]

CHUNK_POINTS = 16384  # grid points worked on at once: 9 bodies have 72 series of them, 9 MB
_ROUNDING_DEG = 1e-13
_WALK = 64  # grid points looked at together on the way out of a visit
_OfBody = Callable[[int, Days], Values]


class Arc(NamedTuple):
    """Smallest arcs (k,): width, longitude of its beginning, and the bodies on its two edges.

    ``trailing`` is the number of the body at the beginning (least longitude within the arc),
    ``leading`` of the one at the end.
    """

    width_deg: Values
    start_deg: Values
    trailing: Series
    leading: Series


def smallest_arc(longitudes_deg: Values, *, along_line: bool = False) -> Arc:
    """The smallest arcs that hold all n longitudes (n, k), degrees, on the circle.

    With ``along_line`` longitudes count modulo 180 degrees: the narrowest double wedge through
    the centre. The arc is the turn less the largest gap between neighbours.
    """
    turn = 180.0 if along_line else 360.0
    on_circle = np.asarray(longitudes_deg, dtype=float) % turn
    order = np.argsort(on_circle, axis=0, kind="stable")
    ordered = np.take_along_axis(on_circle, order, axis=0)
    gaps = np.diff(ordered, axis=0, append=ordered[:1] + turn)
    widest = np.argmax(gaps, axis=0)[None]
    first = (widest + 1) % len(gaps)
    return Arc(
        np.maximum(turn - np.take_along_axis(gaps, widest, axis=0)[0], 0.0),  # never by rounding
        np.take_along_axis(ordered, first, axis=0)[0],
        np.take_along_axis(order, first, axis=0)[0],
        np.take_along_axis(order, widest, axis=0)[0],
    )


class BodiesSeen(NamedTuple):
    """Bodies seen from a centre; folded angles count ``fold`` times, so a line is one point."""

    ephemeris: Ephemeris
    centre: Body
    bodies: tuple[Body, ...]
    fold: float

    def longitudes(self, days: Days) -> Values:
        """Longitudes (n, k) of all bodies, degrees."""
        vectors = geometric_vectors(self.ephemeris, self.centre, self.bodies, days)
        return np.stack([spherical(xyz)[0] for xyz in vectors])

    def arc(self, days: Days) -> Arc:
        """The smallest arc at each instant, plain degrees."""
        return smallest_arc(self.longitudes(days), along_line=self.fold == 2.0)

    def longitude(self, body: int, days: Days) -> Values:
        """Longitude (k,) of one body, folded degrees."""
        name = (self.bodies[body],)
        (xyz,) = geometric_vectors(self.ephemeris, self.centre, name, days)
        return self.fold * spherical(xyz)[0]

    def rate(self, body: int, days: Days) -> Values:
        """Rate (k,) of the longitude of one body, folded degrees per day of TDB."""
        place, velocity = self.ephemeris.vector_state(self.centre, self.bodies[body], days)
        x, y, _ = ECLIPTIC_J2000 @ place
        along_x, along_y, _ = ECLIPTIC_J2000 @ velocity
        rate: Values = np.degrees(self.fold * (x * along_y - y * along_x) / (x * x + y * y))
        return rate

    def step_days(self) -> float:
        """Step of the grid: see `epochtest.sky.events`, halved where angles count twice."""
        names = {self.centre, *self.bodies}
        shortest = min(PERIOD_DAYS[name] for name in names if name != "sun")
        direct = self.centre == "sun" and "moon" not in names
        steps = STEPS_PER_PERIOD_DIRECT if direct else STEPS_PER_PERIOD
        return min(LONGEST_STEP_DAYS, shortest / steps) / self.fold


class ArcInstants(NamedTuple):
    """Instants (sorted, days of TDB) of minima, and of crossings into and out of the arc."""

    minima: Days
    entered: Days
    left: Days


def search_arc(sky: BodiesSeen, first: float, last: float, below_deg: float) -> ArcInstants:
    """All minima below the threshold, and all crossings of it, between two days of TDB.

    Chunk by chunk; chunks overlap by two grid cells. Instants are good to 0.1 ms.
    """
    grid = search_grid(first, last, sky.step_days())
    parts = []
    for begin in range(0, grid.size - 1, CHUNK_POINTS):
        end = min(begin + CHUNK_POINTS, grid.size - 1)
        found = _search_chunk(sky, grid[max(begin - 2, 0) : end + 3], below_deg)
        until = np.inf if end == grid.size - 1 else grid[end]
        parts.append([days[(days >= grid[begin]) & (days < until)] for days in found])
    return ArcInstants(*(np.concatenate(days) for days in zip(*parts, strict=True)))


def _search_chunk(sky: BodiesSeen, grid: Days, below_deg: float) -> ArcInstants:
    longitudes = sky.longitudes(grid)
    width = smallest_arc(longitudes, along_line=sky.fold == 2.0).width_deg
    marks, opposed = _turning_marks(sky, grid, longitudes, width, below_deg)
    days, place = np.unique(np.concatenate((grid, marks)), return_index=True)
    at_marks = sky.arc(marks).width_deg
    # Two opposite bodies need a half turn, whatever rounding says.
    at_marks[opposed] = np.maximum(at_marks[opposed], 180.0 / sky.fold)
    width = np.concatenate((width, at_marks))[place]
    above = width - below_deg
    above[above == 0.0] = _ROUNDING_DEG
    lowest = (width[1:-1] < width[:-2]) & (width[1:-1] <= width[2:]) & (above[1:-1] < 0.0)
    crossing = (above[:-1] < 0.0) != (above[1:] < 0.0)
    # Only cells that hold a crossing are shown to the root search: the marks are the turns.
    kept, samples = _blanked(above[None], _ends(crossing))
    roots = find_roots(
        lambda when, _: sky.arc(when).width_deg - below_deg, days[kept], samples, angle=False
    )
    return ArcInstants(days[1:-1][lowest], roots.days[~roots.rising], roots.days[roots.rising])


def _turning_marks(
    sky: BodiesSeen, grid: Days, longitudes: Values, width: Values, below_deg: float
) -> tuple[Days, NDArray[np.bool_]]:
    """Instants (k,) between which the arc, where it is below the threshold, is monotone.

    The second array (k,) tells which are oppositions, where no arc is below a half turn.

    Conjunctions, oppositions and stations of all pairs, in the cells where the arc can come below
    the threshold: it changes no faster than the fastest pair moves, and a pair that turns back
    within a cell goes less far than its neighbouring steps.
    """
    steps = wrap_deg(sky.fold * np.diff(longitudes, axis=1)) / sky.fold
    motion = np.pad(steps.max(axis=0) - steps.min(axis=0), 1, mode="edge")
    motion = np.maximum(np.maximum(motion[:-2], motion[1:-1]), motion[2:])
    used = _ends(np.minimum(width[:-1], width[1:]) - motion < below_deg)
    if not used.any():
        return np.empty(0), np.empty(0, dtype=bool)
    used = _widened(used)
    number = np.array(list(combinations(range(len(sky.bodies)), 2)), dtype=np.intp).T
    one, other = number

    def pairwise(of_body: _OfBody, days: Days, pair: Series) -> Values:
        total = np.zeros(days.size)
        for sign, which in ((1.0, one[pair]), (-1.0, other[pair])):
            for body in np.unique(which):
                here = which == body
                total[here] += sign * of_body(int(body), days[here])
        return total

    def apart(days: Days, series: Series) -> Values:
        pair, opposed = series % one.size, series >= one.size
        difference: Values = pairwise(sky.longitude, days, pair) - 180.0 * opposed
        return difference

    sampled = sky.fold * (longitudes[one] - longitudes[other])
    kept, samples = _blanked(np.concatenate((sampled, sampled - 180.0)), used)
    meetings = find_roots(apart, grid[kept], samples)
    rates = np.zeros((len(sky.bodies), grid.size))
    for body in range(len(sky.bodies)):
        rates[body, used] = sky.rate(body, grid[used])
    kept, samples = _blanked(rates[one] - rates[other], used)
    stations = find_roots(
        lambda days, pair: pairwise(sky.rate, days, pair), grid[kept], samples, angle=False
    )
    opposed = np.append(meetings.series >= one.size, np.zeros(stations.days.size, dtype=bool))
    return np.concatenate((meetings.days, stations.days)), opposed


def _ends(cells: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Grid points (m,) at either end of the marked cells (m - 1,)."""
    ends: NDArray[np.bool_] = np.append(cells, False) | np.insert(cells, 0, False)
    return ends


def _widened(points: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """The marked points and their neighbours."""
    wide = points.copy()
    wide[1:] |= points[:-1]
    wide[:-1] |= points[1:]
    return wide


def _blanked(samples: Values, used: NDArray[np.bool_]) -> tuple[Series, Values]:
    """Columns to keep, and the samples there, with a column of NaN on both sides of every run.

    NaN brackets nothing, so the root search sees the runs one by one.
    """
    kept = np.nonzero(_widened(used))[0]
    return kept, np.where(used[kept], samples[:, kept], np.nan)


def outside_visit(sky: BodiesSeen, edge: float, limit: float, below_deg: float) -> float:
    """The first day from ``edge`` towards the kernel's end ``limit`` when no visit is on."""
    step = np.copysign(sky.step_days(), limit - edge)
    while edge != limit:
        days = edge + step * np.arange(_WALK)
        days = np.clip(days, min(edge, limit), max(edge, limit))
        outside = np.nonzero(sky.arc(days).width_deg >= below_deg)[0]
        if outside.size:
            return float(days[outside[0]])
        edge = float(days[-1])
    return edge
