"""Stress resolved on faults against published formulas, and the algebra of nodal planes."""

from __future__ import annotations

import numpy as np
import pytest
from epochtest.errors import CatalogError
from epochtest.sky.body_tide import surface_stress
from epochtest.sky.fault import (
    Mechanism,
    auxiliary_plane,
    horizontal_weights,
    mechanism_of,
    normal_and_slip,
    resolve,
)
from hypothesis import example, given, seed, settings
from hypothesis import strategies as st

from tests.test_sky_tides import mean_moon_strain

# METHODS.md B quotes six and seven digits; half a unit of the last one.
LAST_DIGIT_PA = 0.005
LAST_DIGIT_SMALL_PA = 0.0005
ROUNDING = 1e-9  # of unit vectors and unit tensors, through some twenty operations

angles = st.tuples(st.floats(0.0, 360.0), st.floats(0.0, 90.0), st.floats(-180.0, 180.0))
tensors = st.lists(st.floats(-1.0, 1.0), min_size=6, max_size=6).map(
    lambda p: np.array([[p[0], p[3], p[4]], [p[3], p[1], p[5]], [p[4], p[5], p[2]]])
)


def test_mean_moon_on_a_thrust() -> None:
    """The mean Moon in the zenith on 0/30/90, friction 0.4: METHODS.md B (Aki & Richards 2002)."""
    stress = surface_stress(mean_moon_strain())
    tensor = np.diag([float(stress.nn), float(stress.ee), 0.0])
    tensor[0, 1] = tensor[1, 0] = float(stress.ne)
    found = resolve(tensor, Mechanism.of(0.0, 30.0, 90.0), 0.4)
    values = [float(part[0]) for part in found]
    np.testing.assert_allclose(values, [-860.54, 496.84, -661.81], atol=LAST_DIGIT_PA)


def test_general_tensor() -> None:
    """N 1000, NE 500, E -200 Pa on 30/45/60, friction 0.4: METHODS.md B (Aki & Richards 2002)."""
    tensor = np.array([[1000.0, 500.0, 0.0], [500.0, -200.0, 0.0], [0.0, 0.0, 0.0]])
    found = resolve(tensor, Mechanism.of(30.0, 45.0, 60.0), 0.4)
    values = [float(part[0]) for part in found]
    np.testing.assert_allclose(values, [48.875, -166.506, -17.727], atol=LAST_DIGIT_SMALL_PA)


@pytest.mark.parametrize(
    ("mechanism", "tensor", "sign"),
    [
        ((0.0, 45.0, 90.0), np.diag([0.0, -1.0, 0.0]), 1.0),  # squeezed east-west: thrust
        ((0.0, 45.0, -90.0), np.diag([0.0, 1.0, 0.0]), 1.0),  # stretched: normal fault
        ((0.0, 90.0, 0.0), np.array([[0, 1, 0], [1, 0, 0], [0, 0, 0]]), 1.0),  # left-lateral
        ((0.0, 90.0, 180.0), np.array([[0, 1, 0], [1, 0, 0], [0, 0, 0]]), -1.0),
    ],
)
def test_signs(mechanism: tuple[float, ...], tensor: np.ndarray, sign: float) -> None:
    """Stress that drives thrusts, normal and strike-slip faults is positive (common practice)."""
    shear = resolve(tensor, Mechanism.of(*mechanism)).shear_pa[0]
    assert np.sign(shear) == sign
    assert abs(shear) >= 0.49


@seed(20260102)
@settings(max_examples=300, deadline=None)
@given(angles)
@example((0.0, 90.0, 0.0))
@example((123.0, 0.0, 45.0))
@example((10.0, 90.0, 90.0))
@example((200.0, 45.0, 180.0))
def test_auxiliary_is_the_other_plane(plane: tuple[float, float, float]) -> None:
    """Normal and slip change places up to one common sign, so the planes are orthogonal, and the
    auxiliary of the auxiliary is the first double couple (Aki & Richards 2002, section 4.3)."""
    first = Mechanism.of(*plane)
    second = auxiliary_plane(first)
    n1, s1 = normal_and_slip(first)
    n2, s2 = normal_and_slip(second)
    assert abs((n1 * n2).sum()) < ROUNDING
    np.testing.assert_allclose(n2 * (n2 * s1).sum(), s1, atol=ROUNDING)
    np.testing.assert_allclose(s2 * (n2 * s1).sum(), n1, atol=ROUNDING)
    assert 0.0 <= second.strike_deg[0] < 360.0
    assert 0.0 <= second.dip_deg[0] <= 90.0
    assert -180.0 < second.rake_deg[0] <= 180.0
    n3, s3 = normal_and_slip(auxiliary_plane(second))
    np.testing.assert_allclose(n3[:, None] * s3[None], n1[:, None] * s1[None], atol=ROUNDING)


