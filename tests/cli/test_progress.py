"""Progress is shown on a terminal once a step takes over a second, and never in a pipe."""

from __future__ import annotations

import os
import subprocess
import sys

import pytest

SLOW = (
    "import time\n"
    "from relorbit.cli.common import waiting\n"
    "with waiting('solving'):\n"
    "    time.sleep({seconds})\n"
    "print('done')\n"
)


def on_a_terminal(seconds: float) -> str:
    """What a terminal is sent while a step takes so long."""
    pty = pytest.importorskip("pty", reason="terminals of our own are of POSIX systems")
    ours, theirs = pty.openpty()
    done = subprocess.run(
        [sys.executable, "-c", SLOW.format(seconds=seconds)],
        stdout=subprocess.PIPE, stderr=theirs, timeout=60, check=True, text=True,
    )  # fmt: skip
    os.close(theirs)
    assert done.stdout == "done\n"
    shown = b""
    try:
        while part := os.read(ours, 4096):
            shown += part
    except OSError:  # the other end is closed: all is read
        pass
    os.close(ours)
    return shown.decode()


def test_a_slow_step_says_how_long_it_has_taken_and_clears_the_line():
    shown = on_a_terminal(1.4)
    assert "solving ... 1 s" in shown
    assert shown.endswith("\r\033[K")


def test_a_quick_step_says_nothing():
    assert on_a_terminal(0.2) == ""


def test_nothing_is_said_in_a_pipe():
    done = subprocess.run(
        [sys.executable, "-c", SLOW.format(seconds=1.4)], capture_output=True, text=True, timeout=60
    )
    assert (done.returncode, done.stdout, done.stderr) == (0, "done\n", "")
