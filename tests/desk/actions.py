"""A user who does anything at all in a real window, by a fixed seed."""

from __future__ import annotations

import time
import tkinter as tk
from collections.abc import Callable
from pathlib import Path
from tkinter import ttk

import numpy as np
from desk.windows import settle

from relorbit.desk import dialogs, file_actions
from relorbit.desk.table_view import COLUMNS
from relorbit.desk.window import Desk
from relorbit.orbit.elements import NAMES

# they put another pair on the desk, or end it
NOT_UNDONE = ("new", "open", "quit")
TEXTS = (
    "", "0", "12.5", "-3", "400", "1e400", "nan", "abc", "1977.3", "1890-02-30", "2001-07-05",
    "1,5", "eyepiece", "sextant", "\u03b8", "  7  ", "0.5", "98765432109876543210", "yes",
    "P. Quennel", "'\";--", "line\nline",
)  # fmt: skip
PASTES = (
    "", "garbage", "epoch theta rho\n1950.1 12 1.2\n1951.2 13 1.3\n", "1960.5\t44\t0.9\n",
    "epoch;theta;rho\n1950,5;12,5;1,2\n", "epoch theta rho\n1950.1 512 1.2\n", "\x00\x01",
    "a,b,c\n1,2,3\n", "2010.1 33 1.1 0.5 0.01\n2011.1 34 1.15 0.5 0.01\n", "epoch,theta\n,\n",
)  # fmt: skip
KEYS = (
    "f", "x", "u", "w", "o", "p", "0", "plus", "minus", "r", "a", "m", "bracketleft",
    "bracketright", "Escape", "Delete", "F2", "F5", "F6", "F7", "F8", "Up", "Down", "Shift-Up",
    "Shift-Down", "Left", "Right", "Return", "Tab", "Home", "End", "Prior", "Next", "Control-z",
    "Control-y", "Control-a", "Control-c", "Control-v", "Control-k", "Control-l", "Control-e",
    "Control-period", "space",
)  # fmt: skip


