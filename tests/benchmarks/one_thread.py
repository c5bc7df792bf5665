"""What every benchmark imports first: one thread, and the path to the tests' helpers."""

from __future__ import annotations

import os
import sys
from pathlib import Path

for _name in ("OPENBLAS", "OMP", "MKL", "NUMEXPR", "VECLIB_MAXIMUM"):
    os.environ[f"{_name}_NUM_THREADS"] = "1"
_TESTS = Path(__file__).resolve().parents[1]
# the helpers of the tests, and the package where it is not installed
sys.path[:0] = [str(_TESTS), str(_TESTS.parent)]


def machine() -> str:
    """What the figures were taken on."""
    import platform

    import numpy
    import scipy

    return (
        f"{platform.processor() or platform.machine()}, {os.cpu_count()} cores, one thread used; "
        f"Python {platform.python_version()}, numpy {numpy.__version__}, scipy {scipy.__version__}"
    )
