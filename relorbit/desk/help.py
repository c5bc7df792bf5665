"""The help window: how to begin, and every key."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Iterable
from itertools import pairwise
from tkinter import ttk

from relorbit.cli.main import CAUTION
from relorbit.desk.commands import MENUS, Command
from relorbit.desk.dialogs import Dialog
from relorbit.desk.theme import Palette, Sizes

COLUMNS = 3
BEGIN = """Open a pair and press Solve: every orbit that fits is found, without a starting guess.
Then look at the residuals. Point at a measure to read it, click to select it: it is marked in the
table, on the sky and in the strips alike. W goes to the measure that is farthest off. F turns its
quadrant, X sets it aside with a reason, U uses it again. Nothing observed is ever lost.
Refine from here fits again without a search. Keep puts the orbit on record with the pair."""
MOUSE = (
    ("wheel", "zoom; in the strips with Shift: the residuals"),
    ("drag", "a box that selects; with Shift or Ctrl to add"),
    ("right button", "drag to move the picture, click for a menu"),
    ("space and drag", "move the picture"),
    ("double click", "on a picture: show all again; on a cell: edit it"),
)
CELLS = (
    ("Up, Down", "in the table: another measure; in an element: a step, with Shift a fine one"),
    ("Return", "in the table: edit the cell; in a field: take what was typed"),
    ("Tab", "in a cell: take it and go to the next"),
    ("Esc", "give up what is being typed; select nothing"),
)


def key_list(commands: Iterable[Command]) -> list[tuple[str, str, str]]:
    """Menu, key and label of every command that has a key."""
    commands = tuple(commands)
    return [(menu, one.key_label, one.label.rstrip("\u2026")) for menu in MENUS
            for one in commands if one.menu == menu and one.key]  # fmt: skip


def help_lines(commands: Iterable[Command]) -> list[tuple[str, str]]:
    """Key and what it does, line by line; a line without a key is a title."""
    lines: list[tuple[str, str]] = []
    last = ""
    for menu, key, label in key_list(commands):
        if menu != last:
            lines.append(("", menu))
        last = menu
        lines.append((key, label))
    return [*lines, ("", "With the mouse"), *MOUSE, ("", "In fields and tables"), *CELLS]


def _put_lines(parent: tk.Misc, lines: Iterable[tuple[str, str]], sizes: Sizes) -> None:
    for row, (key, label) in enumerate(lines):
        if not key:
            title = ttk.Label(parent, text=label, style="Bold.TLabel")
            title.grid(row=row, column=0, columnspan=2, sticky="w", pady=(sizes(5), 0))
            continue
        ttk.Label(parent, text=key).grid(row=row, column=0, sticky="nw", padx=(0, sizes(10)))
        ttk.Label(parent, text=label, style="Quiet.TLabel", wraplength=sizes(205),
                  justify="left").grid(row=row, column=1, sticky="w")  # fmt: skip


def show_help(parent: tk.Misc, palette: Palette, commands: Iterable[Command]) -> None:
    """Open the help window and wait until it is closed."""
    dialog = Dialog(parent, palette, "Help")
    sizes = dialog.sizes
    ttk.Label(dialog.inner, text=BEGIN.replace("\n", " "), wraplength=sizes(880),
              justify="left").pack(anchor="w")  # fmt: skip
    grid = ttk.Frame(dialog.inner)
    grid.pack(fill="both", expand=True, pady=sizes(8))
    lines = help_lines(commands)
    titles = [at for at, (key, _) in enumerate(lines) if not key]
    cuts = [min(titles, key=lambda at, k=k: abs(COLUMNS * at - k * len(lines)))
            for k in range(1, COLUMNS)]  # fmt: skip
    for first, last in pairwise([0, *cuts, len(lines)]):
        part = lines[first:last]
        column = ttk.Frame(grid)
        column.pack(side="left", anchor="n", padx=(0, sizes(14)))
        _put_lines(column, part, sizes)
    ttk.Label(dialog.inner, text=CAUTION.replace("\n", " "), style="Quiet.TLabel",
              wraplength=sizes(880), justify="left").pack(anchor="w")  # fmt: skip
    dialog.buttons(("Close",), dialog.press)
    dialog.wait()
