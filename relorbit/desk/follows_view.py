"""What follows from the orbit: other orbits compared, mass, ephemeris, turning points, notes."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable
from tkinter import ttk

from relorbit.cli.main import CAUTION
from relorbit.derive.ephemeris import turning_points
from relorbit.derive.mass import mass_budget
from relorbit.desk.commands import CommandSet
from relorbit.desk.model import ORBIT, PAIR, DeskModel
from relorbit.desk.orbits_list import OrbitsList
from relorbit.desk.slips_page import SlipsPage
from relorbit.desk.theme import Palette, Sizes
from relorbit.desk.words import sentence, words_of
from relorbit.errors import InputError
from relorbit.show.text import (
    mass_budget_text,
    technique_table,
    turning_points_table,
)
from relorbit.solve.solution import Solution

PATIENCE = 150  # milliseconds without a change before the longer texts are written anew
NO_SAMPLES = (
    "Not sampled yet. Sample draws all orbits that fit, in proportion to their probability: what "
    "they agree on\nis known, however short the arc."
)
OUTDATED = "The measures were changed since they were sampled. Sample again."
NO_ORBIT = "Nothing follows yet: there is no orbit. Press Solve."
PROVISIONAL = "Orbits from short arcs are provisional."
SUN = CAUTION.replace("\n", " ").removeprefix(PROVISIONAL).strip()


class FollowsView(ttk.Frame):
    """Tabs of what follows; only the one that is seen is kept up to date."""

    def __init__(
        self,
        parent: tk.Misc,
        model: DeskModel,
        commands: CommandSet,
        ephemeris_text: Callable[[str, str, str], str],
        year: float,
    ) -> None:
        super().__init__(parent)
        self.model = model
        self._pending: str | None = None
        self._year = year
        self.tabs = ttk.Notebook(self)
        self.tabs.pack(fill="both", expand=True)
        self.orbits = OrbitsList(self.tabs, model, commands)
        self.mass = TextPage(self.tabs)
        self.ephemeris = EphemerisPage(self.tabs, commands, ephemeris_text, year)
        self.samples = SamplesPage(self.tabs, commands)
        self.slips = SlipsPage(self.tabs, model, commands)
        self.notes = TextPage(self.tabs, words=True)
        for page, title in (
            (self.orbits, "Orbits"), (self.mass, "Mass, dates"),
            (self.ephemeris, "Ephemeris"), (self.samples, "All that fit"),
            (self.slips, "Slips"), (self.notes, "Notes"),
        ):  # fmt: skip
            self.tabs.add(page, text=title)
        self.tabs.bind("<<NotebookTabChanged>>", lambda _: self.write())
        self.bind("<Destroy>", lambda _: self._forget_pending(), add=True)

    def on_change(self, kinds: frozenset[str]) -> None:
        if kinds & {PAIR, ORBIT}:
            self._forget_pending()
            self._pending = self.after(PATIENCE, self.write)

    def _forget_pending(self) -> None:
        if self._pending is not None:
            self.after_cancel(self._pending)
            self._pending = None

    def wear(self, palette: Palette) -> None:
        for page in (self.mass, self.notes, self.ephemeris.page, self.samples.page):
            page.wear(palette)
        for page in (self.orbits, self.slips):
            page.wear(palette)

    def write(self) -> None:
        """Write the page that is seen."""
        self._forget_pending()
        seen = self.tabs.nametowidget(self.tabs.select())
        if seen is self.orbits:
            self.orbits.write()
        elif seen is self.mass:
            self.mass.write(self._mass_text())
        elif seen is self.ephemeris:
            self.ephemeris.write(self.model.elements is not None)
        elif seen is self.samples:
            self.samples.page.write(self._samples_text())
        elif seen is self.slips:
            self.slips.write()
        else:
            self.notes.write(self._notes_text(), self._notes_table())

    def show_samples(self) -> None:
        """Turn to the table of the samples."""
        self.tabs.select(self.samples)
        self.write()

    def show_slips(self) -> None:
        """Turn to the list of slips."""
        self.tabs.select(self.slips)
        self.write()

    def _samples_text(self) -> str:
        if self.model.samples_outdated:
            return OUTDATED
        return self.model.samples_text or NO_SAMPLES

    def _mass_text(self) -> str:
        model = self.model
        orbit, parallax = model.orbit, model.pair.parallax_mas
        if orbit is None:
            return NO_ORBIT
        points = turning_points_table(turning_points(orbit, self._year))
        if parallax is None or parallax <= 0.0:
            mass = "total mass  not known: the pair has no parallax (Edit, About the pair)"
        else:
            mass = mass_budget_text(mass_budget(orbit, parallax, model.pair.parallax_err_mas))
        return f"{points}\n\n{mass}"

    def _notes_text(self) -> str:
        model = self.model
        orbit, following = model.orbit, model.consequences
        if orbit is None or following is None:
            return NO_ORBIT
        if isinstance(orbit, Solution):
            parts = [sentence(one.text) for one in orbit.warnings] or ["Nothing to warn of."]
        else:
            parts = ["Warnings come with a fit: this orbit was typed, nudged or taken from the "
                     "record."]  # fmt: skip
        return "\n\n".join([*parts, PROVISIONAL])

    def _notes_table(self) -> str:
        following = self.model.consequences
        return "" if following is None else technique_table(following.residuals)


class TextPage(ttk.Frame):
    """Text to read and copy, not to change: a table, or words with a table below."""

    def __init__(self, parent: tk.Misc, words: bool = False) -> None:
        super().__init__(parent)
        sizes = Sizes(self)
        self.text = tk.Text(
            self, wrap="word" if words else "none", width=20,
            font="TkTextFont" if words else "TkFixedFont", height=4, borderwidth=0,
            highlightthickness=0, padx=sizes(8), pady=sizes(6), state="disabled", cursor="arrow",
        )  # fmt: skip
        down = ttk.Scrollbar(self, orient="vertical", command=self.text.yview)
        across = ttk.Scrollbar(self, orient="horizontal", command=self.text.xview)
        self.text.configure(yscrollcommand=down.set, xscrollcommand=across.set)
        self.text.grid(row=0, column=0, sticky="nsew")
        down.grid(row=0, column=1, sticky="ns")
        across.grid(row=1, column=0, sticky="ew")
        self.text.tag_configure("table", font="TkFixedFont", wrap="none")
        self.rowconfigure(0, weight=1)
        self.columnconfigure(0, weight=1)
        self.text.bind("<Button-1>", lambda _: self.text.focus_set())

    def write(self, words: str, table: str = "") -> None:
        whole = f"{words}\n\n{table}" if table else words
        if self.content != whole:
            self.text.configure(state="normal")
            self.text.replace("1.0", "end", words)
            if table:
                self.text.insert("end", f"\n\n{table}", "table")
            self.text.configure(state="disabled")

    @property
    def content(self) -> str:
        return self.text.get("1.0", "end-1c")

    def wear(self, palette: Palette) -> None:
        self.text.configure(
            background=palette.paper, foreground=palette.ink, insertbackground=palette.ink,
            selectbackground=palette.accent, selectforeground=palette.on_accent,
        )  # fmt: skip


class SamplesPage(ttk.Frame):
    """The intervals of all orbits that fit."""

    def __init__(self, parent: tk.Misc, commands: CommandSet) -> None:
        super().__init__(parent)
        sizes = Sizes(self)
        feet = ttk.Frame(self)
        feet.pack(side="bottom", fill="x", padx=sizes(6), pady=sizes(4))
        for name in ("save_samples", "sample"):
            commands.button(feet, name).pack(side="right", padx=(sizes(4), 0))
        self.page = TextPage(self)
        self.page.pack(fill="both", expand=True)


class EphemerisPage(ttk.Frame):
    """Positions at chosen dates."""

    def __init__(
        self,
        parent: tk.Misc,
        commands: CommandSet,
        text_of: Callable[[str, str, str], str],
        year: float,
    ) -> None:
        super().__init__(parent)
        sizes = Sizes(self)
        self._text_of = text_of
        line = ttk.Frame(self)
        line.pack(fill="x", padx=sizes(6), pady=sizes(4))
        first = int(year) + 1
        self.fields: dict[str, ttk.Entry] = {}
        for name, value, width in (("from", first, 9), ("to", first + 10, 9),
                                   ("step", "1 year", 8)):  # fmt: skip
            ttk.Label(line, text=name).pack(side="left", padx=(0, sizes(3)))
            field = ttk.Entry(line, width=width)
            field.insert(0, str(value))
            field.pack(side="left", padx=(0, sizes(6)))
            field.bind("<KeyRelease>", lambda _: self.write(self._there))
            self.fields[name] = field
        self._there = False
        self.wrong = ttk.Label(self, style="Warn.TLabel", wraplength=sizes(420))
        feet = ttk.Frame(self)
        feet.pack(side="bottom", fill="x", padx=sizes(6), pady=sizes(4))
        for name in ("save_ephemeris", "copy_ephemeris"):
            commands.button(feet, name).pack(side="right", padx=(sizes(4), 0))
        caution = ttk.Label(feet, text=SUN, style="Small.TLabel", justify="left")
        caution.pack(side="left", fill="x", expand=True)
        self.page = TextPage(self)
        self.page.pack(fill="both", expand=True)
        self.bind("<Configure>", lambda event: [
            label.configure(wraplength=max(event.width - sizes(room), 100))
            for label, room in ((caution, 150), (self.wrong, 12))])  # fmt: skip

    @property
    def asked(self) -> tuple[str, str, str]:
        """First, last and step as typed."""
        return tuple(self.fields[name].get() for name in ("from", "to", "step"))

    def write(self, there: bool) -> None:
        """Compute and show, or say what is wrong with what was asked."""
        self._there = there
        self.wrong.pack_forget()
        if not there:
            self.page.write(NO_ORBIT)
            return
        try:
            self.page.write(self._text_of(*self.asked))
        except InputError as error:
            self.wrong.configure(text=words_of(error))
            self.wrong.pack(fill="x", before=self.page, padx=6)
            self.page.write("")
