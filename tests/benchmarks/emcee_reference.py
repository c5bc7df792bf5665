"""The same posterior for emcee (Foreman-Mackey et al. 2013): written apart, in plain numpy."""

from __future__ import annotations

import sys
from dataclasses import dataclass
from pathlib import Path

import emcee
import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from simulate import observed

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, geometry_from_projection
from relorbit.orbit.kepler import eccentric_anomaly, unit_ellipse
from relorbit.solve.posterior import Posterior

WALKERS = 32
QUANTITIES = ("P", "e", "a", "i", "a^3/P^2")


@dataclass(frozen=True)
class LogPosterior:
    """ln of likelihood times prior at (ln P, e, phase, Re alpha, Im alpha, Re beta, Im beta)."""

    posterior: Posterior

    def __call__(self, p: np.ndarray) -> np.ndarray | float:
        rows = np.atleast_2d(p)
        o, prior = self.posterior.observations, self.posterior.prior
        lnP, e, phase, ar, ai, br, bi = rows.T
        low, high = np.log(prior.period_range)
        alpha, beta = ar + 1j * ai, br + 1j * bi
        a = np.abs(alpha) + np.abs(beta)
        good = (lnP > low) & (lnP < high) & (e >= 0.0) & (e < 0.9999)
        good &= (a > prior.axis_range[0]) & (a < prior.axis_range[1])
        out = np.full(rows.shape[0], -np.inf)
        if good.any():
            ecc = e[good, None]
            time = o.epoch - self.posterior.reference_epoch
            turns = phase[good, None] + time * np.exp(-lnP[good, None])
            mean = 2.0 * np.pi * (turns - np.rint(turns))
            X, Y = unit_ellipse(eccentric_anomaly(mean, ecc), ecc)
            w = X + 1j * Y
            z = alpha[good, None] * w + beta[good, None] * np.conj(w)
            gap = o.theta - np.angle(z)
            gap -= 2.0 * np.pi * np.rint(gap / (2.0 * np.pi))
            chi2 = ((gap * o.per_theta) ** 2).sum(axis=1)
            chi2 += (((np.abs(z) - o.rho) * o.per_rho) ** 2).sum(axis=1)
            # 1/(a^4 sin^2 i) on the constants: a^2 sin^2 i = 4 |alpha| |beta|
            prior_term = np.log(a[good] ** 2 * np.abs(alpha[good] * beta[good]))
            out[good] = -0.5 * chi2 - prior_term
        return out if p.ndim == 2 else float(out[0])


def chain(
    posterior: Posterior, steps: int, vectorize: bool, walkers: int = WALKERS, seed: int = 1
) -> emcee.EnsembleSampler:
    """A chain of emcee's own default moves, begun at samples, so that it needs no burn-in."""
    rows = posterior.equal_rows(walkers, seed)
    phase = (posterior.reference_epoch - posterior.T) / posterior.P
    start = np.stack([
        np.log(posterior.P), posterior.e, phase, posterior.alpha.real, posterior.alpha.imag,
        posterior.beta.real, posterior.beta.imag,
    ], axis=-1)[rows]  # fmt: skip
    sampler = emcee.EnsembleSampler(walkers, 7, LogPosterior(posterior), vectorize=vectorize)
    sampler.random_state = np.random.RandomState(seed).get_state()
    sampler.run_mcmc(start, steps)
    return sampler


def quantities_of(chain: np.ndarray) -> dict[str, np.ndarray]:
    """`QUANTITIES` of chain positions, shape (..., 7)."""
    alpha, beta = chain[..., 3] + 1j * chain[..., 4], chain[..., 5] + 1j * chain[..., 6]
    a, i, _, _ = geometry_from_projection(alpha, beta)
    P = np.exp(chain[..., 0])
    return dict(zip(QUANTITIES, (P, chain[..., 1], a, i, a**3 / P**2), strict=True))


def cases() -> dict[str, Pair]:
    """Six invented pairs, from a whole orbit to a fifth of one."""
    rng = np.random.default_rng(77)

    def pair(P: float, e: float, a: float, i: float, error: float, arc: float, count: int) -> Pair:
        elements = Elements(P, 1990.0, e, a, i, 40.0, 100.0)
        epoch = np.sort(1990.0 + arc * P * (rng.random(count) - 0.4))
        return observed(elements, epoch, error, rng)

    return {
        "covered": pair(60.0, 0.4, 1.2, 55.0, 0.02, 1.5, 100),
        "eccentric": pair(80.0, 0.85, 1.0, 110.0, 0.02, 1.2, 60),
        "face-on": pair(50.0, 0.3, 0.8, 6.0, 0.03, 1.3, 50),
        "coarse": pair(50.0, 0.3, 0.4, 60.0, 0.06, 1.2, 40),
        "arc 30 %": pair(150.0, 0.5, 1.5, 50.0, 0.01, 0.3, 100),
        "arc 20 %": pair(200.0, 0.5, 1.5, 50.0, 0.01, 0.2, 40),
    }
