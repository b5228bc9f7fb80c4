"""Eclipses of the Sun and the Moon: greatest eclipse, type, gamma and magnitude.

                                    axis passes north of the centre: gamma > 0
      Sun  ___________________________________________ ->
                     Moon           _ |
                                  /   | gamma
                                 | Earth
                                  \\_ _/

Greatest eclipse is the instant when the axis of the shadow is nearest to its mark: the axis of
the Moon's shadow to the Earth's centre (solar; Bessel's method, Explanatory Supplement 2013,
ch. 11), the Moon's centre to the axis of the Earth's shadow (lunar). ``gamma`` is that distance
in equatorial radii of the Earth, positive where the axis passes north of the Earth's centre, or
the Moon north of the axis. Directions are apparent and geocentric (light-time, aberration).
Lengths are light-time distances: at new and full Moon, where the line of sight is square to the
Earth's motion, they are the Moon's distance from the Earth within a kilometre. Positions are those
of the centres of mass; the Moon's centre of figure lies up to 0.5" from it.

Solar magnitudes and types are seen from the point of the Earth's ellipsoid that is on the axis,
or nearest to it, found in space stretched along the poles until the Earth is a sphere: straight
lines stay straight, so on the axis that is exact; beside it the point is off by under 1e-5 radii.

Every eclipse is searched near a conjunction or opposition in longitude with a latitude small
enough for one (1.6 degrees at the most; Meeus 1998, ch. 54, gives the limits of the node).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Literal, NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.directions import (
    Values,
    apparent_ecliptic,
    apparent_equatorial_vectors,
    apparent_vectors,
    longitude_difference_deg,
    separation_deg,
)
from epochtest.sky.ephemeris import Ephemeris, Vectors
from epochtest.sky.events import PERIOD_DAYS, STEPS_PER_PERIOD_DIRECT, search_span
from epochtest.sky.instants import instants_table, one_series, rate_per_day
from epochtest.sky.search import Series, find_roots, search_grid, wrap_deg
from epochtest.timescale import Days

Eclipsed = Literal["solar", "lunar"]
Shadow = Literal["danjon", "chauvenet"]

EARTH_RADIUS_KM = 6378.1366  # equatorial, IERS Conventions 2010
EARTH_FLATTENING = 1.0 / 298.25642  # the same
SUN_RADIUS_KM = 149597870.7 * np.sin(np.radians(959.63 / 3600.0))  # Auwers 1891, in use since
# Moon's radius in radii of the Earth. The mean limb (IAU 1982) makes partial eclipses; the
# smaller one, valleys of the limb, total and annular ones: nobody calls an eclipse total while
# the Sun shines through the valleys (common practice).
MOON_RADIUS_MEAN = 0.2725076
MOON_RADIUS_VALLEYS = 0.2722810

# Radius of the Earth that casts the shadow, in equatorial radii, and the factor on the whole.
# Danjon (1951): air of 75 km, 1/85, less the flattening at 45 degrees, 1/594, on the parallax.
# Chauvenet (1863): the radius at 45 degrees, and 1/50 on the radii of umbra and penumbra.
_SHADOW: dict[str, tuple[float, float]] = {
    "danjon": (1.0 + 1.0 / 85.0 - 1.0 / 594.0, 1.0),
    "chauvenet": (0.998340, 1.02),
}
_LATITUDE_LIMIT_DEG = 1.7
_REACH_DAYS = 0.25  # greatest eclipse is within half an hour of the conjunction
_HALF_STEP_DAYS = 5e-4
_PATH_REACH_DAYS = 0.125  # the axis crosses the Earth in four hours at the most
_PATH_POINTS = 33
_HOUR = 1.0 / 24.0


def find_eclipses(
    ephemeris: Ephemeris,
    kind: Eclipsed,
    from_utc: np.datetime64,
    to_utc: np.datetime64,
    *,
    shadow: Shadow = "danjon",
) -> pd.DataFrame:
    """Every eclipse with ``from_utc <= greatest eclipse < to_utc``, anywhere on Earth, sorted.

    Columns of both kinds: ``time_utc`` (datetime64[us], naive UTC), ``tdb_days`` (TDB since
    J2000.0), ``type``, ``gamma_earth_radii``. Then

    - solar: ``type`` is partial, annular, total or hybrid (total in one part of the central path
      and annular in another); ``central``, whether the axis meets the ground; ``magnitude``,
      at the point nearest to the axis: of central eclipses the ratio of the diameters Moon to
      Sun, of others the share of the Sun's diameter that the Moon reaches over;
    - lunar: ``type`` is penumbral, partial or total; ``umbral_magnitude`` and
      ``penumbral_magnitude``, the share of the Moon's diameter within either shadow at greatest
      eclipse (an umbral one below zero: how far it stays outside). ``shadow`` names the
      enlargement of the Earth's shadow by the air: "danjon" (1951) or "chauvenet" (1863; 1/50).
      Umbral magnitudes by the second are larger by about 0.005, penumbral ones by 0.026, and
      with them the faintest eclipses come and go. ``attrs["shadow"]`` keeps the name.

    Raises ProtocolError for another kind or shadow, EphemerisSpanError outside the kernel.
    """
    if kind not in ("solar", "lunar"):
        raise ProtocolError(f"there is no eclipse of kind {kind!r}; give 'solar' or 'lunar'.")
    if shadow not in _SHADOW:
        raise ProtocolError(
            f"there is no shadow enlargement {shadow!r}; give one of {', '.join(_SHADOW)}."
        )
    span = search_span(ephemeris, from_utc, to_utc)
    days = _nearest_passages(ephemeris, kind, span.first_days, span.last_days)
    place = _place(ephemeris, days)
    if kind == "solar":
        kept, columns = _solar(ephemeris, days, place)
    else:
        kept, columns = _lunar(place, shadow)
    table = instants_table(span, days[kept], **columns)
    if kind == "lunar":
        table.attrs["shadow"] = shadow
    return table


class _Place(NamedTuple):
    """Moon and Sun (3, n) from the Earth's centre, km, true equator of date."""

    moon: Vectors
    sun: Vectors

    def shadow_direction(self) -> Vectors:
        """Unit vectors (3, n) along the Moon's shadow."""
        return _unit(self.moon - self.sun)

    def solar_foot(self) -> Vectors:
        """The point (3, n) of the axis of the Moon's shadow nearest to the Earth's centre."""
        return _across(self.moon, self.shadow_direction())

    def lunar_foot(self) -> Vectors:
        """The Moon (3, n) from the nearest point of the axis of the Earth's shadow."""
        return _across(self.moon, _unit(self.sun))


