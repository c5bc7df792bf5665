"""The seven elements: typed, nudged, held or free, with chi2 and the mass that follow."""

from __future__ import annotations

import tkinter as tk
from dataclasses import replace
from tkinter import ttk

from relorbit.derive.consequences import nudged
from relorbit.desk.commands import CommandSet
from relorbit.desk.model import ORBIT, PAIR, DeskModel
from relorbit.desk.theme import Palette, Sizes
from relorbit.desk.words import LETTERS, UNITS, chi2_in_words
from relorbit.measures.pair import RecordedOrbit
from relorbit.orbit.elements import NAMES, Elements
from relorbit.show.numbers import fixed, known, significant
from relorbit.show.text import element_rows, mass_figures
from relorbit.solve.solution import Solution

SPRING = 30.0  # coarse steps from the middle of a spring slider to its end


class ElementsView(ttk.Frame):
    """What the orbit is, and how well it fits."""

    def __init__(self, parent: tk.Misc, model: DeskModel, commands: CommandSet) -> None:
        super().__init__(parent)
        self.model, self.sizes = model, Sizes(self)
        self.drafts: dict[str, float] = {}
        self._heading()
        self._verbs(commands)
        table = ttk.Frame(self)
        table.pack(fill="x")
        self.rows = {name: ElementRow(self, table, at, name) for at, name in enumerate(NAMES, 1)}
        for column, words in ((1, "value"), (2, "error"), (3, "hold"), (4, "nudge")):
            label = ttk.Label(table, text=words, style="Small.TLabel")
            label.grid(row=0, column=column, columnspan=3 if column == 4 else 1,
                       sticky="" if column > 2 else "w", padx=self.sizes(3))  # fmt: skip
        table.columnconfigure(5, weight=1)
        self.word = ttk.Label(self, style="Quiet.TLabel", wraplength=self.sizes(330))
        self.word.pack(fill="x", pady=(self.sizes(4), 0))
        self.bind("<Configure>", self._wrap)

    def _heading(self) -> None:
        line = ttk.Frame(self)
        line.pack(fill="x", pady=(0, self.sizes(4)))
        self.chi2 = ttk.Label(line, style="Reading.TLabel")
        self.chi2.grid(row=0, column=0, sticky="w")
        self.mass = ttk.Label(line, style="Reading.TLabel")
        self.mass.grid(row=0, column=1, sticky="e")
        self.fit = ttk.Label(line, style="Small.TLabel")
        self.fit.grid(row=1, column=0, sticky="w")
        self.parallax = ttk.Label(line, style="Small.TLabel")
        self.parallax.grid(row=1, column=1, sticky="e")
        line.columnconfigure(1, weight=1)

    def _verbs(self, commands: CommandSet) -> None:
        line = ttk.Frame(self)
        line.pack(fill="x", pady=(0, self.sizes(5)))
        for at, name in enumerate(("solve", "refine", "keep")):
            style = "Next.TButton" if name == "solve" else "TButton"
            button = commands.button(line, name, style)
            button.grid(row=0, column=at, sticky="ew", padx=(0, self.sizes(4) if at < 2 else 0))
            line.columnconfigure(at, weight=1)

    def _wrap(self, event: tk.Event) -> None:
        self.word.configure(wraplength=max(event.width - self.sizes(6), 100))

    # -- intentions ----------------------------------------------------------------------------

    def nudge(self, name: str, steps: float, fine: bool, start: Elements | None = None) -> None:
        """Move one element; `start` is where a drag began."""
        elements = start or self.model.elements
        if elements is not None:
            self.model.set_elements(nudged(elements, name, steps, fine), f"nudge {name}")

    def type_in(self, name: str, text: str) -> str:
        """Take a typed value; returns what is wrong with it, "" when it was taken."""
        try:
            value = float(text.replace(",", ".").replace("\u2212", "-"))
        except ValueError:
            return f"{text!r} is not a number; write one such as 41.6"
        try:
            if self.model.elements is None:
                return self._draft(name, value)
            self.model.set_elements(replace(self.model.elements, **{name: value}), f"type {name}")
        except ValueError as error:
            return str(error)
        return ""

    def _draft(self, name: str, value: float) -> str:
        """Keep a value until all seven are there."""
        harmless = {"P": 1.0, "T": 2000.0, "e": 0.0, "a": 1.0, "i": 0.0, "node": 0.0, "omega": 0.0}
        Elements(**{**harmless, name: value})
        self.drafts[name] = value
        if len(self.drafts) == len(NAMES):
            elements, self.drafts = Elements(**self.drafts), {}
            self.model.set_elements(elements, "type elements")
        return ""

    # -- following -----------------------------------------------------------------------------

    def wear(self, palette: Palette) -> None:
        """Colours come with the ttk styles."""

    def on_change(self, kinds: frozenset[str]) -> None:
        if kinds >= {PAIR, ORBIT} and self.model.elements is None and not self.model.undo_label:
            self.drafts = {}
        if kinds & {PAIR, ORBIT}:
            self._show_fit()
            self._show_rows()

    def _show_rows(self) -> None:
        elements, orbit = self.model.elements, self.model.orbit
        sigma = getattr(orbit, "sigma", None)
        if elements is None:
            for name, row in self.rows.items():
                value = self.drafts.get(name)
                row.show("" if value is None else f"{value:.10g}", "", False, False)
            return
        held = self.model.state.held
        for name, value, error, remark in element_rows(elements, sigma):
            row = self.rows[name]
            if not error and not known((sigma or {}).get(name)):
                value = _typed_form(name, getattr(elements, name))
            remark = "" if remark == "error unknown" else remark.removeprefix("undefined: ")
            row.show(value, error or remark, name in held, True)

    def _show_fit(self) -> None:
        following, orbit = self.model.consequences, self.model.orbit
        if following is None:
            self.chi2.configure(text="no orbit yet")
            self.mass.configure(text="")
            self.fit.configure(text="")
            self.parallax.configure(text="")
            self.word.configure(
                text="Solve finds the orbit without a starting guess. Or type all seven elements."
            )
            return
        self.chi2.configure(text=f"\u03c7\u00b2 {chi2_in_words(following.chi2)}")
        self.fit.configure(text=f"for {following.numbers} values in use")
        self._show_mass(following.mass, orbit)
        self.word.configure(text=self._standing(orbit))

    def _show_mass(self, mass: float | None, orbit: object) -> None:
        if mass is None:
            self.mass.configure(text="mass unknown")
            self.parallax.configure(text="no parallax is given")
            return
        total = orbit.mass_total if isinstance(orbit, Solution) else None
        figures = mass_figures(total).replace("+/-", "\u00b1") if total else significant(mass, 4)
        self.mass.configure(text=f"mass {figures}")
        pair = self.model.pair
        self.parallax.configure(text=f"solar masses, at {pair.parallax_mas:g} mas")

    def _standing(self, orbit: object) -> str:
        """Where this orbit comes from."""
        if isinstance(orbit, Solution):
            many = len(orbit.alternatives)
            others = "" if not many else f" {many} other orbit{'s' * (many != 1)} listed below."
            searched = orbit is self.model.state.found
            fit = "The best fit" if searched else "Refined from what was here"
            return f"{fit}, with errors of one standard deviation.{others}"
        if isinstance(orbit, RecordedOrbit):
            return f"On record as {orbit.name}."
        return "Not fitted, so without errors: Refine goes on from here."


