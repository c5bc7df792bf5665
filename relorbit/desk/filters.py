"""Which measures the table shows: by technique, observer and years."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable
from tkinter import ttk

import numpy as np
from numpy.typing import NDArray

from relorbit.desk.theme import Sizes
from relorbit.measures.table import TECHNIQUES, Measures

ANY_TECHNIQUE, ANY_OBSERVER, NO_NAME = "all techniques", "all observers", "(no name)"


class Filters(ttk.Frame):
    """A line of choices over the table."""

    def __init__(self, parent: tk.Misc, on_change: Callable[[], None]) -> None:
        super().__init__(parent)
        sizes = Sizes(self)
        self._on_change = on_change
        self.technique = ttk.Combobox(self, state="readonly", width=13)
        self.observer = ttk.Combobox(self, state="readonly", width=14)
        self.first, self.last = ttk.Entry(self, width=7), ttk.Entry(self, width=7)
        self.clear = ttk.Button(self, text="show all", command=self.show_all)
        self.count = ttk.Label(self, style="Quiet.TLabel")
        parts = (self.technique, self.observer, ttk.Label(self, text="from"), self.first,
                 ttk.Label(self, text="to"), self.last, self.clear)  # fmt: skip
        for part in parts:
            part.pack(side="left", padx=(0, sizes(4)), pady=(0, sizes(3)))
        self.count.pack(side="left", padx=sizes(2))
        for box in (self.technique, self.observer):
            box.bind("<<ComboboxSelected>>", lambda _: self._changed())
        for field in (self.first, self.last):
            field.bind("<KeyRelease>", lambda _: self._changed())
        self.technique.set(ANY_TECHNIQUE)
        self.observer.set(ANY_OBSERVER)
        self._said = self._state()
        self.offer(None)

    def _state(self) -> tuple[str, ...]:
        return tuple(part.get() for part in (self.technique, self.observer, self.first, self.last))

    def _changed(self) -> None:
        for box in (self.technique, self.observer):
            box.selection_clear()
        if self._state() != self._said:
            self._said = self._state()
            self._on_change()

    def offer(self, measures: Measures | None) -> None:
        """List what the measures have; a choice that has gone is given up."""
        techniques, observers = (), ()
        if measures is not None:
            there = set(measures.technique.tolist())
            techniques = tuple(name for name in TECHNIQUES if name in there)
            observers = tuple(sorted({name or NO_NAME for name in measures.observer.tolist()}))
        for box, first, values in (
            (self.technique, ANY_TECHNIQUE, techniques), (self.observer, ANY_OBSERVER, observers),
        ):  # fmt: skip
            box.configure(values=(first, *values))
            if box.get() not in values:
                box.set(first)
        self._said = self._state()

    def show_all(self) -> None:
        """Give up every choice."""
        self.technique.set(ANY_TECHNIQUE)
        self.observer.set(ANY_OBSERVER)
        for field in (self.first, self.last):
            field.delete(0, "end")
        self._changed()

    def passing(self, measures: Measures) -> NDArray[np.bool_]:
        """True for every measure to show."""
        keep = np.ones(len(measures), dtype=bool)
        if self.technique.get() != ANY_TECHNIQUE:
            keep &= measures.technique == self.technique.get()
        if self.observer.get() != ANY_OBSERVER:
            name = self.observer.get()
            keep &= measures.observer == ("" if name == NO_NAME else name)
        first, last = self._year(self.first), self._year(self.last)
        if first is not None:
            keep &= measures.epoch >= first
        if last is not None:
            keep &= measures.epoch <= last
        return keep

    def _year(self, field: ttk.Entry) -> float | None:
        """The year typed; a field with anything else is marked and does not count."""
        text = field.get().strip().replace(",", ".")
        try:
            year = float(text) if text else None
        except ValueError:
            field.configure(style="Wrong.TEntry")
            return None
        field.configure(style="TEntry")
        return year

    def say(self, shown: int, there: int) -> None:
        """How many are shown."""
        self.count.configure(text="" if shown == there else f"{shown} of {there} shown")
        self.clear.state(["!disabled" if any(
            said not in ("", ANY_TECHNIQUE, ANY_OBSERVER) for said in self._said) else "disabled"
        ])  # fmt: skip
