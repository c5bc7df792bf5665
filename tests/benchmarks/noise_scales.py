"""Scales of five groups against the true ones, and the elements' scatter against that of a fit
that knows them. Bars: scales unbiased within 5 % on average over 300 pairs, scatter within 10 %.

    python tests/benchmarks/noise_scales.py [pairs]
"""

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))
from noisy_histories import GROUPS, noise_trial

from relorbit.orbit.elements import NAMES

FAR = 6.0  # sigma: beyond it another orbit was found, which is counted by itself


def main(pairs: int) -> None:
    trials, seed = [], 0
    while len(trials) < pairs:
        seed += 1
        one = noise_trial(seed)
        if one is not None:
            trials.append(one)
    ratio, ours, known = (np.array(part) for part in zip(*trials, strict=True))
    print(f"{pairs} pairs of {seed} simulated ones (P known to 5 % by a fit that knows the errors)")
    print("estimated over true scale   across  along   (mean over pairs)")
    for slot, who in enumerate(GROUPS):
        print(f"  {', '.join(who):<26}{np.nanmean(ratio[:, slot, 0]):6.3f} "
              f"{np.nanmean(ratio[:, slot, 1]):6.3f}")  # fmt: skip
    print(f"  all                       {np.nanmean(ratio):6.3f} +/- "
          f"{np.nanstd(ratio) / np.sqrt(ratio.size):.3f}")  # fmt: skip
    far_ours, far_known = (~(np.nan_to_num(np.abs(x)) < FAR).all(axis=1) for x in (ours, known))
    near = ~far_ours & ~far_known
    print(f"beyond {FAR:g} sigma in an element: from residuals {far_ours.sum()}, "
          f"errors known {far_known.sum()}")  # fmt: skip
    print("scatter in sigma of the fit that knows   from residuals   known   ratio")
    a, b = (np.sqrt(np.nanmean(x[near] ** 2, axis=0)) for x in (ours, known))
    for name, one, other in zip(NAMES, a, b, strict=True):
        print(f"  {name:<36}{one:8.3f} {other:12.3f} {one / other:7.3f}")
    print(f"  all{np.sqrt((a**2).mean()):41.3f} {np.sqrt((b**2).mean()):12.3f} "
          f"{np.sqrt((a**2).mean() / (b**2).mean()):7.3f}")  # fmt: skip


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 300)
