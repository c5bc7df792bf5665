"""5,000 random actions in a real window: no fault, no hang, and undo brings all of it back.

Run by hand, on a display: python tests/benchmarks/desk_random_actions.py [ACTIONS [SEED]]
"""

from __future__ import annotations

import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
from desk.actions import RandomUser, undo_all
from desk.windows import invented_pair, opened, quiet_settings, settle

from relorbit.desk.window import Desk


def main() -> int:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 5000
    seed = int(sys.argv[2]) if len(sys.argv) > 2 else 1
    with quiet_settings() as settings, tempfile.TemporaryDirectory() as folder:
        initial = invented_pair(60)
        desk = opened(Desk(settings), initial, None)
        settle(desk, 1.0)
        user = RandomUser(desk, seed, Path(folder))
        start = time.monotonic()
        user.act(count)
        seconds = time.monotonic() - start
        desk.end_work()
        steps = undo_all(desk)
        same = desk.model.pair is initial
        print(f"{count} actions, seed {seed}, in {seconds:.0f} s: {user.done}")
        print(f"longest turn of the event loop {user.longest:.2f} s, in {user.slowest}")
        print(f"{steps} steps undone; the initial pair is back: {same}")
        desk._end()
    return 0 if same and user.longest < 1.0 else 1


if __name__ == "__main__":
    sys.exit(main())
