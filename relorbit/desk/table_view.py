"""The measures as a table, of which only the visible rows are made.

The rows shown, and their order, are an array of indices (`rows`); the widget holds as many lines
as fit and is filled anew when it scrolls, so that 20,000 measures cost no more than 40.
"""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable
from tkinter import ttk

import numpy as np

from relorbit.desk.cell_editor import CellEditor
from relorbit.desk.filters import Filters
from relorbit.desk.model import ORBIT, PAIR, SELECTION, DeskModel
from relorbit.desk.theme import Palette, Sizes
from relorbit.desk.words import state_of
from relorbit.measures import editing
from relorbit.measures.table import NUMBERS
from relorbit.show.numbers import fixed

# column, heading, width in pixels at 96 dots an inch, how it is set
COLUMNS = (
    ("epoch", "epoch", 78, "e"),
    ("theta", "theta \u00b0", 62, "e"),
    ("rho", "rho \u2033", 62, "e"),
    ("off_theta", "O\u2212C \u03b8/\u03c3", 60, "e"),
    ("off_rho", "O\u2212C \u03c1/\u03c3", 60, "e"),
    ("state", "state", 88, "w"),
    ("technique", "technique", 88, "w"),
    ("observer", "observer", 96, "w"),
    ("theta_err", "\u00b1 theta", 58, "e"),
    ("rho_err", "\u00b1 rho", 58, "e"),
    ("aperture_m", "aperture m", 84, "e"),
    ("nights", "nights", 48, "e"),
    ("weight", "weight", 50, "e"),
    ("reason", "reason", 130, "w"),
    ("note", "note", 160, "w"),
)
NAMES = tuple(column[0] for column in COLUMNS)
SHIFT, CONTROL = 0x1, 0x4


