"""One slip of thirty sigma: by how much it changes the elements.

Bar: no element by more than 0.5 sigma. Beside it, what leaving the measure out changes (which no
fit can undercut by much), and what a fit with the errors as given does.

    python tests/benchmarks/one_slip.py [histories]
"""

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))
from noisy_histories import WELL_KNOWN, slip_trial

BAR = 0.5


def main(histories: int) -> None:
    trials, seed = [], 0
    while len(trials) < histories:
        seed += 1
        one = slip_trial(seed)
        if one is not None:
            trials.append((seed, *one))
    seeds, ours, gone, given, unknown = np.array(trials).T
    print(f"{histories} histories ({seed - histories} more are not determined)")
    print("largest change of an element, in sigma      within 0.5   median   95 %    largest")
    for name, rows in (("all", unknown < np.inf), ("P known to 5 %", unknown < WELL_KNOWN)):
        for what, change in (("slip, errors from residuals", ours),
                             ("measure left out", gone),
                             ("slip, errors as given", given)):  # fmt: skip
            one = change[rows]
            middle, high = np.quantile(one, [0.5, 0.95])
            print(f"  {name + ', ' + what:<42}{100 * (one <= BAR).mean():8.1f} % "
                  f"{middle:8.2f} {high:8.2f} {one.max():8.2f}")  # fmt: skip
    over = ours > BAR
    print(f"beyond 0.5: {over.sum()}, of which leaving the measure out moves the orbit as far: "
          f"{(gone[over] > BAR).sum()}; seeds {seeds[over].astype(int).tolist()}")  # fmt: skip


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 300)
