"""Slips placed in invented histories: how many are found and named rightly, and false findings.

Bars: 95 % of those that move a measure by more than 8 sigma; fewer than one false finding in 200
clean measures.

    python tests/benchmarks/vet_slips.py [histories] [first seed]
"""

import sys
import time
from collections import Counter
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
from slip_histories import slip_trial, tally


def main(histories: int, first: int = 0) -> None:
    start = time.perf_counter()
    kinds, right, wrong, false = Counter(), Counter(), [], []
    again, clean = [0, 0], 0
    for seed in range(first, first + histories):
        placed, found, rows = slip_trial(seed)
        large, repeats, extra = tally(placed, found)
        by_row = {one.row: one.kind for one in found}
        for slip, good in large:
            kinds[slip.kind] += 1
            right[slip.kind] += good
            if not good:
                wrong.append((seed, slip.row, slip.kind, round(slip.moved, 1),
                              by_row.get(slip.row, "nothing")))  # fmt: skip
        again[0] += sum(good for _, good in repeats)
        again[1] += len(repeats)
        false += [(seed, one.row, one.kind, one.sigma_before) for one in extra]
        clean += rows
    total = sum(kinds.values())
    print(f"{histories} histories, {time.perf_counter() - start:.0f} s")
    print(f"slips above 8 sigma: {total}, found and named rightly "
          f"{100 * sum(right.values()) / total:.2f} % (bar 95)")  # fmt: skip
    for kind, count in sorted(kinds.items()):
        print(f"  {kind:<12}{count:5d}{100 * right[kind] / count:8.1f} %")
    print(f"same nights and means: {again[0]} of {again[1]}")
    print(f"false findings: {len(false)} among {clean} clean measures, one in "
          f"{clean / max(len(false), 1):.0f} (bar 200)")  # fmt: skip
    print("not named rightly (seed, row, kind, sigma, named):", *wrong, sep="\n  ")
    print("false (seed, row, kind, sigma):", *false, sep="\n  ")


if __name__ == "__main__":
    main(*(int(word) for word in sys.argv[1:3]) if len(sys.argv) > 1 else (500,))
