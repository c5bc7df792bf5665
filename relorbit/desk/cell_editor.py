"""Editing a cell of the table in place, with what is wrong said beside it."""

from __future__ import annotations

import tkinter as tk
from tkinter import ttk
from typing import TYPE_CHECKING

from relorbit.desk.theme import Palette
from relorbit.errors import InputError
from relorbit.measures import editing
from relorbit.measures.table import TECHNIQUES

if TYPE_CHECKING:
    from relorbit.desk.table_view import TableView


class CellEditor:
    """A field laid over one cell, and the frame that shows where the cursor is."""

    def __init__(self, table: TableView) -> None:
        self.table = table
        self.open = False
        self._row, self._count = -1, 0
        self._at = 0
        self._column = "theta"
        self.field = ttk.Combobox(table.tree, height=len(TECHNIQUES))
        self.wrong = tk.Label(table.tree, font="DeskSmall", borderwidth=1, relief="solid",
                              justify="left", padx=4, pady=2)  # fmt: skip
        self._edges = [tk.Frame(table.tree) for _ in range(4)]
        self.field.bind("<Return>", lambda _: self._finish(1))
        self.field.bind("<KP_Enter>", lambda _: self._finish(1))
        self.field.bind("<Tab>", lambda _: self._finish_across(1))
        self.field.bind("<<PrevWindow>>", lambda _: self._finish_across(-1))
        self.field.bind("<Escape>", lambda _: self.cancel())
        self.field.bind("<FocusOut>", lambda _: self._left())

    def wear(self, palette: Palette) -> None:
        self.wrong.configure(background=palette.paper, foreground=palette.warn)
        for edge in self._edges:
            edge.configure(background=palette.accent)

    def begin(self, at: int, column: str) -> None:
        """Open the field over a cell."""
        self.cancel()
        measures = self.table.model.pair.measures
        self._at, self._column, self._row = at, column, int(self.table.rows[at])
        self._count = len(measures)
        self.open = True
        choices = TECHNIQUES if column == "technique" else ()
        self.field.configure(values=choices, style="TCombobox" if choices else "Cell.TCombobox")
        self.field.set(editing.cell_text(measures, self._row, column))
        self.show_column(column)
        if self.open:
            self.field.focus_set()
            self.field.selection_range(0, "end")
            self.field.icursor("end")

    def follow(self) -> None:
        """Keep field and frame over their cell after the table has moved."""
        box = self.table.bounds(self.table.at, self.table.column)
        if box is None or not len(self.table.rows):
            for edge in self._edges:
                edge.place_forget()
        else:
            x, y, width, height = box
            for edge, (left, top, wide, high) in zip(
                self._edges,
                ((x, y, width, 1), (x, y + height - 1, width, 1), (x, y, 1, height),
                 (x + width - 1, y, 1, height)),
                strict=True,
            ):  # fmt: skip
                edge.place(x=left, y=top, width=wide, height=high)
        if self.open:
            self._place_field()

    def _place_field(self) -> None:
        box = self.table.bounds(self._at, self._column)
        if box is None:
            self.field.place_forget()
            self.wrong.place_forget()
            return
        x, y, width, height = box
        least = self.table.sizes(110 if self._column == "technique" else 64)
        room = self.table.tree.winfo_width()
        width = max(width, least)
        self.field.place(x=min(x, max(room - width, 0)), y=y - 1, width=width, height=height + 2)
        self.field.lift()
        if self.wrong.cget("text"):
            self.wrong.configure(wraplength=max(room - 20, 80))
            x = max(0, min(x, room - self.wrong.winfo_reqwidth() - 4))
            below = y + height + 2
            if below + self.wrong.winfo_reqheight() > self.table.tree.winfo_height():
                below = max(0, y - self.wrong.winfo_reqheight() - 2)
            self.wrong.place(x=x, y=below)
            self.wrong.lift()

    def show_column(self, column: str) -> None:
        """Scroll sideways until a column is visible."""
        tree = self.table.tree
        for _ in range(60):
            box = self.table.bounds(self.table.at, column)
            if box is None:
                break
            if box[0] < 0:
                tree.xview_scroll(-1, "units")
            elif box[0] + box[2] > tree.winfo_width() and box[0] > 0:
                tree.xview_scroll(1, "units")
            else:
                break
        self.follow()

    def cancel(self) -> str:
        """Close the field; the measure stays as it was."""
        if self.open:
            self.open = False
            self.field.place_forget()
            self._say("")
            self.table.tree.focus_set()
        return "break"

    def _say(self, words: str) -> None:
        self.wrong.configure(text=words)
        if not words:
            self.wrong.place_forget()

    def take(self, stay: bool = True) -> bool:
        """Take over what was typed; where it cannot be, say why and keep the text."""
        if not self.open:
            return True
        if len(self.table.model.pair.measures) != self._count:
            # measures came or went meanwhile: the row may be another one, or none
            self.cancel()
            return True
        text, row, column = self.field.get(), self._row, self._column
        self.open = False  # the table is filled anew by the change, and must not place the field
        try:
            self.table.model.edit_cell(row, column, text)
        except InputError as error:
            self.open = True
            self._say(error.what)
            self._place_field()
            if stay:
                self.field.focus_set()
            return False
        self.field.place_forget()
        self._say("")
        return True

    def _finish(self, step: int) -> str:
        if self.take():
            self.table.tree.focus_set()
            self.table._go(self.table.at + step)
        return "break"

    def _finish_across(self, step: int) -> str:
        if self.take():
            self.table.tree.focus_set()
            self.table._step_column(step)
            if self.table.column in editing.EDITABLE:
                self.table.edit()
        return "break"

    def _left(self) -> None:
        """The focus went elsewhere: what can be taken is taken, what cannot stays to be seen."""
        if self.open and "popdown" not in str(self.field.tk.call("focus")):
            self.take(stay=False)
