"""Nonlinear least squares on (theta, rho), one orbit or many at a time.

The unknowns are the regular coordinates of `relorbit.orbit.regular`, the Jacobian is exact, and
the step is that of Levenberg (1944) and Marquardt (1963, J. SIAM 11, 431). Held elements are kept
by stepping in the directions that do not change them, and putting them back to their values after
each step.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import PLACE, SIZE, jacobian_and_place
from relorbit.solve.holding import Holding
from relorbit.solve.linear import SkyData, solve_scaled
from relorbit.solve.observations import Observations

HIGHEST_E = 0.99999
FIRST_DAMPING, LESS_DAMPING, MORE_DAMPING = 1e-4, 0.1, 8.0
MOST_DAMPING = 1e10  # an orbit that does not get better with as short a step as that is at rest
SLOW = 20  # iterations after which chi2 is taken to have a bent valley
BLOCK = 100_000  # residuals of many orbits at a time: bounds the memory
LARGEST_STEP = 1.5  # in ln P, of one iteration


@dataclass(frozen=True)
class Problem:
    """A least-squares problem in the regular coordinates of a reference epoch.

    Attributes
    ----------
    reference_epoch : float
        t0, Julian year.
    values : int
        m, the number of residuals.
    rows : callable
        From c orbits, shape (c, 7), the derivatives of the model by the seven coordinates and,
        as the eighth row, the residuals (observed less computed), shape (c, 8, m), all
        standardised.
    """

    reference_epoch: float
    values: int
    rows: Callable[[FloatArray], FloatArray]

    def with_jacobian(self, u: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Residuals, shape (c, m), and the Jacobian of the model, shape (c, 7, m)."""
        rows = self.rows(u)
        return rows[:, SIZE], rows[:, :SIZE]


def polar_problem(observations: Observations, reference_epoch: float) -> Problem:
    """Standardised residuals of rho and theta (wrapped): the chi2 that a solution reports."""
    o = observations
    direction = np.exp(1j * o.theta)

    def rows(u: FloatArray) -> FloatArray:
        both = jacobian_and_place(u, reference_epoch, o.epoch)
        z = both[:, PLACE]
        rho = np.maximum(np.abs(z), 1e-12)
        unit = np.conj(z)
        unit /= rho
        # turned to the direction of the pair, dz is along + i across: rho and theta alternate
        both *= unit[:, None]
        weight = np.empty((*rho.shape, 2))
        weight[..., 0] = o.per_rho
        np.divide(o.per_theta, rho, out=weight[..., 1])
        out = both.view(float)
        out[:, :SIZE] *= weight.reshape(rho.shape[0], 1, -1)
        np.subtract(o.rho, rho, out=z.real)
        unit *= direction
        np.arctan2(unit.imag, unit.real, out=z.imag)
        z.real *= o.per_rho
        z.imag *= o.per_theta
        return out

    return Problem(reference_epoch, 2 * len(o), rows)


def places_of_values(observations: Observations) -> NDArray[np.intp]:
    """Where the measured thetas, and then the measured rhos, stand among polar residuals."""
    theta, rho = np.flatnonzero(observations.per_theta), np.flatnonzero(observations.per_rho)
    return np.concatenate([2 * theta + 1, 2 * rho])


def sky_problem(data: SkyData, reference_epoch: float) -> Problem:
    """Standardised residuals of x and y: smooth where theta is not, so good far from home."""
    # W = L L' with L lower triangular, so L' dz is standardised
    l11 = np.sqrt(data.w_xx)
    l21 = np.where(l11 > 0.0, data.w_xy / np.where(l11 > 0.0, l11, 1.0), 0.0)
    l22 = np.sqrt(np.maximum(data.w_yy - l21 * l21, 0.0))

    def rows(u: FloatArray) -> FloatArray:
        both = jacobian_and_place(u, reference_epoch, data.epoch)
        np.subtract(data.z, both[:, PLACE], out=both[:, PLACE])
        return np.concatenate([l11 * both.real + l21 * both.imag, l22 * both.imag], axis=-1)

    return Problem(reference_epoch, 2 * data.epoch.size, rows)


