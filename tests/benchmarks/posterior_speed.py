"""Effective samples a second, against emcee on the same posterior. Run by hand.

    python tests/benchmarks/posterior_speed.py

One thread; set OMP_NUM_THREADS and OPENBLAS_NUM_THREADS to 1. The time of relorbit includes the
search and the adaptation; emcee begins at samples of the posterior, and its start is not counted.
"""

from __future__ import annotations

import time

import numpy as np
from emcee_reference import WALKERS, cases, chain

from relorbit.solve.sample import sample

SIZE = 10_000
BARS = {"covered": (100, 20), "arc 30 %": (30, 10)}
STEPS = {"covered": 4000, "arc 30 %": 9000}


def emcee_rate(posterior, steps: int, vectorize: bool) -> tuple[float, float]:
    """Effective samples a second (of the slowest coordinate), and the autocorrelation time."""
    begun = time.perf_counter()
    sampler = chain(posterior, steps, vectorize)
    spent = time.perf_counter() - begun
    tau = float(np.max(sampler.get_autocorr_time(tol=0)))
    return WALKERS * steps / tau / spent, tau


def main() -> None:
    every = cases()
    for name, (bar, bar_vectorized) in BARS.items():
        pair = every[name]
        times = []
        for seed in range(5):
            begun = time.perf_counter()
            posterior = sample(pair, SIZE, seed)
            times.append(time.perf_counter() - begun)
        rate = posterior.effective_size / float(np.median(times))
        print(f"{name}: {len(posterior.observations)} measures, {posterior.effective_size:.0f} "
              f"effective of {posterior.drawn} draws in {np.median(times):.2f} s "
              f"(best {min(times):.2f}), {rate:.0f} a second")  # fmt: skip
        for vectorize, wanted in ((False, bar), (True, bar_vectorized)):
            steps = STEPS[name] // (1 if vectorize else 2)
            other, tau = emcee_rate(posterior, steps, vectorize)
            kind = "vectorised" if vectorize else "plain     "
            print(f"  emcee {kind} {other:7.1f} a second (autocorrelation {tau:.0f} steps): "
                  f"{rate / other:.0f} times (bar {wanted})")  # fmt: skip


if __name__ == "__main__":
    main()
