"""Tidal series, amplitude and phase against slow twins and made-up series of known phase."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from epochtest.errors import CatalogError, EphemerisSpanError, ProtocolError
from epochtest.sky.body_tide import (
    OCEAN_LOADING_NOTE,
    Rock,
    surface_strain,
    surface_stress,
    volumetric_strain,
)
from epochtest.sky.earth_fixed import earth_points
from epochtest.sky.ephemeris import Ephemeris, open_ephemeris
from epochtest.sky.fault import Mechanism, auxiliary_plane, resolve
from epochtest.sky.tidal_phase import (
    HALF_LUNAR_DAY_HOURS,
    TidalModel,
    phase_and_amplitude,
    tidal_phase,
    tidal_series,
)
from epochtest.timescale import tdb_days_from_utc
from hypothesis import example, given, seed, settings
from hypothesis import strategies as st

Array = np.ndarray
HOURS = np.arange(-48.0, 49.0)
# The window's true equator stands still: 0.3" a day, 2 days, of a wave that turns twice a day.
SAME_SERIES = 5e-5


@cache
def kernel() -> Ephemeris:
    """DE440."""
    return open_ephemeris("DE440")


@cache
def sample(count: int = 40) -> tuple[Array, Array, Array, Mechanism]:
    """Random instants 1700-2150, latitudes, longitudes and mechanisms."""
    random = np.random.default_rng(20260107)
    span = np.datetime64("2150-01-01", "us") - np.datetime64("1700-01-01", "us")
    times = np.datetime64("1700-01-01", "us") + (random.uniform(0, 1, count) * span).astype(
        "timedelta64[us]"
    )
    lat = np.degrees(np.arcsin(random.uniform(-1.0, 1.0, count)))
    lon = random.uniform(-180.0, 360.0, count)
    mechanism = Mechanism.of(
        random.uniform(0, 360, count),
        random.uniform(0, 90, count),
        random.uniform(-180, 180, count),
    )
    return times, lat, lon, mechanism


def plain_series(
    time: np.datetime64, lat: float, lon: float, mechanism: Mechanism, hours: Array, friction: float
) -> tuple[Array, Array]:
    """Twin for one place: every instant from the kernel, the whole tensor resolved."""
    days = tdb_days_from_utc(time) + hours / 24.0
    strain = surface_strain(kernel(), days, earth_points(lat, lon))
    stress = surface_stress(strain)
    tensor = np.zeros((3, 3, hours.size))
    tensor[0, 0], tensor[1, 1] = stress.nn[0], stress.ee[0]
    tensor[0, 1] = tensor[1, 0] = stress.ne[0]
    planes = (mechanism, auxiliary_plane(mechanism))
    coulomb = [resolve(tensor, plane, friction).coulomb_pa for plane in planes]
    return volumetric_strain(strain)[0], np.array(coulomb)


def one(mechanism: Mechanism, i: int) -> Mechanism:
    """The mechanism of one row."""
    return Mechanism(*(angle[i : i + 1] for angle in mechanism))


def test_series_against_the_plain_loop() -> None:
    """Interpolated windows equal the kernel asked at every instant (plain twin)."""
    times, lat, lon, mechanism = sample()
    model = TidalModel(friction=0.6)
    found = tidal_series(kernel(), times, lat, lon, 10.0, mechanism, model=model)
    np.testing.assert_array_equal(found.offset_hours, HOURS)
    assert found.stress_pa.shape == (2, 40, 97)
    assert found.note == OCEAN_LOADING_NOTE
    for i in range(40):
        strain, stress = plain_series(times[i], lat[i], lon[i], one(mechanism, i), HOURS, 0.6)
        np.testing.assert_allclose(found.volumetric_strain[i], strain, atol=SAME_SERIES * 3e-8)
        np.testing.assert_allclose(found.stress_pa[:, i], stress, atol=SAME_SERIES * 2000.0)


def test_long_and_coarse_windows() -> None:
    """A fortnight on both sides, and a window with fewer instants than nodes, still agree.

    Over 14 days the equator moves 4", and P1 turns 28 degrees, of which the window follows the
    first order only: 1.23 mm x 0.48^2 / 2, with psi1 0.16 mm, is 3.3e-11 of volumetric strain.
    """
    times, lat, lon, mechanism = sample()
    for half, step in ((336.0, 3.0), (13.0, 6.5)):
        arguments = (times[:5], lat[:5], lon[:5], 0.0)
        found = tidal_series(kernel(), *arguments, None, half, step)
        assert found.offset_hours[-1] == half
        assert np.isnan(found.stress_pa).all()
        for i in range(5):
            strain, _ = plain_series(
                times[i], lat[i], lon[i], one(mechanism, i), found.offset_hours, 0.4
            )
            np.testing.assert_allclose(found.volumetric_strain[i], strain, atol=3.5e-11)


def test_pieces_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """The table does not depend on how many windows are worked on at once (plain twin)."""
    times, lat, lon, mechanism = sample()
    whole = tidal_phase(kernel(), times, lat, lon, 5.0, mechanism)
    monkeypatch.setattr("epochtest.sky.tide_potential._CHUNK_VALUES", 300)
    pieces = tidal_phase(kernel(), times, lat, lon, 5.0, mechanism)
    for name in whole.columns[3:]:
        np.testing.assert_allclose(whole[name], pieces[name], rtol=1e-6, err_msg=name)


@seed(20260108)
@settings(max_examples=200, deadline=None)
@given(st.floats(-179.0, 179.0), st.floats(7.9, 25.8), st.floats(1e-12, 1e4))
@example(90.0, 8.0, 1.0)
@example(0.0, 12.0, 1e-8)
def test_phase_of_a_cosine(phase_deg: float, period_hours: float, size: float) -> None:
    """A cosine's tidal phase is its own phase (Tanaka, Ohtake & Sato 2002), at any tidal period.

    Terdiurnal to diurnal waves; 1 h steps of an 8 h wave are the coarsest: 0.3 degrees.
    """
    series = size * np.cos(2 * np.pi * HOURS / period_hours + np.radians(phase_deg))
    phase, amplitude = phase_and_amplitude(HOURS, series[None])
    assert phase[0] == pytest.approx(phase_deg, abs=0.3)
    if period_hours <= 2 * HALF_LUNAR_DAY_HOURS:
        assert amplitude[0] == pytest.approx(size, rel=2e-3)


@pytest.mark.parametrize(
    ("before", "after", "from_top", "expected"),
    [
        (-2.0, 5.0, True, 180.0 * 2 / 7),
        (-5.0, 2.0, True, 180.0 * 5 / 7),
        (-4.0, 8.0, False, -180.0 * 8 / 12),
        (-8.0, 4.0, False, -180.0 * 4 / 12),
        (-1.0, 3.0, True, 45.0),
        (-3.0, 1.0, False, -45.0),
    ],
)
def test_phase_runs_in_time_not_in_stress(
    before: float, after: float, from_top: bool, expected: float
) -> None:
    """Unequal half cycles: linear in time between extremum and extremum (Tanaka et al. 2002)."""
    hours = np.arange(-480.0, 481.0) / 10.0  # fine, because the pace changes at the extrema
    turn = np.pi * (hours - before) / (after - before)
    series = np.cos(turn) if from_top else -np.cos(turn)
    # Beyond the half cycle around the instant anything may follow, at another pace.
    late, early = after < hours, before > hours
    sign = -1.0 if from_top else 1.0
    series[late] = sign * np.cos(np.pi * (hours[late] - after) / 6.2)
    series[early] = -sign * np.cos(np.pi * (hours[early] - before) / 6.2)
    phase, _ = phase_and_amplitude(hours, series[None])
    assert phase[0] == pytest.approx(expected, abs=1.0)  # spline over the change of pace


def test_two_turns_within_one_step() -> None:
    """A maximum and a minimum between two samples are both found (the spline's own roots)."""
    step = 6.0
    hours = np.arange(-48.0, 49.0, step)
    # cubic x (x - 2) (x - 4) on the middle cell: turns at 2 -+ 2/sqrt(3), zero slope elsewhere none
    series = hours * (hours - 2.0) * (hours - 4.0)
    phase, _ = phase_and_amplitude(hours, np.array([series, -series]))
    assert np.isnan(phase).all()  # the instant lies before both turns: no extremum in the past
    moved = (hours + 2.0) * hours * (hours - 2.0)
    phase, _ = phase_and_amplitude(hours, np.array([moved, -moved]))
    np.testing.assert_allclose(phase, [90.0, -90.0], atol=1e-6)  # halfway between both


def test_phase_against_minute_by_minute() -> None:
    """Phase and amplitude from hourly steps against the extrema of minute-by-minute series.

    The spline's turns are good to 0.1 degrees; flat turns, where two extrema nearly cancel, can
    move more, so 1 degree is asked of all and 0.15 of 95 of 100.
    """
    times, lat, lon, mechanism = sample()
    table = tidal_phase(kernel(), times, lat, lon, 0.0, mechanism)
    fine = np.arange(-48 * 60, 48 * 60 + 1) / 60.0
    names = (
        ("volumetric_phase_deg", "volumetric_amplitude"),
        ("plane1_phase_deg", "plane1_amplitude_pa"),
        ("plane2_phase_deg", "plane2_amplitude_pa"),
    )
    off = []
    for i in range(40):
        strain, stress = plain_series(times[i], lat[i], lon[i], one(mechanism, i), fine, 0.4)
        for (phase_name, amplitude_name), series in zip(names, (strain, *stress), strict=True):
            phase, amplitude = plain_phase(fine, series)
            off.append(abs((table[phase_name][i] - phase + 180.0) % 360.0 - 180.0))
            assert table[amplitude_name][i] == pytest.approx(amplitude, rel=1e-3)
    # The twin itself is good to half a minute of a 6 h half cycle, 0.25 degrees, at both ends.
    assert max(off) < 1.0
    assert np.quantile(off, 0.95) < 0.15 + 0.25


def plain_phase(hours: Array, series: Array) -> tuple[float, float]:
    """Twin: walk from the instant both ways to the first sample that tops its neighbours."""
    middle = hours.size // 2
    turns = [
        i
        for i in range(1, hours.size - 1)
        if (series[i] - series[i - 1]) * (series[i + 1] - series[i]) < 0.0
    ]
    last = max(i for i in turns if i <= middle)
    first = min(i for i in turns if i > middle)
    share = -hours[last] / (hours[first] - hours[last])
    from_top = series[last] > series[first]
    near = series[np.abs(hours) <= HALF_LUNAR_DAY_HOURS]
    return 180.0 * (share if from_top else share - 1.0), 0.5 * float(np.ptp(near))


def test_components_and_rock() -> None:
    """Coulomb is shear plus friction times normal, and stress scales with the rock (Hooke)."""
    times, lat, lon, mechanism = sample()

    def stress(**changes: object) -> Array:
        model = TidalModel(**changes)  # type: ignore[arg-type]
        return tidal_series(kernel(), times, lat, lon, 0.0, mechanism, model=model).stress_pa

    shear, normal = stress(component="shear"), stress(component="normal")
    np.testing.assert_allclose(stress(friction=0.7), shear + 0.7 * normal, atol=1e-9)
    np.testing.assert_allclose(shear[0], shear[1], atol=1e-9)  # both planes carry the same shear
    assert np.abs(normal[0] - normal[1]).max() > 100.0
    np.testing.assert_allclose(stress(rock=Rock(60e9, 60e9)), 2.0 * stress(), atol=1e-9)


def test_planes_of_the_table_change_places() -> None:
    """Giving the auxiliary plane swaps plane1 and plane2 (involution of nodal planes)."""
    times, lat, lon, mechanism = sample()
    first = tidal_phase(kernel(), times, lat, lon, 0.0, mechanism)
    second = tidal_phase(kernel(), times, lat, lon, 0.0, auxiliary_plane(mechanism))
    for name in ("pa", "phase_deg", "amplitude_pa"):
        np.testing.assert_allclose(first[f"plane1_{name}"], second[f"plane2_{name}"], rtol=1e-6)
        np.testing.assert_allclose(first[f"plane2_{name}"], second[f"plane1_{name}"], rtol=1e-6)


def test_edges_of_the_map_and_missing_values() -> None:
    """Poles, dateline, NaN depth and NaN mechanism: finite where there is something to say."""
    lat = np.array([90.0, -90.0, 10.0, 10.0, 10.0])
    lon = np.array([0.0, 77.0, 180.0, -180.0, 540.0])
    depth = np.array([np.nan, 10.0, 70.0, 70.1, 0.0])
    mechanism = Mechanism.of([10.0, np.nan, 10.0, 10.0, 10.0], 45.0, 90.0)
    times = np.full(5, np.datetime64("2010-02-27T06:34", "us"))
    table = tidal_phase(kernel(), times, lat, lon, depth, mechanism)
    assert table["shallow"].tolist() == [False, True, True, False, True]
    assert table["plane1_pa"].isna().tolist() == [False, True, False, False, False]
    assert np.isfinite(table["volumetric_strain"]).all()
    for name in table.columns[3:]:
        same = table[name].to_numpy()[2:]
        np.testing.assert_allclose(same, same[0], rtol=1e-9, err_msg=name)
    # At a pole the volumetric tide has no daily part: within two days it need not turn.
    small = table["volumetric_amplitude"][:2] / table["volumetric_amplitude"][2]
    assert (small < 0.2).all()


def test_one_and_none() -> None:
    """One instant as plain numbers makes one row; none make an empty table of the same types."""
    time = np.datetime64("2011-03-11T05:46:24", "us")
    single = tidal_phase(kernel(), time, 38.3, 142.4, 29.0, Mechanism.of(203.0, 10.0, 88.0))
    assert len(single) == 1
    assert single.attrs["note"] == OCEAN_LOADING_NOTE
    empty = tidal_phase(
        kernel(), np.empty(0, "datetime64[us]"), [], [], [], Mechanism.of([], [], [])
    )
    assert len(empty) == 0
    assert empty.dtypes.to_dict() == single.dtypes.to_dict()
    assert str(empty["time_utc"].dtype) == "datetime64[us]"
    series = tidal_series(kernel(), np.empty(0, "datetime64[us]"), [], [])
    assert series.volumetric_strain.shape == (0, 97)
    assert series.stress_pa.shape == (2, 0, 97)


def test_inputs_stay_as_they_were() -> None:
    """Arrays given are not modified."""
    times, lat, lon, mechanism = sample()
    before = [np.copy(part) for part in (times, lat, lon, *mechanism)]
    tidal_phase(kernel(), times, lat, lon, 0.0, mechanism)
    for one_part, old in zip((times, lat, lon, *mechanism), before, strict=True):
        np.testing.assert_array_equal(one_part, old)


def test_windows_outside_the_kernel() -> None:
    """A window that sticks out of DE421 is refused and the mask names its instant."""
    small = open_ephemeris("DE421")
    last = small.covered_utc[1]
    times = np.array([last - np.timedelta64(49, "h"), last - np.timedelta64(47, "h")])
    with pytest.raises(EphemerisSpanError) as caught:
        tidal_phase(small, times, 0.0, 0.0)
    assert caught.value.outside.tolist() == [False, True]  # type: ignore[attr-defined]
    assert len(tidal_phase(small, times[:1], 0.0, 0.0)) == 1
    with pytest.raises(EphemerisSpanError, match="not a time"):
        tidal_phase(small, np.array(["NaT"], "datetime64[us]"), 0.0, 0.0)


def test_refusals() -> None:
    """Lengths that differ, impossible places, windows and components: one clear sentence each."""
    times = np.array(["2010-01-01", "2011-01-01"], "datetime64[us]")
    with pytest.raises(CatalogError, match=r"lat_deg has shape \(3,\) but there are 2 instants"):
        tidal_phase(kernel(), times, [1.0, 2.0, 3.0], 0.0)
    with pytest.raises(CatalogError, match="strike_deg has shape"):
        tidal_phase(kernel(), times, 0.0, 0.0, 0.0, Mechanism.of([1.0] * 3, [1.0] * 3, [1.0] * 3))
    with pytest.raises(CatalogError, match=r"latitude 90\.5"):
        tidal_phase(kernel(), times, [0.0, 90.5], 0.0)
    with pytest.raises(ProtocolError, match=r"half a lunar day is 12\.42"):
        tidal_phase(kernel(), times, 0.0, 0.0, half_width_hours=12.0)
    with pytest.raises(ProtocolError, match="step_hours is 0"):
        tidal_series(kernel(), times, 0.0, 0.0, step_hours=0.0)
    with pytest.raises(ProtocolError, match="'strain'"):
        TidalModel(component="strain")  # type: ignore[arg-type]
    with pytest.raises(ValueError, match="friction"):
        TidalModel(friction=-0.4)


def test_random_times_have_nearly_even_phases() -> None:
    """Null calibration of Schuster's test (1897) on phases of random times at random places.

    200 catalogs of 100, no effect in them: at 5 % the number rejected is binomial, 2 to 21 with
    99.9 %. (On one plane at one place the phase is not even: see the module's docstring.)
    """
    random = np.random.default_rng(20260109)
    count = 20_000
    span = (np.datetime64("2020-01-01", "us") - np.datetime64("1980-01-01", "us")).astype(float)
    times = np.datetime64("1980-01-01", "us") + (random.uniform(0, span, count)).astype(
        "timedelta64[us]"
    )
    lat = np.degrees(np.arcsin(random.uniform(-1, 1, count)))
    table = tidal_phase(kernel(), times, lat, random.uniform(-180, 180, count))
    angle = np.radians(table["volumetric_phase_deg"].to_numpy()).reshape(200, 100)
    keep = np.isfinite(angle)
    assert keep.mean() > 0.999  # close to a pole the volumetric tide need not turn
    vectors = np.where(keep, np.exp(1j * np.nan_to_num(angle)), 0.0).sum(axis=1)
    p = np.exp(-(np.abs(vectors) ** 2) / keep.sum(axis=1))
    assert 2 <= (p <= 0.05).sum() <= 21
