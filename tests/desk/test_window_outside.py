"""The program as its user runs it: started by the command, driven by keys from outside."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest

from relorbit.measures.editing import with_cell
from relorbit.measures.store import read_pair

EXAMPLE = Path(__file__).parents[2] / "example_measures" / "tarn_31.ecsv"
PATIENCE = 60.0  # seconds


def xdotool(*words: str) -> str:
    done = subprocess.run(
        ["xdotool", *words], capture_output=True, text=True, timeout=PATIENCE, check=False
    )
    return done.stdout.strip()


def wait_for(what: str, found: Callable[[], object]) -> object:
    end = time.monotonic() + PATIENCE
    while time.monotonic() < end:
        result = found()
        if result:
            return result
        time.sleep(0.1)
    raise AssertionError(f"{what}: not within {PATIENCE} s")


def window(title: str) -> str:
    """The number of the window with words in its title."""
    return xdotool("search", "--onlyvisible", "--name", title).split("\n")[0]


def keys(*names: str, to: str) -> None:
    """Press keys with the focus on the window of that title."""
    number = wait_for(f"window {to!r}", lambda: window(to))
    xdotool("windowfocus", "--sync", number)
    for name in names:
        xdotool("key", "--clearmodifiers", name)
        time.sleep(0.15)


@pytest.fixture
def tarn(tmp_path: Path) -> Path:
    """The example with a quadrant wrong and a separation misread."""
    pair = read_pair(EXAMPLE)
    turned = np.mod(pair.measures.theta[20] + 180.0, 360.0)
    pair = with_cell(with_cell(pair, 20, "theta", repr(float(turned))), 41, "rho", "0.31")
    path = tmp_path / "tarn_31.ecsv"
    pair.write(path)
    return path


@pytest.fixture
def program(screen: str, tarn: Path, tmp_path: Path) -> Iterator[subprocess.Popen]:
    """relorbit desk, running on the file."""
    if shutil.which("xdotool") is None:
        pytest.skip("no xdotool to press keys from outside; install xdotool")
    environment = {**os.environ, "DISPLAY": screen, "RELORBIT_CONFIG": str(tmp_path / "settings")}
    running = subprocess.Popen(
        [sys.executable, "-W", "error", "-m", "relorbit", "desk", str(tarn)],
        env=environment, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip
    yield running
    if running.poll() is None:
        running.terminate()
    running.communicate(timeout=PATIENCE)


def test_from_a_list_with_slips_to_an_orbit_on_record(
    program: subprocess.Popen, tarn: Path
) -> None:
    desk = "Tarn 31.*relorbit"
    keys("F5", to=desk)
    time.sleep(2.0)  # solving
    keys("w", "f", "F5", to=desk)  # the quadrant is the worst: turned
    time.sleep(2.0)
    keys("w", "x", to=desk)  # then the separation: set aside
    keys("m", "i", "s", "r", "e", "a", "d", "Return", to="Set aside")
    keys("F5", to=desk)
    time.sleep(2.0)
    keys("ctrl+k", to=desk)
    keys("Return", to="Keep on record")
    keys("ctrl+s", to=desk)
    wait_for("saving", lambda: read_pair(tarn).orbits)
    keys("ctrl+q", to=desk)
    assert program.wait(PATIENCE) == 0
    assert program.stderr.read() == ""
    saved = read_pair(tarn)
    assert np.flatnonzero(saved.measures.flip).tolist() == [20]
    assert np.flatnonzero(~saved.measures.use).tolist() == [41]
    assert saved.measures.reason[41] == "misread"
    orbit = saved.orbit()
    # made from P = 62.4 years, e = 0.42: the README of the examples
    assert abs(orbit.elements.P - 62.4) < 4 * orbit.sigma["P"]
    assert abs(orbit.elements.e - 0.42) < 4 * orbit.sigma["e"]
    assert not list(tarn.parent.glob(".*rescue*"))
