"""What is wrong is said in one line that names file, line and column; status 2; nothing written."""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
import time

import pytest
from command import COMMAND, EXAMPLES

import relorbit

HEADER = b"epoch,theta,rho,theta_err,rho_err\n"
GOOD = b"2001.5,120.1,1.23,0.5,0.01\n"

# content of the file, and what the message says after the file's name
LISTS = {
    "empty": (b"", "is empty"),
    "header only": (HEADER, "a header but no measures"),
    "binary": (b"\x89PNG\r\n\x1a\n\x00\x00\x00\rIHDR", "is a binary file, not a text"),
    "wrong encoding": (
        "epoch,theta,rho,note\n2001.5,12,1.2,M\xfcller\n".encode("latin-1"),
        ", line 2: byte 0xfc is not UTF-8; save the file as UTF-8",
    ),
    "no epoch": (b"theta,rho\n12,1.2\n", "no column for the epoch"),
    "no theta or rho": (b"epoch,observer\n2001.5,me\n", "no column for the position angle"),
    "word for a number": (
        HEADER + GOOD + b"2002.5,north,1.2,0.5,0.01\n",
        ", line 3, column theta: 'north' is not a number",
    ),
    "theta of 360": (
        HEADER + b"2001.5,360,1.2,0.5,0.01\n",
        ", line 2, column theta: 360 is outside [0, 360)",
    ),
    "negative theta": (
        HEADER + b"2001.5,-3.5,1.2,0.5,0.01\n",
        ", line 2, column theta: -3.5 is outside [0, 360)",
    ),
    "negative rho": (
        HEADER + GOOD + b"2002.5,12,-1.2,0.5,0.01\n",
        ", line 3, column rho: -1.2 is negative",
    ),
    "NaN": (HEADER + b"2001.5,NaN,1.2,0.5,0.01\n", ", line 2, column theta: 'NaN' is not a number"),
    "inf": (HEADER + b"2001.5,12,inf,0.5,0.01\n", ", line 2, column rho: 'inf' is not a number"),
    "zero error": (
        HEADER + b"2001.5,12,1.2,0,0.01\n",
        ", line 2, column theta_err: 0 is not a standard deviation",
    ),
    "negative error": (
        HEADER + b"2001.5,12,1.2,0.5,-0.01\n",
        ", line 2, column rho_err: -0.01 is not a standard deviation",
    ),
    "epoch too early": (
        HEADER + b"1599.5,12,1.2,0.5,0.01\n",
        ", line 2, column epoch: 1599.5 is before 1600 or after 2200",
    ),
    "epoch too late": (
        HEADER + b"2201.5,12,1.2,0.5,0.01\n",
        ", line 2, column epoch: 2201.5 is before 1600 or after 2200",
    ),
    "Julian Date headed epoch": (
        HEADER + b"2451545.0,12,1.2,0.5,0.01\n",
        ", line 2, column epoch: '2451545.0' looks like a Julian Date; head the column JD",
    ),
    "unknown technique": (
        b"epoch,theta,rho,technique\n2001.5,12,1.2,telepathy\n",
        ", line 2, column technique: 'telepathy' is not a technique",
    ),
    "one cell too many": (HEADER + GOOD[:-1] + b",7\n", ", line 2"),
}


def refused(done: subprocess.CompletedProcess[str]) -> str:
    """The one line of a refusal, after its status was checked."""
    assert done.returncode == 2, done
    assert done.stdout == ""
    assert done.stderr.count("\n") == 1
    assert "Traceback" not in done.stderr
    return done.stderr


@pytest.mark.parametrize("case", LISTS)
def test_lists_that_cannot_be_read(run, tmp_path, case):
    content, says = LISTS[case]
    (tmp_path / "list.csv").write_bytes(content)
    message = refused(run("solve", "list.csv"))
    assert message.startswith("relorbit: list.csv")
    assert says in message
    message = refused(run("intake", "list.csv", "--into", "pair.ecsv"))
    assert message.startswith("relorbit: list.csv")
    assert says in message
    assert {path.name for path in tmp_path.iterdir()} == {"list.csv"}


def test_no_such_file_and_a_folder(run, tmp_path):
    assert "nowhere.csv: no such file" in refused(run("solve", "nowhere.csv"))
    (tmp_path / "folder").mkdir()
    assert "folder: is a directory" in refused(run("solve", "folder"))


def test_epochs_out_of_reason_are_read_when_allowed(run, tmp_path):
    (tmp_path / "old.csv").write_bytes(HEADER + b"1550.5,12,1.2,0.5,0.01\n")
    done = run("intake", "old.csv", "--into", "pair.ecsv", "--any-epoch")
    assert done.returncode == 0, done.stderr
    assert run("ephemeris", "pair.ecsv", "--any-epoch").returncode == 3, "read, but one measure"
    assert run("ephemeris", "pair.ecsv").returncode == 2


