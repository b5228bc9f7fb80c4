r"""All roots of smooth functions whose slopes are known, from a coarse grid, refined together.

A cell of the grid is decided by the values and the slopes at its two ends:

         \                         \          /
       ---o-----------           ----o--------o----
           \                        `-.____.-'
    the signs differ:            the signs agree, but it goes towards zero on the left and away
    one root                     from it on the right: the station between is found first, and
                                 its value says whether there are two roots or none

So double roots near stations are found without a grid point between them. Such a cell is left
alone only if an end lies farther from zero than twice what its slope covers in the whole cell.
What the grid must promise: at most one turn per cell.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from epochtest.sky.search import TOLERANCE_DAYS, Brackets, Difference, Roots, Series, refine
from epochtest.timescale import Days

Values = NDArray[np.float64]

REACH = 2.0  # what a slope covers, times this, is how far from zero a turn is still looked for
_GUESSES = 4  # Newton steps on the cubic: each squares the error of the first guess


class Cells(NamedTuple):
    """Cells (m,) of a grid: both ends in days, values and slopes (per day) there, the series."""

    left: Days
    right: Days
    at_left: Values
    at_right: Values
    slope_left: Values
    slope_right: Values
    series: Series


def undecided_cells(grid_days: Days, samples: Values, slopes: Values, series: Series) -> Cells:
    """The cells that may hold a root, of k series on one grid (n,).

    ``samples`` and ``slopes`` are (k, n); ``series`` (k,) gives the number of each row.
    """
    below = samples < 0.0
    near = np.abs(samples[:, :-1]) <= REACH * np.diff(grid_days) * np.abs(slopes[:, :-1])
    near &= np.abs(samples[:, 1:]) <= REACH * np.diff(grid_days) * np.abs(slopes[:, 1:])
    towards = below == (slopes > 0.0)  # zero, as time goes on
    turned = near & towards[:, :-1] & ~towards[:, 1:]
    row, column = np.nonzero(turned | (below[:, :-1] != below[:, 1:]))
    after = column + 1
    return Cells(
        grid_days[column],
        grid_days[after],
        samples[row, column],
        samples[row, after],
        slopes[row, column],
        slopes[row, after],
        series[row],
    )


def together(parts: list[Cells]) -> Cells:
    """Cells of several grids in one."""
    return Cells(*map(np.concatenate, zip(*parts, strict=True)))


def roots_in_cells(
    value: Difference, slope: Difference, cells: Cells, *, tolerance_days: float = TOLERANCE_DAYS
) -> Roots:
    """Every root in the cells, each once, sorted by instant; a root on a grid point too.

    ``value`` and ``slope`` take instants (m,) and series (m,). No loop over roots: time grows as
    their number.
    """
    changes = (cells.at_left < 0.0) != (cells.at_right < 0.0)
    crossed, touched = _beyond_stations(value, slope, _taken(cells, ~changes), tolerance_days)
    cells = together([_taken(cells, changes), crossed])
    brackets = Brackets(cells.left, cells.right, cells.at_left, cells.at_right, cells.series)
    days = refine(value, brackets, tolerance_days, _cubic_guess(cells))
    found = Roots(days, cells.series, cells.at_right > cells.at_left)
    both = [np.concatenate(parts) for parts in zip(found, touched, strict=True)]
    order = np.lexsort((both[1], both[0]))
    return Roots(*(part[order] for part in both))


def _taken(cells: Cells, which: NDArray[np.bool_]) -> Cells:
    return Cells._make(part[which] for part in cells)


def _beyond_stations(
    value: Difference, slope: Difference, cells: Cells, tolerance: float
) -> tuple[Cells, Roots]:
    """Cells on both sides of every station that lies across zero, and roots that only touch it.

    Every cell given holds a turn and no change of sign between its ends.
    """
    brackets = Brackets(cells.left, cells.right, cells.slope_left, cells.slope_right, cells.series)
    station = refine(slope, brackets, tolerance)
    turned = value(station, cells.series)
    side = np.where(cells.at_left < 0.0, -1.0, 1.0)
    touches, crosses = turned == 0.0, turned * side < 0.0
    touched = Roots(station[touches], cells.series[touches], side[touches] < 0.0)
    cells, station, turned = _taken(cells, crosses), station[crosses], turned[crosses]
    flat = np.zeros(station.size)
    before = cells._replace(right=station, at_right=turned, slope_right=flat)
    after = cells._replace(left=station, at_left=turned, slope_left=flat)
    return together([before, after]), touched


def _cubic_guess(cells: Cells) -> Values:
    """Where between its ends (0 to 1) each cell's cubic through values and slopes is zero."""
    length = cells.right - cells.left
    f0, s0 = cells.at_left, cells.slope_left * length
    rise = cells.at_right - f0
    s1 = cells.slope_right * length
    c2, c3 = 3.0 * rise - 2.0 * s0 - s1, s0 + s1 - 2.0 * rise
    low, high = np.zeros(f0.size), np.ones(f0.size)
    x = -f0 / rise
    for _ in range(_GUESSES):
        cubic = f0 + x * (s0 + x * (c2 + x * c3))
        before = (cubic < 0.0) == (f0 < 0.0)
        low, high = np.where(before, x, low), np.where(before, high, x)
        with np.errstate(divide="ignore", invalid="ignore"):
            newton = x - cubic / (s0 + x * (2.0 * c2 + x * (3.0 * c3)))
        x = np.where((newton >= low) & (newton <= high), newton, 0.5 * (low + high))
    return x
