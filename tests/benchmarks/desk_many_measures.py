"""20,000 measures in the window: how long opening, scrolling, selecting, sorting, editing take.

Run by hand, on a display: python tests/benchmarks/desk_many_measures.py [MEASURES]
Prints the median and the worst of each, the window's answer included. The pair is invented.
"""

from __future__ import annotations

import statistics
import sys
import time
from collections.abc import Callable
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
from desk.windows import INVENTED, invented_pair, quiet_settings, settle

from relorbit.desk.window import Desk


def timed(desk: Desk, name: str, count: int, act: Callable[[int], object]) -> list[float]:
    """Milliseconds of `count` actions, each until the window has shown it."""
    times = []
    for k in range(count):
        start = time.perf_counter()
        act(k)
        desk.root.update()
        times.append(1000.0 * (time.perf_counter() - start))
    print(f"{name:32} median {statistics.median(times):7.1f} ms   worst {max(times):7.1f} ms")
    return times


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 20_000
    with quiet_settings() as settings:
        pair = invented_pair(count)
        path = settings.folder / "many.ecsv"
        pair.write(path)
        desk = Desk(settings)
        settle(desk, 0.5)
        print(f"{count} measures")
        timed(desk, "open the file", 1, lambda k: desk.files.open_path(path))
        model, table, strips = desk.model, desk.table, desk.strips
        timed(desk, "first orbit shown", 1, lambda k: model.set_elements(INVENTED))
        settle(desk, 1.0)
        timed(desk, "scroll the table by its bar", 100,
              lambda k: table._scrolled("moveto", str(k / 100)))  # fmt: skip
        timed(desk, "wheel over the table", 100, lambda k: table._wheel(1))
        timed(desk, "select one measure", 50, lambda k: model.select({397 * k}))
        timed(desk, "select 5,000 measures", 20,
              lambda k: model.select(range(100 * k, 100 * k + 5000)))  # fmt: skip
        timed(desk, "point at measures", 50, lambda k: strips.widget.event_generate(
            "<Motion>", x=80 + 4 * k, y=90))  # fmt: skip
        timed(desk, "move the date", 50, lambda k: model.look(epoch=1950.0 + k))
        timed(desk, "sort by a column", 6, lambda k: table.sort(("rho", "off_rho")[k % 2]))
        timed(desk, "edit a cell", 6, lambda k: model.edit_cell(k, "rho", f"1.{k + 1}"))
        timed(desk, "set 1,000 measures aside", 6, lambda k: model.set_use(
            range(1000 * k, 1000 * k + 1000), False, "invented"))  # fmt: skip
        timed(desk, "nudge", 30, lambda k: desk.elements.nudge("e", (-1) ** k, True))
        timed(desk, "zoom", 20, lambda k: desk.commands.do("zoom_in" if k % 2 else "zoom_out"))
        model.flip([3])  # something new to keep, whatever the window's own clock has kept
        timed(desk, "keep unsaved work safe", 1, lambda k: desk.session.tick(1e9))
        timed(desk, "save", 1, lambda k: desk.session.save())
        desk.close()


if __name__ == "__main__":
    main()