def test_a_pair_file_of_a_newer_version(run, tarn):
    before = tarn.read_text(encoding="utf-8")
    newer = before.replace("format: 1", "format: 2")
    assert newer != before
    tarn.write_text(newer, encoding="utf-8")
    message = refused(run("solve", tarn, "--record", "mine"))
    assert "tarn_31.ecsv" in message and "format 2" in message
    assert tarn.read_text(encoding="utf-8") == newer


def test_a_pair_file_with_a_bad_cell_names_line_and_column(run, tarn):
    lines = tarn.read_text(encoding="utf-8").splitlines()
    cells = lines[-1].split(",")
    cells[2] = "-4"
    lines[-1] = ",".join(cells)
    tarn.write_text("\n".join(lines) + "\n", encoding="utf-8")
    message = refused(run("residuals", tarn))
    assert f"tarn_31.ecsv, line {len(lines)}, column rho: -4 is negative" in message


def test_a_read_only_target_is_left_alone(run, tarn):
    before = tarn.read_bytes()
    tarn.chmod(0o444)
    message = refused(run("solve", tarn, "--record", "mine"))
    assert "tarn_31.ecsv" in message
    assert tarn.read_bytes() == before
    assert [path.name for path in tarn.parent.iterdir()] == ["tarn_31.ecsv"]


@pytest.mark.skipif(sys.platform == "win32", reason="file size limits are of POSIX systems")
def test_a_full_disk_keeps_the_old_file(tarn, tmp_path):
    # a real limit on the size of files: the write itself fails, as on a full disk
    before = tarn.read_bytes()
    limited = (
        "import resource, sys; resource.setrlimit(resource.RLIMIT_FSIZE, (2000, 2000));"
        "from relorbit.cli.main import main; sys.exit(main(sys.argv[1:]))"
    )
    done = subprocess.run(
        [sys.executable, "-c", limited, "solve", str(tarn), "--record", "mine"],
        capture_output=True, text=True, cwd=tmp_path, timeout=120,
    )  # fmt: skip
    assert "not written" in refused(done)
    assert tarn.read_bytes() == before
    assert [path.name for path in tmp_path.iterdir()] == ["tarn_31.ecsv"]


@pytest.mark.skipif(sys.platform == "win32", reason="kills by signal")
def test_killed_in_mid_save_the_old_file_survives(tmp_path):
    # a pair of many measures is written over and over; killed at any moment it reads whole
    target = tmp_path / "many.ecsv"
    script = (
        "import sys, numpy as np, relorbit\n"
        "n = 4000\n"
        "epoch = np.linspace(1900, 2000, n)\n"
        "for k in range(10**6):\n"
        "    pair = relorbit.Pair.from_arrays(epoch, np.full(n, k % 360.0), np.ones(n))\n"
        "    pair.write(sys.argv[1])\n"
        "    print(k, flush=True)\n"
    )
    for wait in (0.0, 0.13, 0.31, 0.57):
        writer = subprocess.Popen(
            [sys.executable, "-c", script, str(target)], stdout=subprocess.PIPE, text=True
        )
        assert writer.stdout is not None
        writer.stdout.readline()
        time.sleep(wait)
        writer.send_signal(signal.SIGKILL)
        writer.communicate()
        theta = relorbit.read(target).measures.theta
        assert theta.size == 4000
        assert (theta == theta[0]).all()