def _place(ephemeris: Ephemeris, days: Days) -> _Place:
    return _Place(*apparent_equatorial_vectors(ephemeris, ("moon", "sun"), days))


def _unit(vectors: Vectors) -> Vectors:
    unit: Vectors = vectors / np.linalg.norm(vectors, axis=0)
    return unit


def _across(vectors: Vectors, axis: Vectors) -> Vectors:
    """The part of ``vectors`` (3, n) at right angles to the unit vectors ``axis`` (3, n)."""
    part: Vectors = vectors - (vectors * axis).sum(axis=0) * axis
    return part


def _nearest_passages(ephemeris: Ephemeris, kind: Eclipsed, first: float, last: float) -> Days:
    """Instants (n,) in [first, last] when the axis is nearest to its mark, eclipse or none."""
    turn_deg = 0.0 if kind == "solar" else 180.0

    def from_syzygy(days: Days, _series: Series) -> Days:
        seen = apparent_vectors(ephemeris, ("moon", "sun"), days)
        return wrap_deg(longitude_difference_deg(*seen) - turn_deg)

    grid = search_grid(first, last, PERIOD_DAYS["moon"] / STEPS_PER_PERIOD_DIRECT)
    syzygies = find_roots(
        from_syzygy, grid, from_syzygy(grid, one_series(grid)), tolerance_days=1e-4
    ).days
    low = np.abs(apparent_ecliptic(ephemeris, "moon", syzygies)[1]) < _LATITUDE_LIMIT_DEG
    # A greatest eclipse in the span may belong to a syzygy just outside it.
    ends = np.array([first, last])
    ends = ends[np.abs(from_syzygy(ends, one_series(ends))) < 5.0] if grid.size else ends[:0]
    middles = np.concatenate((syzygies[low], ends))
    left, right = np.maximum(middles - _REACH_DAYS, first), np.minimum(middles + _REACH_DAYS, last)

    def squared_km2(days: Days) -> Days:
        place = _place(ephemeris, days)
        foot = place.solar_foot() if kind == "solar" else place.lunar_foot()
        square: Days = (foot * foot).sum(axis=0)
        return square

    def approach(share: Days, series: Series) -> Days:
        days = left[series] + share * (right[series] - left[series])
        return rate_per_day(squared_km2, days, ephemeris, _HALF_STEP_DAYS)

    share, series, rising = _roots_in_parts(approach, middles.size)
    days = np.sort((left[series] + share * (right[series] - left[series]))[rising])
    fresh = np.diff(days, prepend=-np.inf) > _HOUR  # an end of the span may repeat a syzygy
    return days[fresh]


