"""A desk that is edited at random and killed at random: what is missing afterwards.

Run as a program it is that desk, without a window; `series` starts it, kills it and looks.
"""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from desks import new_session, pair_file

from relorbit.desk import rescue
from relorbit.desk.session import Session
from relorbit.measures.pair import Pair
from relorbit.measures.store import pair_text, read_pair

ROOT = Path(__file__).resolve().parents[2]
TICK_S = 2.0  # how often a window calls `Session.tick`
ROUND_S = 0.25  # what one round lasts on the clock that does not wait
MEASURES = 60


@dataclass(frozen=True)
class Outcome:
    """What was found after one kill.

    Attributes
    ----------
    edits : int
        How many edits there were in that life.
    lost_s : float
        How old the oldest missing edit was at the last sign of life, seconds; 0 if none is.
    rescued : bool
        Unsaved work was offered.
    file_is_whole : bool
        The file holds one of the states it was ever in.
    """

    edits: int
    lost_s: float
    rescued: bool
    file_is_whole: bool


def series(folder: Path, kills: int, seed: int, speed: float = 0.0) -> list[Outcome]:
    """Kill a desk so many times; each life goes on with what the last one left.

    Parameters
    ----------
    folder : Path
        An empty folder.
    speed : float
        How fast the desk's clock runs; 0 for one that does not wait, 0.25 s a round.
    """
    rng = np.random.default_rng(seed)
    path, config = pair_file(folder, MEASURES), folder / "config"
    states = {_digest(path.read_bytes())}
    outcomes = []
    for life in range(kills):
        log = folder / f"life_{life}.log"
        longest = 30.0 / speed if speed else 1.0
        _live_and_die(path, config, log, seed + life, speed, rng.uniform(0.0, longest))
        outcomes.append(_look(path, config, log, states))
    return outcomes


def _live_and_die(
    path: Path, config: Path, log: Path, seed: int, speed: float, seconds: float
) -> None:
    process = subprocess.Popen(
        [sys.executable, __file__, path, config.parent, log, str(seed), str(speed)],
        env={**os.environ, "PYTHONPATH": str(ROOT)},
    )
    while not (log.exists() and log.read_bytes().count(b"\n")):
        assert process.poll() is None, "the desk ended by itself"
        time.sleep(0.01)
    time.sleep(seconds)
    assert process.poll() is None, "the desk ended by itself"
    process.kill()
    process.wait()


def _look(path: Path, config: Path, log: Path, states: set[str]) -> Outcome:
    """What is there after a kill, compared with the log of that life."""
    lines = [line.split() for line in log.read_text().splitlines() if line.endswith(".")]
    history = [(float(when), digest) for when, digest, _ in lines]
    states.update(digest for _, digest in history)
    left = rescue.found(path, config)
    assert len(left) <= 1, "work of more than one window"
    there = read_pair(left[0].file if left else path)
    place = max((k for k, (_, one) in enumerate(history) if one == digest_of(there)), default=None)
    assert place is not None, "what is there was never on the desk in this life"
    missing = history[place + 1 :]
    lost = history[-1][0] - missing[0][0] if missing else 0.0
    whole = _digest(path.read_bytes()) in states
    return Outcome(len(history) - 1, lost, bool(left), whole)


def digest_of(pair: Pair) -> str:
    return _digest(pair_text(pair).encode())


def _digest(content: bytes) -> str:
    return hashlib.sha256(content).hexdigest()


def edit_at_random(session: Session, rng: np.random.Generator, count: int) -> None:
    """One edit of the measures, or a save."""
    model, row = session.model, int(rng.integers(len(session.model.pair.measures)))
    kind = rng.integers(9)
    if kind == 0:
        model.undo()
    elif kind == 1:
        model.redo()
    elif kind == 2:
        model.flip([row])
    elif kind == 3:
        model.set_use([row], not model.pair.measures.use[row], f"edit {count}")
    elif kind == 4 and rng.random() < 0.2:
        session.save()
    elif kind == 5:
        model.add_measure("2020.5", "10", "1", note=f"edit {count}")
    else:
        model.edit_cell(row, "note", f"edit {count}")


def live(path: Path, folder: Path, log: Path, seed: int, speed: float) -> None:
    """Open, take up what a crash left behind, and edit until killed."""
    rng, session = np.random.default_rng(seed), new_session(folder)
    session.open_file(path)
    for left in session.found():
        session.restore(left)
    begun, now, count, next_tick, told = time.monotonic(), 0.0, 0, TICK_S, None
    with open(log, "w", encoding="utf-8") as file:
        while True:
            if session.model.pair is not told:  # said before it can be written anywhere
                told = session.model.pair
                file.write(f"{now:.3f} {digest_of(told)} .\n")
                file.flush()
            now = (time.monotonic() - begun) * speed if speed else now + ROUND_S
            if now >= next_tick:
                next_tick = now + TICK_S
                assert session.tick(now) is None
            count += 1
            if rng.random() < 0.5:
                edit_at_random(session, rng, count)
            time.sleep(0.001 if not speed else ROUND_S / speed)


if __name__ == "__main__":
    live(*map(Path, sys.argv[1:4]), int(sys.argv[4]), float(sys.argv[5]))
