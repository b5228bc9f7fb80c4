"""Groupings: every visit of n bodies to a narrow arc of ecliptic longitude.

By extrema and crossings, never by grid hits: `epochtest.sky.arcs` says how.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from epochtest.errors import ProtocolError
from epochtest.sky.arcs import ArcInstants, BodiesSeen, outside_visit, search_arc
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import OVERLAP_DAYS, PERIOD_DAYS
from epochtest.sky.search import Series, wrap_deg
from epochtest.study.events import Body
from epochtest.timescale import Days, tdb_days_from_utc, utc_from_tdb_days, utc_instant

SAME_EDGE_DEG = 1e-6  # bodies this near to the edge of the arc share it; roots are good to 2e-8


def find_groupings(
    ephemeris: Ephemeris,
    centre: Body,
    bodies: tuple[Body, ...],
    below_deg: float,
    from_utc: np.datetime64,
    to_utc: np.datetime64,
    *,
    along_line: bool = False,
    each_minimum: bool = False,
) -> pd.DataFrame:
    """Visits of n >= 3 bodies, seen from ``centre``, to an arc smaller than ``below_deg``.

    One row per visit whose tightest minimum lies in ``from_utc <= time < to_utc``, or with
    ``each_minimum`` one per local minimum there. Columns: ``time_utc`` (datetime64[us], naive
    UTC) and ``tdb_days`` (TDB since J2000.0) of the minimum, ``width_deg``; of its visit
    ``entered_utc``, ``left_utc``, ``duration_days``, ``minima`` (how many local minima, also
    outside the span asked for); at the minimum ``trailing_bodies``, ``leading_bodies`` (names on
    the edge of lesser and of greater longitude; "a+b" where a conjunction makes the minimum) and
    ``central_longitude_deg`` (in [0, 180) along a line). Visits are followed beyond the span to
    the ends of the kernel; one cut by those has NaT and NaN there, one that has no minimum
    inside the kernel no row. Instants are good to 0.1 ms of the ephemeris.

    Geometric directions, ecliptic of J2000. ``along_line`` takes longitudes modulo 180 degrees.
    Time and rows grow with the span, memory with the rows. Raises EphemerisSpanError outside the
    kernel, ProtocolError for bodies or a threshold that cannot be.
    """
    sky = BodiesSeen(ephemeris, centre, tuple(bodies), 2.0 if along_line else 1.0)
    _require_possible(centre, sky.bodies, below_deg, 180.0 / sky.fold)
    first_utc, last_utc = (utc_instant(edge) for edge in (from_utc, to_utc))
    ends = tdb_days_from_utc(np.array([first_utc, last_utc]))
    ephemeris.require(ends)
    if not first_utc < last_utc:
        return _table(sky, ArcInstants(*(np.empty(0) for _ in range(3))), each_minimum)
    lowest, highest = ephemeris.covered_tdb_days
    first = outside_visit(sky, max(ends[0] - OVERLAP_DAYS, lowest), lowest, below_deg)
    last = outside_visit(sky, min(ends[1] + OVERLAP_DAYS, highest), highest, below_deg)
    table = _table(sky, search_arc(sky, first, last, below_deg), each_minimum)
    time = table["time_utc"].to_numpy()
    inside: pd.DataFrame = table[(time >= first_utc) & (time < last_utc)]
    return inside.reset_index(drop=True)


def _table(sky: BodiesSeen, found: ArcInstants, each_minimum: bool) -> pd.DataFrame:
    """One row per visit, or per minimum, with its column types."""
    days = found.minima
    arc = sky.arc(days)
    visit = np.searchsorted(found.entered, days)  # how many entries lie before: 0 if none
    entered = np.concatenate(([np.nan], found.entered))[visit]
    left = np.append(found.left, np.nan)[np.searchsorted(found.left, days)]
    _, number, minima = np.unique(visit, return_inverse=True, return_counts=True)
    table = pd.DataFrame(
        {
            "time_utc": utc_from_tdb_days(days).astype("datetime64[us]"),
            "tdb_days": days,
            "width_deg": arc.width_deg,
            "entered_utc": utc_from_tdb_days(entered).astype("datetime64[us]"),
            "left_utc": utc_from_tdb_days(left).astype("datetime64[us]"),
            "duration_days": left - entered,
            "minima": minima[number].astype(np.int64),
            "trailing_bodies": pd.array(_on_edge(sky, arc.trailing, days), dtype="str"),
            "leading_bodies": pd.array(_on_edge(sky, arc.leading, days), dtype="str"),
            "central_longitude_deg": (arc.start_deg + arc.width_deg / 2.0) % (360.0 / sky.fold),
        }
    )
    if each_minimum:
        return table
    order = np.lexsort((table["width_deg"].to_numpy(), visit))
    _, first = np.unique(visit[order], return_index=True)
    return table.iloc[order[first]].reset_index(drop=True)


def _on_edge(sky: BodiesSeen, edge: Series, days: Days) -> list[str]:
    """Names of the bodies in conjunction with the one on the edge, itself included."""
    longitudes = sky.longitudes(days)
    apart = wrap_deg(sky.fold * (longitudes - np.take_along_axis(longitudes, edge[None], axis=0)))
    shared = np.abs(apart) < SAME_EDGE_DEG
    return ["+".join(np.array(sky.bodies)[column]) for column in shared.T]


def _require_possible(
    centre: Body, bodies: tuple[Body, ...], below_deg: float, widest_deg: float
) -> None:
    """Raise ProtocolError unless these bodies can be grouped within that arc."""
    shown = ", ".join(bodies) or "none"
    if unknown := [name for name in (centre, *bodies) if name != "sun" and name not in PERIOD_DAYS]:
        raise ProtocolError(
            f"{unknown[0]!r} is no body of the kernel; choose among sun, {', '.join(PERIOD_DAYS)}."
        )
    if len(set(bodies)) < len(bodies) or len(bodies) < 3:
        raise ProtocolError(
            f"a grouping needs at least three different bodies, but found {shown}; "
            "for two bodies use a longitude difference."
        )
    if centre in bodies:
        raise ProtocolError(
            f"{centre!r} is the centre and cannot be seen from itself; name another centre or "
            f"take it from the bodies {shown}."
        )
    if not 0.0 < below_deg <= widest_deg:
        raise ProtocolError(
            f"the arc is to be smaller than below_deg = {below_deg:g} degrees; give more than 0 "
            f"and at most {widest_deg:g} (half of the circle the longitudes are counted on)."
        )
