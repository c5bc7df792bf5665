"""Marginal likelihoods of no motion and of straight motion, by importance sampling.

The likelihood is that of theta and rho themselves, as for orbits, and so is its constant factor.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from relorbit.orbit.kepler import TWO_PI, FloatArray
from relorbit.solve.linear import solve_scaled
from relorbit.solve.observations import Observations
from relorbit.solve.target import linearised
from relorbit.solve.weights import effective_size, normalised, pareto_k

DRAWS = 8000
BLOCK = 200_000  # values at a time
WIDE, WIDE_SHARE = 2.5, 0.2  # some places are drawn from a Gaussian wider by this
FREE_WITHIN, FREE_SHARE = 6.0, 0.5  # motions drawn from the prior where zero is so many sigma off


@dataclass(frozen=True)
class Marginal:
    """ln of a marginal likelihood, the least chi2, unknowns, and how good the weights are."""

    log_evidence: float
    chi2: float
    unknowns: int
    effective_size: float
    pareto_k: float


def chi2_of_places(o: Observations, z: np.ndarray) -> FloatArray:
    """chi2 in theta (wrapped) and rho, shape (m,), of places z, shape (m, n)."""
    gap = np.angle(z * np.exp(-1j * o.theta)) * o.per_theta
    along = (np.abs(z) - o.rho) * o.per_rho
    return np.einsum("mn,mn->m", gap, gap) + np.einsum("mn,mn->m", along, along)


def _normal_equations(
    o: Observations, z: np.ndarray, basis: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """For unknowns (x parts, y parts), each times a row of the basis, about the places z."""
    data = linearised(o, z)
    xx, xy, yy = (basis * w @ basis.T for w in (data.w_xx, data.w_xy, data.w_yy))
    x, y = data.z.real, data.z.imag
    right = [basis @ (data.w_xx * x + data.w_xy * y), basis @ (data.w_xy * x + data.w_yy * y)]
    return np.block([[xx, xy], [xy, yy]]), np.concatenate(right)


def at_rest(
    o: Observations, rho_range: tuple[float, float], rng: np.random.Generator
) -> Marginal:
    """No relative motion: uniform in ln rho within a range and in direction."""
    basis = np.ones((1, len(o)))
    z = np.full(len(o), np.average(o.sky_rho * np.exp(1j * o.theta), weights=o.sky_weight))
    for _ in range(8):
        normal, right = _normal_equations(o, z, basis)
        p = solve_scaled(normal, right)
        z = np.full(len(o), complex(p[0], p[1]))
    root = np.linalg.cholesky(np.linalg.inv(normal))
    step, log_density = _steps(rng, 2)
    place = p + step @ root.T
    log_density -= np.log(np.diag(root)).sum()
    value = place[:, 0] + 1j * place[:, 1]
    chi2 = _in_blocks(o, lambda rows: value[rows, None] * np.ones(len(o)))
    return _marginal(_log_prior_of_ring(value, rho_range) - 0.5 * chi2 - log_density, chi2, 2)


def straight(
    o: Observations,
    start: tuple[float, complex, complex],
    rho_range: tuple[float, float],
    speed_range: tuple[float, float],
    rng: np.random.Generator,
) -> Marginal:
    """Straight motion: uniform in ln rho at a given epoch, ln speed and both directions.

    Parameters
    ----------
    start : (float, complex, complex)
        Epoch, place then and motion of the best straight line.
    rho_range, speed_range : (float, float)
        arcsec, and arcsec a year.
    """
    epoch, place, motion = start
    time = o.epoch - epoch
    basis = np.stack([np.ones_like(time), time])
    normal, right = _normal_equations(o, place + motion * time, basis)
    # the motion first: (vx, vy, x, y)
    order = np.array([1, 3, 0, 2])
    normal, right = normal[np.ix_(order, order)], right[order]
    centre = solve_scaled(normal, right)
    covariance = np.linalg.inv(normal)
    V = covariance[:2, :2]
    own = np.linalg.cholesky(V)
    v, log_v = _motions(centre[:2], own, speed_range, rng)
    # the place at a given motion
    gain = covariance[2:, :2] @ np.linalg.inv(V)
    rest = np.linalg.cholesky(covariance[2:, 2:] - gain @ covariance[:2, 2:])
    step, log_density = _steps(rng, 2)
    x = centre[2:] + (v - centre[:2]) @ gain.T + step @ rest.T
    log_density += log_v - np.log(np.diag(rest)).sum()
    z, w = x[:, 0] + 1j * x[:, 1], v[:, 0] + 1j * v[:, 1]
    chi2 = _in_blocks(o, lambda rows: z[rows, None] + w[rows, None] * time)
    prior = _log_prior_of_ring(z, rho_range) + _log_prior_of_ring(w, speed_range)
    return _marginal(prior - 0.5 * chi2 - log_density, chi2, 4)


def _motions(
    centre: FloatArray, root: FloatArray, speed_range: tuple[float, float], rng: np.random.Generator
) -> tuple[FloatArray, FloatArray]:
    """Motions, shape (DRAWS, 2), and ln of the density they come from.

    Where no motion is within reach, some come from the prior, which has a cusp there.
    """
    step, _ = _steps(rng, 2)
    off = float(np.linalg.norm(np.linalg.solve(root, centre)))
    share = FREE_SHARE if off < FREE_WITHIN else 0.0
    low, high = np.log(speed_range)
    # not beyond what the measures can allow
    high = min(high, np.log(np.linalg.norm(centre) + 8.0 * np.linalg.norm(root)))
    share = share if high > low else 0.0
    v = centre + step @ root.T
    free = rng.random(DRAWS) < share
    if share:
        speed, angle = np.exp(rng.uniform(low, high, DRAWS)), TWO_PI * rng.random(DRAWS)
        ring = speed[:, None] * np.stack([np.cos(angle), np.sin(angle)], axis=-1)
        v = np.where(free[:, None], ring, v)
    back = np.linalg.solve(root, (v - centre).T).T
    bell = np.exp(_log_bell(back) - np.log(np.diag(root)).sum())
    if not share:
        return v, np.log(bell)
    square = (v * v).sum(axis=1)
    inside = (square >= np.exp(2.0 * low)) & (square <= np.exp(2.0 * high))
    ring = np.where(inside, 1.0 / (TWO_PI * (high - low) * np.maximum(square, 1e-300)), 0.0)
    return v, np.log((1.0 - share) * bell + share * ring)


def _steps(rng: np.random.Generator, size: int) -> tuple[FloatArray, FloatArray]:
    """Standardised steps, shape (DRAWS, size), some of them wide, and ln of their density."""
    wide = rng.random(DRAWS) < WIDE_SHARE
    step = rng.standard_normal((DRAWS, size)) * np.where(wide, WIDE, 1.0)[:, None]
    return step, _log_bell(step)


def _log_bell(step: FloatArray) -> FloatArray:
    size, square = step.shape[1], np.einsum("mj,mj->m", step, step)
    bell = (1.0 - WIDE_SHARE) * np.exp(-0.5 * square)
    bell += WIDE_SHARE * np.exp(-0.5 * square / WIDE**2) / WIDE**size
    return np.log(np.maximum(bell, 1e-300)) - 0.5 * size * np.log(TWO_PI)


def _log_prior_of_ring(z: np.ndarray, length_range: tuple[float, float]) -> FloatArray:
    """ln of the density in the plane that is uniform in ln |z| within a range and in angle."""
    low, high = length_range
    length = np.abs(z)
    inside = (length >= low) & (length <= high)
    density = -np.log(TWO_PI * np.log(high / low)) - 2.0 * np.log(np.maximum(length, 1e-300))
    return np.where(inside, density, -np.inf)


def _in_blocks(o: Observations, places: Callable[[slice], np.ndarray]) -> FloatArray:
    step = max(1, BLOCK // len(o))
    parts = [chi2_of_places(o, places(slice(k, k + step))) for k in range(0, DRAWS, step)]
    return np.concatenate(parts)


def _marginal(log_weight: FloatArray, chi2: FloatArray, unknowns: int) -> Marginal:
    weight = normalised(log_weight)
    top = float(np.max(log_weight))
    evidence = -np.inf
    if np.isfinite(top):
        evidence = top + float(np.log(np.exp(log_weight - top).mean()))
    return Marginal(evidence, float(chi2.min()), unknowns, effective_size(weight), pareto_k(weight))