def _typed_form(name: str, value: float) -> str:
    """A value without an error, in as many figures as nudging it finely needs."""
    if name in ("P", "a"):
        return significant(value, 6)
    return fixed(value, {"T": 3, "e": 4}.get(name, 2))


class ElementRow:
    """The widgets of one element."""

    def __init__(self, view: ElementsView, table: tk.Misc, at: int, name: str) -> None:
        self.view, self.name = view, name
        self._shown = ""
        self._start: Elements | None = None
        gap = view.sizes(3)
        letter = LETTERS.get(name, name)
        unit = f"  {UNITS[name]}" if UNITS[name] else ""
        label = ttk.Label(table, text=f"{letter}{unit}", anchor="w")
        label.grid(row=at, column=0, sticky="w", padx=(0, gap))
        self.entry = ttk.Entry(table, width=11, justify="right")
        self.entry.grid(row=at, column=1, pady=view.sizes(1))
        self.error = ttk.Label(table, style="Quiet.TLabel", width=8, anchor="w")
        self.error.grid(row=at, column=2, sticky="w", padx=gap)
        self.held = tk.BooleanVar(table)
        self.check = ttk.Checkbutton(table, variable=self.held, command=self._hold)
        self.check.grid(row=at, column=3)
        self.down = self._step(table, at, 4, "\u2212", -1.0)
        self.spring = ttk.Scale(table, from_=-SPRING, to=SPRING, value=0.0, command=self._pulled,
                                length=view.sizes(70), takefocus=False)  # fmt: skip
        self.spring.grid(row=at, column=5, sticky="ew", padx=gap)
        self.up = self._step(table, at, 6, "+", 1.0)
        self._bind()

    def _step(self, table: tk.Misc, at: int, column: int, sign: str, way: float) -> ttk.Button:
        button = ttk.Button(table, text=sign, style="Step.TButton",
                            command=lambda: self.view.nudge(self.name, way, False))  # fmt: skip
        button.grid(row=at, column=column)
        button.bind("<Shift-ButtonRelease-1>", lambda _: self._fine(way))
        return button

    def _fine(self, way: float) -> str:
        self.view.nudge(self.name, way, True)
        self.down.state(["!pressed"])
        self.up.state(["!pressed"])
        return "break"

    def _bind(self) -> None:
        for key, steps, fine in (
            ("<Up>", 1.0, False), ("<Down>", -1.0, False),
            ("<Shift-Up>", 1.0, True), ("<Shift-Down>", -1.0, True),
        ):  # fmt: skip
            self.entry.bind(key, lambda _, s=steps, f=fine: self._nudge_by_key(s, f))
        self.entry.bind("<Return>", self._typed)
        self.entry.bind("<KP_Enter>", self._typed)
        self.entry.bind("<FocusOut>", self._typed)
        self.entry.bind("<Escape>", lambda _: self._write(self._shown))
        self.spring.bind("<ButtonPress-1>", self._grip)
        self.spring.bind("<ButtonRelease-1>", self._let_go)

    def show(self, value: str, error: str, held: bool, there: bool) -> None:
        """What the model says; a text being typed stays."""
        typing = self.entry.get() != self._shown and self.entry.focus_get() is self.entry
        self._shown = value
        if not typing:
            self._write(value)
        self.error.configure(text=f"\u00b1 {error}" if error[:1].isdigit() else error)
        self.held.set(held)
        for widget in (self.check, self.down, self.spring, self.up):
            if ("disabled" in widget.state()) == there:
                widget.state(["!disabled" if there else "disabled"])

    def _write(self, text: str) -> None:
        if self.entry.get() != text:
            self.entry.delete(0, "end")
            self.entry.insert(0, text)
        self.entry.configure(style="TEntry")

    def _nudge_by_key(self, steps: float, fine: bool) -> str:
        self._write(self._shown)
        self.view.nudge(self.name, steps, fine)
        return "break"

    def _typed(self, event: tk.Event) -> None:
        text = self.entry.get().strip()
        if text == self._shown:
            self.entry.configure(style="TEntry")
            return
        before, self._shown = self._shown, text
        wrong = self.view.type_in(self.name, text) if text else ""
        if wrong:
            self._shown = before
            self.entry.configure(style="Wrong.TEntry")
            self.view.word.configure(text=f"{LETTERS.get(self.name, self.name)}: {wrong}")
        elif not text:
            self._shown = before
            self._write(before)

    def _hold(self) -> None:
        self.view.model.set_held(self.name, self.held.get())

    def _grip(self, _: tk.Event) -> None:
        self._start = self.view.model.elements

    def _pulled(self, value: str) -> None:
        if self._start is not None:
            self.view.nudge(self.name, float(value), False, self._start)

    def _let_go(self, _: tk.Event) -> None:
        self._start = None
        self.spring.set(0.0)
