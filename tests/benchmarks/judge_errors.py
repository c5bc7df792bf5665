"""Measures ten years ahead against predictions: standardised O-C must have variance 1 (10 %).

    python tests/benchmarks/judge_errors.py [measures] [as-given|from-residuals]
"""

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))
from noisy_histories import WELL_KNOWN, judge_trial


def main(measures: int, errors: str) -> None:
    trials, seed = [], 0
    while len(trials) < measures:
        seed += 1
        one = judge_trial(seed, errors)
        if one is not None:
            trials.append(one)
    theta, rho, probability, unknown, linear, theta_1, rho_1 = np.array(trials).T
    print(f"{measures} measures ten years ahead, errors {errors}, of {seed} histories")
    print("orbits                count  var theta  var rho    both  beyond 4   "
          "chance below 10 %   1 %   0.1 %")  # fmt: skip
    for name, rows in (
        ("all determined", unknown < np.inf),
        ("P known to 5 %", unknown < WELL_KNOWN),
        ("P known worse", unknown >= WELL_KNOWN),
    ):
        both = np.concatenate([theta[rows], rho[rows]])
        shares = [100.0 * np.mean(probability[rows] < level) for level in (0.1, 0.01, 0.001)]
        print(f"  {name:<18}{rows.sum():7d} {np.mean(theta[rows]**2):10.3f} "
              f"{np.mean(rho[rows]**2):8.3f} {np.mean(both**2):7.3f} "
              f"{int((np.abs(both) > 4).sum()):9d} "
              f"{shares[0]:17.1f} % {shares[1]:4.1f} % {shares[2]:5.2f} %")  # fmt: skip
        first = np.concatenate([theta_1[rows], rho_1[rows]])
        print(f"    to first order: variance {np.mean(first**2):.3f}, beyond 4: "
              f"{int((np.abs(first) > 4).sum())}")  # fmt: skip
    print("to first order, without refits, chance would be below 1 % for "
          f"{100 * np.mean(linear < 0.01):.1f} % and below 0.1 % for "
          f"{100 * np.mean(linear < 0.001):.1f} % of all")  # fmt: skip


if __name__ == "__main__":
    main(
        int(sys.argv[1]) if len(sys.argv) > 1 else 1000,
        sys.argv[2] if len(sys.argv) > 2 else "as-given",
    )
