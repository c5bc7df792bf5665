"""The frame of the window: the bench line on top, the divided middle, the line at the foot."""

from __future__ import annotations

import re
import tkinter as tk
from collections.abc import Sequence
from tkinter import ttk

from relorbit.desk.commands import CommandSet
from relorbit.desk.model import DeskModel
from relorbit.desk.settings import Settings
from relorbit.desk.theme import Palette, Sizes
from relorbit.desk.words import pair_in_words

# share of the room to the left of, or above, each divider
SEEN = 60  # pixels of a window that must be on the screen
FOLLOWS = 405  # pixels at 96 an inch that the orbits side by side need
DIVIDERS = {"upper 0": 0.37, "upper 1": 0.72, "lower 0": 0.6, "rows 0": 0.56}


class Bench(ttk.Frame):
    """Who the pair is, what is done most, and the work that goes on."""

    def __init__(self, parent: tk.Misc, commands: CommandSet) -> None:
        super().__init__(parent)
        sizes = Sizes(self)
        self.name = ttk.Label(self, style="Name.TLabel")
        self.name.pack(side="left", padx=(sizes(10), sizes(10)), pady=sizes(6))
        buttons = ("undo", "redo", "doubt", "flip", "aside", "use", "add")
        for name in reversed(buttons):
            gap = sizes(14) if name in ("redo", "use") else sizes(4)
            commands.button(self, name).pack(side="right", padx=(0, gap))
        self.about = ttk.Label(self, style="Quiet.TLabel")
        self.about.pack(side="left")  # after the buttons: where room is short it is the one cut
        self._work = ttk.Frame(self)
        self._label = ttk.Label(self._work, style="Quiet.TLabel")
        self._label.pack(side="left", padx=(0, sizes(6)))
        self._bar = ttk.Progressbar(self._work, maximum=1.0, length=sizes(110))
        self._bar.pack(side="left", padx=(0, sizes(6)))
        commands.button(self._work, "stop").pack(side="left")

    def show(self, model: DeskModel) -> None:
        self.name.configure(text=model.pair.name)
        self.about.configure(text=pair_in_words(model.pair))

    def wear(self, palette: Palette) -> None:
        """Colours come with the ttk styles."""

    def busy(self, label: str) -> None:
        self._label.configure(text=f"{label}\u2026")
        self._bar.configure(value=0.0)
        self._work.pack(side="left", padx=20)

    def progress(self, share: float) -> None:
        self._bar.configure(value=share)

    def idle(self) -> None:
        self._work.pack_forget()


class Panes(ttk.Frame):
    """Two rows of parts with dividers between, whose places are remembered as shares."""

    def __init__(self, parent: tk.Misc, settings: Settings) -> None:
        super().__init__(parent)
        self._settings = settings
        self.rows = ttk.PanedWindow(self, orient="vertical")
        gap = Sizes(self)(8)
        self.rows.pack(fill="both", expand=True, padx=gap, pady=(0, gap // 2))
        self.upper = ttk.PanedWindow(self.rows, orient="horizontal")
        self.lower = ttk.PanedWindow(self.rows, orient="horizontal")
        self.rows.add(self.upper, weight=5)
        self.rows.add(self.lower, weight=4)
        self._all = {"upper": self.upper, "lower": self.lower, "rows": self.rows}

    def hold(self, upper: Sequence[ttk.Frame], lower: Sequence[ttk.Frame]) -> None:
        for panes, parts, weights in ((self.upper, upper, (4, 4, 0)), (self.lower, lower, (3, 2))):
            for part, weight in zip(parts, weights, strict=True):
                panes.add(part, weight=weight)

    def _length(self, panes: ttk.PanedWindow) -> int:
        upright = str(panes.cget("orient")) == "vertical"
        return max(panes.winfo_height() if upright else panes.winfo_width(), 1)

    def place_dividers(self) -> None:
        """Put the dividers where they were left, or where they usually are."""
        for which in ("rows", "upper", "lower"):
            panes = self._all[which]
            for at in range(len(panes.panes()) - 1):
                name, length = f"{which} {at}", self._length(panes)
                share = self._settings.panes.get(name, DIVIDERS[name])
                place = round(min(max(share, 0.05), 0.95) * length)
                if name not in self._settings.panes:
                    place = self._roomy(name, place, length)
                panes.sashpos(at, place)
                panes.update_idletasks()

    def _roomy(self, name: str, place: int, length: int) -> int:
        """A usual place, moved where the elements, which do not shrink, need more room."""
        elements = self.nametowidget(self.upper.panes()[-1])
        if name == "rows 0":
            return min(max(place, elements.winfo_reqheight()), round(0.75 * length))
        right = length - elements.winfo_reqwidth() - Sizes(self)(8)
        if name == "upper 1":
            return min(place, right)
        if name == "upper 0":
            return min(place, right // 2)
        return min(place, length - Sizes(self)(FOLLOWS))

    def remember(self) -> None:
        for which, panes in self._all.items():
            for at in range(len(panes.panes()) - 1):
                share = panes.sashpos(at) / self._length(panes)
                self._settings.panes[f"{which} {at}"] = round(share, 4)


def on_screen(root: tk.Misc, geometry: str) -> bool:
    """Whether a window put there would be seen: the screen may be another one than last time."""
    numbers = [int(word) for word in re.findall(r"-?[0-9]+", geometry)]
    if len(numbers) != 4:
        return False
    wide, high, x, y = numbers
    across = max(root.winfo_screenwidth(), root.winfo_vrootwidth())
    upright = max(root.winfo_screenheight(), root.winfo_vrootheight())
    return SEEN - wide < x < across - SEEN and -SEEN < y < upright - SEEN and high <= upright


class Status(ttk.Frame):
    """The last thing there was to say."""

    def __init__(self, parent: tk.Misc) -> None:
        super().__init__(parent)
        sizes = Sizes(self)
        self.label = ttk.Label(self, style="Quiet.TLabel", anchor="w")
        self.label.pack(side="left", fill="x", expand=True, padx=sizes(10), pady=sizes(3))

    def say(self, words: str, warn: bool = False) -> None:
        self.label.configure(text=words, style="Warn.TLabel" if warn else "Quiet.TLabel")
