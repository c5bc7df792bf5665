"""Orbits side by side: the solution, its alternatives and those on record, with their chi2."""

from __future__ import annotations

import tkinter as tk
from tkinter import ttk

from relorbit.derive.glance import Compared, compared
from relorbit.desk.commands import CommandSet
from relorbit.desk.model import DeskModel
from relorbit.desk.theme import Palette, Sizes
from relorbit.desk.words import chi2_in_words
from relorbit.orbit.elements import Elements
from relorbit.show.numbers import fixed, significant

HERE = "this orbit"
COLUMNS = (("P", "P yr", 54), ("e", "e", 52), ("a", "a \u2033", 52), ("chi2", "\u03c7\u00b2", 56),
           ("rise", "more", 66))  # fmt: skip


class OrbitsList(ttk.Frame):
    """A list to step through: a double click or Return takes an orbit up."""

    def __init__(self, parent: tk.Misc, model: DeskModel, commands: CommandSet) -> None:
        super().__init__(parent)
        self.model = model
        sizes = Sizes(self)
        self._takes: dict[str, tuple[str, object]] = {}
        tree = ttk.Treeview(self, columns=[name for name, _, _ in COLUMNS], height=3,
                            selectmode="browse")  # fmt: skip
        tree.heading("#0", text="orbit", anchor="w")
        tree.column("#0", width=sizes(100), minwidth=sizes(80))
        for name, heading, width in COLUMNS:
            tree.heading(name, text=heading, anchor="e")
            tree.column(name, width=sizes(width), minwidth=sizes(40), anchor="e", stretch=False)
        down = ttk.Scrollbar(self, orient="vertical", command=tree.yview)
        tree.configure(yscrollcommand=down.set)
        feet = ttk.Frame(self)
        feet.pack(side="bottom", fill="x", padx=sizes(4), pady=sizes(4))
        for name in ("previous", "following", "take_up", "drop"):
            commands.button(feet, name).pack(side="left", padx=(0, sizes(4)))
        down.pack(side="right", fill="y")
        tree.pack(fill="both", expand=True)
        tree.bind("<Double-Button-1>", lambda _: commands.do("take_up"))
        tree.bind("<Return>", lambda _: commands.do("take_up"))
        tree.bind("<<TreeviewSelect>>", lambda _: commands.refresh())
        self.tree = tree

    def wear(self, palette: Palette) -> None:
        self.tree.tag_configure("here", font="DeskBold")
        self.tree.tag_configure("plain", foreground=palette.ink)

    def listed(self) -> dict[tuple[str, object], Elements]:
        """What can be taken up: ("found", index) or ("record", name), with the elements."""
        model = self.model
        found, orbits = model.state.found, {}
        if found is not None:
            orbits["found", 0] = found.elements
            orbits |= {("found", at): one.elements for at, one in enumerate(found.alternatives, 1)}
        orbits |= {("record", one.name): one.elements for one in model.pair.orbits}
        if model.elements is not None and model.elements not in orbits.values():
            orbits = {(HERE, 0): model.elements, **orbits}
        return orbits

    def write(self) -> None:
        """List the orbits anew; the line chosen stays chosen."""
        orbits = self.listed()
        kept = self.chosen
        self.tree.delete(*self.tree.get_children())
        self._takes = {}
        here = False
        for key, one in zip(orbits, compared(self.model.pair, orbits), strict=True):
            present = not here and one.elements == self.model.elements
            here = here or present
            line = self.tree.insert("", "end", text=_title(key), values=_cells(one),
                                    tags=("here" if present else "plain",))  # fmt: skip
            self._takes[line] = key
            if key == kept:
                self.tree.selection_set(line)

    @property
    def chosen(self) -> tuple[str, object] | None:
        """The line chosen."""
        lines = self.tree.selection()
        key = self._takes.get(lines[0]) if lines else None
        return key if key in self.listed() else None  # the list may be a moment behind

    def take_up(self) -> None:
        """Work on the orbit of the line chosen."""
        if self.chosen is not None:
            kind, which = self.chosen
            if kind == "found":
                self.model.choose(which)
            elif kind == "record":
                self.model.use_recorded(which)


def _title(key: tuple[str, object]) -> str:
    kind, which = key
    if kind == "found":
        return "best found" if which == 0 else f"alternative {which}"
    return HERE if kind == HERE else f"on record: {which}"


def _cells(one: Compared) -> list[str]:
    orbit = one.elements
    return [significant(orbit.P, 4), fixed(orbit.e, 4), significant(orbit.a, 4),
            chi2_in_words(one.chi2), chi2_in_words(one.rise, sign=True)]  # fmt: skip
