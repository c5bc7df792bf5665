"""Peak memory of one solve, by the number of measures.

    python tests/benchmarks/memory.py [COUNT ...]

Each count runs in a process of its own. The bar is 500 MB at 20,000 measures.
"""

from __future__ import annotations

import one_thread  # first: it sets the number of threads

# isort: split

import resource
import subprocess
import sys

import numpy as np
from simulate import observed

from relorbit.orbit.elements import Elements
from relorbit.solve.solver import solve


def peak() -> float:
    """Peak resident memory of this process, MB (kilobytes are counted, and bytes on macOS)."""
    unit = 2.0**20 if sys.platform == "darwin" else 2.0**10
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / unit


def one(count: int) -> None:
    elements = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
    rng = np.random.default_rng(1)
    pair = observed(elements, np.sort(rng.uniform(1940.0, 2020.0, count)), 0.03, rng)
    before = peak()
    solve(pair)
    print(f"{count:>10,}{before:>18.0f} MB{peak():>12.0f} MB")


def main() -> None:
    if sys.argv[1:2] == ["--one"]:
        one(int(sys.argv[2]))
        return
    print(one_thread.machine())
    print(f"{'measures':>10}{'before':>21}{'peak':>15}", flush=True)
    for count in sys.argv[1:] or ["100", "1000", "10000", "20000"]:
        subprocess.run([sys.executable, __file__, "--one", count], check=True)


if __name__ == "__main__":
    main()
