"""Up to half of all quadrants flipped at random: how often the orbit is still found.

Bar: 98 % of histories of 40 or more measures that cover half a revolution or more. Beside it, the
orbit that is solved for once `vet` has been applied.

    python tests/benchmarks/vet_quadrants.py [histories] [first seed]
"""

import sys
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))
from quadrant_histories import flipped_history, is_found

from relorbit.errors import Undetermined
from relorbit.measures.vetting import applied
from relorbit.solve.quadrants import joint_quadrants
from relorbit.solve.solver import solve
from relorbit.solve.vetted import vet


def main(histories: int, first: int = 0) -> None:
    start = time.perf_counter()
    missed, missed_vetted = [], []
    for seed in range(first, first + histories):
        truth, pair, flipped = flipped_history(np.random.default_rng(seed))
        found = joint_quadrants(flipped)
        if not any(is_found(one.elements, truth, pair) for one in found):
            missed.append(seed)
        try:
            solved = solve(applied(flipped, vet(flipped)))
        except Undetermined:
            missed_vetted.append(seed)
            continue
        if not is_found(solved.elements, truth, pair):
            missed_vetted.append(seed)
    print(f"{histories} histories, {time.perf_counter() - start:.0f} s")
    for what, seeds in (("joint quadrants", missed), ("vet applied, then solve", missed_vetted)):
        print(f"{what}: found {100 * (1 - len(seeds) / histories):.1f} % (bar 98), missed {seeds}")


if __name__ == "__main__":
    main(*(int(word) for word in sys.argv[1:3]) if len(sys.argv) > 1 else (300,))