def _roots_in_parts(
    function: Callable[[Days, Series], Days], parts: int
) -> tuple[Days, Series, NDArray[np.bool_]]:
    """Roots of ``function`` (share 0..1 of its part, part) in every one of ``parts`` parts."""
    grid = search_grid(0.0, 1.0, 0.25)
    series = np.repeat(np.arange(parts), grid.size)
    samples = function(np.tile(grid, parts), series).reshape(parts, grid.size)
    return find_roots(function, grid, samples, angle=False)


def _solar(
    ephemeris: Ephemeris, days: Days, place: _Place
) -> tuple[NDArray[np.bool_], dict[str, Values]]:
    """Which passages are solar eclipses, and the columns of those."""
    ground, central = _ground(place)
    sun_deg, mean_deg, valleys_deg, apart_deg = _discs(place, ground)
    within = apart_deg < np.abs(valleys_deg - sun_deg)
    kept = sun_deg + mean_deg > apart_deg
    moon_deg = np.where(within, valleys_deg, mean_deg)
    covered = (sun_deg + moon_deg - apart_deg) / (2.0 * sun_deg)
    kinds = np.where(valleys_deg > sun_deg, "total", "annular").astype(object)
    kinds[~within & ~central] = "partial"
    largest, smallest = _excess_on_path(ephemeris, days[central])
    on_path = np.where(largest > 0.0, "total", "annular").astype(object)
    on_path[(largest > 0.0) & (smallest < 0.0)] = "hybrid"
    kinds[central] = on_path
    foot = place.solar_foot()
    magnitude = np.where(central, valleys_deg / sun_deg, covered)
    return kept, {
        "type": kinds[kept],
        "central": central[kept],
        "gamma_earth_radii": _gamma(foot)[kept],
        "magnitude": magnitude[kept],
    }


def _gamma(foot: Vectors) -> Values:
    gamma: Values = np.copysign(np.linalg.norm(foot, axis=0), foot[2]) / EARTH_RADIUS_KM
    return gamma


def _stretched(place: _Place) -> tuple[Vectors, Vectors]:
    """Foot of the axis and its direction (not of length 1) where the Earth is a sphere."""
    stretch = np.array([[1.0], [1.0], [1.0 / (1.0 - EARTH_FLATTENING)]])
    along = stretch * place.shadow_direction()
    return _across(stretch * place.moon, _unit(along)), along


def _ground(place: _Place) -> tuple[Vectors, NDArray[np.bool_]]:
    """Point (3, n) of the ground on the axis or nearest to it, km; and whether it is on it."""
    foot, along = _stretched(place)
    square = (foot * foot).sum(axis=0)
    inside = EARTH_RADIUS_KM**2 - square
    on_axis = foot - np.sqrt(np.maximum(inside, 0.0)) * _unit(along)
    point = np.where(inside >= 0.0, on_axis, foot * (EARTH_RADIUS_KM / np.sqrt(square)))
    point[2] *= 1.0 - EARTH_FLATTENING
    return point, inside >= 0.0


