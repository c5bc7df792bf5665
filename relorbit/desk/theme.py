"""Colours, fonts and sizes of the window, light and dark."""

from __future__ import annotations

import tkinter as tk
from dataclasses import dataclass
from tkinter import font as tkfont
from tkinter import ttk

from matplotlib.artist import Artist
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.patheffects import withStroke
from matplotlib.spines import Spine
from matplotlib.text import Text

from relorbit.show import colours

LEAST_ROOM = (960, 540)  # pixels of 96 an inch that the desk needs
TEXT_SIZE, SMALL_SIZE, NAME_SIZE, READING_SIZE = 9, 8, 13, 12  # points


@dataclass(frozen=True)
class Palette:
    """The colours of one appearance of the window.

    Attributes
    ----------
    ground, paper : behind widgets; behind figures, tables and entries
    ink, quiet : text; text of less weight. Both read on ground, paper and chosen.
    line : frames and rules
    accent, on_accent : the button of the next step, selections in figures; text on it
    chosen : behind selected rows
    warn : what is wrong
    curve, today : the orbit; the companion at the chosen date
    edges : outline of the markers of each technique
    """

    name: str
    ground: str
    paper: str
    ink: str
    quiet: str
    line: str
    accent: str
    on_accent: str
    chosen: str
    warn: str
    curve: str
    today: str
    edges: dict[str, str]


LIGHT = Palette(
    name="light", ground="#F1EFEA", paper="#FFFFFF", ink="#1A1A1A", quiet="#5C5A55",
    line="#CFCBC2", accent="#1F5A8C", on_accent="#FFFFFF", chosen="#D6E4F1", warn="#9C2F14",
    curve=colours.CURVE, today=colours.FUTURE,
    edges={name: mark.outline for name, mark in colours.MARKS.items()},
)  # fmt: skip
DARK = Palette(
    name="dark", ground="#202327", paper="#15171A", ink="#E8E5DE", quiet="#AAA69E",
    line="#43484F", accent="#8FBDE6", on_accent="#10151A", chosen="#26394C", warn="#F3A688",
    curve="#D8D4CB", today="#7FCB95",
    edges={"eyepiece": "#F1E8BC", "plate": "#8AD8CB", "camera": "#EDB2BB",
           "interferometer": "#DE96BC", "space": "#A79DEE", "unknown": "#E2E2E2"},
)  # fmt: skip
PALETTES = {palette.name: palette for palette in (LIGHT, DARK)}


class Sizes:
    """Lengths that follow the display's scaling."""

    def __init__(self, root: tk.Misc) -> None:
        self._factor = float(root.tk.call("tk", "scaling")) / (96.0 / 72.0)

    def __call__(self, length: float) -> int:
        """Pixels for a length given in pixels of a display of 96 dots an inch."""
        return max(1, round(length * self._factor))


def set_scaling(root: tk.Misc, factor: float) -> None:
    """Sizes `factor` times those of the display, as far as all of the desk still fits on it."""
    room = min(root.winfo_screenwidth() / LEAST_ROOM[0], root.winfo_screenheight() / LEAST_ROOM[1])
    wanted = float(root.tk.call("tk", "scaling")) * factor
    root.tk.call("tk", "scaling", min(wanted, max(room, 1.0) * 96.0 / 72.0))


def set_fonts(root: tk.Misc) -> None:
    """One family, a few sizes in points, so that they follow the scaling."""
    family = tkfont.nametofont("TkDefaultFont", root).actual("family")
    fixed = tkfont.nametofont("TkFixedFont", root).actual("family")
    for name in ("TkDefaultFont", "TkTextFont", "TkMenuFont", "TkHeadingFont", "TkCaptionFont"):
        tkfont.nametofont(name, root).configure(family=family, size=TEXT_SIZE, weight="normal")
    tkfont.nametofont("TkFixedFont", root).configure(family=fixed, size=TEXT_SIZE)
    existing = tkfont.names(root)
    for name, size, weight in (
        ("DeskSmall", SMALL_SIZE, "normal"),
        ("DeskBold", TEXT_SIZE, "bold"),
        ("DeskName", NAME_SIZE, "bold"),
        ("DeskReading", READING_SIZE, "normal"),
    ):
        # a font made through tkfont.Font goes when its Python object does
        how = "configure" if name in existing else "create"
        root.tk.call("font", how, name, "-family", family, "-size", size, "-weight", weight)


