"""All roots of wrapped angle differences on a shared grid, refined together.

    difference
      +180 ...............  a jump from +180 to -180 is no root: both ends of a
                          /|  true bracket lie within 90 degrees of zero
                         / |
         0 ----o----------------------o----o-----------
              /           /|         /  ^^ \\
             /            / |       /       \\
      -180 ................

    The station trap. Near a retrograde station the difference turns round. Between two
    grid points (x) it may rise above zero and fall again, and no sign changes on the grid:

                       ,-o-.            o  the two roots
         0 -----------o-----o--------   top: the extremum
                     /       \\
          x---------x         x------   x  the grid

    So every grid triple with a turn towards zero is searched for its extremum first; if that
    lies beyond zero it splits its cell into two brackets, one per root.

What the grid must promise: less than 90 degrees of change, and at most one turn, per step.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from epochtest.timescale import Days

Series = NDArray[np.intp]
Difference = Callable[[Days, Series], Days]
"""Values (m,) of the searched functions at instants (m,), each of the series named in (m,)."""

HALF_TURN_DEG = 180.0
TOLERANCE_DAYS = 1e-9  # 0.1 ms; the float64 spacing of days is 0.003 ms in 1550 and 2650
_EDGE = 1e-3  # extra grid points this share of a step inside both ends
_MOST_PASSES = 60  # a bracket of 100 days halved 37 times is below the tolerance


class Roots(NamedTuple):
    """Roots of all series, sorted by instant: ``days`` (r,), ``series`` (r,), ``rising`` (r,).

    ``rising`` is true where the function goes from negative to positive.
    """

    days: Days
    series: Series
    rising: NDArray[np.bool_]


class Brackets(NamedTuple):
    """Intervals (m,) in days with values of opposite sign (or zero) at their ends."""

    left: Days
    right: Days
    at_left: Days
    at_right: Days
    series: Series


def wrap_deg(angle_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    """Angles moved into [-180, 180)."""
    wrapped: NDArray[np.float64] = (np.asarray(angle_deg) + HALF_TURN_DEG) % 360.0 - HALF_TURN_DEG
    return wrapped


def search_grid(first_days: float, last_days: float, step_days: float) -> Days:
    """Grid (n,) from ``first_days`` to ``last_days``, both included, steps of at most the given.

    One more point stands close to either end, so that a turn inside the first or the last cell
    shows as a triple like any other. Empty if the interval is.
    """
    if not last_days > first_days:
        return np.empty(0)
    cells = max(2, int(np.ceil((last_days - first_days) / step_days)))
    grid = np.linspace(first_days, last_days, cells + 1)
    edge = _EDGE * (grid[1] - grid[0])
    return np.concatenate((grid[:1], [grid[0] + edge], grid[1:-1], [grid[-1] - edge], grid[-1:]))


def find_roots(
    function: Difference,
    grid_days: Days,
    samples: NDArray[np.float64],
    *,
    angle: bool = True,
    tolerance_days: float = TOLERANCE_DAYS,
) -> Roots:
    """Every root of every series between the ends of the grid.

    ``samples`` (k, n) or (n,) are the values of the k series on ``grid_days`` (n,), as from
    `search_grid`. With ``angle`` the values are degrees on the circle and zero means zero
    modulo 360; without, they are plain numbers. Time grows as k n for the scan and, for the
    refinement, as the number of roots; there is no loop over roots.
    """
    table = np.atleast_2d(np.asarray(samples, dtype=float))
    table = wrap_deg(table) if angle else table

    def value(days: Days, series: Series) -> Days:
        raw = function(days, series)
        return wrap_deg(raw) if angle else raw

    zero_series, zero_column = np.nonzero(table == 0.0)
    on_grid = Roots(grid_days[zero_column], zero_series, _rises(table, zero_series, zero_column))
    brackets = _sign_changes(grid_days, table, angle)
    turned, touching = _beyond_stations(value, grid_days, table, angle, tolerance_days)
    brackets = Brackets(*(np.concatenate(pair) for pair in zip(brackets, turned, strict=True)))
    refined = refine(value, brackets, tolerance_days)
    inside = Roots(refined, brackets.series, brackets.at_right > brackets.at_left)
    together = [np.concatenate(parts) for parts in zip(on_grid, inside, touching, strict=True)]
    order = np.lexsort((together[1], together[0]))
    return Roots(*(part[order] for part in together))


def _rises(table: NDArray[np.float64], series: Series, column: Series) -> NDArray[np.bool_]:
    """Whether each series rises at a grid point where it is exactly zero."""
    before = table[series, np.maximum(column - 1, 0)]
    after = table[series, np.minimum(column + 1, table.shape[1] - 1)]
    rising: NDArray[np.bool_] = after > before
    return rising


def _sign_changes(grid: Days, table: NDArray[np.float64], angle: bool) -> Brackets:
    left, right = table[:, :-1], table[:, 1:]
    changes = left * right < 0.0
    if angle:
        changes &= np.abs(left - right) < HALF_TURN_DEG
    series, column = np.nonzero(changes)
    return Brackets(
        grid[column], grid[column + 1], table[series, column], table[series, column + 1], series
    )


def _beyond_stations(
    value: Difference, grid: Days, table: NDArray[np.float64], angle: bool, tolerance: float
) -> tuple[Brackets, Roots]:
    """Brackets on both sides of every turn that crosses zero within a cell, and mere touches."""
    steps = np.diff(table, axis=1)
    steps = wrap_deg(steps) if angle else steps
    before, after, middle = steps[:, :-1], steps[:, 1:], table[:, 1:-1]
    # A crest below zero or a trough above it. On an even grid a parabola's crest stands at most
    # 1/8 of the larger neighbouring step beyond the middle point; 1 is asked for safety. The
    # uneven triples at the ends are always looked into.
    turns = ((before > 0.0) & (after <= 0.0) & (middle < 0.0)) | (
        (before < 0.0) & (after >= 0.0) & (middle > 0.0)
    )
    near = np.abs(middle) <= np.maximum(np.abs(before), np.abs(after))
    reach = HALF_TURN_DEG / 2 if angle else np.inf
    for end in (slice(None, 2), slice(-2, None)):
        near[:, end] = np.abs(middle[:, end]) < reach
    series, column = np.nonzero(turns & near)
    column = column + 1
    if series.size == 0:
        none = np.empty(0)
        return (
            Brackets(none, none, none, none, series),
            Roots(none, series, np.empty(0, dtype=bool)),
        )
    side = np.sign(table[series, column])
    instant, turn = _extrema(
        value, (grid[column - 1], grid[column], grid[column + 1]), series, side, tolerance
    )
    crosses, touches = turn * side < 0.0, turn == 0.0
    touching = Roots(instant[touches], series[touches], side[touches] < 0.0)
    series, column = series[crosses], column[crosses]
    instant, turn = instant[crosses], turn[crosses]
    start = np.where(instant < grid[column], column - 1, column)
    twice = Brackets(
        np.concatenate((grid[start], instant)),
        np.concatenate((instant, grid[start + 1])),
        np.concatenate((table[series, start], turn)),
        np.concatenate((turn, table[series, start + 1])),
        np.concatenate((series, series)),
    )
    return twice, touching


def _extrema(
    value: Difference,
    triple: tuple[Days, Days, Days],
    series: Series,
    side: Days,
    tolerance: float,
) -> tuple[Days, Days]:
    """Instants and values of the extrema in the triples: minima where ``side`` is positive."""
    from scipy.optimize import elementwise  # 0.9 s to import, and seldom needed

    def towards_zero(days: Days, which: Series, sign: Days) -> Days:
        return sign * value(days, which.astype(np.intp))

    found = elementwise.find_minimum(
        towards_zero,
        triple,
        args=(series, side),
        tolerances={"xatol": tolerance, "xrtol": 0.0, "fatol": 0.0, "frtol": 0.0},
    )
    return np.asarray(found.x), side * np.asarray(found.f_x)


def refine(
    value: Difference,
    brackets: Brackets,
    tolerance: float,
    first_guess: NDArray[np.float64] | None = None,
) -> Days:
    """Roots (m,) in days, to ``tolerance`` days, of all brackets at once by Chandrupatla's method.

    ``first_guess`` (m,) says where to look first, from 0 at the left end to 1 at the right one
    (default: on the secant).

    Chandrupatla (1997), Adv. Eng. Softw. 28:145: inverse quadratic interpolation where the
    three points look smooth, bisection elsewhere; the root stays bracketed.
    """
    b, fb = brackets.left.copy(), brackets.at_left.copy()
    a, fa = brackets.right.copy(), brackets.at_right.copy()
    c, fc = a.copy(), fa.copy()
    share = fb / (fb - fa) if first_guess is None else first_guess
    best = np.where(np.abs(fa) < np.abs(fb), a, b)
    live = np.arange(best.size)
    for _ in range(_MOST_PASSES):
        if live.size == 0:
            break
        series = brackets.series[live]
        x = b + share * (a - b)
        fx = value(x, series)
        same = np.sign(fx) == np.sign(fb)
        # b is always the newest point, a the other end of the bracket, c the point before.
        c, fc = np.where(same, b, a), np.where(same, fb, fa)
        a, fa = np.where(same, a, b), np.where(same, fa, fb)
        b, fb = x, fx
        nearer = np.abs(fa) < np.abs(fb)
        best[live] = np.where(nearer, a, b)
        width = np.abs(a - b)
        smallest = np.minimum(0.5, tolerance / np.where(width > 0.0, width, 1.0))
        going = (smallest < 0.5) & (fb != 0.0) & (width > 0.0)
        with np.errstate(divide="ignore", invalid="ignore"):
            xi, phi = (b - a) / (c - a), (fb - fa) / (fc - fa)
            smooth = (phi * phi < xi) & ((1.0 - phi) ** 2 < 1.0 - xi)
            quadratic = fb / (fb - fa) * fc / (fc - fa)
            quadratic += (c - b) / (a - b) * fb / (fc - fb) * fa / (fc - fa)
        share = np.where(smooth, quadratic, 0.5)
        share = np.clip(share, smallest, 1.0 - smallest)
        live, share = live[going], share[going]
        a, b, c, fa, fb, fc = (part[going] for part in (a, b, c, fa, fb, fc))
    return best
