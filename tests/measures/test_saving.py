"""Saving whole or not at all: interruption, full disk, read-only, links, devices."""

import os
import random
import signal
import stat
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from relorbit.errors import InputError
from relorbit.measures.files import write_text_atomically
from relorbit.measures.pair import Pair
from relorbit.measures.store import read_pair

POSIX = pytest.mark.skipif(os.name != "posix", reason="POSIX signals, limits and permissions")
ROOM = Path(__file__).resolve().parents[2]

LOOP = """
import sys
from relorbit.measures.files import write_text_atomically
texts = [open(name, encoding="utf-8").read() for name in sys.argv[2:]]
count = 0
while True:
    write_text_atomically(sys.argv[1], texts[count % 2], keep_previous=True)
    count += 1
    print(count, flush=True)
"""
LIMITED = """
import resource, sys
from relorbit.errors import InputError
from relorbit.measures.store import read_pair, write_pair
pair = read_pair(sys.argv[1])
resource.setrlimit(resource.RLIMIT_FSIZE, (2000, 2000))
try:
    write_pair(pair, sys.argv[2])
except InputError as error:
    print(error)
"""


def python(code, *arguments, **ways):
    environment = {**os.environ, "PYTHONPATH": str(ROOM)}
    return subprocess.Popen(
        [sys.executable, "-c", code, *map(str, arguments)],
        stdout=subprocess.PIPE, text=True, env=environment, **ways,
    )  # fmt: skip


def big_pair(count, name):
    rng = np.random.default_rng(count)
    values = (np.sort(rng.uniform(1800, 2020, count)), rng.uniform(0, 360, count))
    return Pair.from_arrays(*values, rng.uniform(0, 9, count), name=name)


@POSIX
def test_killed_in_mid_save_the_file_is_whole(tmp_path):
    pairs = [big_pair(9000, "first"), big_pair(7000, "second")]
    names = [tmp_path / "a.ecsv", tmp_path / "b.ecsv"]
    for pair, name in zip(pairs, names, strict=True):
        pair.write(name)
    whole = {name.read_bytes() for name in names}
    folder = tmp_path / "target"
    folder.mkdir()
    target = folder / "pair.ecsv"
    rng, kills, in_mid_save = random.Random(20240501), 0, 0
    # How many kills fall into a save depends on the disk; go on until some have.
    while kills < 12 or (in_mid_save < 3 and kills < 200):
        kills += 1
        writer = python(LOOP, target, *names)
        writer.stdout.readline()
        time.sleep(rng.uniform(0.0, 0.08))
        writer.send_signal(signal.SIGKILL)
        writer.wait()
        writer.stdout.close()
        assert target.read_bytes() in whole
        previous = folder / "pair.ecsv.previous"
        assert not previous.exists() or previous.read_bytes() in whole
        left = [path for path in folder.iterdir() if path.name.startswith(".")]
        in_mid_save += bool(left)
        for path in left:
            path.unlink()
    assert in_mid_save >= 3, "too few kills fell into a save to prove anything"
    assert read_pair(target) in pairs


@POSIX
def test_disk_with_no_room_left(tmp_path):
    """A limit of the size of files, which stops the write half way as a full disk does."""
    big_pair(500, "large").write(tmp_path / "source.ecsv")
    target = tmp_path / "target.ecsv"
    small = Pair.from_arrays([1990.0], [10.0], [1.0], name="small")
    small.write(target)
    before = target.read_bytes()
    done = python(LIMITED, tmp_path / "source.ecsv", target)
    out, _ = done.communicate()
    assert out == (
        f"{target}: not written: the file is too large for this disk; make room or choose another "
        "place\n"
    )
    assert target.read_bytes() == before
    assert not [path for path in tmp_path.iterdir() if path.name.endswith(".tmp")]


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no device that is always full")
def test_full_device():
    with pytest.raises(InputError) as caught:
        write_text_atomically("/dev/full", "text")
    assert str(caught.value) == (
        "/dev/full: not written: the disk is full; make room or choose another place"
    )


def test_read_only_target_is_refused_even_to_the_administrator(tmp_path):
    target = tmp_path / "p.ecsv"
    target.write_text("old")
    target.chmod(stat.S_IREAD)
    with pytest.raises(InputError) as caught:
        write_text_atomically(target, "new")
    assert str(caught.value) == (
        f"{target}: not written: the file is read-only; allow writing to it or name another"
    )
    assert target.read_text() == "old"
    target.chmod(stat.S_IREAD | stat.S_IWRITE)
    assert [path.name for path in tmp_path.iterdir()] == ["p.ecsv"]


@POSIX
@pytest.mark.skipif(
    hasattr(os, "geteuid") and os.geteuid() == 0, reason="permissions do not bind the administrator"
)
def test_read_only_folder(tmp_path):
    target = tmp_path / "p.ecsv"
    target.write_text("old")
    tmp_path.chmod(0o500)
    try:
        with pytest.raises(InputError, match="not written: no permission here; choose another"):
            write_text_atomically(target, "new")
        assert target.read_text() == "old"
    finally:
        tmp_path.chmod(0o700)


def test_a_failing_flush_leaves_the_old_file(tmp_path, monkeypatch):
    target = tmp_path / "p.ecsv"
    write_text_atomically(target, "old")

    def fails(_):
        raise OSError(5, "Input/output error")

    monkeypatch.setattr(os, "fsync", fails)
    with pytest.raises(InputError, match="not written: input/output error; choose another place"):
        write_text_atomically(target, "new", keep_previous=True)
    assert target.read_text() == "old"
    assert [path.name for path in tmp_path.iterdir()] == ["p.ecsv"]


def test_places_that_cannot_be_written(tmp_path):
    with pytest.raises(InputError, match="not written: this is a directory; name a file in it"):
        write_text_atomically(tmp_path, "text")
    with pytest.raises(InputError, match=r"not written: there is no folder .*; make it first"):
        write_text_atomically(tmp_path / "none" / "p.ecsv", "text")
    with pytest.raises(InputError, match="not written: "):
        write_text_atomically(tmp_path / ("n" * 300), "text")
    assert not list(tmp_path.iterdir())


@POSIX
def test_a_link_is_written_through_and_the_mode_kept(tmp_path):
    real = tmp_path / "real.ecsv"
    real.write_text("old")
    real.chmod(0o640)
    link = tmp_path / "link.ecsv"
    link.symlink_to(real)
    write_text_atomically(link, "new")
    assert link.is_symlink() and real.read_text() == "new"
    assert stat.S_IMODE(real.stat().st_mode) == 0o640


def test_bytes_and_line_ends_are_kept(tmp_path):
    write_text_atomically(tmp_path / "a", b"\x00\r\n\xff")
    assert (tmp_path / "a").read_bytes() == b"\x00\r\n\xff"
    write_text_atomically(tmp_path / "b", "\u03b8\n")
    assert (tmp_path / "b").read_bytes() == b"\xce\xb8\n"