class RandomUser:
    """Actions by a seeded generator, and a record of what went wrong.

    Attributes
    ----------
    faults : list of exceptions that reached the window
    longest : float
        Seconds between two turns of the event loop, the longest.
    done : dict of str to int
        How often each kind of action was taken.
    """

    def __init__(self, desk: Desk, seed: int, folder: Path) -> None:
        self.desk, self.folder = desk, folder
        self.rng = np.random.default_rng(seed)
        self.faults: list[BaseException] = []
        self.longest, self.slowest = 0.0, ""
        self.done: dict[str, int] = {}
        self._last = time.perf_counter()
        self._acting = ""
        desk.root.report_callback_exception = lambda kind, fault, trace: self.faults.append(fault)
        self._beat()
        self._answer()

    # -- what goes on beside the actions -------------------------------------------------------

    def _beat(self) -> None:
        now = time.perf_counter()
        if now - self._last > self.longest:
            self.longest, self.slowest = now - self._last, self._acting
        self._last = now
        self.desk.root.after(5, self._beat)

    def _answer(self) -> None:
        """Whoever asks gets an answer: text in the fields, any button, or Escape."""
        self.desk.root.after(15, self._answer)
        try:
            self.desk.context.unpost()
            self.desk.root.tk.call("grab", "current")
        except tk.TclError:
            pass
        waiting = [one for one in self.desk.root.winfo_children()
                   if isinstance(one, dialogs.Dialog) and one.winfo_viewable()]  # fmt: skip
        for dialog in waiting[-1:]:
            if isinstance(dialog, dialogs.Form) and self.rng.random() < 0.7:
                for field in dialog.widgets.values():
                    if self.rng.random() < 0.4:
                        field.delete(0, "end")
                        field.insert(0, self.pick(TEXTS))
            buttons = [one for one in dialog.default.master.winfo_children()
                       if isinstance(one, ttk.Button)]  # fmt: skip
            if self.rng.random() < 0.2:
                dialog.event_generate("<Escape>")
            else:
                buttons[self.rng.integers(len(buttons))].invoke()

    def pick(self, things: tuple) -> object:
        return things[self.rng.integers(len(things))]

    # -- actions -------------------------------------------------------------------------------

    def act(self, count: int) -> None:
        """So many actions, the event loop turning after each."""
        choices: tuple[tuple[Callable[[], None], float], ...] = (
            (self.command, 5), (self.key, 5), (self.point, 4), (self.edit, 4), (self.paste, 1),
            (self.element, 3), (self.table, 3), (self.undo, 1.5), (self.look, 2), (self.work, 1.5),
        )  # fmt: skip
        weights = np.array([weight for _, weight in choices])
        with answered_file_dialogs(self):
            for _ in range(count):
                action = choices[self.rng.choice(len(choices), p=weights / weights.sum())][0]
                self._acting = action.__name__
                self.done[self._acting] = self.done.get(self._acting, 0) + 1
                action()
                self.desk.root.update()
                if self.faults:
                    raise AssertionError(f"in {self._acting}") from self.faults[0]

    def command(self) -> None:
        names = [one.id for one in self.desk.commands.all if one.id not in NOT_UNDONE]
        name = self.pick(tuple(names))
        self._acting = f"command {name}"
        self.desk.commands.do(name)

    def key(self) -> None:
        desk = self.desk
        widgets = (desk.table.tree, desk.sky.widget, desk.strips.widget, desk.root,
                   desk.elements.rows["P"].entry, desk.elements.rows["e"].entry)  # fmt: skip
        widget, key = self.pick(widgets), self.pick(KEYS)
        self._acting = f"key {key}"
        widget.focus_force()
        widget.event_generate(f"<{key}>")

    def point(self) -> None:
        """Click, drag, turn the wheel or press the right button in a picture or the table."""
        desk = self.desk
        widget = self.pick((desk.sky.widget, desk.strips.widget, desk.table.tree))
        x, y = (int(self.rng.integers(max(size, 1)))
                for size in (widget.winfo_width(), widget.winfo_height()))  # fmt: skip
        button, state = self.pick((1, 1, 1, 2, 3)), self.pick((0, 0, 1, 4))
        self._acting = f"point {button}"
        if self.rng.random() < 0.25:
            widget.event_generate(f"<Button-{self.pick((4, 5))}>", x=x, y=y, state=state)
            return
        widget.event_generate("<Motion>", x=x, y=y)
        widget.event_generate(f"<ButtonPress-{button}>", x=x, y=y, state=state)
        held = {1: 0x100, 2: 0x200, 3: 0x400}[button] | state
        for _ in range(int(self.rng.integers(4))):
            x, y = x + int(self.rng.integers(-60, 60)), y + int(self.rng.integers(-60, 60))
            widget.event_generate("<Motion>", x=x, y=y, state=held)
        widget.event_generate(f"<ButtonRelease-{button}>", x=x, y=y, state=held)

    def edit(self) -> None:
        table = self.desk.table
        if not len(table.rows):
            return
        table.at = int(self.rng.integers(len(table.rows)))
        table.column = self.pick(COLUMNS)[0]
        table.edit()
        if table.editor.open:
            table.editor.field.delete(0, "end")
            table.editor.field.insert(0, self.pick(TEXTS))
            table.editor.field.event_generate(f"<{self.pick(('Return', 'Tab', 'Escape'))}>")
            if self.rng.random() < 0.8:
                table.editor.cancel()

    def paste(self) -> None:
        self.desk.put_on_clipboard(self.pick(PASTES))
        self.desk.commands.do("paste")

    def element(self) -> None:
        row = self.desk.elements.rows[self.pick(NAMES)]
        what = self.rng.integers(5)
        if what == 0:
            row.entry.focus_force()
            row.entry.delete(0, "end")
            row.entry.insert(0, self.pick(TEXTS))
            row.entry.event_generate("<Return>")
        elif what == 1:
            row.check.invoke()
        elif what == 2:
            row.up.invoke()
        elif what == 3:
            row.down.invoke()
        else:
            row.spring.event_generate("<ButtonPress-1>", x=1, y=4)
            row.spring.set(float(self.rng.uniform(-30, 30)))
            row.spring.event_generate("<ButtonRelease-1>", x=1, y=4)

    def table(self) -> None:
        table, what = self.desk.table, self.rng.integers(5)
        if what == 0:
            table.sort(self.pick(COLUMNS)[0])
        elif what == 1:
            table.filters.technique.current(
                int(self.rng.integers(len(table.filters.technique.cget("values"))))
            )
            table.filters.technique.event_generate("<<ComboboxSelected>>")
        elif what == 2:
            table.filters.first.delete(0, "end")
            table.filters.first.insert(0, self.pick(TEXTS))
            table.filters.first.event_generate("<KeyRelease>")
        elif what == 3:
            table.filters.show_all()
        else:
            table._scrolled("moveto", str(self.rng.random()))

    def undo(self) -> None:
        name = self.pick(("undo", "undo", "redo"))
        for _ in range(int(self.rng.integers(1, 6))):
            self.desk.commands.do(name)

    def look(self) -> None:
        desk, what = self.desk, self.rng.integers(6)
        if what == 0:
            desk.model.look(epoch=float(self.rng.uniform(1800, 2200)))
        elif what == 1:
            desk.sky.dates.field.delete(0, "end")
            desk.sky.dates.field.insert(0, self.pick(TEXTS))
            desk.sky.dates.field.event_generate("<Return>")
        elif what == 2:
            desk.follows.tabs.select(int(self.rng.integers(desk.follows.tabs.index("end"))))
        elif what == 3:
            field = desk.follows.ephemeris.fields[self.pick(("from", "to", "step"))]
            field.delete(0, "end")
            field.insert(0, self.pick((*TEXTS, "2 months", "30 d", "2030")))
            field.event_generate("<KeyRelease>")
        elif what == 4:
            wide, high = self.rng.integers(700, 1270), self.rng.integers(480, 740)
            desk.root.geometry(f"{wide}x{high}")
        else:
            tree = self.pick((desk.follows.orbits.tree, desk.follows.slips.tree))
            lines = tree.get_children()
            if lines:
                tree.selection_set(self.pick(lines))

    def work(self) -> None:
        """Begin a fit, samples or a look for slips; wait for it, cancel it, or go on meanwhile."""
        self.desk.commands.do(self.pick(("solve", "refine", "sample", "vet")))
        what = self.rng.integers(3)
        if what == 0:
            self.desk.commands.do("stop")
        elif what == 1:
            settle(self.desk, 0.3, lambda: not self.desk.worker.busy, strict=False)


