"""Errors of the total mass, to first order, and where they come from."""

from math import hypot, sqrt

import numpy as np
import pytest

from relorbit.orbit.elements import Elements
from relorbit.orbit.regular import Uncertainty, campbell_covariance
from relorbit.orbit.third_law import (
    axis_cubed_over_period_squared,
    mass_from_axis,
    total_mass,
)

ORBIT = Elements(41.6, 1990.0, 0.28, 0.9, 59.0, 23.7, 219.9)
PARALLAX = 55.0
ROOT = np.random.default_rng(11).normal(size=(7, 7)) * 2e-3
UNCERTAINTY = Uncertainty(1987.25, ROOT @ ROOT.T)


def test_nothing_known_of_the_errors_is_none_and_not_zero():
    mass = total_mass(ORBIT, PARALLAX)
    assert mass.value == mass_from_axis(ORBIT.P, ORBIT.a, PARALLAX)
    assert (mass.sigma, mass.sigma_orbit, mass.sigma_parallax) == (None, None, None)
    assert mass.to_dict() == {"value": mass.value, "sigma": None}
    assert axis_cubed_over_period_squared(ORBIT, None) == (0.9**3 / 41.6**2, None)


def test_the_parallax_alone_is_three_times_its_share():
    mass = total_mass(ORBIT, PARALLAX, 0.55)
    assert mass.sigma == pytest.approx(0.03 * mass.value, rel=1e-14)
    assert mass.sigma_orbit is None


def test_the_orbit_with_its_correlation():
    """Against the covariance of P and a: (3/a, -2/P) on both sides."""
    mass = total_mass(ORBIT, PARALLAX, None, UNCERTAINTY)
    matrix = campbell_covariance(ORBIT, UNCERTAINTY)[np.ix_([0, 3], [0, 3])]
    slope = np.array([-2.0 / ORBIT.P, 3.0 / ORBIT.a])
    assert mass.sigma == mass.sigma_orbit
    assert mass.sigma == pytest.approx(mass.value * sqrt(slope @ matrix @ slope), rel=1e-9)
    assert mass.sigma_parallax is None
    value, sigma = axis_cubed_over_period_squared(ORBIT, UNCERTAINTY)
    assert sigma / value == pytest.approx(mass.sigma / mass.value, rel=1e-12)


def test_both_add_in_quadrature():
    mass = total_mass(ORBIT, PARALLAX, 0.55, UNCERTAINTY)
    assert mass.sigma == pytest.approx(hypot(mass.sigma_orbit, mass.sigma_parallax), rel=1e-14)
    assert mass.to_dict() == {"value": mass.value, "sigma": mass.sigma}


def test_by_sampling():
    """Ten thousand draws of the coordinates: 1/sqrt(2 N) is 0.7 %, and 3 % is four of these."""
    from relorbit.orbit.regular import regular_from_elements

    small = Uncertainty(1987.25, UNCERTAINTY.covariance * 0.01)
    u = regular_from_elements(ORBIT, 1987.25)
    draws = np.random.default_rng(3).multivariate_normal(u, small.covariance, 10_000)
    a = np.hypot(draws[:, 3], draws[:, 4]) + np.hypot(draws[:, 5], draws[:, 6])
    periods = np.exp(draws[:, 0])
    masses = [mass_from_axis(P, axis, PARALLAX) for P, axis in zip(periods, a, strict=True)]
    expected = total_mass(ORBIT, PARALLAX, None, small).sigma
    assert np.std(masses) == pytest.approx(expected, rel=0.03)
