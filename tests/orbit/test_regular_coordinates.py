"""The coordinates in which orbits are fitted: round trip, exact derivatives, covariance."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from orbit_strategies import axes, bearings, orbits, properties, tilted

from relorbit.orbit.elements import NAMES, Elements, complex_position, projection
from relorbit.orbit.partials import partials, polar_derivatives
from relorbit.orbit.regular import (
    Uncertainty,
    axis_and_period_gradient,
    campbell_covariance,
    campbell_jacobian,
    elements_from_regular,
    position_and_jacobian,
    regular_from_elements,
    regular_position,
)

T0 = 1987.25
BY_HAND = {
    "ordinary": Elements(41.6, 1990.0, 0.28, 0.9, 59.0, 23.7, 219.9),
    "eccentric, retrograde": Elements(168.7, 2005.1, 0.95, 3.7, 148.0, 36.9, 256.5),
    "edge-on": Elements(25.9, 1989.1, 0.51, 0.67, 90.0, 12.2, 100.6),
    "circular": Elements(30.0, 1985.0, 0.0, 0.5, 40.0, 100.0, 0.0),
    "face-on": Elements(30.0, 1985.0, 0.4, 0.5, 0.0, 0.0, 70.0),
    "face-on, backwards": Elements(30.0, 1985.0, 0.4, 0.5, 180.0, 0.0, 70.0),
    "circular and face-on": Elements(30.0, 1985.0, 0.0, 0.5, 0.0, 0.0, 0.0),
}
PLAIN = ("ordinary", "eccentric, retrograde", "edge-on")


def epochs_of(orbit):
    return T0 + orbit.P * np.array([-1.3, -0.6, -0.2, 0.0, 0.1, 0.35, 0.8])


@properties
@given(orbits(), st.floats(1900.0, 2050.0))
def test_round_trip_is_the_same_path(orbit, t0):
    back = elements_from_regular(regular_from_elements(orbit, t0), t0)
    epochs = t0 + orbit.P * np.linspace(-1.0, 1.0, 9)
    gap = np.abs(complex_position(orbit, epochs) - complex_position(back, epochs))
    # phases between T and t0 are rounded to 1e-13 or so for the shortest periods; periastron
    # passes at sqrt((1 + e)/(1 - e)) times the mean speed
    speed = 2.0 * np.pi * np.sqrt((1.0 + orbit.e) / (1.0 - orbit.e))
    rounding = 4.0 * np.spacing(2100.0) / orbit.P + 4e-16 * (2.0 + abs(t0 - orbit.T) / orbit.P)
    assert gap.max() < orbit.a * (1e-13 + 4.0 * speed * rounding) / (1.0 - orbit.e)
    assert abs(back.T - t0) <= 0.5 * orbit.P * (1.0 + 1e-9)
    assert 0.0 <= back.node < 180.0
    assert pytest.approx(orbit.P, rel=1e-13) == back.P
    assert back.e == pytest.approx(orbit.e, abs=1e-13)


@pytest.mark.parametrize("name", PLAIN)
def test_round_trip_of_the_elements(name):
    orbit = BY_HAND[name].near(T0)
    back = elements_from_regular(regular_from_elements(orbit, T0), T0)
    for key in NAMES:
        assert getattr(back, key) == pytest.approx(getattr(orbit, key), rel=1e-11), key


@properties
@given(axes, tilted, bearings, st.floats(0.0, 360.0))
def test_a_circle_is_counted_from_its_node(a, i, node, omega):
    """omega is 0 and T the passage of the node: what is chosen where periastron is not."""
    orbit = Elements(20.0, 1990.0, 0.0, a, i, node, omega)
    back = elements_from_regular(regular_from_elements(orbit, T0), T0)
    assert (back.e, back.omega) == (0.0, 0.0)
    epochs = T0 + np.linspace(0.0, 20.0, 7)
    gap = np.abs(complex_position(orbit, epochs) - complex_position(back, epochs))
    assert gap.max() < 1e-11 * a
    z = complex_position(back, np.array([back.T]))[0] * np.exp(-1j * np.radians(back.node))
    assert z == pytest.approx(a, abs=1e-11 * a)


def test_regular_position_is_the_position():
    for orbit in BY_HAND.values():
        u = regular_from_elements(orbit, T0)
        epochs = epochs_of(orbit)
        expected = complex_position(orbit, epochs)
        np.testing.assert_allclose(regular_position(u, T0, epochs), expected, rtol=0, atol=1e-12)
        z, _ = position_and_jacobian(u, T0, epochs)
        np.testing.assert_allclose(z, expected, rtol=0, atol=1e-12)


@pytest.mark.parametrize("name", BY_HAND)
def test_jacobian_by_finite_differences(name):
    """Also at e = 0 and at i = 0 and 180, where the Campbell elements have no derivative."""
    orbit = BY_HAND[name]
    u, epochs = regular_from_elements(orbit, T0), epochs_of(orbit)
    _, jacobian = position_and_jacobian(u, T0, epochs)
    for slot in range(7):
        step = np.zeros(7)
        step[slot] = h = 1e-4 * (1.0 - orbit.e) ** 1.5
        shifted = [regular_position(u + n * step, T0, epochs) for n in (-2, -1, 1, 2)]
        numerical = np.array([1.0, -8.0, 8.0, -1.0]) @ np.array(shifted) / (12.0 * h)
        scale = np.abs(numerical).max()
        np.testing.assert_allclose(jacobian[slot], numerical, rtol=0.0, atol=3e-9 * scale)


def test_many_orbits_at_once():
    us = np.array([regular_from_elements(orbit, T0) for orbit in BY_HAND.values()])
    epochs = np.linspace(1950.0, 2000.0, 11)
    z, jacobian = position_and_jacobian(us.reshape(7, 1, 7), T0, epochs)
    assert z.shape == (7, 1, 11)
    assert jacobian.shape == (7, 1, 7, 11)
    for row, u in enumerate(us):
        alone = position_and_jacobian(u, T0, epochs)
        np.testing.assert_allclose(z[row, 0], alone[0], rtol=1e-13)
        np.testing.assert_allclose(jacobian[row, 0], alone[1], rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("name", PLAIN)
def test_campbell_jacobian_by_the_chain_rule(name):
    """d(theta, rho)/du = d(theta, rho)/d(elements) d(elements)/du, both sides exact.

    14 rows for 7 columns: an error in any entry of the 7 by 7 matrix shows.
    """
    orbit = BY_HAND[name].near(T0)
    u, epochs = regular_from_elements(orbit, T0), epochs_of(orbit)
    z, dz = position_and_jacobian(u, T0, epochs)
    by_u = np.concatenate([np.degrees(polar_derivatives(z, dz)[0]), polar_derivatives(z, dz)[1]], 1)
    _, _, d_theta, d_rho = partials(orbit, epochs)
    chained = np.concatenate([d_theta, d_rho]) @ campbell_jacobian(u, T0)
    scale = np.abs(by_u.T).max(axis=1, keepdims=True)
    np.testing.assert_allclose(chained / scale, by_u.T / scale, rtol=0.0, atol=1e-9)


@pytest.mark.parametrize("name", PLAIN)
def test_campbell_jacobian_by_finite_differences(name):
    u = regular_from_elements(BY_HAND[name].near(T0), T0)
    exact = campbell_jacobian(u, T0)
    for slot in range(7):
        step = np.zeros(7)
        step[slot] = 1e-6
        ends = [elements_from_regular(u + sign * step, T0).to_dict() for sign in (-1, 1)]
        numerical = [(ends[1][key] - ends[0][key]) / 2e-6 for key in NAMES]
        np.testing.assert_allclose(exact[:, slot], numerical, rtol=1e-5, atol=2e-5)


@pytest.mark.parametrize(
    ("name", "missing"),
    [
        ("circular", {"T", "e", "omega"}),
        ("face-on", {"i", "node", "omega"}),
        ("face-on, backwards", {"i", "node", "omega"}),
        ("circular and face-on", {"T", "e", "i", "node", "omega"}),
    ],
)
def test_what_does_not_exist_has_no_derivative(name, missing):
    """Said by NaN, in these rows and no others."""
    u = regular_from_elements(BY_HAND[name], T0)
    # the face-on ones by construction, since pi is not exact
    if "face-on" in name:
        u[3 if "backwards" in name else 5 : 5 if "backwards" in name else 7] = 0.0
    rows = np.isnan(campbell_jacobian(u, T0)).any(axis=1)
    assert {key for key, bad in zip(NAMES, rows, strict=True) if bad} == missing


@pytest.mark.parametrize("name", BY_HAND)
def test_axis_and_period_gradient(name):
    u = regular_from_elements(BY_HAND[name], T0)
    gradient = axis_and_period_gradient(u)

    def value(u):
        a = np.hypot(u[3], u[4]) + np.hypot(u[5], u[6])
        return 3.0 * np.log(a) - 2.0 * u[0]

    for slot in range(7):
        step = np.zeros(7)
        step[slot] = 1e-6
        numerical = (value(u + step) - value(u - step)) / 2e-6
        # where beta is 0 the axis has a corner, |beta|: 0 is the mean of its two slopes
        assert gradient[slot] == pytest.approx(numerical, abs=1e-7)
    if name in PLAIN:
        by_elements = campbell_jacobian(u, T0)
        orbit = BY_HAND[name]
        expected = 3.0 * by_elements[3] / orbit.a - 2.0 * by_elements[0] / orbit.P
        np.testing.assert_allclose(gradient, expected, atol=1e-12)


@pytest.fixture
def uncertainty():
    root = np.random.default_rng(5).normal(size=(7, 7)) * 1e-3
    return Uncertainty(T0, root @ root.T)


@pytest.mark.parametrize("name", PLAIN)
def test_covariance_is_carried_by_the_jacobian(name, uncertainty):
    orbit = BY_HAND[name].near(T0)
    matrix = campbell_covariance(orbit, uncertainty)
    jacobian = campbell_jacobian(regular_from_elements(orbit, T0), T0)
    np.testing.assert_allclose(matrix, jacobian @ uncertainty.covariance @ jacobian.T, rtol=1e-9)
    np.testing.assert_allclose(matrix, matrix.T, rtol=1e-12)
    assert np.linalg.eigvalsh(matrix / np.outer(*[np.sqrt(np.diag(matrix))] * 2)).min() > 0.0


@pytest.mark.parametrize("turns", [-3, 1, 10])
def test_a_later_passage_is_less_certain(turns, uncertainty):
    """var(T + k P) = var T + 2 k cov(T, P) + k^2 var P."""
    orbit = BY_HAND["ordinary"].near(T0)
    near = campbell_covariance(orbit, uncertainty)
    far = campbell_covariance(replace(orbit, T=orbit.T + turns * orbit.P), uncertainty)
    expected = near[1, 1] + 2.0 * turns * near[0, 1] + turns**2 * near[0, 0]
    assert far[1, 1] == pytest.approx(expected, rel=1e-9)
    others = [0, 2, 3, 4, 5, 6]
    np.testing.assert_allclose(far[np.ix_(others, others)], near[np.ix_(others, others)], rtol=1e-6)


def test_the_same_orbit_for_another_reference_epoch():
    orbit = BY_HAND["ordinary"]
    here, there = (regular_from_elements(orbit, t0) for t0 in (T0, T0 + 17.0))
    assert abs(complex(*here[1:3])) == pytest.approx(abs(complex(*there[1:3])))
    alpha, beta = projection(orbit)
    for u in (here, there):
        assert abs(complex(*u[3:5])) == pytest.approx(abs(alpha))
        assert abs(complex(*u[5:7])) == pytest.approx(abs(beta))
    epochs = epochs_of(orbit)
    np.testing.assert_allclose(
        regular_position(here, T0, epochs), regular_position(there, T0 + 17.0, epochs), atol=1e-13
    )
