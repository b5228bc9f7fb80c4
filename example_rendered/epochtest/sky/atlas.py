"""Line-up atlas: every instant at which three bodies stand on one line, for many triples at once.

On a line means: in the projection on the ecliptic of J2000, where the signed area of the
triangle of the three bodies goes through zero. That is the same thing as a conjunction or an
opposition of two of them seen from the third, from whichever of the three one looks; so the
atlas holds the events of every centre, each once.

Positions are computed once per body, on a grid fine enough for the fastest body of all. Triples
without it use every 2nd, 4th, 8th ... point of that grid, as their own fastest body allows. All
cells in which a root may lie go to `epochtest.sky.slope_search` together. The span is worked
through in chunks, so that memory grows with the number of line-ups only.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations
from typing import Literal, NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import LONGEST_STEP_DAYS, PERIOD_DAYS, search_span
from epochtest.sky.lineup_geometry import (
    BODIES,
    Triples,
    cross,
    cross_rate,
    flat_state,
    require_bodies,
)
from epochtest.sky.search import Series
from epochtest.sky.slope_search import Cells, roots_in_cells, together, undecided_cells
from epochtest.study.events import Body
from epochtest.timescale import Days, utc_from_tdb_days

Values = NDArray[np.float64]

SUN_AND_PLANETS: tuple[Body, ...] = tuple(b for b in BODIES if b not in ("moon", "pluto"))
STEPS_PER_PERIOD = 16  # of the fastest body: 5.5 days for Mercury; 8 find the same line-ups
CHUNK_POINTS = 8192  # of the finest grid: 11 bodies are 2.9 MB, a triple of them 0.1 MB
Triple = tuple[Body, Body, Body]


def find_lineups(
    ephemeris: Ephemeris,
    bodies: Sequence[Body],
    from_utc: np.datetime64 | str,
    to_utc: np.datetime64 | str,
    triples: Sequence[Triple] | None = None,
) -> pd.DataFrame:
    """Every line-up of three among ``bodies`` with ``from_utc <= time < to_utc``, by time.

    ``triples`` limits the search to those named (default: all; `SUN_AND_PLANETS` make 84).
    Geometric places at one instant (no light-time), instants good to 0.1 ms of the ephemeris.
    One row per line-up:

    - ``time_utc`` (datetime64[us], naive UTC), ``tdb_days`` (days of TDB since J2000.0);
    - ``middle``, the body between the two others, and ``first`` and ``last``, the two ends in
      the order of `BODIES` (names);
    - ``out_of_plane_deg``: with b_f and b_l the J2000 ecliptic latitudes of the first and of the
      last body as seen from the middle one, -(b_f + b_l). Positive: the middle body is north of
      the straight line between the ends. The bend of the line at the middle body;
    - ``miss_from_first_deg``, ``miss_from_last_deg``: true angle between the directions to the
      two other bodies, as seen from an end; ``miss_from_middle_deg``: 180 degrees minus the true
      angle between the directions to the ends. The first two add up to the third, and this is
      the size of ``out_of_plane_deg``, because the three bodies and the pole of the ecliptic lie
      in one plane;
    - ``distance_first_middle_au``, ``distance_middle_last_au``: true distances.

    Time grows with the span (times the steps of the fastest body), memory with the rows: about
    100 bytes each. Raises EphemerisSpanError outside the kernel, ProtocolError for bodies or
    triples that cannot be.
    """
    named, numbers = _numbered(bodies, triples)
    span = search_span(ephemeris, from_utc, to_utc)
    found = [_nothing()]
    if len(numbers) and not span.empty:
        system = Triples(ephemeris, named, numbers)
        grids = _nested_grids(named, numbers, span.first_days, span.last_days)
        for chunk in grids.chunks():
            cells = _undecided(ephemeris, named, numbers, grids, chunk)
            roots = roots_in_cells(system.area, system.area_rate, cells)
            geometry = system.geometry(roots.days, roots.series)
            slots = np.take_along_axis(numbers[roots.series].T, geometry.order, axis=0)
            found.append(_Found(roots.days, slots.astype(np.int8), *geometry[1:]))
    return span.inside(_table(named, found))


def select_aspect(
    lineups: pd.DataFrame,
    centre: Body,
    pair: tuple[Body, Body],
    aspect: Literal["conjunction", "opposition"],
) -> pd.DataFrame:
    """The rows of an atlas that are this aspect of ``pair`` seen from ``centre``.

    Geometric, in ecliptic longitude of J2000. From an end the two others are in conjunction,
    from the middle in opposition. Raises ProtocolError for bodies that are not three.
    """
    require_bodies((centre, *pair))
    first, middle, last = (lineups[name] for name in ("first", "middle", "last"))
    if aspect == "opposition":
        chosen = (middle == centre) & first.isin(pair) & last.isin(pair)
    else:
        at_an_end = (first == centre) & last.isin(pair) | (last == centre) & first.isin(pair)
        chosen = at_an_end & middle.isin(pair)
    rows: pd.DataFrame = lineups[chosen.to_numpy(dtype=bool)]
    return rows.reset_index(drop=True)


class _Found(NamedTuple):
    """Line-ups (m,) of a chunk; ``slots`` (3, m) are numbers of the first, middle, last body."""

    days: Days
    slots: NDArray[np.int8]
    out_of_plane_deg: Values
    miss_deg: Values
    distance_au: Values


class _Grids(NamedTuple):
    """One grid; ``stride`` (t,) says which of its points each triple uses: every 1st, 2nd, 4th."""

    days: Days
    stride: Series

    def chunks(self) -> list[slice]:
        """Runs of points that share their ends and hold whole strides."""
        longest = int(self.stride.max())
        length = max(1, CHUNK_POINTS // longest) * longest
        return [slice(begin, begin + length + 1) for begin in range(0, self.days.size - 1, length)]


def _nested_grids(bodies: tuple[Body, ...], triples: Series, first: float, last: float) -> _Grids:
    period = np.array([PERIOD_DAYS.get(body, np.inf) for body in bodies])
    step = np.minimum(period[triples].min(axis=1) / STEPS_PER_PERIOD, LONGEST_STEP_DAYS)
    cells = int(np.ceil((last - first) / step.min()))
    stride = 2 ** np.log2(np.minimum(step / step.min(), cells)).astype(np.intp)
    longest = int(stride.max())
    cells = -(-cells // longest) * longest
    return _Grids(np.linspace(first, last, cells + 1), stride)


def _undecided(
    ephemeris: Ephemeris, bodies: tuple[Body, ...], triples: Series, grids: _Grids, chunk: slice
) -> Cells:
    """The cells of all triples in one chunk of the grid in which there may be a line-up."""
    days = grids.days[chunk]
    states = np.stack([flat_state(ephemeris, body, days) for body in bodies])
    found = []
    for stride in np.unique(grids.stride):
        used = np.nonzero(grids.stride == stride)[0]
        samples = np.empty((used.size, len(days[::stride])))
        slopes = np.empty_like(samples)
        for row, triple in enumerate(used):
            three = states[triples[triple], :, ::stride]
            samples[row] = cross(three[:, :2])
            slopes[row] = cross_rate(three[:, :2], three[:, 2:])
        found.append(undecided_cells(days[::stride], samples, slopes, used))
    return together(found)


def _nothing() -> _Found:
    none = np.empty(0)
    return _Found(none, np.empty((3, 0), dtype=np.int8), none, np.empty((3, 0)), np.empty((2, 0)))


def _table(bodies: tuple[Body, ...], found: list[_Found]) -> pd.DataFrame:
    days, slots, out_of_plane, miss, distance = (
        np.concatenate(parts, axis=-1) for parts in zip(*found, strict=True)
    )
    names = np.array(bodies, dtype=object)
    return pd.DataFrame(
        {
            "time_utc": utc_from_tdb_days(days).astype("datetime64[us]"),
            "tdb_days": days,
            **{
                place: pd.array(names[slot], dtype="str")
                for place, slot in zip(("first", "middle", "last"), slots, strict=True)
            },
            "out_of_plane_deg": out_of_plane,
            "miss_from_first_deg": miss[0],
            "miss_from_middle_deg": miss[1],
            "miss_from_last_deg": miss[2],
            "distance_first_middle_au": distance[0],
            "distance_middle_last_au": distance[1],
        }
    )


def _numbered(
    bodies: Sequence[Body], triples: Sequence[Triple] | None
) -> tuple[tuple[Body, ...], Series]:
    """The bodies from the Sun outwards, and the triples (t, 3) by their numbers, each once."""
    require_bodies(bodies)
    if len(bodies) < 3:
        raise ProtocolError(
            f"a line-up needs at least three bodies, but found {', '.join(bodies) or 'none'}."
        )
    named = tuple(body for body in BODIES if body in bodies)
    wanted: Sequence[Triple] = list(combinations(named, 3)) if triples is None else triples
    for triple in wanted:
        require_bodies(triple, named)
        if len(triple) != 3:
            raise ProtocolError(
                f"a line-up is of three bodies, but found {', '.join(triple) or 'none'}."
            )
    numbers = {tuple(sorted(map(named.index, triple))) for triple in wanted}
    return named, np.array(sorted(numbers), dtype=np.intp).reshape(-1, 3)
