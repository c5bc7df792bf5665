"""The refinement against scipy's least squares on residuals written here, in Campbell elements.

Same measures, same errors: the same least chi2, the same orbit, and the covariance of a numerical
Jacobian at the minimum.
"""

import numpy as np
import pytest
from scipy.optimize import least_squares

import relorbit

NAMES = ("P", "T", "e", "a", "i", "node", "omega")
TRUTH = {  # invented pairs
    "ordinary": (38.0, 1986.2, 0.41, 0.92, 52.0, 71.0, 133.0),
    "retrograde, eccentric": (61.0, 1979.4, 0.83, 1.35, 128.0, 20.0, 245.0),
    "nearly edge-on": (24.0, 1991.7, 0.32, 0.55, 87.0, 155.0, 300.0),
    "nearly circular": (30.0, 1988.0, 0.04, 0.80, 40.0, 100.0, 60.0),
}


def sky(values, epochs):
    """theta (radians) and rho of Campbell elements, by their textbook formulas."""
    P, T, e, a = values[:4]
    i, node, omega = np.radians(values[4:])
    M = 2.0 * np.pi * (((epochs - T) / P) % 1.0)
    E = np.full_like(M, np.pi)  # from apastron Newton's steps find the root for any e below 1
    for _ in range(60):
        E = E - (E - e * np.sin(E) - M) / (1.0 - e * np.cos(E))
    true = 2.0 * np.arctan2(np.sqrt(1.0 + e) * np.sin(E / 2), np.sqrt(1.0 - e) * np.cos(E / 2))
    r = a * (1.0 - e * np.cos(E))
    x, y = r * np.cos(true + omega), r * np.sin(true + omega) * np.cos(i)
    return np.arctan2(y, x) + node, np.hypot(x, y)


def measured(name):
    """Invented measures over 1.4 revolutions; some rows lack theta, others rho."""
    random = np.random.default_rng(sorted(TRUTH).index(name) + 40)
    values = np.array(TRUTH[name])
    epochs = np.sort(random.uniform(2000.0 - 1.4 * values[0], 2000.0, 60))
    theta, rho = sky(values, epochs)
    rho_err = random.choice([0.004, 0.02, 0.05], epochs.size) * values[3]
    theta_err = np.degrees(rho_err / rho)
    theta = np.degrees(theta) + theta_err * random.normal(size=epochs.size)
    rho = np.abs(rho + rho_err * random.normal(size=epochs.size))
    theta[5::13], rho[7::13] = np.nan, np.nan
    return epochs, theta % 360.0, rho, theta_err, rho_err


def residuals_of(epochs, theta, rho, theta_err, rho_err):
    has_theta, has_rho = np.isfinite(theta), np.isfinite(rho)

    def residuals(values):
        theta_c, rho_c = sky(values, epochs)
        gap = (theta - np.degrees(theta_c) + 180.0) % 360.0 - 180.0
        both = (gap / theta_err)[has_theta], ((rho - rho_c) / rho_err)[has_rho]
        return np.concatenate(both)

    return residuals


@pytest.fixture(scope="module", params=TRUTH)
def fits(request):
    data = measured(request.param)
    solution = relorbit.solve(relorbit.Pair.from_arrays(*data))
    # scipy's steps grow with the size of an unknown, so T is counted from near its value
    origin = np.array([0.0, TRUTH[request.param][1], 0.0, 0.0, 0.0, 0.0, 0.0])
    start = np.array(TRUTH[request.param]) - origin
    start = start + np.array([0.1, 0.1, 0.005, 0.005, 1.0, 1.0, 1.0])
    residuals = residuals_of(*data)
    found = least_squares(
        lambda values: residuals(values + origin), start, jac="3-point", method="trf",
        x_scale="jac", xtol=1e-15, ftol=1e-15, gtol=1e-15, max_nfev=400,
    )  # fmt: skip
    found.x = found.x + origin
    return solution, found


def test_the_same_least_chi2(fits):
    solution, found = fits
    chi2 = 2.0 * found.cost
    assert solution.chi2 == pytest.approx(chi2, rel=1e-6)
    assert solution.dof == found.fun.size - 7
    assert solution.residuals.chi2 == pytest.approx(chi2, rel=1e-6)


def test_the_same_orbit(fits):
    solution, found = fits
    theirs = relorbit.Elements(*found.x).near(solution.elements.T)
    for name in NAMES:
        sigma = solution.sigma[name]
        gap = getattr(solution.elements, name) - getattr(theirs, name)
        if name in ("node", "omega"):
            gap = (gap + 180.0) % 360.0 - 180.0
        assert abs(gap) < 1e-3 * sigma, name


def test_the_same_covariance(fits):
    """1e-3 of the product of the two errors; T carried to the same passage."""
    solution, found = fits
    theirs = np.linalg.inv(found.jac.T @ found.jac)
    carry = np.eye(7)
    carry[1, 0] = np.rint((solution.elements.T - found.x[1]) / found.x[0])
    theirs = carry @ theirs @ carry.T
    ours = solution.covariance / solution.error_scale**2
    size = np.sqrt(np.diag(theirs))
    np.testing.assert_allclose(ours / np.outer(size, size), theirs / np.outer(size, size),
                               rtol=0.0, atol=1e-3)  # fmt: skip


def test_errors_of_a_pair_that_scatters_more_are_scaled(fits):
    """Errors given half as large: chi2 fourfold, formal errors halved, scaled ones as before."""
    solution, _ = fits
    o = solution.residuals
    pair = relorbit.Pair.from_arrays(
        o.epoch, o.theta, o.rho, np.where(np.isfinite(o.theta), o.theta_err, 1.0) / 2.0,
        np.where(np.isfinite(o.rho), o.rho_err, 1.0) / 2.0,
    )  # fmt: skip
    tight = relorbit.solve(pair)
    assert tight.chi2 == pytest.approx(4.0 * solution.chi2, rel=1e-6)
    assert tight.error_scale == pytest.approx(np.sqrt(tight.chi2 / tight.dof))
    for name in NAMES:
        assert tight.sigma_formal[name] == pytest.approx(solution.sigma_formal[name] / 2, rel=1e-3)
        expected = solution.sigma_formal[name] * np.sqrt(solution.chi2 / solution.dof)
        assert tight.sigma[name] == pytest.approx(expected, rel=1e-3)
