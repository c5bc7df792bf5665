"""General routines of scipy set to the same problem, as lean as they can fairly be made.

Their objectives use the project's own Kepler solver and plain numpy; the bounds are those of the
project's search.
"""

from __future__ import annotations

import numpy as np
from scipy.optimize import OptimizeResult, differential_evolution, least_squares

from relorbit.orbit.elements import NAMES, Elements, positions
from relorbit.orbit.kepler import TWO_PI, eccentric_anomaly
from relorbit.orbit.regular import elements_from_regular
from relorbit.solve.linear import sky_data
from relorbit.solve.observations import Observations
from relorbit.solve.search import LONGEST, MOST_REVOLUTIONS

POPULATION, TOLERANCE = 30, 1e-8
HIGHEST_E = 0.99


def period_bounds(o: Observations) -> tuple[float, float]:
    """ln P between the shortest and the longest period that the search looks at."""
    shortest = o.span / min(max(5.0, 0.4 * len(o)), MOST_REVOLUTIONS)
    return float(np.log(shortest)), float(np.log(LONGEST * o.span))


def three_nonlinear(o: Observations, seed: int) -> float:
    """Least chi2 over (ln P, e, phase), the Thiele-Innes constants projected out."""
    data = sky_data(o)
    # whitening with the Cholesky factor of each weight matrix, once
    l11 = np.sqrt(data.w_xx)
    l21 = data.w_xy / l11
    l22 = np.sqrt(np.maximum(data.w_yy - l21**2, 0.0))
    right = np.concatenate([l11 * data.z.real + l21 * data.z.imag, l22 * data.z.imag])
    t0 = o.mean_epoch
    time = data.epoch - t0
    n = time.size
    design = np.zeros((4, 2 * n))
    total = right @ right

    def chi2(p: np.ndarray) -> float:
        e = p[1]
        E = eccentric_anomaly(TWO_PI * (np.exp(-p[0]) * time + p[2]), e)
        X, Y = np.cos(E) - e, np.sqrt(1.0 - e * e) * np.sin(E)
        design[0, :n], design[1, :n], design[1, n:] = l11 * X, l21 * X, l22 * X
        design[2, :n], design[3, :n], design[3, n:] = l11 * Y, l21 * Y, l22 * Y
        b = design @ right
        try:
            return total - b @ np.linalg.solve(design @ design.T, b)
        except np.linalg.LinAlgError:
            return total

    bounds = [period_bounds(o), (0.0, HIGHEST_E), (0.0, 1.0)]
    return float(_evolve(chi2, bounds, seed).fun)


def all_seven(o: Observations, seed: int) -> float:
    """Least chi2 in theta and rho over all seven elements."""
    t0 = o.mean_epoch
    largest = float(o.rho.max())
    # ln P, phase, e, ln a, cos i, node, omega
    bounds = [
        period_bounds(o), (0.0, 1.0), (0.0, HIGHEST_E),
        (np.log(0.3 * largest), np.log(10.0 * largest)), (-1.0, 1.0), (0.0, np.pi), (0.0, TWO_PI),
    ]  # fmt: skip
    time = o.epoch - t0

    def chi2(p: np.ndarray) -> float:
        z = _place(time * np.exp(-p[0]) + p[1], p[2], np.exp(p[3]), p[4], p[5], p[6])
        return float(np.sum(_residuals(o, z) ** 2))

    return float(_evolve(chi2, bounds, seed).fun)


def refine_campbell(o: Observations, start: Elements) -> OptimizeResult:
    """Refinement of the Campbell elements with the default numerical Jacobian, residuals lean."""

    def residuals(p: np.ndarray) -> np.ndarray:
        P, T, e, a, i, node, omega = p
        turns = (o.epoch - T) / P
        z = _place(turns, min(max(e, 0.0), 0.9999), a, np.cos(np.radians(i)), np.radians(node),
                   np.radians(omega))  # fmt: skip
        return _residuals(o, z)

    return least_squares(residuals, [getattr(start, name) for name in NAMES])


def refine_plainly(o: Observations, start: Elements) -> OptimizeResult:
    """The same as one would write it from the public functions: `positions` in degrees."""
    theta_observed, theta_err = np.degrees(o.theta), np.degrees(1.0 / o.per_theta)
    rho_err = 1.0 / o.per_rho

    def residuals(p: np.ndarray) -> np.ndarray:
        elements = Elements(p[0], p[1], min(max(p[2], 0.0), 0.9999), *p[3:])
        theta, rho = positions(elements, o.epoch)
        gap = (theta_observed - theta + 180.0) % 360.0 - 180.0
        return np.concatenate([gap / theta_err, (o.rho - rho) / rho_err])

    return least_squares(residuals, [getattr(start, name) for name in NAMES])


def warm_start(
    best: np.ndarray, covariance: np.ndarray, t0: float, rng: np.random.Generator
) -> Elements:
    """Elements about three standard deviations from the best, a direction of its own each time."""
    root = np.linalg.cholesky(covariance + 1e-16 * np.diag(np.diag(covariance)))
    step = rng.standard_normal(7)
    step = root @ (3.0 * step / np.linalg.norm(step))
    while np.hypot(best[1] + step[1], best[2] + step[2]) > 0.98:
        step *= 0.5
    return elements_from_regular(best + step, t0)


def _place(
    turns: np.ndarray, e: float, a: float, cos_i: float, node: float, omega: float
) -> np.ndarray:
    """x + i y (arcsec) so many revolutions after periastron, angles in radians."""
    E = eccentric_anomaly(TWO_PI * turns, e)
    X, Y = np.cos(E) - e, np.sqrt(1.0 - e * e) * np.sin(E)
    along = a * (X * np.cos(omega) - Y * np.sin(omega))
    across = a * (X * np.sin(omega) + Y * np.cos(omega)) * cos_i
    return (along + 1j * across) * np.exp(1j * node)


def _residuals(o: Observations, z: np.ndarray) -> np.ndarray:
    gap = o.theta - np.angle(z)
    gap -= TWO_PI * np.rint(gap / TWO_PI)
    return np.concatenate([gap * o.per_theta, (o.rho - np.abs(z)) * o.per_rho])


def _evolve(chi2, bounds: list[tuple[float, float]], seed: int) -> OptimizeResult:
    return differential_evolution(
        chi2, bounds, popsize=POPULATION, tol=TOLERANCE, maxiter=5000, rng=seed
    )