def dress(root: tk.Tk, palette: Palette) -> None:
    """Give every ttk style the colours of `palette`."""
    style, sizes, p = ttk.Style(root), Sizes(root), palette
    style.theme_use("clam")
    root.configure(background=p.ground)
    style.configure(
        ".", background=p.ground, foreground=p.ink, fieldbackground=p.paper, bordercolor=p.line,
        lightcolor=p.ground, darkcolor=p.ground, troughcolor=p.line, focuscolor=p.accent,
        insertcolor=p.ink, selectbackground=p.accent, selectforeground=p.on_accent,
        font="TkDefaultFont",
    )  # fmt: skip
    style.map(".", foreground=[("disabled", p.quiet)])
    for name, settings in (
        ("Quiet.TLabel", {"foreground": p.quiet}),
        ("Small.TLabel", {"foreground": p.quiet, "font": "DeskSmall"}),
        ("Warn.TLabel", {"foreground": p.warn}),
        ("Bold.TLabel", {"font": "DeskBold"}),
        ("Name.TLabel", {"font": "DeskName"}),
        ("Reading.TLabel", {"font": "DeskReading"}),
        ("Paper.TFrame", {"background": p.paper}),
    ):
        style.configure(name, **settings)
    _dress_buttons(style, sizes, p)
    _dress_fields(style, sizes, p)
    _dress_lists(style, sizes, p)
    _dress_choices(root, p)


def _dress_choices(root: tk.Tk, p: Palette) -> None:
    """The lists that comboboxes open: those to come, and those there are."""
    colours_of = {"background": p.paper, "foreground": p.ink, "selectBackground": p.accent,
                  "selectForeground": p.on_accent}  # fmt: skip
    for option, colour in colours_of.items():
        root.option_add(f"*TCombobox*Listbox.{option}", colour)
    waiting: list[tk.Misc] = [root]
    while waiting:
        widget = waiting.pop()
        waiting += widget.winfo_children()
        if widget.winfo_class() == "TCombobox":
            opened = root.tk.call("ttk::combobox::PopdownWindow", widget)
            for option, colour in colours_of.items():
                root.tk.call(f"{opened}.f.l", "configure", f"-{option.lower()}", colour)


def _dress_buttons(style: ttk.Style, sizes: Sizes, p: Palette) -> None:
    style.configure(
        "TButton", padding=(sizes(8), sizes(3)), background=p.ground, bordercolor=p.line,
        lightcolor=p.ground, darkcolor=p.ground, relief="raised", borderwidth=1, width=0,
    )  # fmt: skip
    style.configure("Choice.TButton", anchor="w")
    style.configure("First.TButton", anchor="w")
    style.map(
        "TButton",
        background=[("disabled", p.ground), ("active", p.chosen)],
        bordercolor=[("focus", p.accent)],
        lightcolor=[("active", p.chosen)],
        darkcolor=[("active", p.chosen)],
    )
    style.configure("Step.TButton", padding=(0, 0), width=2)
    for name in ("Next.TButton", "First.TButton"):
        style.configure(
            name, background=p.accent, foreground=p.on_accent, bordercolor=p.accent,
            lightcolor=p.accent, darkcolor=p.accent,
        )  # fmt: skip
        style.map(
            name,
            background=[("disabled", p.ground), ("active", p.accent)],
            foreground=[("disabled", p.quiet)],
            lightcolor=[("disabled", p.ground), ("active", p.accent)],
            darkcolor=[("disabled", p.ground), ("active", p.accent)],
            bordercolor=[("disabled", p.line), ("focus", p.ink)],
        )
    for kind in ("TCheckbutton", "TRadiobutton"):
        style.configure(
            kind, indicatorbackground=p.paper, indicatorforeground=p.ink,
            upperbordercolor=p.quiet, lowerbordercolor=p.quiet, indicatorsize=sizes(11),
            padding=sizes(1),
        )  # fmt: skip
        style.map(
            kind,
            background=[("active", p.ground)],
            indicatorbackground=[("disabled", p.ground), ("selected", p.accent)],
            indicatorforeground=[("selected", p.on_accent)],
        )


