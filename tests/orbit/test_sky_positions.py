"""Positions on the sky: symmetries that hold for every orbit, shapes, no NaN."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from orbit_strategies import axes, bearings, eccentricities, inclinations, orbits, properties

from relorbit.orbit.elements import Elements, complex_position, polar, positions

PHASES = np.array([-3.3, -0.9, -0.25, 0.0, 1e-9, 0.01, 0.3, 0.5, 0.77, 12.4])
# epochs of P and T that are exact in binary, so that a shift by P loses nothing
exact_periods = st.integers(2, 4000).map(lambda n: n / 8.0)


def exact_orbit(P, e, a, i, node, omega):
    return Elements(P, 1987.125, e, a, i, node, omega)


exact_orbits = st.builds(
    exact_orbit, exact_periods, eccentricities, axes, inclinations, bearings, bearings
)


def epochs_of(orbit):
    return np.round((orbit.T + PHASES * orbit.P) * 1024.0) / 1024.0


@properties
@given(exact_orbits, st.integers(-40, 40))
def test_a_period_later_it_is_back(orbit, turns):
    epochs = epochs_of(orbit)
    gap = complex_position(orbit, epochs) - complex_position(orbit, epochs + turns * orbit.P)
    # the phase of many turns is rounded to some 1e-14; near periastron speed is that of apastron
    # times (1 + e)/(1 - e), and the mean speed 2 pi a a period times the root of it
    fastest = 2.0 * np.pi * np.sqrt((1.0 + orbit.e) / (1.0 - orbit.e))
    assert np.abs(gap).max() < orbit.a * (1e-14 + 3e-14 * fastest)


@properties
@given(exact_orbits, st.integers(-40, 40))
def test_any_passage_names_the_same_orbit(orbit, turns):
    other = replace(orbit, T=orbit.T + turns * orbit.P)
    epochs = epochs_of(orbit)
    gap = complex_position(orbit, epochs) - complex_position(other, epochs)
    fastest = 2.0 * np.pi * np.sqrt((1.0 + orbit.e) / (1.0 - orbit.e))
    assert np.abs(gap).max() < orbit.a * (1e-14 + 3e-14 * fastest)


@properties
@given(orbits(), st.sampled_from([0.25, 2.0, 1024.0]))
def test_size_is_size(orbit, factor):
    theta, rho = positions(orbit, epochs_of(orbit))
    theta_of, rho_of = positions(replace(orbit, a=orbit.a * factor), epochs_of(orbit))
    np.testing.assert_array_equal(theta_of, theta)
    np.testing.assert_array_equal(rho_of, rho * factor)


@properties
@given(orbits(), st.floats(0.0, 360.0))
def test_the_node_turns_the_picture(orbit, angle):
    turned = complex_position(replace(orbit, node=orbit.node + angle), epochs_of(orbit))
    expected = complex_position(orbit, epochs_of(orbit)) * np.exp(1j * np.radians(angle))
    assert np.abs(turned - expected).max() < 4e-14 * orbit.a


@properties
@given(orbits())
def test_the_other_node_is_the_same_path(orbit):
    other = replace(orbit, node=orbit.node + 180.0, omega=orbit.omega + 180.0)
    for same in (other, orbit.folded()):
        gap = complex_position(orbit, epochs_of(orbit)) - complex_position(same, epochs_of(orbit))
        assert np.abs(gap).max() < 4e-14 * orbit.a
    assert orbit.folded().node < 180.0


@properties
@given(orbits())
def test_a_mirror_turns_the_motion_round(orbit):
    """East for west: i -> 180 - i, node -> -node, omega as it was."""
    mirror = replace(orbit, i=180.0 - orbit.i, node=-orbit.node)
    gap = complex_position(mirror, epochs_of(orbit)) - np.conj(
        complex_position(orbit, epochs_of(orbit))
    )
    assert np.abs(gap).max() < 4e-14 * orbit.a


@properties
@given(exact_orbits)
def test_time_run_backwards(orbit):
    """i -> 180 - i and omega -> -omega, the rule by which old elements are turned into ours."""
    back = replace(orbit, i=180.0 - orbit.i, omega=-orbit.omega)
    since = epochs_of(orbit) - orbit.T
    gap = complex_position(back, orbit.T - since) - complex_position(orbit, orbit.T + since)
    assert np.abs(gap).max() < 4e-14 * orbit.a


@properties
@given(orbits())
def test_theta_increases_below_90_degrees(orbit):
    z = complex_position(orbit, orbit.T + orbit.P * np.linspace(0.0, 1.0, 4001))
    # the second law: equal areas in equal times, pi a^2 sqrt(1 - e^2) cos i in a period
    area = 0.5 * np.sum(np.imag(np.conj(z[:-1]) * z[1:]))
    full = np.pi * orbit.a**2 * np.sqrt(1.0 - orbit.e**2) * np.cos(np.radians(orbit.i))
    assert area == pytest.approx(full, rel=2e-3, abs=1e-12 * orbit.a**2)


@properties
@given(exact_orbits, st.floats(0.05, 0.95))
def test_equal_areas_in_equal_times(orbit, phase):
    when = orbit.T + orbit.P * (phase + np.array([-2e-5, -1e-5, 0.0, 1e-5, 2e-5]))
    z = complex_position(orbit, when)
    speed = np.array([1.0, -8.0, 0.0, 8.0, -1.0]) @ z / (12e-5 * orbit.P)
    rate = np.imag(np.conj(z[2]) * speed)
    full = np.sqrt((1.0 - orbit.e) * (1.0 + orbit.e)) * np.cos(np.radians(orbit.i))
    expected = 2.0 * np.pi * orbit.a**2 * full / orbit.P
    # the epochs of a short period are rounded to 2e-13 yr, a part in 1e-8 of these steps
    scale = 2.0 * np.pi * orbit.a**2 / orbit.P
    assert rate == pytest.approx(expected, abs=scale * 1e-6)


@properties
@given(orbits())
def test_ranges_and_no_nan(orbit):
    theta, rho = positions(orbit, epochs_of(orbit))
    assert np.all((theta >= 0.0) & (theta < 360.0))
    assert np.all((rho >= 0.0) & (rho <= orbit.a * (1.0 + orbit.e) * (1.0 + 1e-14)))


def test_face_on_by_hand():
    """A circle of 8 years: node 0, omega 10, so at T it stands at 10 and gains 45 a year."""
    orbit = Elements(8.0, 2000.0, 0.0, 0.5, 0.0, 0.0, 10.0)
    theta, rho = positions(orbit, [2000.0, 2001.0, 2002.0, 2007.0])
    np.testing.assert_allclose(theta, [10.0, 55.0, 100.0, 325.0], atol=1e-12)
    np.testing.assert_allclose(rho, 0.5, rtol=1e-15)


def test_edge_on_by_hand():
    """i 90: on the line of nodes always; at the node with omega 0 and T, a quarter later at 0."""
    orbit = Elements(8.0, 2000.0, 0.0, 0.5, 90.0, 30.0, 0.0)
    theta, rho = positions(orbit, [2000.0, 2001.0, 2003.0, 2004.0])
    np.testing.assert_allclose(theta, [30.0, 30.0, 210.0, 210.0], atol=1e-12)
    np.testing.assert_allclose(rho, 0.5 * np.array([1, np.sqrt(0.5), np.sqrt(0.5), 1]), rtol=1e-14)


@pytest.mark.parametrize("shape", [(), (1,), (5,), (2, 3), (0,)])
def test_shapes(shape):
    orbit = Elements(8.0, 2000.0, 0.3, 0.5, 40.0, 30.0, 20.0)
    epochs = np.full(shape, 2001)
    theta, rho = positions(orbit, epochs)
    assert theta.shape == rho.shape == shape
    one = positions(orbit, 2001.0)
    assert np.all(theta == one[0])
    assert np.all(rho == one[1])
    single = positions(orbit, epochs.astype(np.float32))
    np.testing.assert_array_equal(single[0], theta)


@pytest.mark.parametrize("z", [1.0 - 1e-300j, 1.0 - 1e-20j, 1.0 + 0.0j, complex(1.0, -0.0)])
def test_north_is_0_and_never_360(z):
    assert polar(np.array([z]))[0][0] == 0.0


def test_an_epoch_that_is_no_number_is_refused():
    orbit = Elements(8.0, 2000.0, 0.3, 0.5, 40.0, 30.0, 20.0)
    with pytest.raises(ValueError, match=r"^the mean anomaly must be finite$"):
        positions(orbit, [2000.0, float("nan")])