@dataclass(frozen=True)
class Refined:
    """Orbits after refinement.

    Attributes
    ----------
    u : ndarray, shape (c, 7)
    chi2 : ndarray, shape (c,)
    at_rest : bool ndarray, shape (c,)
        False where the iterations ended first.
    iterations : int
    """

    u: FloatArray
    chi2: FloatArray
    at_rest: NDArray[np.bool_]
    iterations: int


def refine(
    problem: Problem,
    u: FloatArray,
    held: Holding | None = None,
    most_iterations: int = 100,
    tolerance: float = 1e-4,
    columns: slice = slice(None),
    on_step: Callable[[], None] | None = None,
) -> Refined:
    """Bring c orbits to the nearest minimum of chi2.

    Parameters
    ----------
    problem : Problem
    u : ndarray, shape (c, 7)
        Starting orbits in regular coordinates.
    held : Holding, optional
        Elements that keep their values.
    most_iterations : int
    tolerance : float
        An orbit is at rest when a step is expected to lower chi2 by less than this.
    columns : slice
        Coordinates that may change; ``slice(1, 7)`` holds the period for many orbits at once.
    on_step : callable, optional
        Called at each iteration; what it raises ends the refinement.
    """
    held = held or Holding()
    t0 = problem.reference_epoch
    u = held.put_back(np.array(u, dtype=float, ndmin=2), t0)
    chi2, normal, right = _normal_equations(problem, u)
    damping = np.full(chi2.size, FIRST_DAMPING)
    end_u, end_chi2, still = u.copy(), chi2.copy(), np.ones(chi2.size, dtype=bool)
    which = np.arange(chi2.size)  # of all orbits, those still under way, which u, chi2 ... hold
    iteration = 0
    while which.size and iteration < most_iterations:
        iteration += 1
        if on_step is not None:
            on_step()
        trial, inside, expected = _tried(u, normal, right, damping, held, t0, columns)
        # counting is the quickest question to a small array
        ends = (expected < tolerance) & (damping < 1.0)
        if count := np.count_nonzero(ends):
            # chi2 is as good as quadratic here: the last step needs no look at where it leads
            end_u[which[ends]] = trial[ends]
            end_chi2[which[ends]] = (chi2 - np.where(inside, expected, 0.0))[ends]
            if count == ends.size:
                which, u, chi2 = which[:0], u[:0], chi2[:0]
                break
            parts = which, u, chi2, normal, right, damping, trial, inside
            which, u, chi2, normal, right, damping, trial, inside = _only(~ends, parts)
        tried = _normal_equations(problem, trial)
        if iteration > SLOW and not held.values:
            # a bent valley: the constants, which are nearly linear, follow at once
            trial[:, 3:] += solve_scaled(tried[1][:, 3:, 3:], tried[2][:, 3:])
            tried = _normal_equations(problem, trial)
        better = inside & (tried[0] < chi2)
        if np.count_nonzero(better) == better.size:
            u, (chi2, normal, right) = trial, tried
            damping *= LESS_DAMPING
            continue
        for part, new in zip((u, chi2, normal, right), (trial, *tried), strict=True):
            part[better] = new[better]
        damping *= np.where(better, LESS_DAMPING, MORE_DAMPING)
        stuck = ~better & (damping > MOST_DAMPING)
        if stuck.any():
            end_u[which[stuck]], end_chi2[which[stuck]] = u[stuck], chi2[stuck]
            parts = which, u, chi2, normal, right, damping
            which, u, chi2, normal, right, damping = _only(~stuck, parts)
    end_u[which], end_chi2[which], still[which] = u, chi2, False
    return Refined(end_u, end_chi2, still, iteration)


