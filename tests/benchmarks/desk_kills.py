"""Fifty kills of a desk at random moments during edits: what is missing afterwards.

Run by hand: ``python tests/benchmarks/desk_kills.py [KILLS [SPEED]]``. The desk's clock runs four
times as fast as time by default, so that disk and processor count four times.
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "desk"))

from desk_crash import series


def main(kills: int = 50, speed: float = 4.0) -> int:
    with tempfile.TemporaryDirectory() as folder:
        outcomes = series(Path(folder), kills, seed=20261202, speed=speed)
    whole = sum(one.file_is_whole for one in outcomes)
    lost = sorted(one.lost_s for one in outcomes)
    print(
        f"{kills} kills, {sum(one.edits for one in outcomes)} edits, clock {speed:g} times as fast"
    )
    print(f"file whole: {whole} of {kills}")
    print(f"work offered after: {sum(one.rescued for one in outcomes)} of {kills}")
    print(f"edits missing: none after {lost.count(0.0)}; the oldest {lost[-1]:.1f} s old, "
          f"median {lost[len(lost) // 2]:.1f} s; allowed 10 s")  # fmt: skip
    return 0 if whole == kills and lost[-1] <= 10.0 else 1


if __name__ == "__main__":
    given = sys.argv[1:]
    sys.exit(main(*map(int, given[:1]), *map(float, given[1:])))
