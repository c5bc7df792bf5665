"""Twenty thousand measures: within 500 MB, and no slower than the measures make it."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

SCRIPT = """
import json, resource, sys, time
from pathlib import Path
sys.path.insert(0, {folder!r})
import numpy as np
from simulate import observed
from relorbit.orbit.elements import Elements
from relorbit.solve.solver import solve

rng = np.random.default_rng(1)
elements = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
pair = observed(elements, np.sort(rng.uniform(1940.0, 2020.0, 20000)), 0.03, rng)
start = time.perf_counter()
solution = solve(pair)
seconds = time.perf_counter() - start
# the peak is counted in kilobytes, and in bytes on macOS
unit = 2.0**20 if sys.platform == "darwin" else 2.0**10
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
# on Linux that is at least what the process of the tests had when it started this one
if Path("/proc/self/status").exists():
    lines = Path("/proc/self/status").read_text().splitlines()
    peak = next(int(line.split()[1]) for line in lines if line.startswith("VmHWM"))
print(json.dumps({{"P": solution.elements.P, "sigma": solution.sigma["P"], "used": solution.used,
    "reduced": solution.reduced_chi2, "seconds": seconds,
    "megabytes": peak / unit}}))
"""


def test_twenty_thousand_measures_fit_in_500_megabytes() -> None:
    pytest.importorskip("resource", reason="only unix systems tell a process its peak memory")
    script = SCRIPT.format(folder=str(Path(__file__).parents[1]))
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", script], capture_output=True, text=True, timeout=300
    )
    assert done.returncode == 0, done.stderr
    said = json.loads(done.stdout)
    assert said["used"] == 20000
    assert abs(said["P"] - 40.0) < 5.0 * said["sigma"]
    assert said["reduced"] == pytest.approx(1.0, abs=0.05)
    assert said["megabytes"] < 500.0
    # a minute on any machine; the benchmarks measure it properly
    assert said["seconds"] < 60.0