def _only(rows: NDArray[np.bool_], parts: tuple[NDArray, ...]) -> tuple[NDArray, ...]:
    return tuple(part[rows] for part in parts)


def _tried(
    u: FloatArray,
    normal: FloatArray,
    right: FloatArray,
    damping: FloatArray,
    held: Holding,
    t0: float,
    columns: slice,
) -> tuple[FloatArray, NDArray[np.bool_], FloatArray]:
    """The next orbits, shape (c, 7), which of them are within bounds (the others stay where they
    are), and the fall of chi2 that is expected."""
    basis = held.directions(u, t0)
    step, expected = _damped_step(normal, right, damping, basis, columns)
    trial = u + step
    # false also where a step is not finite
    inside = (np.hypot(trial[:, 1], trial[:, 2]) < HIGHEST_E) & (expected < np.inf)
    inside &= np.abs(step[:, 0]) < LARGEST_STEP
    if np.count_nonzero(inside) < inside.size:
        trial = np.where(inside[:, None], trial, u)
    return held.put_back(trial, t0), inside, expected


def _normal_equations(problem: Problem, u: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """chi2, shape (c,), J J', shape (c, 7, 7), and J r, shape (c, 7)."""
    products = np.empty((len(u), SIZE + 1, SIZE + 1))
    step = max(1, BLOCK // problem.values)
    for start in range(0, len(u), step):
        rows = problem.rows(u[start : start + step])
        np.matmul(rows, np.swapaxes(rows, -1, -2), out=products[start : start + step])
    return products[:, SIZE, SIZE], products[:, :SIZE, :SIZE], products[:, :SIZE, SIZE]


def _damped_step(
    normal: FloatArray,
    right: FloatArray,
    damping: FloatArray,
    basis: FloatArray | None,
    columns: slice,
) -> tuple[FloatArray, FloatArray]:
    """Marquardt's step, shape (c, 7), and the fall of chi2 that the linear model expects."""
    if basis is not None:
        across = np.swapaxes(basis, -1, -2)
        normal, right = across @ normal @ basis, (across @ right[..., None])[..., 0]
    else:
        normal, right = normal[:, columns, columns], right[:, columns]
    size = normal.shape[-1]
    scale = 1.0 / np.sqrt(np.maximum(np.diagonal(normal, axis1=1, axis2=2), 1e-300))
    scaled = normal * (scale[:, :, None] * scale[:, None, :])
    scaled.reshape(len(scaled), -1)[:, :: size + 1] = 1.0 + 1e-13 + damping[:, None]
    right = scale * right
    inner = np.linalg.solve(scaled, right[..., None])[..., 0]
    expected = (inner * (right + damping[:, None] * inner)).sum(axis=1)
    step = scale * inner
    if basis is not None:
        return (basis @ step[..., None])[..., 0], expected
    if size == SIZE:
        return step, expected
    full = np.zeros((step.shape[0], SIZE))
    full[:, columns] = step
    return full, expected


def covariance(problem: Problem, u: FloatArray, held: Holding | None = None) -> FloatArray:
    """Covariance of the regular coordinates at a minimum, shape (7, 7).

    The inverse of J'J of the standardised residuals, by a QR of the scaled Jacobian, within the
    directions that the held elements leave free.
    """
    held = held or Holding()
    _, J = problem.with_jacobian(np.asarray(u, dtype=float)[None])
    basis = held.directions(np.asarray(u, dtype=float)[None], problem.reference_epoch)
    Z = np.eye(SIZE) if basis is None else basis[0]
    JZ = J[0].T @ Z
    scale = np.linalg.norm(JZ, axis=0)
    scale = np.where(scale > 0.0, scale, 1.0)
    inverse = np.linalg.pinv(np.linalg.qr(JZ / scale, mode="r")) / scale[:, None]
    root = Z @ inverse
    return root @ root.T