@pytest.mark.skipif(sys.platform == "win32", reason="interrupts by signal")
def test_interrupt_is_one_line_and_status_130(tmp_path):
    fifo = tmp_path / "list.csv"
    os.mkfifo(fifo)
    # tests that run in the background are started with interrupts ignored, and hand that on
    reader = subprocess.Popen(
        [COMMAND, "solve", str(fifo)], stderr=subprocess.PIPE, stdout=subprocess.PIPE, text=True,
        preexec_fn=lambda: signal.signal(signal.SIGINT, signal.SIG_DFL),
    )  # fmt: skip
    try:
        time.sleep(1.5)
        reader.send_signal(signal.SIGINT)
        out, err = reader.communicate(timeout=60)
    finally:
        reader.kill()
        reader.communicate()
    assert (reader.returncode, out) == (130, "")
    assert err == "relorbit: stopped; nothing was left half written\n"


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (["solve", "{pair}", "--hold", "q=3"], "q is not an element; hold one of P, T, e, a"),
        (["solve", "{pair}", "--hold", "e"], "--hold: 'e' is not ELEMENT=VALUE"),
        (["solve", "{pair}", "--hold", "e=x"], "--hold: 'x' is not a number for e"),
        (["solve", "{pair}", "--hold", "e=1.2"], "e must be in 0 <= e < 1, not 1.2"),
        (["solve", "{pair}", "--hold", "P=-5"], "P must be above 0, not -5"),
        (["solve", "{pair}", "--epoch-range", "2020"], "--epoch-range: '2020' is not a range"),
        (["solve", "{pair}", "--epoch-range", "2020:1990"], "is empty; write the smaller"),
        (["solve", "{pair}", "--period-range", "0:10"], "not a range; give the lower end, above"),
        (["ephemeris"], "give either a pair file or --elements"),
        (["ephemeris", "{pair}", "--elements", "P=1"], "give either a pair file or --elements"),
        (["ephemeris", "--elements", "P=1,T=2000"], "--elements: e, a, i, node, omega missing"),
        (["ephemeris", "{pair}", "--step", "fortnight"], "step 'fortnight' is not a length"),
        (["ephemeris", "{pair}", "--step", "0 d"], "step '0 d' is not a length"),
        (["ephemeris", "{pair}", "--from", "tomorrow"], "epoch 'tomorrow'"),
        (["ephemeris", "{pair}", "--from", "2030", "--to", "2020"], "is before the first"),
        (["ephemeris", "{pair}", "--to", "2199", "--step", "1e-9y"], "step '1e-9y' is not"),
        (["ephemeris", "{pair}", "--to", "9999", "--step", "0.001d"], "more than 100000"),
        (["ephemeris", "{pair}", "--orbit", "lost"], "has no orbit on record"),
        (["weigh", "{pair}", "--parallax", "-3"], "a mass needs a parallax above 0 mas, not -3"),
        (["weigh", "{pair}", "--parallax", "x"], "argument --parallax: invalid float value: 'x'"),
        (["draw", "{pair}", "--out", "orbit.jpg"], "orbit.jpg: the name ends in .jpg"),
        (["draw", "{pair}", "--out", "no/such/orbit.png"], "no/such/orbit.png: not written"),
        (["intake", "{pair}", "--into", "x.ecsv", "--dec", "+95"], "95 is outside -90 to 90"),
        (["intake", "{pair}", "--into", "x.ecsv", "--ra", "25 00"], "'25 00' is not a right asc"),
        (["intake", "{pair}", "--into", "x.ecsv", "--equinox", "old"], "'old' is not an equinox"),
        (["intake", "{pair}", "--into", "x.ecsv", "--layout", "l.toml"], "l.toml: no such file"),
        (["fly"], "invalid choice: 'fly'"),
        (["solve"], "the following arguments are required: PAIR"),
    ],
)
def test_words_that_make_no_sense(run, tarn, tmp_path, words, says):
    before = tarn.read_bytes()
    message = refused(run(*(word.replace("{pair}", str(tarn)) for word in words)))
    assert says in message
    assert tarn.read_bytes() == before
    assert [path.name for path in tmp_path.iterdir()] == ["tarn_31.ecsv"]


def test_a_list_is_not_appended_to_a_plain_list(run, tmp_path):
    plain = shutil.copy(EXAMPLES / "tarn_31.csv", tmp_path / "plain.csv")
    before = plain.read_bytes()
    message = refused(run("intake", EXAMPLES / "tarn_31.csv", "--into", "plain.csv"))
    assert "plain.csv: is a plain list" in message
    assert plain.read_bytes() == before


@pytest.mark.parametrize(
    ("rows", "code", "says"),
    [
        (1, "too-few-measures", "at least 8"),
        (3, "too-few-measures", "4 positions"),
    ],
)
def test_too_few_measures_are_status_3(run, tmp_path, rows, code, says):
    lines = [f"{2000 + 3 * k},{10 * k + 5},1.2,0.5,0.01\n".encode() for k in range(rows)]
    (tmp_path / "few.csv").write_bytes(HEADER + b"".join(lines))
    done = run("solve", "few.csv", "--json")
    assert done.returncode == 3
    assert code in done.stdout
    assert says in done.stderr
    assert done.stderr.count("\n") == 1


def test_all_at_one_epoch_is_status_3(run, tmp_path):
    rows = b"".join(f"2001.5,{12 + k},1.2,0.5,0.01\n".encode() for k in range(6))
    (tmp_path / "one.csv").write_bytes(HEADER + rows)
    done = run("solve", "one.csv")
    assert done.returncode == 3
    assert "all at one epoch" in done.stderr


def test_a_fault_of_our_own_is_status_1_and_says_where(tmp_path, tarn):
    broken = (
        "import sys, relorbit.solve.solver as s\n"
        "def solve(*words, **more): raise ZeroDivisionError('made to fail')\n"
        "s.solve = solve\n"
        "from relorbit.cli.main import main; sys.exit(main(sys.argv[1:]))"
    )
    done = subprocess.run(
        [sys.executable, "-c", broken, "solve", str(tarn)],
        capture_output=True, text=True, timeout=120,
        env={**os.environ, "TMPDIR": str(tmp_path), "TEMP": str(tmp_path)},
    )  # fmt: skip
    assert done.returncode == 1
    assert done.stderr.count("\n") == 1
    assert "Traceback" not in done.stderr
    report = done.stderr.rsplit(" ", 1)[1].strip()
    with open(report, encoding="utf-8") as file:
        assert "made to fail" in file.read()
