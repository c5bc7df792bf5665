"""Lucy's test: the mass from incomplete orbits. Run by hand.

    python tests/benchmarks/lucy_mass.py [CAMPAIGNS]

The model binary and the error are those of Lucy (2014, A&A 563, A126), from memory: P = 100 yr,
a = 1 arcsec, e = 0.5, i = 60, omega = 250, node = 120, 15 measures evenly over a share of the
orbit, 0.05 arcsec in x and y. His headline is that the posterior mean of a^3/P^2 has no bias once
40 per cent or more of the orbit is covered.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from simulate import observed

from relorbit.errors import Undetermined
from relorbit.orbit.elements import Elements
from relorbit.solve.sample import sample

MODEL = Elements(100.0, 1940.0, 0.5, 1.0, 60.0, 120.0, 250.0)
ERROR, MEASURES, FIRST = 0.05, 15, 1900.0
SHARES = tuple(0.1 * k for k in range(1, 11))
SIZE = 800
PRIORS = ("flat-constants", "default")


def campaign(share: float, rng: np.random.Generator):
    """One simulated campaign over a share of the orbit."""
    epoch = FIRST + MODEL.P * share * (np.arange(MEASURES) + 0.5) / MEASURES
    return observed(MODEL, epoch, ERROR, rng)


def mean_of_mass(pair, prior: str, seed: int) -> tuple[float, float]:
    """Posterior mean and median of a^3/P^2 over the true one."""
    posterior = sample(pair, SIZE, seed, prior)
    values = posterior.axis_cubed_over_period_squared / (MODEL.a**3 / MODEL.P**2)
    order = np.argsort(values)
    median = values[order][np.searchsorted(np.cumsum(posterior.weight[order]), 0.5)]
    return float(posterior.weight @ values), float(median)


def row(share: float, prior: str, campaigns: int, seed: int = 3) -> tuple[np.ndarray, int]:
    """Means and medians of some campaigns, shape (n, 2), and how many could not be sampled."""
    rng = np.random.default_rng(seed)
    found, lost = [], 0
    for number in range(campaigns):
        pair = campaign(share, rng)
        try:
            found.append(mean_of_mass(pair, prior, number))
        except Undetermined:
            lost += 1
    return np.array(found), lost


def main() -> None:
    campaigns = int(sys.argv[1]) if len(sys.argv) > 1 else 60
    for prior in PRIORS:
        print(f"prior {prior}, {campaigns} campaigns: posterior mean of a^3/P^2 over the truth")
        print("  covered   mean  +/-     scatter   mean of medians   not sampled")
        for share in SHARES:
            values, lost = row(share, prior, campaigns)
            mean, scatter = values[:, 0].mean(), values[:, 0].std(ddof=1)
            error = scatter / np.sqrt(len(values))
            print(f"  {100 * share:5.0f} %  {mean:6.3f}  {error:6.3f}  {scatter:8.3f}  "
                  f"{values[:, 1].mean():10.3f}  {lost:12d}", flush=True)  # fmt: skip


if __name__ == "__main__":
    main()