class answered_file_dialogs:
    """The system's file dialogs answered: often with nothing, else with a name in a folder."""

    def __init__(self, user: RandomUser) -> None:
        self.user = user

    def _name(self, **asked: object) -> str:
        names = ("", "pair.ecsv", "figure.png", "figure.svg", "figure.gif", "list.csv",
                 "missing/pair.ecsv")  # fmt: skip
        name = self.user.pick(names)
        return str(self.user.folder / name) if name else ""

    def _names(self, **asked: object) -> tuple[str, ...]:
        good = self.user.folder / "a list.csv"
        good.write_text("epoch,theta,rho\n1944.5,77,1.01\n", encoding="utf-8")
        return self.user.pick(((), (str(good),), (str(self.user.folder / "none.csv"),)))

    def __enter__(self) -> None:
        real = file_actions.filedialog
        self.real = real.askopenfilename, real.askopenfilenames, real.asksaveasfilename
        real.askopenfilename, real.askopenfilenames = self._name, self._names
        real.asksaveasfilename = self._name

    def __exit__(self, *_: object) -> None:
        real = file_actions.filedialog
        real.askopenfilename, real.askopenfilenames, real.asksaveasfilename = self.real


def undo_all(desk: Desk) -> int:
    """Undo until there is nothing to undo; how many steps."""
    steps = 0
    while desk.model.undo_label is not None:
        desk.model.undo()
        steps += 1
    desk.root.update()
    return steps
