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
from relorbit.orbit.regular import SIZE, position_and_jacobian
from relorbit.solve.holding import Holding
from relorbit.solve.linear import SkyData, solve_scaled
from relorbit.solve.observations import Observations

HIGHEST_E = 0.99999
FIRST_DAMPING, LESS_DAMPING, MORE_DAMPING = 1e-4, 0.1, 8.0
MOST_DAMPING = 1e10  # an orbit that does not get better with as short a step as that is at rest
SLOW = 20  # iterations after which chi2 is taken to have a bent valley
LARGEST_STEP = 1.5  # in ln P, of one iteration
# residuals, shape (c, m), and the Jacobian of the model, shape (c, 7, m), of c orbits (c, 7)
WithJacobian = Callable[[FloatArray], tuple[FloatArray, FloatArray]]


@dataclass(frozen=True)
class Problem:
    """A least-squares problem in the regular coordinates of a reference epoch."""

    reference_epoch: float
    with_jacobian: WithJacobian


def polar_problem(observations: Observations, reference_epoch: float) -> Problem:
    """Standardised residuals of theta (wrapped) and rho: the chi2 that a solution reports."""
    o = observations
    direction = np.exp(1j * o.theta)

    def with_jacobian(u: FloatArray) -> tuple[FloatArray, FloatArray]:
        z, dz = position_and_jacobian(u, reference_epoch, o.epoch)
        rho = np.maximum(np.abs(z), 1e-12)
        unit = np.conj(z)
        unit /= rho
        # turned to the direction of the pair, dz is along + i across: rho and theta alternate
        dz *= unit[..., None, :]
        weight = np.empty((*z.shape, 2))
        weight[..., 0], weight[..., 1] = o.per_rho, o.per_theta / rho
        jacobian = dz.view(float)
        jacobian *= weight.reshape(*z.shape[:-1], 1, -1)
        r = np.empty_like(weight)
        np.multiply(o.rho - rho, o.per_rho, out=r[..., 0])
        unit *= direction
        np.multiply(np.angle(unit), o.per_theta, out=r[..., 1])
        return r.reshape(*z.shape[:-1], -1), jacobian

    return Problem(reference_epoch, with_jacobian)


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

    def standardised(dz: NDArray[np.complex128]) -> FloatArray:
        return np.concatenate([l11 * dz.real + l21 * dz.imag, l22 * dz.imag], axis=-1)

    def with_jacobian(u: FloatArray) -> tuple[FloatArray, FloatArray]:
        z, dz = position_and_jacobian(u, reference_epoch, data.epoch)
        return standardised(data.z - z), standardised(dz)

    return Problem(reference_epoch, with_jacobian)


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
    active = np.arange(chi2.size)
    iteration = 0
    while active.size and iteration < most_iterations:
        iteration += 1
        if on_step is not None:
            on_step()
        basis = held.directions(u[active], t0)
        full, expected = _damped_step(
            normal[active], right[active], damping[active], basis, columns
        )
        trial = u[active] + full
        inside = np.hypot(trial[:, 1], trial[:, 2]) < HIGHEST_E
        inside &= np.isfinite(full).all(axis=1) & (np.abs(full[:, 0]) < LARGEST_STEP)
        trial = held.put_back(np.where(inside[:, None], trial, u[active]), t0)
        at_rest = (expected < tolerance) & (damping[active] < 1.0)
        if at_rest.any():
            # chi2 is as good as quadratic here: the last step needs no look at where it leads
            last = active[at_rest]
            u[last] = trial[at_rest]
            chi2[last] -= np.where(inside, expected, 0.0)[at_rest]
            active, trial, inside = active[~at_rest], trial[~at_rest], inside[~at_rest]
            if not active.size:
                break
        tried = _normal_equations(problem, trial)
        if iteration > SLOW and basis is None:
            # a bent valley: the constants, which are nearly linear, follow at once
            trial[:, 3:] += solve_scaled(tried[1][:, 3:, 3:], tried[2][:, 3:])
            tried = _normal_equations(problem, trial)
        chi2_trial, normal_trial, right_trial = tried
        better = inside & (chi2_trial < chi2[active])
        damping[active] *= np.where(better, LESS_DAMPING, MORE_DAMPING)
        moved = active[better]
        u[moved], chi2[moved] = trial[better], chi2_trial[better]
        normal[moved], right[moved] = normal_trial[better], right_trial[better]
        active = active[better | (damping[active] <= MOST_DAMPING)]
    still = np.ones(chi2.size, dtype=bool)
    still[active] = False
    return Refined(u, chi2, still, iteration)


def _normal_equations(problem: Problem, u: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """chi2, shape (c,), J J', shape (c, 7, 7), and J r, shape (c, 7)."""
    r, J = problem.with_jacobian(u)
    return (
        np.einsum("cm,cm->c", r, r),
        J @ np.swapaxes(J, -1, -2),
        (J @ r[..., None])[..., 0],
    )


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
    diagonal = np.diagonal(normal, axis1=1, axis2=2)
    scale = 1.0 / np.sqrt(np.where(diagonal > 0.0, diagonal, 1.0))
    scaled = normal * (scale[:, :, None] * scale[:, None, :])
    slots = np.arange(scaled.shape[-1])
    scaled[:, slots, slots] = 1.0 + 1e-13 + damping[:, None]
    right = scale * right
    inner = np.linalg.solve(scaled, right[..., None])[..., 0]
    expected = (inner * (right + damping[:, None] * inner)).sum(axis=1)
    step = scale * inner
    if basis is not None:
        return (basis @ step[..., None])[..., 0], expected
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
