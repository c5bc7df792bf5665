"""The help window: how to begin, and every key."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Iterable
from tkinter import ttk

from relorbit.cli.main import CAUTION
from relorbit.desk.commands import MENUS, Command
from relorbit.desk.dialogs import Dialog
from relorbit.desk.theme import Palette, Sizes

BEGIN = """Open a pair and press Solve: every orbit that fits is found, without a starting guess.
Point at a measure to read it, click to select it everywhere. W goes to the one that is farthest
off; F turns its quadrant, X sets it aside with a reason, U uses it again: nothing observed is lost.
Refine from here fits again without a search. Keep puts the orbit on record with the pair. Where the
arc is short, Sample draws all orbits that fit: what they agree on is known."""
MOUSE = (
    ("wheel", "zoom; with Shift: residuals"),
    ("drag", "select; with Shift: add"),
    ("right drag", "move the picture"),
    ("space drag", "move the picture"),
    ("right click", "menu of the selection"),
    ("double click", "show all again; edit a cell"),
)
CELLS = (
    ("Up, Down", "a row; a step of an element"),
    ("Shift+Up", "select; a fine step"),
    ("Return", "edit a cell; take what is typed"),
    ("Tab", "take a cell, go to the next"),
    ("Esc", "give up what is typed"),
)


AROUND = 260  # pixels at 96 an inch: the rest of the help window, and the screen's own bars
# three columns of about one height: menus, and lines after them; a line without a key is a title
COLUMNS = (
    (("File", "Edit", "Help"), ()),
    (("Measures", "Orbit"), ()),
    (("View",), (("", "With the mouse"), *MOUSE, ("", "In fields and tables"), *CELLS)),
)


def key_list(commands: Iterable[Command]) -> dict[str, list[tuple[str, str]]]:
    """Key and label of every command that has a key, by menu."""
    keys: dict[str, list[tuple[str, str]]] = {menu: [] for menu in MENUS}
    for one in commands:
        if one.key:
            keys[one.menu].append((one.key_label, one.label.rstrip("\u2026")))
    return keys


def _hold(window: tk.Canvas, grid: ttk.Frame, most: int) -> None:
    """Put the columns into their window, with a bar where the screen is too low for all."""
    grid.update_idletasks()
    high = grid.winfo_reqheight()
    window.create_window(0, 0, window=grid, anchor="nw")
    window.configure(width=grid.winfo_reqwidth(), height=min(high, most),
                     scrollregion=(0, 0, grid.winfo_reqwidth(), high))  # fmt: skip
    if high > most:
        bar = ttk.Scrollbar(window.master, orient="vertical", command=window.yview)
        window.configure(yscrollcommand=bar.set)
        bar.pack(side="right", fill="y")
        for key, units in (("<Button-4>", -1), ("<Button-5>", 1), ("<Up>", -1), ("<Down>", 1)):
            window.winfo_toplevel().bind(key, lambda _, n=units: window.yview_scroll(n, "units"))
        window.winfo_toplevel().bind("<MouseWheel>", lambda event: window.yview_scroll(
            -1 if event.delta > 0 else 1, "units"))  # fmt: skip
    window.pack(side="left", fill="both", expand=True)


def _put_lines(parent: tk.Misc, lines: Iterable[tuple[str, str]], sizes: Sizes) -> None:
    for row, (key, label) in enumerate(lines):
        if not key:
            title = ttk.Label(parent, text=label, style="Bold.TLabel")
            title.grid(row=row, column=0, columnspan=2, sticky="w", pady=(sizes(5), 0))
            continue
        ttk.Label(parent, text=key).grid(row=row, column=0, sticky="nw", padx=(0, sizes(10)))
        ttk.Label(parent, text=label, style="Quiet.TLabel", wraplength=sizes(240),
                  justify="left").grid(row=row, column=1, sticky="w")  # fmt: skip


def show_help(parent: tk.Misc, palette: Palette, commands: Iterable[Command]) -> None:
    """Open the help window and wait until it is closed."""
    dialog = Dialog(parent, palette, "Help")
    sizes = dialog.sizes
    ttk.Label(dialog.inner, text=BEGIN.replace("\n", " "), wraplength=sizes(880),
              justify="left").pack(anchor="w")  # fmt: skip
    holder = ttk.Frame(dialog.inner)
    holder.pack(fill="both", expand=True, pady=sizes(8))
    window = tk.Canvas(holder, background=palette.ground, highlightthickness=0)
    grid = ttk.Frame(window)
    keys = key_list(commands)
    for menus, more in COLUMNS:
        part = [line for menu in menus for line in [("", menu), *keys[menu]]] + list(more)
        column = ttk.Frame(grid)
        column.pack(side="left", anchor="n", padx=(0, sizes(14)))
        _put_lines(column, part, sizes)
    _hold(window, grid, dialog.winfo_screenheight() - sizes(AROUND))
    ttk.Label(dialog.inner, text=CAUTION.replace("\n", " "), style="Quiet.TLabel",
              wraplength=sizes(880), justify="left").pack(anchor="w")  # fmt: skip
    dialog.buttons(("Close",), dialog.press)
    dialog.wait()