class TableView(ttk.Frame):
    """The measures, sortable, filtered, edited in place."""

    def __init__(
        self, parent: tk.Misc, model: DeskModel, palette: Palette, on_menu: Callable[..., None]
    ) -> None:
        super().__init__(parent)
        self.model, self.sizes = model, Sizes(self)
        self.rows = np.arange(len(model.pair.measures))
        self.first = 0  # position in `rows` of the uppermost line
        self.at = 0  # position in `rows` of the cursor
        self.column = "theta"
        self._sort: tuple[str, bool] | None = None
        self._lines: list[str] = []
        self._anchor = 0
        self._on_menu = on_menu
        self.filters = Filters(self, self._filtered)
        self.filters.grid(row=0, column=0, columnspan=2, sticky="ew")
        self._make_tree()
        self.editor = CellEditor(self)
        self._bind()
        self.wear(palette)

    def _make_tree(self) -> None:
        tree = ttk.Treeview(self, columns=NAMES, show="headings", selectmode="none", height=4)
        for name, heading, width, anchor in COLUMNS:
            tree.heading(name, text=heading, anchor=anchor, command=lambda n=name: self.sort(n))
            tree.column(name, width=self.sizes(width), minwidth=self.sizes(36), anchor=anchor,
                        stretch=name == "note")  # fmt: skip
        self.tree = tree
        self.down = ttk.Scrollbar(self, orient="vertical", command=self._scrolled)
        across = ttk.Scrollbar(self, orient="horizontal", command=self._scrolled_across)
        tree.configure(xscrollcommand=across.set)
        tree.grid(row=1, column=0, sticky="nsew")
        self.down.grid(row=1, column=1, sticky="ns")
        across.grid(row=2, column=0, sticky="ew")
        self.rowconfigure(1, weight=1)
        self.columnconfigure(0, weight=1)

    def _bind(self) -> None:
        tree = self.tree
        tree.bind("<Configure>", lambda _: self.after_idle(self.refill))
        tree.bind("<MouseWheel>", lambda e: self._wheel(-1 if e.delta > 0 else 1))
        tree.bind("<Button-4>", lambda _: self._wheel(-1))
        tree.bind("<Button-5>", lambda _: self._wheel(1))
        tree.bind("<Button-1>", self._pressed)
        tree.bind("<B1-Motion>", self._dragged)
        tree.bind("<Double-Button-1>", self._double)
        for button in ("<Button-3>", "<Button-2>"):
            tree.bind(button, self._menu)
        tree.bind("<Return>", lambda _: self.edit())
        for key, step in (("Up", -1), ("Down", 1)):
            tree.bind(f"<{key}>", lambda _, s=step: self._go(self.at + s))
            tree.bind(f"<Shift-{key}>", lambda _, s=step: self._go(self.at + s, extend=True))
        tree.bind("<Prior>", lambda _: self._go(self.at - self.height))
        tree.bind("<Next>", lambda _: self._go(self.at + self.height))
        tree.bind("<Home>", lambda _: self._go(0))
        tree.bind("<End>", lambda _: self._go(len(self.rows) - 1))
        tree.bind("<Left>", lambda _: self._step_column(-1))
        tree.bind("<Right>", lambda _: self._step_column(1))

    # -- which rows ----------------------------------------------------------------------------

    def _filtered(self) -> None:
        self._choose_rows()
        self.first = 0
        self.refill()

    def _choose_rows(self) -> None:
        measures = self.model.pair.measures
        rows = np.flatnonzero(self.filters.passing(measures))
        if self._sort is not None:
            name, backwards = self._sort
            keys = self._keys(name)[rows]
            order = np.argsort(keys, kind="stable")
            if backwards:
                order = order[::-1]
            if keys.dtype.kind == "f":  # what is missing stays at the end
                missing = np.isnan(keys[order])
                order = np.concatenate([order[~missing], order[missing]])
            rows = rows[order]
        self.rows = rows
        self.at = min(self.at, max(len(rows) - 1, 0))
        self.filters.say(len(rows), len(measures))

    def _keys(self, name: str) -> np.ndarray:
        """What a column is sorted by: residuals by their size."""
        measures = self.model.pair.measures
        if name == "state":
            return measures.flip + 2 * ~measures.use
        if name.startswith("off_"):
            return np.abs(self._in_sigma(name))
        return getattr(measures, name)

    def _in_sigma(self, name: str) -> np.ndarray:
        following = self.model.consequences
        if following is None:
            return np.full(len(self.model.pair.measures), np.nan)
        of = following.residuals
        return of.theta_in_sigma if name == "off_theta" else of.rho_in_sigma

    def sort(self, name: str) -> None:
        """Sort by a column; again to turn it round. Residuals begin with the largest."""
        if self._sort is not None and self._sort[0] == name:
            self._sort = (name, not self._sort[1])
        else:
            self._sort = (name, name.startswith("off_") or name == "state")
        for column, heading, _, _ in COLUMNS:
            arrow = ""
            if column == name:
                arrow = " \u25be" if self._sort[1] else " \u25b4"
            self.tree.heading(column, text=heading + arrow)
        self._choose_rows()
        self.first = 0
        self.refill()

    # -- the visible lines ---------------------------------------------------------------------

    @property
    def height(self) -> int:
        """How many whole lines fit."""
        row = ttk.Style(self).lookup("Treeview", "rowheight")
        room = self.tree.winfo_height() - int(row)
        return max(1, room // int(row))

    def refill(self) -> None:
        """Write the visible rows into the widget."""
        if not self.winfo_exists():
            return
        wanted = min(self.height, len(self.rows))
        while len(self._lines) < wanted:
            self._lines.append(self.tree.insert("", "end"))
        while len(self._lines) > wanted:
            self.tree.delete(self._lines.pop())
        self.first = max(0, min(self.first, len(self.rows) - self.height))
        shown = self.rows[self.first : self.first + wanted]
        off = {name: self._in_sigma(name) for name in ("off_theta", "off_rho")}
        for line, row in zip(self._lines, shown.tolist(), strict=False):
            self.tree.item(line, values=self._cells(row, off), tags=(self._tag(row),))
        for line in self._lines[len(shown) :]:
            self.tree.item(line, values=(), tags=())
        count = max(len(self.rows), 1)
        self.down.set(self.first / count, min(1.0, (self.first + self.height) / count))
        self.editor.follow()

    def _cells(self, row: int, off: dict[str, np.ndarray]) -> list[str]:
        measures, cells = self.model.pair.measures, []
        for name in NAMES:
            if name == "state":
                cells.append(state_of(self.model.pair, row))
            elif name in off:
                value = off[name][row]
                cells.append("" if np.isnan(value) else fixed(value, 1, sign=True))
            elif name == "epoch":
                cells.append(fixed(measures.epoch[row], 3))
            else:
                cells.append(editing.cell_text(measures, row, name))
        return cells

    def _tag(self, row: int) -> str:
        measures = self.model.pair.measures
        kind = "flipped" if measures.flip[row] else "plain"
        kind = kind if measures.use[row] else "aside"
        return f"chosen {kind}" if row in self.model.selection else kind

    def see(self, at: int) -> None:
        """Scroll so that a position is visible."""
        if at < self.first:
            self.first = at
        elif at >= self.first + self.height:
            self.first = at - self.height + 1
        self.refill()

    def bounds(self, at: int, column: str) -> tuple[int, int, int, int] | None:
        """Where a cell is (x, y, width, height in pixels), None when it is not visible."""
        line = at - self.first
        if not 0 <= line < len(self._lines):
            return None
        box = self.tree.bbox(self._lines[line], column)
        return tuple(box) if box else None

    def _scrolled(self, how: str, amount: str, unit: str = "") -> None:
        if how == "moveto":
            self.first = round(float(amount) * len(self.rows))
        else:
            self.first += int(amount) * (self.height if unit == "pages" else 1)
        self.refill()

    def _scrolled_across(self, *how: str) -> None:
        self.tree.xview(*how)
        self.editor.follow()

    def _wheel(self, way: int) -> str:
        self.first += 3 * way
        self.refill()
        return "break"

    # -- the mouse and the keys ----------------------------------------------------------------

    def _where(self, event: tk.Event) -> tuple[int, str] | None:
        line, column = self.tree.identify_row(event.y), self.tree.identify_column(event.x)
        if not line or line not in self._lines or not column:
            return None
        at = self.first + self._lines.index(line)
        return (at, NAMES[int(column[1:]) - 1]) if at < len(self.rows) else None

    def _pressed(self, event: tk.Event) -> str | None:
        self.tree.focus_set()
        if self.tree.identify_region(event.x, event.y) in ("heading", "separator"):
            return None
        where = self._where(event)
        if where is None:
            self.model.select(())
            return "break"
        self.at, self.column = where
        row = int(self.rows[self.at])
        if event.state & CONTROL:
            self._anchor = self.at
            self.model.select(self.model.selection ^ {row})
        elif event.state & SHIFT:
            self._select_to(self.at)
        else:
            self._anchor = self.at
            self.model.select({row})
        self.editor.follow()
        return "break"

    def _dragged(self, event: tk.Event) -> str | None:
        where = self._where(event)
        if where is not None and where[0] != self.at and not self.editor.open:
            self.at = where[0]
            self._select_to(self.at)
        return None

    def _select_to(self, at: int) -> None:
        low, high = sorted((min(self._anchor, len(self.rows) - 1), at))
        self.model.select(self.rows[low : high + 1].tolist())

    def _double(self, event: tk.Event) -> str:
        if self._where(event) is not None:
            self.edit()
        return "break"

    def _menu(self, event: tk.Event) -> None:
        where = self._where(event)
        if where is not None and int(self.rows[where[0]]) not in self.model.selection:
            self.at, self.column = where
            self.model.select({int(self.rows[self.at])})
        self._on_menu(event.x_root, event.y_root)

    def _go(self, at: int, extend: bool = False) -> str:
        if len(self.rows):
            self.at = max(0, min(at, len(self.rows) - 1))
            self.see(self.at)
            if extend:
                self._select_to(self.at)
            else:
                self._anchor = self.at
                self.model.select({int(self.rows[self.at])})
            self.editor.follow()
        return "break"

    def _step_column(self, step: int) -> str:
        place = max(0, min(NAMES.index(self.column) + step, len(NAMES) - 1))
        self.column = NAMES[place]
        self.editor.show_column(self.column)
        return "break"

    def edit(self) -> str:
        """Open the cell of the cursor."""
        if len(self.rows) and self.column in editing.EDITABLE:
            self.see(self.at)
            self.editor.begin(self.at, self.column)
        return "break"

    # -- following -----------------------------------------------------------------------------

    def wear(self, palette: Palette) -> None:
        self.editor.wear(palette)
        for kind, colour in (
            ("plain", palette.ink), ("flipped", palette.accent), ("aside", palette.quiet),
        ):  # fmt: skip
            self.tree.tag_configure(kind, foreground=colour, background=palette.paper)
            self.tree.tag_configure(f"chosen {kind}", foreground=colour, background=palette.chosen)

    def on_change(self, kinds: frozenset[str]) -> None:
        if PAIR in kinds:
            self.filters.offer(self.model.pair.measures)
            self._choose_rows()
        elif ORBIT in kinds and self._sort and self._sort[0].startswith("off_"):
            self._orbit_sorted()
        if SELECTION in kinds and len(self.model.selection) and not self.editor.open:
            self._show_selection()
        if kinds & {PAIR, ORBIT, SELECTION}:
            self.refill()

    def _orbit_sorted(self) -> None:
        # a table that jumps about while one nudges helps nobody
        if not self.model.nudging:
            self._choose_rows()

    def _show_selection(self) -> None:
        """Scroll to the selection where none of it is visible, and put the cursor there."""
        chosen = np.flatnonzero(np.isin(self.rows, list(self.model.selection)))
        if len(chosen) and self.at not in chosen:
            self.at = int(chosen[0])
        visible = (chosen >= self.first) & (chosen < self.first + self.height)
        if len(chosen) and not visible.any():
            self.first = int(chosen[0])

    def shown_columns(self) -> tuple[str, ...]:
        """Columns in the order shown, without those that are computed."""
        return tuple(name for name in NAMES if name in NUMBERS or name in editing.EDITABLE)