def _discs(place: _Place, ground: Vectors) -> tuple[Values, Values, Values, Values]:
    """Radii of the Sun and of the Moon (mean, valleys) from ``ground``, their distance; deg."""
    moon, sun = place.moon - ground, place.sun - ground
    moon_km, sun_km = np.linalg.norm(moon, axis=0), np.linalg.norm(sun, axis=0)
    return (
        np.degrees(np.arcsin(SUN_RADIUS_KM / sun_km)),
        np.degrees(np.arcsin(MOON_RADIUS_MEAN * EARTH_RADIUS_KM / moon_km)),
        np.degrees(np.arcsin(MOON_RADIUS_VALLEYS * EARTH_RADIUS_KM / moon_km)),
        separation_deg(moon, sun),
    )


def _excess_on_path(ephemeris: Ephemeris, days: Days) -> tuple[Values, Values]:
    """Largest and smallest radius of the Moon less that of the Sun along each central path, deg.

    The path is followed from sunrise to sunset, within the kernel.
    """
    lowest, highest = ephemeris.covered_tdb_days
    left = np.maximum(days - _PATH_REACH_DAYS, lowest)
    right = np.minimum(days + _PATH_REACH_DAYS, highest)

    def above_ground(share: Days, series: Series) -> Days:
        instants = left[series] + share * (right[series] - left[series])
        foot, _ = _stretched(_place(ephemeris, instants))
        height: Days = np.linalg.norm(foot, axis=0) - EARTH_RADIUS_KM
        return height

    share, series, rising = _roots_in_parts(above_ground, days.size)
    instants = left[series] + share * (right[series] - left[series])
    begin, end = left.copy(), right.copy()
    begin[series[~rising]], end[series[rising]] = instants[~rising], instants[rising]
    path = begin + np.linspace(0.0, 1.0, _PATH_POINTS)[:, None] * (end - begin)
    place = _place(ephemeris, path.ravel())
    sun_deg, _, valleys_deg, _ = _discs(place, _ground(place)[0])
    excess = (valleys_deg - sun_deg).reshape(path.shape)
    if days.size == 0:
        return np.empty(0), np.empty(0)
    return excess.max(axis=0), excess.min(axis=0)


def _lunar(place: _Place, shadow: Shadow) -> tuple[NDArray[np.bool_], dict[str, Values]]:
    """Which passages are lunar eclipses, and the columns of those."""
    radius, factor = _SHADOW[shadow]
    moon_km, sun_km = np.linalg.norm(place.moon, axis=0), np.linalg.norm(place.sun, axis=0)
    moon_parallax = np.degrees(np.arcsin(EARTH_RADIUS_KM / moon_km))
    sun_parallax = np.degrees(np.arcsin(EARTH_RADIUS_KM / sun_km))
    moon_deg = np.degrees(np.arcsin(MOON_RADIUS_MEAN * EARTH_RADIUS_KM / moon_km))
    sun_deg = np.degrees(np.arcsin(SUN_RADIUS_KM / sun_km))
    from_axis_deg = separation_deg(place.moon, -place.sun)
    umbra_deg = factor * (radius * moon_parallax + sun_parallax - sun_deg)
    penumbra_deg = factor * (radius * moon_parallax + sun_parallax + sun_deg)
    umbral = (umbra_deg + moon_deg - from_axis_deg) / (2.0 * moon_deg)
    penumbral = (penumbra_deg + moon_deg - from_axis_deg) / (2.0 * moon_deg)
    kinds = np.where(umbral >= 1.0, "total", np.where(umbral > 0.0, "partial", "penumbral"))
    kept = penumbral > 0.0
    return kept, {
        "type": kinds.astype(object)[kept],
        "gamma_earth_radii": _gamma(place.lunar_foot())[kept],
        "umbral_magnitude": umbral[kept],
        "penumbral_magnitude": penumbral[kept],
    }
