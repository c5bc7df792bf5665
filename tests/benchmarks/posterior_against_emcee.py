"""Medians and percentiles against long emcee runs on the same posterior. Run by hand.

    python tests/benchmarks/posterior_against_emcee.py [STEPS]
"""

from __future__ import annotations

import sys

import numpy as np
from emcee_reference import QUANTITIES, cases, chain, quantities_of

from relorbit.solve.posterior import Posterior
from relorbit.solve.sample import sample
from relorbit.solve.weights import quantiles

SHARES = (0.025, 0.16, 0.5, 0.84, 0.975)
SIZE = 20_000


def ours(p: Posterior) -> dict[str, np.ndarray]:
    values = (p.P, p.e, p.a, p.i, p.axis_cubed_over_period_squared)
    return dict(zip(QUANTITIES, values, strict=True))


def compare(pair, steps: int, seed: int = 0) -> dict[str, np.ndarray]:
    """Differences of the percentiles over the Monte Carlo error of both, by quantity."""
    posterior = sample(pair, SIZE, seed)
    sampler = chain(posterior, steps, vectorize=True)
    theirs = quantities_of(sampler.get_chain())
    found = {}
    for name, values in ours(posterior).items():
        other = theirs[name]
        tau = max(1.0, _autocorrelation(other))
        effective = other.size / tau
        mine = quantiles(values, posterior.weight, SHARES)
        flat = np.sort(other.ravel())
        theirs_q = np.quantile(flat, SHARES)
        # error of a quantile: sqrt(q (1 - q)/n) over the density there
        step = 0.01
        density = 2 * step / (np.quantile(flat, np.array(SHARES) + step)
                              - np.quantile(flat, np.array(SHARES) - step))  # fmt: skip
        share = np.array(SHARES) * (1.0 - np.array(SHARES))
        error = np.sqrt(share * (1.0 / effective + 1.0 / posterior.effective_size)) / density
        found[name] = (mine - theirs_q) / error
    return found


def _autocorrelation(values: np.ndarray) -> float:
    from emcee.autocorr import integrated_time

    return float(integrated_time(values[:, :, None], tol=0)[0])


def main() -> None:
    steps = int(sys.argv[1]) if len(sys.argv) > 1 else 20_000
    print("differences over their Monte Carlo error, at 2.5, 16, 50, 84, 97.5 per cent")
    every = []
    for name, pair in cases().items():
        print(name)
        for quantity, z in compare(pair, steps).items():
            every.extend(z)
            print(f"  {quantity:8s} " + " ".join(f"{value:6.2f}" for value in z))
    print(f"root of the mean square {np.sqrt(np.mean(np.square(every))):.2f} (1 is chance), "
          f"largest {np.max(np.abs(every)):.2f} of {len(every)}")  # fmt: skip


if __name__ == "__main__":
    main()
