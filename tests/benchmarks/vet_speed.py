"""How long vetting a thousand measures takes, in cold solves of the same list.

Bar: fewer than 20. The solves are of the clean lists: with the slips, some are refused.

    python tests/benchmarks/vet_speed.py [lists] [measures]
"""

import sys
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))
from slip_histories import VALUES, long_history, place_slips

from relorbit.solve.solver import solve
from relorbit.solve.vetted import vet


def main(lists: int, measures: int) -> None:
    solves, vets = [], []
    for seed in range(lists):
        rng = np.random.default_rng(seed)
        truth, pair = long_history(rng, measures)
        slipped, _ = place_slips(truth, pair, rng, 5, VALUES)
        for function, given, times in ((solve, pair, solves), (vet, slipped, vets)):
            start = time.process_time()
            function(given)
            times.append(time.process_time() - start)
    ratio = np.array(vets) / np.array(solves)
    print(f"{lists} lists of {measures} measures: solve {np.median(solves):.2f} s, vet "
          f"{np.median(vets):.2f} s; ratio median {np.median(ratio):.1f}, largest "
          f"{ratio.max():.1f} (bar 20)")  # fmt: skip


if __name__ == "__main__":
    words = [int(word) for word in sys.argv[1:]]
    main(*(words + [7, 1000][len(words):]))