def _dress_fields(style: ttk.Style, sizes: Sizes, p: Palette) -> None:
    style.configure("TEntry", padding=sizes(2), fieldbackground=p.paper, foreground=p.ink)
    style.map(
        "TEntry",
        bordercolor=[("invalid", p.warn), ("focus", p.accent)],
        lightcolor=[("invalid", p.warn), ("focus", p.accent)],
        fieldbackground=[("disabled", p.ground)],
    )
    style.configure("Wrong.TEntry", bordercolor=p.warn, lightcolor=p.warn)
    style.map("Wrong.TEntry", bordercolor=[("focus", p.warn)], lightcolor=[("focus", p.warn)])
    style.configure(
        "TCombobox", padding=sizes(2), arrowsize=sizes(11), background=p.ground, arrowcolor=p.ink
    )
    style.map(
        "TCombobox",
        fieldbackground=[("readonly", p.paper)],
        foreground=[("readonly", p.ink)],
        selectbackground=[("readonly", p.paper)],
        selectforeground=[("readonly", p.ink)],
        bordercolor=[("focus", p.accent)],
    )
    style.layout("Cell.TCombobox", [("Combobox.field", {"sticky": "nswe", "children": [
        ("Combobox.padding", {"sticky": "nswe", "children": [
            ("Combobox.textarea", {"sticky": "nswe"})]})]})])  # fmt: skip
    style.configure(
        "TScrollbar", background=p.ground, troughcolor=p.paper, bordercolor=p.line,
        arrowcolor=p.quiet, arrowsize=sizes(11), gripcount=0,
    )  # fmt: skip
    style.map("TScrollbar", background=[("disabled", p.ground), ("active", p.chosen)])
    style.configure(
        "TScale", background=p.ground, troughcolor=p.line, bordercolor=p.line,
        sliderlength=sizes(14), sliderthickness=sizes(14), gripcount=0,
    )  # fmt: skip
    style.map("TScale", background=[("disabled", p.ground), ("active", p.accent)])
    style.configure("TProgressbar", background=p.accent, troughcolor=p.line, thickness=sizes(10))


def _dress_lists(style: ttk.Style, sizes: Sizes, p: Palette) -> None:
    height = tkfont.nametofont("TkDefaultFont", style.master).metrics("linespace") + sizes(5)
    style.configure(
        "Treeview", background=p.paper, fieldbackground=p.paper, foreground=p.ink,
        rowheight=height, bordercolor=p.line, borderwidth=1,
    )  # fmt: skip
    style.map("Treeview", background=[("selected", p.chosen)], foreground=[("selected", p.ink)])
    style.configure(
        "Treeview.Heading", background=p.ground, foreground=p.quiet, padding=(sizes(3), sizes(2)),
        relief="flat", bordercolor=p.line,
    )  # fmt: skip
    style.map("Treeview.Heading", background=[("active", p.chosen)])
    style.configure("TNotebook", background=p.ground, bordercolor=p.line, tabmargins=0)
    style.configure(
        "TNotebook.Tab", background=p.ground, foreground=p.quiet, bordercolor=p.line,
        padding=(sizes(9), sizes(3)), lightcolor=p.ground,
    )  # fmt: skip
    style.map(
        "TNotebook.Tab",
        background=[("selected", p.paper)],
        foreground=[("selected", p.ink)],
        lightcolor=[("selected", p.paper)],
        padding=[("selected", (sizes(9), sizes(3)))],
        expand=[("selected", (0, 0, 0, 0))],
    )
    style.configure("Sash", sashthickness=sizes(7), gripcount=0, background=p.ground)
    style.configure("TPanedwindow", background=p.ground)


def recolour(artist: Artist, palette: Palette) -> None:
    """Turn the colours that figures have on white paper into those of `palette`."""
    new = {
        colours.INK.lower(): palette.ink, colours.GREY.lower(): palette.quiet,
        colours.CURVE.lower(): palette.curve, "white": palette.paper,
    }  # fmt: skip
    for part in artist.findobj():
        if isinstance(part, Line2D | Text):
            colour = part.get_color()
            if isinstance(colour, str) and colour.lower() in new:
                part.set_color(new[colour.lower()])
        if isinstance(part, Text) and part.get_path_effects():
            part.set_path_effects([withStroke(linewidth=2.2, foreground=palette.paper)])
        elif isinstance(part, Spine):
            part.set_edgecolor(palette.line)
        elif isinstance(part, Patch) and part.get_gid():
            part.set_facecolor(palette.curve if part.get_gid() == "direction" else palette.ink)
