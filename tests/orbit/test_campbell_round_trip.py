"""Campbell to Thiele-Innes to Campbell, and what is chosen where an element does not exist.

Angles are compared in radians: 1e-12 of one is 2e-7 arcsec.
"""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from orbit_strategies import axes, bearings, eccentricities, orbits, properties, tilted

from relorbit.orbit.elements import (
    Elements,
    ThieleInnes,
    campbell_from_thiele_innes,
    complex_position,
    constants_from_projection,
    geometry_from_projection,
    projection,
    projection_from_constants,
    thiele_innes_from_campbell,
)

ANGLE = 1e-12


def there_and_back(orbit):
    return campbell_from_thiele_innes(thiele_innes_from_campbell(orbit), orbit.P, orbit.T, orbit.e)


def apart(one, other):
    """Difference of two angles in degrees, as radians."""
    return abs(np.radians((one - other + 180.0) % 360.0 - 180.0))


def same_path(one, other, tolerance=1e-12):
    """At T as well as all around."""
    epochs = one.T + one.P * np.array([0.0, 0.1, 0.37, 0.5, 0.9])
    gap = np.abs(complex_position(one, epochs) - complex_position(other, epochs))
    assert gap.max() < tolerance * one.a


@properties
@given(orbits(i=tilted))
def test_round_trip(orbit):
    back = there_and_back(orbit)
    folded = orbit.folded()
    assert (back.P, back.T, back.e) == (orbit.P, orbit.T, orbit.e)
    assert back.a == pytest.approx(orbit.a, rel=1e-12)
    assert apart(back.i, orbit.i) < ANGLE
    # the node is an axis: 0 and 180 are neighbours, and omega goes along
    if apart(back.node, folded.node) < ANGLE:
        assert apart(back.omega, folded.omega) < ANGLE
    else:
        assert apart(back.node + 180.0, folded.node) < ANGLE
        assert apart(back.omega + 180.0, folded.omega) < ANGLE
    assert 0.0 <= back.node < 180.0
    assert 0.0 <= back.omega < 360.0
    same_path(orbit, back)


@properties
@given(eccentricities, axes, st.sampled_from([0.0, 180.0]), bearings, bearings)
def test_round_trip_face_on(e, a, i, node, omega):
    """Only the sum (difference) of node and omega exists; node 0 is chosen, never NaN."""
    orbit = Elements(20.0, 2000.0, e, a, i, node, omega)
    back = there_and_back(orbit)
    assert (back.i, back.node) == (i, 0.0)
    assert back.a == pytest.approx(a, rel=1e-12)
    expected = omega + node if i == 0.0 else omega - node
    assert apart(back.omega, expected) < ANGLE
    same_path(orbit, back)


@properties
@given(st.floats(-5.0, 1.0).map(lambda x: 10.0**x), st.booleans(), bearings, bearings)
def test_round_trip_nearly_face_on(i, backwards, node, omega):
    """The errors grow as rounding does: eps/sin i in i, eps/sin^2 i in node and omega apart.

    Their sum (difference) and the sky path keep full precision.
    """
    orbit = Elements(20.0, 2000.0, 0.4, 1.0, 180.0 - i if backwards else i, node, omega)
    back = there_and_back(orbit)
    eps, sine = np.finfo(float).eps, np.sin(np.radians(i))
    assert apart(back.i, orbit.i) < ANGLE + 10.0 * eps / sine
    twist = apart(2.0 * back.node, 2.0 * orbit.node)
    assert twist < ANGLE + 40.0 * eps / sine**2
    sign = -1.0 if backwards else 1.0
    assert apart(back.omega + sign * back.node, orbit.omega + sign * orbit.node) < ANGLE
    same_path(orbit, back)


@pytest.mark.parametrize("i", [0.0, 1e-7, 1e-6, 90.0, 179.999999, 180.0])
def test_closer_to_face_on_than_constants_can_tell(i):
    """Within 3e-8 rad (2e-6 deg) of 0 or 180 the orbit may come back as exactly face-on."""
    orbit = Elements(20.0, 2000.0, 0.4, 1.0, i, 30.0, 50.0)
    back = there_and_back(orbit)
    assert apart(back.i, i) < 4e-8
    same_path(orbit, back, 1e-12)


@pytest.mark.parametrize("node", [0.0, 1e-14, 90.0, 179.99999999999997, 180.0, 359.99999999999994])
@pytest.mark.parametrize("i", [35.0, 90.0, 145.7])
def test_a_node_in_the_north_keeps_its_side(node, i):
    """A node a rounding error west of north must not turn omega, and the pair, by 180 degrees."""
    for omega in range(0, 360, 5):
        orbit = Elements(10.0, 2000.0, 0.3, 1.0, i, node, omega)
        same_path(orbit, there_and_back(orbit))


def test_a_node_far_below_an_ulp_before_zero():
    _, _, node, omega = geometry_from_projection(0.8, 0.3 * np.exp(-1e-17j))
    assert 0.0 <= node < 180.0
    assert apart(float(node) + float(omega), 0.0) < ANGLE


@properties
@given(*[st.floats(-10.0, 10.0)] * 4)
def test_projection_and_constants_are_inverses(A, B, F, G):
    again = constants_from_projection(*projection_from_constants(A, B, F, G))
    assert again == pytest.approx((A, B, F, G), abs=1e-14)


@properties
@given(orbits())
def test_constants_by_the_textbook(orbit):
    """A = a (cos omega cos node - sin omega sin node cos i) and so on (Binnendijk 1960)."""
    i, node, omega = np.radians([orbit.i, orbit.node, orbit.omega])
    c = thiele_innes_from_campbell(orbit)
    so, co, sn, cn, ci = np.sin(omega), np.cos(omega), np.sin(node), np.cos(node), np.cos(i)
    expected = (co * cn - so * sn * ci, co * sn + so * cn * ci,
                -so * cn - co * sn * ci, -so * sn + co * cn * ci)  # fmt: skip
    expected = [orbit.a * value for value in expected]
    assert pytest.approx(expected, abs=1e-14 * orbit.a) == (c.A, c.B, c.F, c.G)
    assert c.to_dict() == {"A": c.A, "B": c.B, "F": c.F, "G": c.G}


def test_arrays_of_projections():
    tilts = enumerate((0, 40, 90, 180))
    many = [Elements(10.0, 2000.0, 0.3, 1.0 + k, i, 20.0, 50.0) for k, i in tilts]
    alpha, beta = np.array([projection(one) for one in many]).T
    a, i, node, omega = geometry_from_projection(alpha.reshape(2, 2), beta.reshape(2, 2))
    assert a.shape == i.shape == node.shape == omega.shape == (2, 2)
    np.testing.assert_allclose(a.ravel(), [1.0, 2.0, 3.0, 4.0], rtol=1e-14)
    np.testing.assert_allclose(i.ravel(), [0.0, 40.0, 90.0, 180.0], rtol=1e-14)
    np.testing.assert_allclose(node.ravel(), [0.0, 20.0, 20.0, 0.0], rtol=1e-13)
    np.testing.assert_allclose(omega.ravel(), [70.0, 50.0, 50.0, 30.0], rtol=1e-13)


def test_no_orbit_in_four_zeros():
    with pytest.raises(ValueError, match=r"^a must be above 0, not 0$"):
        campbell_from_thiele_innes(ThieleInnes(0.0, 0.0, 0.0, 0.0), 10.0, 2000.0, 0.1)
