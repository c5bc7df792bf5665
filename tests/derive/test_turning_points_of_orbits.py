"""Periastron, closest and widest against a dense sampling of the revolution."""

import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import relorbit
from relorbit.derive.ephemeris import turning_points
from relorbit.measures.pair import RecordedOrbit
from relorbit.orbit.elements import Elements, complex_position, positions
from relorbit.orbit.kepler import mean_anomaly
from relorbit.orbit.regular import Uncertainty, elements_from_regular, regular_from_elements

ORBITS = {
    "ordinary": Elements(41.623, 1934.008, 0.2763, 0.907, 59.025, 23.717, 219.907),
    "very eccentric": Elements(168.68, 2005.13, 0.95, 3.697, 148.0, 36.9, 256.5),
    "edge-on": Elements(25.87, 2015.092, 0.5106, 0.67144, 90.0, 12.227, 100.563),
    "circular": Elements(12.5, 2001.25, 0.0, 0.31, 47.0, 120.0, 33.0),
    "face-on": Elements(60.0, 1990.5, 0.3, 1.1, 0.0, 20.0, 300.0),
}


def dense(orbit, after):
    """rho through one revolution from `after`, at epochs even in eccentric anomaly."""
    E = np.linspace(0.0, 4.0 * np.pi, 80_001)
    first = orbit.T + np.floor((after - orbit.T) / orbit.P) * orbit.P
    epochs = first + mean_anomaly(E, orbit.e) / (2.0 * np.pi) * orbit.P
    epochs = epochs[(epochs >= after) & (epochs <= after + orbit.P)]
    return positions(orbit, epochs)[1]


def assert_right(orbit, after):
    points = {point.kind: point for point in turning_points(orbit, after)}
    rho = dense(orbit, after)
    for kind, least in (("closest", True), ("widest", False)):
        point = points[kind]
        assert after <= point.epoch <= after + orbit.P * (1.0 + 1e-9)
        # no sample is closer (wider); and the samples come within their step of it
        best = rho.min() if least else rho.max()
        slack = 1e-9 * orbit.a
        assert point.rho <= best + slack if least else point.rho >= best - slack
        assert point.rho == pytest.approx(best, abs=2e-4 * orbit.a)
        there = complex_position(orbit, point.epoch)
        assert abs(point.rho * np.exp(1j * np.radians(point.theta)) - there) < 1e-12 * orbit.a
    assert [point.epoch_sigma for point in points.values()] == [None] * len(points)
    assert ("periastron" in points) == (orbit.e > 0.0)
    if orbit.e == 0.0:
        return
    periastron = points["periastron"]
    turns = (periastron.epoch - orbit.T) / orbit.P
    assert turns == pytest.approx(round(turns), abs=1e-9)
    assert after - 1e-9 <= periastron.epoch < after + orbit.P + 1e-9


@pytest.mark.parametrize("after", [1900.0, 2005.2, 2026.5])
@pytest.mark.parametrize("name", ORBITS)
def test_against_dense_sampling(name, after):
    assert_right(ORBITS[name], after)


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    st.builds(
        Elements, st.floats(1.0, 1000.0), st.floats(1900.0, 2050.0), st.floats(0.0, 0.95),
        st.floats(0.1, 5.0), st.floats(5.0, 175.0), st.floats(0.0, 359.0), st.floats(0.0, 359.0),
    ),
    st.floats(1950.0, 2050.0),
)  # fmt: skip
def test_any_orbit(orbit, after):
    assert_right(orbit, after)


def test_a_circle_seen_face_on_has_none():
    circle = Elements(10.0, 2000.0, 0.0, 1.0, 0.0, 0.0, 0.0)
    assert turning_points(circle, 2003.0) == ()


def test_face_on_by_hand():
    """Closest at periastron, 0.7 a, widest half a period later, 1.3 a."""
    kinds = {point.kind: point for point in turning_points(ORBITS["face-on"], 2000.0)}
    assert kinds["periastron"].epoch == pytest.approx(2050.5, abs=1e-9)
    assert kinds["closest"].epoch == pytest.approx(2050.5, abs=1e-4)
    assert kinds["widest"].epoch == pytest.approx(2020.5, abs=1e-4)
    assert kinds["closest"].rho == pytest.approx(0.7 * 1.1, rel=1e-9)
    assert kinds["widest"].rho == pytest.approx(1.3 * 1.1, rel=1e-9)


@pytest.mark.parametrize("turns", [0, 1, 7])
def test_at_the_very_passage_it_is_now(turns):
    orbit = Elements(8.0, 2000.0, 0.3, 1.0, 40.0, 20.0, 10.0)
    now = 2000.0 + 8.0 * turns
    assert turning_points(orbit, now)[0].epoch == now


@pytest.fixture(scope="module")
def recorded():
    """An invented orbit with an invented covariance, small enough for the first order."""
    root = np.random.default_rng(8).normal(size=(7, 7)) * 2e-4
    orbit = ORBITS["ordinary"].near(1990.0)
    return RecordedOrbit("made up", orbit, None, 1990.0, root @ root.T)


def test_errors_of_the_epochs_by_drawing_orbits(recorded):
    """Four hundred draws: the spread is known to 3.5 %, and 15 % is over four of that."""
    u = regular_from_elements(recorded.elements, 1990.0)
    draws = np.random.default_rng(21).multivariate_normal(u, recorded.covariance, 400)
    ours = {point.kind: point for point in turning_points(recorded, 2030.0)}
    spread = {kind: [] for kind in ours}
    for draw in draws:
        for point in turning_points(elements_from_regular(draw, 1990.0), 2030.0):
            spread[point.kind].append(point.epoch)
    assert set(spread) == {"periastron", "closest", "widest"}
    for kind, epochs in spread.items():
        assert np.std(epochs) == pytest.approx(ours[kind].epoch_sigma, rel=0.15), kind
        assert np.mean(epochs) == pytest.approx(ours[kind].epoch, abs=0.25 * ours[kind].epoch_sigma)


def test_a_later_periastron_is_less_certain(recorded):
    """By the error of P for each revolution: var T + 2 k cov(T, P) + k^2 var P."""
    from relorbit.orbit.regular import campbell_covariance

    orbit = recorded.elements
    matrix = campbell_covariance(orbit, Uncertainty(1990.0, recorded.covariance))
    for k in (1, 4):
        after = orbit.T + (k - 0.5) * orbit.P
        (first, *_) = turning_points(recorded, after)
        assert first.epoch == pytest.approx(orbit.T + k * orbit.P)
        expected = matrix[1, 1] + 2 * k * matrix[0, 1] + k * k * matrix[0, 0]
        assert first.epoch_sigma == pytest.approx(np.sqrt(expected), rel=1e-6)


def test_json(recorded):
    rows = json.loads(json.dumps([p.to_dict() for p in turning_points(recorded, 2030.0)]))
    assert [row["kind"] for row in rows] == ["periastron", "closest", "widest"]
    assert all(set(row) == {"kind", "epoch", "epoch_sigma", "theta", "rho"} for row in rows)
    assert relorbit.turning_points is turning_points
