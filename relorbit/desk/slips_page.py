"""The slips found: one line each, with what is said for it and what it would change."""

from __future__ import annotations

import tkinter as tk
from tkinter import ttk

from relorbit.desk.commands import CommandSet
from relorbit.desk.model import DeskModel
from relorbit.desk.theme import Palette, Sizes
from relorbit.desk.words import sentence
from relorbit.measures.vetting import Finding
from relorbit.show.numbers import fixed
from relorbit.show.vet_text import change_text

COLUMNS = (("epoch", "epoch", 76, "e"), ("text", "finding", 150, "w"),
           ("before", "off by \u03c3", 64, "e"), ("after", "then \u03c3", 58, "e"),
           ("sure", "sure", 50, "e"))  # fmt: skip
NOT_YET = "Not looked for yet. Nothing is changed until you say so, and undo takes it back."
NONE = "No slip found among the measures in use."
OUTDATED = "The measures were changed since. Look again."


class SlipsPage(ttk.Frame):
    """A list to choose from; a line chosen selects its measure everywhere."""

    def __init__(self, parent: tk.Misc, model: DeskModel, commands: CommandSet) -> None:
        super().__init__(parent)
        self.model = model
        sizes = Sizes(self)
        self._listed: tuple[Finding, ...] | None = None
        feet = ttk.Frame(self)
        feet.pack(side="bottom", fill="x", padx=sizes(4), pady=sizes(4))
        for name in ("vet", "mend", "mend_all"):
            commands.button(feet, name).pack(side="left", padx=(0, sizes(4)))
        self.said = ttk.Label(self, justify="left", padding=(sizes(8), sizes(3)))
        self.said.pack(side="bottom", fill="x")
        tree = ttk.Treeview(self, columns=[name for name, *_ in COLUMNS], show="headings",
                            height=3, selectmode="extended")  # fmt: skip
        for name, heading, width, anchor in COLUMNS:
            tree.heading(name, text=heading, anchor=anchor)
            tree.column(name, width=sizes(width), minwidth=sizes(40), anchor=anchor,
                        stretch=name == "text")  # fmt: skip
        down = ttk.Scrollbar(self, orient="vertical", command=tree.yview)
        tree.configure(yscrollcommand=down.set)
        down.pack(side="right", fill="y")
        tree.pack(fill="both", expand=True)
        tree.bind("<<TreeviewSelect>>", lambda _: self._chosen())
        tree.bind("<Return>", lambda _: commands.do("mend"))
        self.bind("<Configure>", lambda event: self.said.configure(
            wraplength=max(event.width - sizes(20), 100)))  # fmt: skip
        self.tree, self._commands = tree, commands

    def wear(self, palette: Palette) -> None:
        self.tree.tag_configure("plain", foreground=palette.ink)

    @property
    def chosen(self) -> tuple[Finding, ...]:
        """The findings of the lines chosen, as far as they still hold."""
        findings = self.model.findings or ()
        if findings is not self._listed:
            return ()
        return tuple(findings[self.tree.index(line)] for line in self.tree.selection())

    def write(self) -> None:
        """List the findings anew where there are others."""
        findings = self.model.findings
        if findings is not self._listed or not findings:
            self.tree.delete(*self.tree.get_children())
            for one in findings or ():
                cells = [
                    fixed(float(self.model.pair.measures.epoch[one.row]), 2), one.text,
                    _sigma(one.sigma_before), _sigma(one.sigma_after),
                    f"{100.0 * one.confidence:.0f} %",
                ]  # fmt: skip
                self.tree.insert("", "end", values=cells, tags=("plain",))
            self._listed = findings
        self._say()

    def _chosen(self) -> None:
        if self.chosen:
            self.model.select({one.row for one in self.chosen})
        self._say()
        self._commands.refresh()

    def _say(self) -> None:
        findings = self.model.findings
        if findings is None:
            words = OUTDATED if self.model.findings_outdated else NOT_YET
        elif not findings:
            words = NONE
        elif len(self.chosen) == 1:
            (one,) = self.chosen
            words = f"{sentence(one.text)} {sentence(change_text(one))}"
        else:
            words = "Choose a line to see what is said for it."
        if self.said["text"] != words:
            self.said.configure(text=words)


def _sigma(value: float | None) -> str:
    return "" if value is None else fixed(value, 1)
