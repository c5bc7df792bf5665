"""False alarms of the search for a companion, and how often a wobble is found.

Bars: at a level of 1 %, 1 % (0.5) of 1,000 clean simulations flagged; a wobble of 20 mas and
6 years among 60 measures of 10 mas found in over 95 %.

    python tests/benchmarks/companion_alarms.py [simulations]
"""

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))
from noisy_histories import companion_trial


def main(simulations: int) -> None:
    clean = [companion_trial(seed, 0.0) for seed in range(simulations)]
    print(f"{simulations} clean simulations: flagged "
          f"{100 * np.mean([one.found for one in clean]):.2f} %")  # fmt: skip
    print("level      shuffled  analytic   drift")
    for level in (0.01, 0.05, 0.1, 0.5):
        shares = [
            100.0 * np.mean(np.array(values) <= level)
            for values in (
                [one.wobble.probability_permuted for one in clean],
                [one.wobble.probability for one in clean],
                [one.drift.probability for one in clean],
            )
        ]
        print(f"{100 * level:4g} %  " + "".join(f"{share:8.2f} %" for share in shares))
    count = max(simulations // 5, 20)
    found = [companion_trial(10_000 + seed, 0.02) for seed in range(count)]
    near = [one.found and abs(one.wobble.period - 6.0) < 0.3 for one in found]
    amplitude = np.median([one.wobble.amplitude_mas for one in found])
    print(f"{count} with a wobble of 20 mas in 6 years: found {100 * np.mean(near):.1f} %, "
          f"amplitude {amplitude:.1f} mas")  # fmt: skip


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1000)
