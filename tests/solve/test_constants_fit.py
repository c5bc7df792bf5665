"""Thiele-Innes constants at given (P, e, T) against a general least-squares routine."""

from __future__ import annotations

import numpy as np
import pytest
from simulate import history, observed

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, projection_from_constants
from relorbit.orbit.kepler import TWO_PI, eccentric_anomaly, unit_ellipse
from relorbit.solve.linear import SkyData, fit_constants, sky_data, solve_scaled
from relorbit.solve.observations import Observations, observe


def by_lstsq(data: SkyData, P: float, e: float, T: float) -> tuple[np.ndarray, float]:
    """A, B, F, G and chi2 from the whole design matrix, two rows a measure."""
    X, Y = unit_ellipse(eccentric_anomaly(TWO_PI * (data.epoch - T) / P, e), e)
    design, right = [], []
    for k in range(data.epoch.size):
        weight = np.array([[data.w_xx[k], data.w_xy[k]], [data.w_xy[k], data.w_yy[k]]])
        values, vectors = np.linalg.eigh(weight)
        root = (vectors * np.sqrt(np.maximum(values, 0.0))).T
        design.append(root @ [[X[k], 0.0, Y[k], 0.0], [0.0, X[k], 0.0, Y[k]]])
        right.append(root @ [data.z[k].real, data.z[k].imag])
    design, right = np.concatenate(design), np.concatenate(right)
    constants = np.linalg.lstsq(design, right, rcond=None)[0]
    return constants, float(np.sum((right - design @ constants) ** 2))


@pytest.mark.parametrize("seed", range(6))
def test_constants_and_chi2_agree_with_lstsq(seed: int) -> None:
    rng = np.random.default_rng([11, seed])
    elements, pair = history(rng)
    data = sky_data(observe(pair.measures))
    P = elements.P * np.array([0.7, 1.0, 1.31])
    e = np.array([0.0, elements.e, 0.93])
    T = elements.T + P * np.array([0.2, 0.0, 0.45])
    fit = fit_constants(data, P, e, T)
    for k in range(3):
        constants, chi2 = by_lstsq(data, P[k], e[k], T[k])
        size = np.abs(constants).max()
        assert fit.constants[k] == pytest.approx(constants, rel=1e-6, abs=1e-6 * size)
        assert fit.chi2[k] == pytest.approx(chi2, rel=1e-6, abs=1e-9 * data.constant)


def test_normal_matrix_is_the_inverse_of_the_scatter_of_the_constants() -> None:
    rng = np.random.default_rng(12)
    elements = Elements(40.0, 1995.0, 0.3, 1.0, 40.0, 70.0, 200.0)
    epoch = np.linspace(1950.0, 2015.0, 30)
    # errors small against rho, where the Gaussian in x and y is that of theta and rho
    found = []
    for _ in range(400):
        data = sky_data(observe(observed(elements, epoch, 0.004, rng).measures))
        fit = fit_constants(data, [elements.P], [elements.e], [elements.T])
        found.append(fit.constants[0])
    expected = np.sqrt(np.diag(np.linalg.inv(fit.normal[0])))
    # the scatter of 400 draws is known to 3.5 %
    assert np.std(found, axis=0) == pytest.approx(expected, rel=0.15)


def test_constants_are_those_of_the_orbit_when_nothing_is_wrong() -> None:
    elements = Elements(40.0, 1995.0, 0.3, 1.0, 40.0, 70.0, 200.0)
    epoch = np.linspace(1950.0, 2015.0, 30)
    exact = observed(elements, epoch, 1e-9, np.random.default_rng(1))
    fit = fit_constants(sky_data(observe(exact.measures)), [40.0], [0.3], [1995.0])
    alpha, beta = projection_from_constants(*fit.constants[0])
    assert abs(alpha) + abs(beta) == pytest.approx(1.0, abs=1e-8)  # the semimajor axis
    assert np.degrees(np.angle(alpha)) % 360.0 == pytest.approx(270.0, abs=1e-6)


def rows(theta: list[float], rho: list[float], theta_err: float, rho_err: float) -> Observations:
    n = len(theta)
    pair = Pair.from_arrays(
        2000.0 + np.arange(n), theta, rho, np.full(n, theta_err), np.full(n, rho_err)
    )
    return observe(pair.measures)


def test_weights_lie_along_and_across_the_direction_of_the_pair() -> None:
    data = sky_data(rows([30.0, 120.0], [2.0, 0.5], 1.0, 0.05))
    for k, (theta, rho) in enumerate([(30.0, 2.0), (120.0, 0.5)]):
        weight = np.array([[data.w_xx[k], data.w_xy[k]], [data.w_xy[k], data.w_yy[k]]])
        along = np.array([np.cos(np.radians(theta)), np.sin(np.radians(theta))])
        across = np.array([-along[1], along[0]])
        assert along @ weight @ along == pytest.approx(1.0 / 0.05**2)
        assert across @ weight @ across == pytest.approx(1.0 / (rho * np.radians(1.0)) ** 2)
        assert along @ weight @ across == pytest.approx(0.0, abs=1e-9)


def test_a_row_without_rho_binds_across_only_and_one_without_theta_not_at_all() -> None:
    data = sky_data(rows([30.0, np.nan, 60.0], [np.nan, 1.0, 1.2], 1.0, 0.05))
    weight = np.array([[data.w_xx[0], data.w_xy[0]], [data.w_xy[0], data.w_yy[0]]])
    along = np.array([np.cos(np.radians(30.0)), np.sin(np.radians(30.0))])
    assert weight @ along == pytest.approx([0.0, 0.0], abs=1e-9 * np.trace(weight))
    assert np.trace(weight) > 0.0
    assert data.w_xx[1] == data.w_xy[1] == data.w_yy[1] == 0.0


def test_singular_systems_are_solved_without_blowing_up() -> None:
    normal = np.array([[[1.0, 1.0], [1.0, 1.0]], [[4.0, 0.0], [0.0, 0.0]]])
    right = np.array([[2.0, 2.0], [8.0, 0.0]])
    solved = solve_scaled(normal, right)
    assert solved[0].sum() == pytest.approx(2.0, abs=1e-9)
    assert np.abs(solved[0]).max() < 100.0
    assert solved[1] == pytest.approx([2.0, 0.0])
