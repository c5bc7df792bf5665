"""Time of a solution with errors from residuals over that with errors as given.

    python tests/benchmarks/weighing_cost.py
"""

import time

import numpy as np

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, complex_position, polar
from relorbit.solve.solver import solve

TRUTH = Elements(62.4, 1978.31, 0.42, 1.85, 52.0, 71.0, 214.0)
GROUPS = (("eyepiece", "A", 0.05), ("eyepiece", "B", 0.08), ("plate", "C", 0.02),
          ("camera", "D", 0.03), ("interferometer", "E", 0.004))  # fmt: skip
REPEATS = 3


def pair_of(count: int, kind: str) -> Pair:
    """Invented measures: errors told, told five times too small in one group, or a slip too."""
    rng = np.random.default_rng(count)
    group = rng.integers(0, len(GROUPS), count)
    technique, observer, error = (np.array(part) for part in zip(*GROUPS, strict=True))
    error = error[group].astype(float)
    epoch = np.sort(rng.uniform(1930.0, 2024.0, count))
    noise = error * (rng.normal(size=count) + 1j * rng.normal(size=count))
    theta, rho = polar(complex_position(TRUTH, epoch) + noise)
    if kind != "told":
        error = np.where(group == 3, error / 5.0, error)
    if kind == "slip":
        theta[count // 3] = (theta[count // 3] + 180.0) % 360.0
    return Pair.from_arrays(
        epoch, theta, rho, np.degrees(error / rho), error, technique=technique[group],
        observer=observer[group],
    )  # fmt: skip


def seconds(pair: Pair, errors: str) -> float:
    """The shortest of some runs."""
    times = []
    for _ in range(REPEATS):
        start = time.perf_counter()
        solve(pair, errors=errors)
        times.append(time.perf_counter() - start)
    return min(times)


if __name__ == "__main__":
    print("measures  errors       as given  from residuals  ratio")
    for count in (100, 2000, 20_000):
        for kind in ("told", "wrong", "slip"):
            pair = pair_of(count, kind)
            given, found = (seconds(pair, errors) for errors in ("as-given", "from-residuals"))
            print(f"{count:8d}  {kind:<11}{given:10.3f}{found:16.3f}{found / given:7.2f}")
