"""How quickly the window follows a nudge, beside a full redraw of the same two figures.

Run by hand, on a display: python tests/benchmarks/desk_redraw.py [MEASURES]
Prints medians over 120 nudges of each element in turn. The pair is invented.
"""

from __future__ import annotations

import statistics
import sys
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
from desk.windows import invented_pair, opened, quiet_settings, settle

from relorbit.desk.window import Desk
from relorbit.orbit.elements import NAMES

NUDGES = 120
FULL = 25


def nudge_times(desk: Desk, count: int = NUDGES) -> list[float]:
    """Milliseconds from a nudge to the picture of it, for each of `count` nudges."""
    times = []
    for k in range(count):
        start = time.perf_counter()
        desk.elements.nudge(NAMES[k % 7], 1.0 if (k // 7) % 2 else -1.0, True)
        desk.root.update()
        times.append(1000.0 * (time.perf_counter() - start))
    return times


def figure_times(desk: Desk, count: int = FULL) -> tuple[list[float], list[float]]:
    """Milliseconds of feeding and repainting both figures, and of drawing them in full."""
    quick, full = [], []
    for _ in range(count):
        start = time.perf_counter()
        for view in (desk.sky, desk.strips):
            view.feed()
            view.repaint()
        quick.append(1000.0 * (time.perf_counter() - start))
        start = time.perf_counter()
        for view in (desk.sky, desk.strips):
            view.canvas.draw()
        full.append(1000.0 * (time.perf_counter() - start))
        desk.root.update()
    return quick, full


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    with quiet_settings() as settings:
        desk = opened(Desk(settings), invented_pair(count))
        settle(desk, 1.0)
        nudge_times(desk, 14)
        times = nudge_times(desk)
        quick, full = figure_times(desk)
        size = [view.canvas.get_width_height() for view in (desk.sky, desk.strips)]
        print(f"{count} measures, figures of {size[0]} and {size[1]} pixels")
        print(f"nudge, all of the window: median {statistics.median(times):.1f} ms, "
              f"worst {max(times):.1f} ms")  # fmt: skip
        ratio = statistics.median(full) / statistics.median(quick)
        print(f"both figures: repainted {statistics.median(quick):.1f} ms, drawn in full "
              f"{statistics.median(full):.1f} ms, ratio {ratio:.1f}")  # fmt: skip
        desk.model.saved(Path("unsaved"))
        desk.close()


if __name__ == "__main__":
    main()
