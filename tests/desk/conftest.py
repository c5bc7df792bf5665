"""A display for the tests that open a window, and windows on it."""

from __future__ import annotations

import faulthandler
import os
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest

PATIENCE = 120  # seconds that a test of a window may take
NO_DISPLAY = "no display and no Xvfb to make one; install xvfb"


@pytest.fixture(scope="session")
def display() -> Iterator[str]:
    """The display there is, or one of our own; its name ("" where the system has no names)."""
    if sys.platform in ("win32", "darwin") or os.environ.get("DISPLAY"):
        yield os.environ.get("DISPLAY", "")
        return
    if shutil.which("Xvfb") is None:
        pytest.skip(NO_DISPLAY)
    read, write = os.pipe()
    server = subprocess.Popen(
        ["Xvfb", "-displayfd", str(write), "-screen", "0", "1280x800x24", "-dpi", "96"],
        pass_fds=(write,), stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
    )  # fmt: skip
    os.close(write)
    with os.fdopen(read) as said:
        name = f":{said.readline().strip()}"
    os.environ["DISPLAY"] = name
    yield name
    del os.environ["DISPLAY"]
    server.terminate()
    server.wait(10)


@pytest.fixture
def desk(display: str) -> Iterator[object]:
    """A window with nothing on it yet, and settings of its own."""
    from relorbit.desk.settings import Settings
    from relorbit.desk.window import Desk

    with tempfile.TemporaryDirectory() as folder:
        window = Desk(Settings.load(folder))
        faults: list[BaseException] = []
        window.root.report_callback_exception = lambda kind, fault, trace: faults.append(fault)
        window.root.geometry("1240x740+0+0")
        window.root.update()
        # a dialog that nobody answers would wait for ever
        faulthandler.dump_traceback_later(PATIENCE, exit=True)
        yield window
        faulthandler.cancel_dump_traceback_later()
        if not window._closing:
            window._end()
        if faults:
            raise faults[0]


@pytest.fixture
def example(desk: object) -> object:
    """A window with the example Tarn 31 on it."""
    from desk.windows import settle

    desk.files.open_example("tarn_31.ecsv")
    settle(desk, 0.3)
    return desk


@pytest.fixture
def screen(display: str, tmp_path: Path) -> str:
    """The name of an X display for programs that drive windows from outside."""
    if not display:
        pytest.skip("windows are driven from outside on X displays only")
    return display
