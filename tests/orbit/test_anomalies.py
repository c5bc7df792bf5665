"""Kepler's equation and the anomalies: inverses, symmetry, shapes, refusals."""

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from orbit_strategies import properties

from relorbit.orbit.kepler import (
    BLOCK,
    eccentric_anomaly,
    eccentric_from_true,
    mean_anomaly,
    true_anomaly,
    unit_ellipse,
)

angles = st.floats(-40.0, 40.0)
shapes = st.floats(0.0, 0.99)


@properties
@given(angles, shapes)
def test_mean_and_eccentric_are_inverses(M, e):
    E = eccentric_anomaly(M, e)
    assert mean_anomaly(E, e) == pytest.approx(M, abs=1e-14 + 4e-15 * abs(M))


@properties
@given(angles, shapes)
def test_eccentric_and_true_are_inverses_in_the_same_revolution(E, e):
    f = true_anomaly(E, e)
    assert abs(f - E) < np.pi
    # towards apastron f changes sqrt((1 + e)/(1 - e)) times slower than E
    assert eccentric_from_true(f, e) == pytest.approx(E, abs=1e-13 + 1e-14 * abs(E) / (1.0 - e))


@properties
@given(angles, shapes)
def test_true_anomaly_has_the_half_angle_formula(E, e):
    """tan(f/2) = sqrt((1 + e)/(1 - e)) tan(E/2) (Meeus, ch. 30, from memory)."""
    inner = 2.0 * np.arctan2(
        np.sqrt(1.0 + e) * np.sin(0.5 * E), np.sqrt(1.0 - e) * np.cos(0.5 * E)
    )
    gap = (true_anomaly(E, e) - inner + np.pi) % (2.0 * np.pi) - np.pi
    assert abs(gap) < 1e-13 / (1.0 - e)


@properties
@given(angles, shapes, st.integers(-1000, 1000))
def test_odd_and_periodic(M, e, turns):
    assert eccentric_anomaly(-M, e) == -eccentric_anomaly(M, e)
    full = eccentric_anomaly(M + 2.0 * np.pi * turns, e) - 2.0 * np.pi * turns
    # the sum M + 2 pi turns is rounded; E follows M 1/(1 - e) times as fast at the most
    slack = np.spacing(2.0 * np.pi * abs(turns) + abs(M)) * 2.0
    assert full == pytest.approx(eccentric_anomaly(M, e), abs=1e-14 + slack / (1.0 - e) + slack)


@properties
@given(angles, shapes)
def test_the_unit_ellipse_is_one(E, e):
    X, Y = unit_ellipse(E, e)
    assert (X + e) ** 2 + Y**2 / (1.0 - e * e) == pytest.approx(1.0, abs=1e-13)
    # distance from the focus, and from the directrix times e
    assert np.hypot(X, Y) == pytest.approx(1.0 - e * np.cos(E), abs=1e-14)
    assert np.hypot(X, Y) == pytest.approx(1.0 - e * e - e * X, abs=1e-14)


def test_unit_ellipse_keeps_its_precision_at_periastron():
    """cos E - e as it is written loses four digits here; mpmath is the reference."""
    for E in (0.0, 1e-3, 0.005, 0.01):
        X, Y = unit_ellipse(E, 0.9999)
        with mpmath.workdps(40):
            exact, e = mpmath.mpf(E), mpmath.mpf(0.9999)
            along = float(mpmath.cos(exact) - e)
            across = float(mpmath.sqrt(1 - e * e) * mpmath.sin(exact))
        assert pytest.approx(along, rel=1e-15, abs=0.0) == X
        assert pytest.approx(across, rel=1e-15, abs=0.0) == Y


def test_apsides_exactly():
    for e in (0.0, 0.5, 0.99):
        assert eccentric_anomaly(0.0, e) == 0.0
        assert eccentric_anomaly(np.pi, e) == pytest.approx(np.pi, abs=5e-16)
        assert true_anomaly(np.pi, e) == pytest.approx(np.pi, abs=1e-15)


def test_a_circle_has_one_anomaly():
    M = np.linspace(-9.0, 9.0, 301)
    for value in (eccentric_anomaly(M, 0.0), true_anomaly(M, 0.0), eccentric_from_true(M, 0.0)):
        np.testing.assert_allclose(value, M, rtol=0.0, atol=4e-15)


@pytest.mark.parametrize(
    ("mean", "e", "shape"),
    [
        (0.3, 0.2, ()),
        ([0.3], 0.2, (1,)),
        (np.linspace(0, 6, 5), np.linspace(0, 0.9, 4)[:, None], (4, 5)),
        (np.zeros((2, 1, 3)), np.full((7, 1), 0.5), (2, 7, 3)),
        ([], 0.5, (0,)),
        (np.zeros((0, 4)), 0.5, (0, 4)),
    ],
)
def test_shapes_are_broadcast(mean, e, shape):
    assert eccentric_anomaly(mean, e).shape == shape
    assert mean_anomaly(mean, e).shape == shape
    assert true_anomaly(mean, e).shape == shape
    assert eccentric_from_true(mean, e).shape == shape
    assert unit_ellipse(mean, e)[1].shape == shape


@pytest.mark.parametrize("size", [1, BLOCK - 1, BLOCK, BLOCK + 1, 2 * BLOCK + 7])
def test_blocks_leave_no_seam(size):
    """Every value of an array is what it is alone, first and last of a block too."""
    random = np.random.default_rng(size)
    M, e = random.uniform(-20.0, 20.0, size), random.uniform(0.0, 0.9999, size)
    whole = eccentric_anomaly(M, e)
    assert np.all(np.isfinite(whole))
    for k in {0, size // 2, size - 1, min(size, BLOCK) - 1, min(size - 1, BLOCK)}:
        # a block that holds more than one revolution is reduced, which costs one rounding
        np.testing.assert_allclose(whole[k], eccentric_anomaly(M[k], e[k]), rtol=1e-15, atol=4e-15)
    np.testing.assert_allclose(mean_anomaly(whole, e), M, rtol=0.0, atol=2e-14)


def test_the_arguments_are_left_alone():
    M, e = np.linspace(-9.0, 9.0, 40), np.linspace(0.0, 0.99, 40)
    kept = M.copy(), e.copy()
    eccentric_anomaly(M, e)
    np.testing.assert_array_equal(M, kept[0])
    np.testing.assert_array_equal(e, kept[1])


def test_integers_single_precision_and_lists():
    assert eccentric_anomaly(3, 0) == 3.0
    single = eccentric_anomaly(np.float32(0.5), np.float32(0.25))
    assert single.dtype == np.float64
    assert single == eccentric_anomaly(0.5, 0.25)
    assert eccentric_anomaly([1, 2], [0.5, 0]).tolist()[1] == 2.0
    strided = np.linspace(0.0, 6.0, 20)[::-2]
    plain = eccentric_anomaly(strided.copy(), 0.4)
    np.testing.assert_array_equal(eccentric_anomaly(strided, 0.4), plain)


@pytest.mark.parametrize("e", [1.0, -1e-300, 1.5, float("nan"), [0.1, 1.0]])
def test_an_eccentricity_outside_is_refused(e):
    with pytest.raises(ValueError, match=r"^the eccentricity must lie in 0 <= e < 1$"):
        eccentric_anomaly(0.3, e)


@pytest.mark.parametrize("mean", [float("nan"), float("inf"), [0.0, -float("inf")]])
def test_a_mean_anomaly_that_is_no_number_is_refused(mean):
    with pytest.raises(ValueError, match=r"^the mean anomaly must be finite$"):
        eccentric_anomaly(mean, 0.3)
