"""Any sky event of a claim as one table of epochs: which search answers which model."""

from __future__ import annotations

from typing import Literal

import numpy as np
import pandas as pd

from epochtest.sky.atlas import find_lineups, select_aspect
from epochtest.sky.eclipses import find_eclipses
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.events import epoch_table, find_epochs
from epochtest.sky.groupings import find_groupings
from epochtest.sky.moon import (
    find_declination_extremes,
    find_node_passages,
    find_perigean_springs,
    find_standstills,
)
from epochtest.sky.planets import find_greatest_elongations, find_stations
from epochtest.sky.seasons import find_apsides, find_seasons
from epochtest.sky.separation import find_separation_minima
from epochtest.study.events import (
    Apsis,
    Body,
    ComputedEvent,
    Eclipse,
    GreatestElongation,
    Grouping,
    LineUp,
    LongitudeDifference,
    LunarDeclination,
    LunarNode,
    LunarStandstill,
    PerigeanSpringTide,
    Season,
    SeparationMinimum,
    Station,
)
from epochtest.study.words import body_in_words

ECLIPSED: dict[str, Literal["solar", "lunar"]] = {"sun": "solar", "moon": "lunar"}


def find_event(
    event: ComputedEvent, ephemeris: Ephemeris, from_utc: np.datetime64, to_utc: np.datetime64
) -> pd.DataFrame:
    """Every epoch of ``event`` with ``from_utc <= time < to_utc``, sorted by time.

    Columns as `events.find_epochs`: ``time_utc``, ``tdb_days``, ``label``, ``separation_deg``
    (of a separation minimum or grouping its angle or width), ``distance_km`` (of the Moon, or of
    a planet from the Sun at an apsis); NaN where the event has no such number. Line-ups have
    ``middle`` and ``out_of_plane_deg`` too (`atlas.find_lineups`). Raises
    EphemerisSpanError outside the kernel and ProtocolError for bodies that cannot be.
    """
    span = (from_utc, to_utc)
    match event:
        case LongitudeDifference(aspect=str(aspect), frame="geometric-J2000"):
            return _aspect(event, aspect, find_lineups(ephemeris, _three(event), *span))
        case LineUp():
            table = find_lineups(ephemeris, event.bodies, *span)
            if event.middle is not None:
                table = table[table["middle"] == event.middle]
            names = table[["first", "middle", "last"]].to_numpy()
            found = _epochs(table, [f"line-up {'-'.join(row)}" for row in names])
            return found.assign(
                middle=table["middle"].to_numpy(),
                out_of_plane_deg=table["out_of_plane_deg"].to_numpy(),
            )
        case SeparationMinimum():
            table = find_separation_minima(
                ephemeris, event.centre, event.bodies, event.below_deg, *span
            )
            label = f"closest {' and '.join(event.bodies)}"
            return _epochs(table, label, separation="separation_deg")
        case Grouping():
            table = find_groupings(
                ephemeris,
                event.centre,
                event.bodies,
                event.below_deg,
                *span,
                along_line=event.along_line,
            )
            return _epochs(table, f"grouping of {len(event.bodies)}", separation="width_deg")
        case Eclipse():
            table = find_eclipses(ephemeris, ECLIPSED[event.of], *span)
            if event.types:
                table = table[table["type"].isin(event.types)]
            return _epochs(table, table["type"] + f" eclipse of the {event.of.capitalize()}")
        case LunarNode():
            table = _kept(find_node_passages(ephemeris, *span), "node", event.passage)
            return _epochs(table, table["node"] + " node", distance="distance_km")
        case LunarDeclination():
            table = find_declination_extremes(ephemeris, *span)
            table = _kept(table, "extreme", event.extreme)
            return _epochs(table, "Moon farthest " + table["extreme"], distance="distance_km")
        case LunarStandstill():
            table = _kept(find_standstills(ephemeris, *span), "standstill", event.size)
            return _epochs(table, table["standstill"] + " standstill", distance="distance_km")
        case PerigeanSpringTide():
            table = find_perigean_springs(ephemeris, *span, within_hours=event.within_hours)
            return _epochs(table, table["phase"] + " near perigee", distance="distance_km")
        case Season():
            table = find_seasons(ephemeris, *span)
            named = table["season"].str.lower().str.replace(" ", "-")
            table = table[named.isin(event.instants)]
            return _epochs(table, table["season"])
        case Apsis():
            table = _kept(find_apsides(ephemeris, event.body, *span), "apsis", event.extreme)
            name = body_in_words(event.body)
            return _epochs(table, table["apsis"] + f" of {name}", distance="distance_km")
        case Station():
            table = find_stations(ephemeris, event.body, *span)
            if event.turns != "either":
                table = table[table["station"] == f"turns {event.turns}"]
            return _epochs(table, body_in_words(event.body) + " " + table["station"])
        case GreatestElongation():
            table = find_greatest_elongations(ephemeris, event.body, *span)
            table = _kept(table, "side", event.side)
            name = body_in_words(event.body)
            sides = f"{name} at greatest elongation " + table["side"]
            return _epochs(table, sides, separation="elongation_deg")
        case _:
            return find_epochs(event, ephemeris, *span)


def _three(event: LongitudeDifference) -> tuple[Body, Body, Body]:
    return (event.centre, *event.bodies)


def _aspect(
    event: LongitudeDifference, aspect: Literal["conjunction", "opposition"], atlas: pd.DataFrame
) -> pd.DataFrame:
    """A conjunction or opposition seen from a centre: a selection of the line-ups of the three."""
    table = select_aspect(atlas, event.centre, event.bodies, aspect)
    pair = "-".join(body.capitalize() for body in event.bodies)
    found = _epochs(table, f"{pair} {aspect} seen from {body_in_words(event.centre)}")
    if aspect == "opposition":
        return found.assign(separation_deg=180.0 - table["miss_from_middle_deg"].to_numpy())
    centre_first = (table["first"] == event.centre).to_numpy()
    misses = table["miss_from_first_deg"], table["miss_from_last_deg"]
    return found.assign(separation_deg=np.where(centre_first, *misses))


def _kept(table: pd.DataFrame, column: str, wanted: str) -> pd.DataFrame:
    return table if wanted == "either" else table[table[column] == wanted]


def _epochs(
    table: pd.DataFrame,
    labels: pd.Series | list[str] | str,
    separation: str | None = None,
    distance: str | None = None,
) -> pd.DataFrame:
    nothing = np.full(len(table), np.nan)
    named = [labels] * len(table) if isinstance(labels, str) else [str(label) for label in labels]
    return epoch_table(
        table["time_utc"].to_numpy(),
        table["tdb_days"].to_numpy(),
        named,
        nothing if separation is None else table[separation].to_numpy(dtype=float),
        nothing if distance is None else table[distance].to_numpy(dtype=float),
    )
