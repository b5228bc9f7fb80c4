"""Tidal stress around given instants at given places: series, daily amplitude, phase.

    stress          max                    phase is 0 at a maximum, -180 or +180 at the minima
    that           .-o-.                   beside it, and runs evenly in *time* within each half
    favours      .'     '.         .       cycle (Tanaka, Ohtake & Sato 2002, J. Geophys. Res.
    slip   '.  .'         '.     .'        107(B10):2211)
             oo             '-o-'
            -180   -90   0  +90 +180/-180

"Favours slip" is the Coulomb stress (or shear or normal stress, tension positive) on a plane
where a mechanism is known; else the volumetric strain, expansion positive.

The half cycles of a mixed tide are unequally long, so that random times do *not* give an even
phase on one plane (mean vector up to 0.08 long): compare with phases of shifted times.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from epochtest.errors import CatalogError, ProtocolError
from epochtest.sky.body_tide import (
    DEFAULT_ROCK,
    IERS_2010,
    OCEAN_LOADING_NOTE,
    SHALLOW_KM,
    TIDE_BODIES,
    LoveNumbers,
    Rock,
    SurfaceTensor,
    diurnal_correction,
    has_diurnal,
    strain_under,
    surface_stress,
    volumetric_strain,
)
from epochtest.sky.earth_fixed import (
    EARTH_RADIUS_M,
    geocentric_latitude_rad,
    local_windows_km,
    require_coordinates,
)
from epochtest.sky.ephemeris import Ephemeris
from epochtest.sky.fault import (
    DEFAULT_FRICTION,
    Mechanism,
    auxiliary_plane,
    horizontal_weights,
    required_friction,
)
from epochtest.sky.tide_potential import tide_parts
from epochtest.study.events import Body
from epochtest.timescale import Days, tdb_days_from_utc

Values = NDArray[np.float64]
Component = Literal["coulomb", "shear", "normal"]

_COLUMNS = (
    "volumetric_strain", "volumetric_phase_deg", "volumetric_amplitude",
    "plane1_pa", "plane1_phase_deg", "plane1_amplitude_pa",
    "plane2_pa", "plane2_phase_deg", "plane2_amplitude_pa",
)  # fmt: skip
_KNOT = 1e-9  # share of a step within which an extremum lies on a sample
HALF_LUNAR_DAY_HOURS = 12.42  # the daily amplitude is taken within this of the instant


@dataclass(frozen=True)
class TidalModel:
    """Everything a tidal stress depends on besides place and time.

    ``friction`` is effective and applies to the Coulomb stress. Ocean loading is not modelled:
    the solid tide stays below about 5 kPa, ocean loading can reach 50 kPa near coasts.
    """

    component: Component = "coulomb"
    friction: float = DEFAULT_FRICTION
    rock: Rock = DEFAULT_ROCK
    love: LoveNumbers = IERS_2010
    bodies: tuple[Body, ...] = TIDE_BODIES

    def __post_init__(self) -> None:
        required_friction(self.friction)
        if self.component not in ("coulomb", "shear", "normal"):
            raise ProtocolError(
                f"a tidal stress can be coulomb, shear or normal but not {self.component!r}."
            )


@dataclass(frozen=True)
class TidalSeries:
    """Tides around n instants at k offsets (``offset_hours``, SI time from each instant).

    ``volumetric_strain`` (n, k), expansion positive, and ``stress_pa`` (2, n, k), the model's
    component on the plane given and the auxiliary plane, NaN without a mechanism. Surface values;
    ``shallow`` (n,): depth at most 70 km (false for NaN). Ocean loading is not modelled: the
    solid tide stays below about 5 kPa, ocean loading can reach 50 kPa near coasts: ``note``.
    """

    offset_hours: Values
    volumetric_strain: Values
    stress_pa: Values
    shallow: NDArray[np.bool_]
    note: str = OCEAN_LOADING_NOTE


class _Asked(NamedTuple):
    """Checked arguments; arrays (n,), offsets (k,), no planes or two."""

    tdb_days: Days
    latitude_rad: Values
    longitude_rad: Values
    shallow: NDArray[np.bool_]
    planes: tuple[Mechanism, ...]
    offset_hours: Values


def tidal_series(
    ephemeris: Ephemeris,
    times_utc: ArrayLike,
    lat_deg: ArrayLike,
    lon_deg: ArrayLike,
    depth_km: ArrayLike = np.nan,
    mechanism: Mechanism | None = None,
    half_width_hours: float = 48.0,
    step_hours: float = 1.0,
    model: TidalModel = TidalModel(),
) -> TidalSeries:
    """Tidal strain and stress around each instant ``times_utc`` (n,) at its own place.

    ``lat_deg`` (geodetic), ``lon_deg`` and ``depth_km`` are numbers or (n,); the offsets run
    from minus to plus ``half_width_hours`` (rounded up to whole steps). Time grows as
    n times k; memory is 24 bytes per n and k plus 40 MB (`tidal_phase` needs only the latter).

    Surface values for every depth. Ocean loading is not modelled: the solid tide stays below
    about 5 kPa, ocean loading can reach 50 kPa near coasts (OCEAN_LOADING_NOTE).
    Raises EphemerisSpanError (``outside`` marks the instants whose windows leave the kernel),
    CatalogError for impossible places or lengths that differ, ProtocolError for a bad window.
    """
    where = (lat_deg, lon_deg, depth_km, mechanism)
    asked = _checked(ephemeris, times_utc, *where, half_width_hours, step_hours)
    shape = asked.tdb_days.size, asked.offset_hours.size
    strain, stress = np.empty(shape), np.empty((2, *shape))
    for part in tide_parts(shape[1], shape[0]):
        strain[part], stress[:, part] = _piece(ephemeris, asked, part, model)
    return TidalSeries(asked.offset_hours, strain, stress, asked.shallow)


def tidal_phase(
    ephemeris: Ephemeris,
    times_utc: ArrayLike,
    lat_deg: ArrayLike,
    lon_deg: ArrayLike,
    depth_km: ArrayLike = np.nan,
    mechanism: Mechanism | None = None,
    half_width_hours: float = 48.0,
    step_hours: float = 1.0,
    model: TidalModel = TidalModel(),
) -> pd.DataFrame:
    """Tidal phase and daily amplitude of each instant: one row per instant, in the order given.

    Columns: ``time_utc``, ``tdb_days``, ``shallow``; then for the volumetric strain and for the
    model's stress on both nodal planes (``plane2`` is the auxiliary) the value at the instant,
    the phase and the amplitude: ``volumetric_strain``, ``volumetric_phase_deg``,
    ``volumetric_amplitude``, ``plane1_pa``, ``plane1_phase_deg``, ``plane1_amplitude_pa``, ...
    Plane columns are NaN without a mechanism; a phase is NaN where the window holds no extremum
    on one side (near a pole the daily tide can vanish). Amplitude: half the range within 12.42 h.

    Phase by Tanaka, Ohtake & Sato (2002). Surface values for every depth. Ocean loading is not
    modelled: the solid tide stays below about 5 kPa, ocean loading can reach 50 kPa near coasts
    and shift the phase (OCEAN_LOADING_NOTE, also in ``attrs["note"]``).
    Raises as `tidal_series`, and ProtocolError for a window shorter than half a lunar day.
    """
    if not half_width_hours >= HALF_LUNAR_DAY_HOURS:
        raise ProtocolError(
            f"half_width_hours is {half_width_hours} but half a lunar day is 12.42; 48 is usual."
        )
    where = (lat_deg, lon_deg, depth_km, mechanism)
    asked = _checked(ephemeris, times_utc, *where, half_width_hours, step_hours)
    count, steps = asked.tdb_days.size, asked.offset_hours.size
    found = np.full((3, 3, count), np.nan)
    for part in tide_parts(steps, count):
        strain, stress = _piece(ephemeris, asked, part, model)
        for values, series in zip(found, (strain, *stress), strict=True):
            values[0, part] = series[:, steps // 2]
            values[1:, part] = phase_and_amplitude(asked.offset_hours, series)
    times = np.atleast_1d(np.asarray(times_utc, dtype="datetime64[us]"))
    table = pd.DataFrame(
        {"time_utc": times, "tdb_days": asked.tdb_days, "shallow": asked.shallow}
        | dict(zip(_COLUMNS, found.reshape(9, count), strict=True))
    )
    table.attrs["note"] = OCEAN_LOADING_NOTE
    return table


def phase_and_amplitude(offset_hours: Values, series: Values) -> tuple[Values, Values]:
    """Phase in degrees and amplitude (n,) at offset zero of evenly spaced series (n, k).

    Extrema are those of the cubic spline through the samples. Phase as in the module's sketch,
    amplitude half the range within 12.42 h. NaN for a series with NaN.
    Ocean loading is not modelled in `tidal_series`: up to 50 kPa near coasts, solid tide 5.
    """
    from scipy.interpolate import CubicSpline  # slow to import

    phase, amplitude = np.full((2, len(series)), np.nan)
    whole = np.isfinite(series).all(axis=1)
    if not whole.any():
        return phase, amplitude
    spline = CubicSpline(offset_hours, series[whole], axis=1)
    instant, value, top = _extrema(offset_hours, spline.c)
    rows = np.arange(len(instant))
    past, coming = instant <= 0.0, instant > 0.0  # false for NaN
    last = instant.shape[1] - 1 - np.argmax(past[:, ::-1], axis=1)
    first = np.argmax(coming, axis=1)
    start, end = instant[rows, last], instant[rows, first]
    from_top = top[rows, last]
    paired = past.any(axis=1) & coming.any(axis=1) & (from_top != top[rows, first])
    share = np.where(paired, -start / (end - start), np.nan)
    phase[whole] = np.where(from_top, 180.0 * share, 180.0 * (share - 1.0))
    edges = spline(np.array([-HALF_LUNAR_DAY_HOURS, HALF_LUNAR_DAY_HOURS]))
    within = np.abs(instant) <= HALF_LUNAR_DAY_HOURS
    highest = np.where(within, value, -np.inf).max(axis=1, initial=-np.inf)
    lowest = np.where(within, value, np.inf).min(axis=1, initial=np.inf)
    amplitude[whole] = 0.5 * (
        np.maximum(highest, edges.max(axis=1)) - np.minimum(lowest, edges.min(axis=1))
    )
    return phase, amplitude


def _extrema(knots: Values, cubics: Values) -> tuple[Values, Values, NDArray[np.bool_]]:
    """Instants, values and whether a maximum, (n, 2 (k - 1)) in order of time, NaN for none.

    ``cubics`` (4, k - 1, n), highest power first, run from each knot (k,) to the next.
    """
    a, b, c, d = cubics
    with np.errstate(divide="ignore", invalid="ignore"):
        root = np.sqrt(b * b - 3.0 * a * c)  # of 3 a x^2 + 2 b x + c, without cancellation
        q = -(b + np.copysign(root, b))
        one, other = q / (3.0 * a), c / q
        pair = np.where(one > other, (other, one), (one, other))
        end = np.diff(knots)[:, None]
        slack = _KNOT * end  # a turn on a knot belongs to the cell that begins there
        x = np.where((pair >= -slack) & (pair < end - slack), pair, np.nan)
        value = ((a * x + b) * x + c) * x + d
        top = 3.0 * a * x + b < 0.0
    instant = knots[:-1, None] + x
    shape = (x.shape[2], -1)
    ordered = [part.transpose(2, 1, 0).reshape(shape) for part in (instant, value, top)]
    return ordered[0], ordered[1], ordered[2].astype(bool)


def _checked(
    ephemeris: Ephemeris,
    times_utc: ArrayLike,
    lat_deg: ArrayLike,
    lon_deg: ArrayLike,
    depth_km: ArrayLike,
    mechanism: Mechanism | None,
    half_width_hours: float,
    step_hours: float,
) -> _Asked:
    """The arguments as arrays of one length, or the errors that `tidal_series` names."""
    if not 0.0 < step_hours <= half_width_hours < np.inf:
        raise ProtocolError(
            f"step_hours is {step_hours}; it must be in 0 < step <= {half_width_hours} hours."
        )
    days = tdb_days_from_utc(np.atleast_1d(np.asarray(times_utc, dtype="datetime64[us]")))
    given = {"lat_deg": lat_deg, "lon_deg": lon_deg, "depth_km": depth_km}
    given |= {} if mechanism is None else mechanism._asdict()
    full = {}
    for name, value in given.items():
        array = np.asarray(value, dtype=float)
        if array.shape not in ((), (1,), days.shape):
            raise CatalogError(
                f"{name} has shape {array.shape} but there are {days.size} instants; give one "
                "number or one for each instant."
            )
        full[name] = np.broadcast_to(array, days.shape)
    lat, lon, depth, *angles = full.values()
    require_coordinates(lat, lon)
    first = Mechanism.of(*angles) if angles else None
    steps = np.ceil(half_width_hours / step_hours - 1e-9)
    offsets = step_hours * np.arange(-steps, steps + 1.0)
    for edge in (offsets[0], offsets[-1]):
        ephemeris.require(days + edge / 24.0)
    planes = () if first is None else (first, auxiliary_plane(first))
    lat_rad, lon_rad = geocentric_latitude_rad(lat), np.radians(lon)
    return _Asked(days, lat_rad, lon_rad, depth <= SHALLOW_KM, planes, offsets)


def _piece(
    ephemeris: Ephemeris, asked: _Asked, part: slice, model: TidalModel
) -> tuple[Values, Values]:
    """Volumetric strain (c, k) and stress in Pa (2, c, k) of some of the instants."""
    days, offsets, lat = asked.tdb_days[part], asked.offset_hours, asked.latitude_rad[part]
    lon = asked.longitude_rad[part]
    where, turning = local_windows_km(ephemeris, model.bodies, days, offsets, lat, lon)
    strain = SurfaceTensor(*np.zeros((3, days.size, offsets.size)))
    for body, local in zip(model.bodies, where, strict=True):
        raised = strain_under(body, local, np.sin(lat)[:, None], model.love)
        for total, more in zip(strain, raised, strict=True):
            total += more
    if has_diurnal(model.bodies):
        z, rate = (values[:, None] for values in diurnal_correction(days))
        rise = (turning * (z + rate * (offsets / 24.0))).imag
        rise *= np.sin(2.0 * lat)[:, None] / EARTH_RADIUS_M
        strain.nn[:] += rise
        strain.ee[:] += rise
    stress_pa = np.full((2, days.size, offsets.size), np.nan)
    stress = surface_stress(strain, model.rock)
    for chosen, plane in zip(stress_pa, asked.planes, strict=False):  # no planes: all NaN
        shear, normal = horizontal_weights(Mechanism(*(angle[part] for angle in plane)))
        of = {"shear": shear, "normal": normal, "coulomb": shear + model.friction * normal}
        nn, ee, ne = of[model.component][:, :, None]
        chosen[:] = nn * stress.nn + ee * stress.ee + ne * stress.ne
    return volumetric_strain(strain, model.rock), stress_pa
