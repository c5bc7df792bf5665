"""The command line as an observer runs it: the installed command in a process of its own."""

from __future__ import annotations

import os
import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest
from command import COMMAND, EXAMPLES

Run = Callable[..., subprocess.CompletedProcess[str]]


@pytest.fixture
def run(tmp_path: Path) -> Run:
    """Run ``relorbit WORDS`` in an empty folder; returns status, standard output and error."""
    assert COMMAND, "the relorbit command is not installed beside this Python"

    def go(*words: object, cwd: Path = tmp_path, **options: object):
        return subprocess.run(
            [COMMAND, *map(str, words)], cwd=cwd, capture_output=True, text=True, timeout=120,
            encoding="utf-8", env={**os.environ, "MPLBACKEND": "agg"}, **options,
        )  # fmt: skip

    return go


@pytest.fixture
def tarn(tmp_path: Path) -> Path:
    """A copy of the pair file of Tarn 31, without an orbit on record."""
    return Path(shutil.copy(EXAMPLES / "tarn_31.ecsv", tmp_path))
