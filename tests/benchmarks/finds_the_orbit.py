"""Does the search miss an orbit? Simulated measure histories of published-like pairs.

    python tests/benchmarks/finds_the_orbit.py [COUNT] [--seed S] [--processes N]

A miss is a history where a refinement started at the true elements ends with a chi2 lower by more
than 1 than that of the orbit found without a guess. Each history is also solved as an observer
would, and what is refused is counted by its reason.
"""

from __future__ import annotations

import one_thread  # first: it sets the number of threads

# isort: split

import argparse
import time
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass

import numpy as np
from simulate import chi2_from_the_truth, history

from relorbit.errors import Undetermined
from relorbit.orbit.elements import Elements
from relorbit.solve.basins import find_basins
from relorbit.solve.observations import observe
from relorbit.solve.solver import solve


@dataclass(frozen=True)
class Trial:
    """One history: chi2 found and chi2 from the truth, times in seconds, and the answer's code."""

    number: int
    elements: Elements
    measures: int
    revolutions: float
    found: float
    reference: float
    search_time: float
    solve_time: float
    answer: str
    limit: float | None

    @property
    def missed(self) -> bool:
        return not self.found <= self.reference + 1.0


def trial(seed: int, number: int) -> Trial:
    elements, pair = history(np.random.default_rng([seed, number]))
    observations = observe(pair.measures)
    start = time.perf_counter()
    t0, orbits = find_basins(observations)
    search_time = time.perf_counter() - start
    reference = chi2_from_the_truth(elements, observations, t0)
    answer, limit = "solved", None
    start = time.perf_counter()
    try:
        solve(pair)
    except Undetermined as error:
        answer, limit = error.code, error.known.get("P_lower_limit")
    return Trial(
        number, elements, len(pair.measures), observations.span / elements.P,
        float(orbits.chi2[0]), reference, search_time, time.perf_counter() - start, answer, limit,
    )  # fmt: skip


def report(trials: list[Trial]) -> str:
    misses = [one for one in trials if one.missed]
    answers = Counter(one.answer for one in trials)
    limits = [one for one in trials if one.limit is not None]
    solved = [one.solve_time for one in trials if one.answer == "solved"]
    search = [one.search_time for one in trials]
    lines = [
        f"histories                    {len(trials)}",
        f"misses                       {len(misses)}",
        f"  worst excess of chi2       {max(one.found - one.reference for one in trials):.3g}",
        *(f"  refused: {code:<18}{count}" for code, count in answers.items() if code != "solved"),
        f"solved                       {answers['solved']}",
        f"median search                {1e3 * np.median(search):.0f} ms"
        f"   (longest {max(search):.2f} s)",
        f"median solve                 {1e3 * np.median(solved):.0f} ms"
        f"   (longest {max(solved):.2f} s)",
    ]
    if limits:
        below = np.mean([one.limit < one.elements.P for one in limits])
        lines.append(f"lower limits below the truth {100.0 * below:.0f} % of {len(limits)}")
    for one in misses:
        lines.append(
            f"  miss {one.number}: {one.found:.2f} against {one.reference:.2f}, {one.measures} "
            f"measures over {one.revolutions:.2f} revolutions, {one.elements}"
        )
    return "\n".join(lines)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("count", type=int, nargs="?", default=1000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--processes", type=int, default=None)
    given = parser.parse_args()
    print(one_thread.machine())
    with ProcessPoolExecutor(given.processes) as pool:
        seeds = [given.seed] * given.count
        print(report(list(pool.map(trial, seeds, range(given.count), chunksize=4))))


if __name__ == "__main__":
    main()