@seed(20260103)
@settings(max_examples=100, deadline=None)
@given(st.tuples(st.floats(0.0, 359.9), st.floats(1.0, 89.0), st.floats(-179.0, 179.0)))
def test_auxiliary_is_an_involution(plane: tuple[float, float, float]) -> None:
    """Away from vertical and level planes the angles themselves return (definition)."""
    first = Mechanism.of(*plane)
    second = auxiliary_plane(first)
    if not 0.5 < second.dip_deg[0] < 89.5:
        return
    back = np.array(auxiliary_plane(second)).ravel()
    turned = (back - np.array(first).ravel() + 180.0) % 360.0 - 180.0
    # Angles lose digits as 1 / sin(dip), at most 120.
    np.testing.assert_allclose(turned, 0.0, atol=1e-7)


def test_auxiliary_known_pairs() -> None:
    """Pure thrust, normal and strike-slip pairs that every handbook draws (common practice)."""
    first = Mechanism.of([0.0, 90.0, 0.0], [30.0, 60.0, 90.0], [90.0, -90.0, 0.0])
    second = auxiliary_plane(first)
    np.testing.assert_allclose(second.strike_deg[:2], [180.0, 270.0], atol=1e-6)
    np.testing.assert_allclose(second.dip_deg, [60.0, 30.0, 90.0], atol=1e-6)
    np.testing.assert_allclose(second.rake_deg[:2], [90.0, -90.0], atol=1e-6)
    assert second.strike_deg[2] % 180.0 == pytest.approx(90.0)
    assert abs(second.rake_deg[2]) == pytest.approx(180.0)
    # Rounding below -180 is the same rake as 180, which is the one named.
    right = mechanism_of(np.array([[0.0], [1.0], [0.0]]), np.array([[-1.0], [0.0], [1e-20]]))
    assert right.rake_deg[0] == 180.0


@seed(20260104)
@settings(max_examples=100, deadline=None)
@given(angles, tensors)
def test_shear_is_equal_on_both_planes(
    plane: tuple[float, float, float], tensor: np.ndarray
) -> None:
    """n.S.s is symmetric in n and s, so both planes carry the same shear (symmetry of stress)."""
    first = Mechanism.of(*plane)
    one, other = resolve(tensor, first), resolve(tensor, auxiliary_plane(first))
    np.testing.assert_allclose(one.shear_pa, other.shear_pa, atol=ROUNDING)


@seed(20260105)
@settings(max_examples=100, deadline=None)
@given(angles, tensors, st.floats(0.0, 1.0))
def test_weights_are_the_plain_product(
    plane: tuple[float, float, float], tensor: np.ndarray, friction: float
) -> None:
    """Three weights give the whole tensor product where no part is vertical (algebra)."""
    level = tensor.copy()
    level[2, :] = level[:, 2] = 0.0
    mechanism = Mechanism.of(*plane)
    shear, normal = horizontal_weights(mechanism)
    parts = np.array([level[0, 0], level[1, 1], level[0, 1]])
    found = resolve(level, mechanism, friction)
    np.testing.assert_allclose(shear[:, 0] @ parts, found.shear_pa[0], atol=ROUNDING)
    np.testing.assert_allclose(normal[:, 0] @ parts, found.normal_pa[0], atol=ROUNDING)
    np.testing.assert_allclose(
        found.coulomb_pa, found.shear_pa + friction * found.normal_pa, atol=ROUNDING
    )


def test_unknown_and_empty_mechanisms() -> None:
    """One missing angle makes the mechanism unknown, and unknown stays NaN; none stay none."""
    mechanism = Mechanism.of([10.0, np.nan], [20.0, 30.0], [5.0, 5.0])
    assert mechanism.known.tolist() == [True, False]
    found = resolve(np.eye(3), mechanism)
    assert np.isnan(found.coulomb_pa).tolist() == [False, True]
    assert np.isnan(auxiliary_plane(mechanism).dip_deg).tolist() == [False, True]
    empty = Mechanism.of([], [], [])
    assert auxiliary_plane(empty).strike_deg.shape == (0,)
    assert resolve(np.zeros((3, 3, 0)), empty).coulomb_pa.shape == (0,)


def test_impossible_input_is_named() -> None:
    """A dip of 95, an infinite strike and negative friction are refused, with row and value."""
    with pytest.raises(CatalogError, match=r"row 1: strike 0\.0, dip 95\.0") as caught:
        Mechanism.of(0.0, [45.0, 95.0], 0.0)
    assert caught.value.rows.tolist() == [1]  # type: ignore[attr-defined]
    with pytest.raises(CatalogError, match=r"dip -1\.0"):
        Mechanism.of(0.0, -1.0, 0.0)
    with pytest.raises(CatalogError, match="strike inf"):
        Mechanism.of(np.inf, 1.0, 0.0)
    with pytest.raises(ValueError, match=r"-0\.1"):
        resolve(np.eye(3), Mechanism.of(0.0, 45.0, 0.0), -0.1)
