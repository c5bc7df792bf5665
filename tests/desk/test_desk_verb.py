"""``relorbit desk`` where no window can be opened, and with a bad pair."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest
from desks import pair_file

ROOT = Path(__file__).resolve().parents[2]
WITHOUT_TKINTER = """
import sys
sys.modules["tkinter"] = None
from relorbit.cli.main import main
sys.exit(main(sys.argv[1:]))
"""
TOUCHED = """
import sys
from relorbit.cli.main import main
main(sys.argv[1:])
print(sorted({"matplotlib", "scipy", "astropy", "tkinter"} & set(sys.modules)))
"""


def run(folder, *words, code=None, **environment):
    """The command in a process of its own, without a display unless one is given."""
    kept = {name: value for name, value in os.environ.items() if name != "DISPLAY"}
    kept |= {"PYTHONPATH": str(ROOT), "RELORBIT_CONFIG": str(folder / "config"), **environment}
    begin = ["-m", "relorbit"] if code is None else ["-c", code]
    return subprocess.run(
        [sys.executable, *begin, *map(str, words)], cwd=folder, env=kept, capture_output=True,
        text=True, timeout=60,
    )  # fmt: skip


@pytest.mark.skipif(sys.platform in ("win32", "darwin"), reason="always has a display")
@pytest.mark.parametrize("display", [None, ":987"])
def test_no_display_points_to_the_command_line(tmp_path, display):
    words = ["desk", pair_file(tmp_path)]
    done = run(tmp_path, *words, **({"DISPLAY": display} if display else {}))
    assert done.returncode == 2 and done.stdout == ""
    assert done.stderr == (
        "relorbit: no display to open a window on; work from the command line instead, see "
        "relorbit --help: solve, ephemeris, residuals and draw need no display\n"
    )


def test_no_tkinter_says_what_to_install(tmp_path):
    done = run(tmp_path, "desk", code=WITHOUT_TKINTER)
    assert done.returncode == 2 and done.stdout == ""
    assert done.stderr.startswith("relorbit: the window needs tkinter, which this Python lacks; ")
    assert "python3-tk (Debian, Ubuntu)" in done.stderr and done.stderr.count("\n") == 1


def test_a_bad_pair_is_refused_before_anything_else(tmp_path):
    done = run(tmp_path, "desk", "none.ecsv", code=WITHOUT_TKINTER)
    assert done.returncode == 2
    assert done.stderr == "relorbit: none.ecsv: no such file; check the name and the folder\n"
    (tmp_path / "bad.csv").write_text("epoch,theta,rho\n1990.5,400,1\n")
    done = run(tmp_path, "desk", "bad.csv")
    assert done.returncode == 2
    assert done.stderr.startswith("relorbit: bad.csv, line 2, column theta: 400 is outside")
    done = run(tmp_path, "desk", "a.ecsv", "b.ecsv")
    assert done.returncode == 2 and done.stderr.startswith("relorbit desk: unrecognized argum")


def test_help_needs_no_display_and_none_of_the_heavy_libraries(tmp_path):
    for words in (["--help"], ["desk", "--help"]):
        done = run(tmp_path, *words, code=TOUCHED)
        assert done.stdout.splitlines()[-1] == "[]", words
        assert "desk" in done.stdout
    assert "example:\n  relorbit desk" in done.stdout
