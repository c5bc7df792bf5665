"""What can be done to measures."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Mapping
from typing import TYPE_CHECKING

from relorbit.derive.glance import largest_in_sigma, most_doubtful
from relorbit.desk.commands import Command
from relorbit.desk.dialogs import Field
from relorbit.measures import editing
from relorbit.measures.pair import Pair
from relorbit.measures.reduction import reduce_pair
from relorbit.measures.table import TECHNIQUES
from relorbit.show.numbers import fixed

if TYPE_CHECKING:
    from relorbit.desk.window import Desk

REASONS = ("wrong quadrant cannot be settled", "misread circle", "poor night", "another pair",
           "misprint", "far from all others")  # fmt: skip
IDENTITY = (
    ("name", "Name", ""),
    ("ra_deg", "Right ascension", "degrees, or hours as 15 23 12.3"),
    ("dec_deg", "Declination", "degrees, or +30 17 16"),
    ("pm_ra_mas_yr", "Proper motion, RA", "mas/yr, times cos(dec)"),
    ("pm_dec_mas_yr", "Proper motion, dec", "mas/yr"),
    ("parallax_mas", "Parallax", "mas"),
    ("parallax_err_mas", "its error", "mas"),
    ("magnitude_primary", "Magnitude, primary", ""),
    ("magnitude_secondary", "Magnitude, secondary", ""),
    ("spectral_primary", "Spectral type, primary", ""),
    ("spectral_secondary", "Spectral type, secondary", ""),
    ("note", "Note", ""),
)
WORDS = ("name", "spectral_primary", "spectral_secondary", "note")


class MeasureActions:
    """Handlers, and the commands that name them."""

    def __init__(self, desk: Desk) -> None:
        self.desk = desk
        self._doubted: tuple[object, list[int]] | None = None

    def commands(self) -> tuple[Command, ...]:
        d = self.desk
        some, there = d.has_selection, d.has_measures
        return (
            Command("copy", "Copy measures", "Edit", "Control-c", self.copy, there),
            Command("paste", "Paste measures", "Edit", "Control-v", self.paste, d.on_desk),
            Command("all", "Select all shown", "Edit", "Control-a", self.select_shown, there),
            Command("none", "Select nothing", "Edit", "Escape", self.select_none, some),
            Command("identity", "About the pair\u2026", "Edit", "Control-i", self.identity,
                    d.on_desk, "About the pair\u2026"),
            Command("flip", "Flip the quadrant", "Measures", "f", self.flip, some, "Flip"),
            Command("aside", "Set aside\u2026", "Measures", "x", self.set_aside, some,
                    "Set aside\u2026"),
            Command("use", "Use again", "Measures", "u", self.use, some, "Use"),
            Command("doubt", "Go to the most doubtful measure", "Measures", "w", self.doubt,
                    d.has_orbit_and_measures, "Most doubtful"),
            Command("edit_cell", "Edit the cell", "Measures", "F2", self.edit_cell, there),
            Command("add", "Add a measure\u2026", "Measures", "Insert", self.add, d.on_desk,
                    "Add\u2026"),
            Command("reduce", "Bring theta to J2000", "Measures", "Control-j", self.reduce,
                    self._of_date),
            Command("remove", "Remove rows added by mistake\u2026", "Measures", "Delete",
                    self.remove, some),
        )  # fmt: skip

    # -- measures ------------------------------------------------------------------------------

    def flip(self) -> None:
        self.desk.model.flip(self.desk.model.selection)

    def use(self) -> None:
        self.desk.model.set_use(self.desk.model.selection, True)

    def set_aside(self) -> None:
        model = self.desk.model
        rows = model.selection
        count = f"{len(rows)} measures" if len(rows) != 1 else "the measure"
        self.desk.fill_in(
            "Set aside",
            (Field("reason", "Why", "", REASONS),),
            lambda said: model.set_use(rows, False, said["reason"]),
            "Set aside",
            f"What is the reason to set {count} aside? It stays with the pair and can be used "
            "again at any time.",
        )

    def doubt(self) -> None:
        """Select the measure farthest off; again, the one after it."""
        model = self.desk.model
        of = model.consequences.residuals
        if self._doubted is None or self._doubted[0] is not model.state:
            self._doubted = (model.state, most_doubtful(of).tolist())
        rows = self._doubted[1]
        if not rows:
            self.desk.say("No measure is in use.")
            return
        row = rows.pop(0)
        if not rows:
            self._doubted = None
        model.select({row})
        off = fixed(largest_in_sigma(of)[row], 1)
        self.desk.say(f"This one is {off} sigma off. W goes to the next, F flips it, X sets it "
                      "aside.")  # fmt: skip

    def add(self) -> None:
        fields = (
            Field("epoch", "Epoch", hint="2026.51 or 2026-07-05"),
            Field("theta", "Position angle", hint="degrees"),
            Field("rho", "Separation", hint="arcsec"),
            Field("theta_err", "its error, angle", hint="degrees; may stay empty"),
            Field("rho_err", "its error, separation", hint="arcsec; may stay empty"),
            Field("technique", "Technique", "eyepiece", TECHNIQUES),
            Field("observer", "Observer"),
            Field("equinox", "Equinox of the angle", "date", ("date", "J2000"),
                  "brought to J2000 where the position is known"),
            Field("note", "Note"),
        )  # fmt: skip
        if self.desk.fill_in("Add a measure", fields, self._add, "Add"):
            self.desk.model.select({len(self.desk.model.pair.measures) - 1})

    def _add(self, said: Mapping[str, str]) -> None:
        said = {name: text for name, text in said.items() if text.strip()}
        for name in ("epoch", "theta", "rho"):
            said.setdefault(name, "")
        pair, _ = reduce_pair(editing.with_measure(self.desk.model.pair, **said))
        self.desk.model.take_in(pair, "add a measure")

    def remove(self) -> None:
        rows = self.desk.model.selection
        words = (
            f"Take {len(rows)} row{'s' * (len(rows) != 1)} out of the pair? This is for rows added "
            "by mistake: a measure that is doubted is better set aside. Undo brings them back."
        )
        if self.desk.ask("Remove rows", words, ("Remove", "Cancel")) == "Remove":
            self.desk.model.remove(rows)

    def edit_cell(self) -> None:
        self.desk.table.edit()

    def _of_date(self) -> bool:
        pair = self.desk.model.pair
        known = pair.ra_deg is not None and pair.dec_deg is not None
        return known and bool((pair.measures.equinox != "J2000").any())

    def reduce(self) -> None:
        count = self.desk.session.reduce()
        self.desk.say(f"{count} position angles brought to J2000; the values as received are kept.")

    # -- selection and clipboard ---------------------------------------------------------------

    def select_shown(self) -> None:
        self.desk.model.select(self.desk.table.rows.tolist())

    def select_none(self) -> None:
        self.desk.model.select(())

    def copy(self) -> None:
        model, table = self.desk.model, self.desk.table
        chosen = model.selection
        rows = [row for row in table.rows.tolist() if row in chosen] if chosen else None
        text = self.desk.session.table_text(rows if rows else table.rows.tolist())
        self.desk.put_on_clipboard(text)
        self.desk.say(f"{text.rstrip().count(chr(10))} measures copied, with a header line.")

    def paste(self) -> None:
        try:
            text = self.desk.root.clipboard_get()
        except tk.TclError:
            text = ""
        if not text.strip():
            self.desk.say("The clipboard holds no text to paste.")
            return
        with self.desk.refusals("Not pasted"):
            taken = self.desk.session.paste(text, self.desk.table.shown_columns())
            self.desk.say(f"{taken.appended} of {taken.read} rows taken in.")
            self.desk.ask("Pasted", taken.text)

    # -- the pair ------------------------------------------------------------------------------

    def identity(self) -> None:
        pair = self.desk.model.pair
        fields = [Field(name, label, _text(pair, name), hint=hint)
                  for name, label, hint in IDENTITY]  # fmt: skip
        self.desk.fill_in("About the pair", fields, self._identify, "Take over")

    def _identify(self, said: Mapping[str, str]) -> None:
        pair = self.desk.model.pair
        changed = {}
        for name, text in said.items():
            text = text.strip()
            if text != _text(pair, name):
                empty = "" if name in ("name", "note") else None
                changed[name] = (text if name in WORDS else text.replace(",", ".")) or empty
        if changed:
            self.desk.model.set_identity(**changed)


def _text(pair: Pair, name: str) -> str:
    value = getattr(pair, name)
    return "" if value is None else str(value)
