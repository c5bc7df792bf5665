"""One page to print: the orbit, its elements, residuals, mass, ephemeris and notes."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

import numpy as np
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from relorbit.derive.ephemeris import Ephemeris, TurningPoint
from relorbit.measures.pair import Pair
from relorbit.show.colours import GREY, HAIRLINE, INK, SMALL
from relorbit.show.marks import legend_below
from relorbit.show.numbers import error_text, known, on_the_point, significant, with_error
from relorbit.show.orbit_plot import draw_apparent_orbit, orbit_handles, orbit_view
from relorbit.show.residual_plot import draw_residual_panels, residual_unit
from relorbit.show.text import element_rows, ephemeris_rows, mass_figures, turning_rows
from relorbit.solve.solution import Solution

PAGE = (8.27, 11.69)  # A4 portrait, inches
MARGIN = 0.6
LINE = 0.155  # inches from one line of a table to the next
FLATTEST = 0.95  # height over width of the apparent orbit: flatter ones leave a hole in the page
EPHEMERIS_ROWS = 11
COLUMN = 4.62  # inches from the left edge to the right-hand half of the lower part
NOTE_WIDTH = 58  # characters of a line of notes
LETTERS = {"node": "\u03a9", "omega": "\u03c9"}
SHORT_UNITS = {"P": "yr", "a": "\u2033", "i": "\u00b0", "node": "\u00b0", "omega": "\u00b0"}


def sheet(
    solution: Solution,
    pair: Pair | None = None,
    ephemeris: Ephemeris | None = None,
    turning_points: Sequence[TurningPoint] = (),
    *,
    orientation: str = "sky",
    notes: Sequence[str] = (),
) -> Figure:
    """A page of A4 with everything an observer files or hands on.

    Parameters
    ----------
    solution : Solution
    pair : Pair, optional
        Gives the lines under the title.
    ephemeris : Ephemeris, optional
        At most eleven rows of it are printed.
    turning_points : sequence of TurningPoint
    orientation : "sky" or "eyepiece"
    notes : sequence of str
        Printed after the warnings of the solution.

    Raises
    ------
    ValueError
        For another orientation.
    """
    figure = Figure(figsize=PAGE)
    _put_heading(figure, solution, pair)
    axes = figure.add_axes(_box(MARGIN + 0.5, 6.42, 3.95, 3.88))
    axes.set_anchor("N")
    view = orbit_view(
        solution.elements, solution.residuals, orientation=orientation, flattest=FLATTEST
    )
    draw_apparent_orbit(axes, solution.elements, solution.residuals, view=view)
    _put_elements(figure, solution)
    _draw_residuals(figure, solution)
    legend_below(figure, orbit_handles(solution.elements, solution.residuals), bottom=3.0)
    if ephemeris is not None:
        _put_ephemeris(figure, ephemeris)
    _put_turning_points_and_notes(figure, solution, turning_points, notes)
    _put_foot(figure, orientation)
    return figure


def _draw_residuals(figure: Figure, solution: Solution) -> None:
    """Both panels of residuals, as wide as the page."""
    wide = PAGE[0] - 2 * MARGIN - 0.5
    across = figure.add_axes(_box(MARGIN + 0.5, 4.9, wide, 0.98))
    along = figure.add_axes(_box(MARGIN + 0.5, 3.87, wide, 0.98), sharex=across)
    draw_residual_panels(across, along, solution.residuals)
    unit = residual_unit(solution.residuals)[0]
    for axes, name in ((across, "across"), (along, "along")):
        axes.set_ylabel(f"{name} ({unit})", fontsize=SMALL)


def _box(left: float, bottom: float, width: float, height: float) -> tuple[float, ...]:
    """A box given in inches, as fractions of the page."""
    return left / PAGE[0], bottom / PAGE[1], width / PAGE[0], height / PAGE[1]


def _put(figure: Figure, x: float, y: float, text: str, **style: object) -> None:
    """Text at x, y (inches from the lower left corner of the page)."""
    style = {"fontsize": SMALL + 0.5, "color": INK, "va": "baseline"} | style
    figure.text(x / PAGE[0], y / PAGE[1], text, **style)


def _put_table(
    figure: Figure,
    y: float,
    edges: Sequence[float],
    align: str,
    heads: Sequence[str],
    rows: Sequence[Sequence[str]],
) -> float:
    """A table with its first line at height `y`; returns the height of the line after it.

    `edges` are left or right edges of the columns in inches, as `align` (l, r or ".") says.
    """
    for x, kind, head in zip(edges, align, heads, strict=True):
        _put(figure, x, y, head, ha="left" if kind == "l" else "right", fontsize=SMALL, color=GREY)
    _rule(figure, y - 0.05, min(edges), max(edges))
    for slot, (x, kind) in enumerate(zip(edges, align, strict=True)):
        cells = [row[slot] for row in rows]
        if kind == ".":
            cells = _padded(cells)
        for line, cell in enumerate(cells):
            _put(figure, x, y - LINE * (line + 1.15), cell, ha="left" if kind == "l" else "right")
    return y - LINE * (len(rows) + 1.15)


def _rule(figure: Figure, y: float, left: float, right: float) -> None:
    figure.add_artist(Line2D([left / PAGE[0], right / PAGE[0]], [y / PAGE[1]] * 2, color=GREY,
                             linewidth=HAIRLINE))  # fmt: skip


def _padded(cells: Sequence[str]) -> list[str]:
    """Cells with decimal points in one line: spaces as wide as a figure and as a point."""
    out = []
    for cell, padded in zip(cells, on_the_point(cells), strict=True):
        spaces = len(padded) - len(cell)
        point = "\u2008" if spaces and "." not in cell else ""
        text = cell + point + "\u2007" * (spaces - len(point))
        out.append(text.replace("-", "\u2212") if cell[1:] else text)
    return out


def _put_heading(figure: Figure, solution: Solution, pair: Pair | None) -> None:
    top = PAGE[1] - 0.72
    _put(figure, MARGIN, top, solution.pair, fontsize=15)
    lines = [] if pair is None else [line for line in _who(pair) if line]
    for slot, line in enumerate(lines):
        _put(figure, MARGIN, top - 0.22 - 0.16 * slot, line, fontsize=SMALL + 0.5, color=GREY)


def _who(pair: Pair) -> list[str]:
    """Up to two lines: other names and place; magnitudes, types and parallax."""
    first, second = list(pair.designations), []
    if known(pair.ra_deg) and known(pair.dec_deg):
        first.append(_position(pair.ra_deg, pair.dec_deg) + " (J2000)")
    magnitudes = [pair.magnitude_primary, pair.magnitude_secondary]
    if any(map(known, magnitudes)):
        shown = " and ".join(f"{m:.2f}" if known(m) else "unknown" for m in magnitudes)
        second.append(f"magnitudes {shown}")
    types = [kind for kind in (pair.spectral_primary, pair.spectral_secondary) if kind]
    if types:
        second.append("spectrum " + " and ".join(types))
    if known(pair.parallax_mas):
        value, sigma = with_error(pair.parallax_mas, pair.parallax_err_mas, 2)
        spread = f" \u00b1 {sigma}" if known(pair.parallax_err_mas) else ""
        second.append(f"parallax {value}{spread} mas")
    return [", ".join(first), ", ".join(second)]


def _position(ra_deg: float, dec_deg: float) -> str:
    """Right ascension to a tenth of a second of time, declination to a second of arc."""
    tenths = round(ra_deg / 15.0 * 36000.0) % 864000
    seconds = round(abs(dec_deg) * 3600.0)
    hours, minutes = divmod(tenths // 600, 60)
    sign = "\u2212" if dec_deg < 0.0 else "+"
    return (f"{hours:02d}h {minutes:02d}m {tenths % 600 / 10:04.1f}s  "
            f"{sign}{seconds // 3600:02d}\u00b0 {seconds // 60 % 60:02d}\u2032 "
            f"{seconds % 60:02d}\u2033")  # fmt: skip


def _put_elements(figure: Figure, solution: Solution) -> None:
    """Elements, quality of the fit and mass, beside the apparent orbit."""
    left = 5.3
    scaled = solution.error_scale > 1.0
    formal = solution.sigma_formal
    rows = []
    for name, value, sigma, remark in element_rows(
        solution.elements, solution.sigma, solution.held
    ):
        unit = SHORT_UNITS.get(name, "")
        second = error_text(formal[name]) if scaled and known(formal[name]) else ""
        rows.append([LETTERS.get(name, name), f"{value}", unit, sigma or remark.split(":")[0],
                     second])  # fmt: skip
    heads = ["element", "value", "", "scaled \u03c3" if scaled else "\u03c3",
             "formal" if scaled else ""]  # fmt: skip
    edges = [left, left + 1.05, left + 1.12, left + 1.82, PAGE[0] - MARGIN]
    y = _put_table(figure, 10.2, edges, "l.l..", heads, rows) - 0.06
    lines = _fit_lines(solution)
    for line in lines:
        y -= LINE
        _put(figure, left, y, line, fontsize=SMALL)


def _fit_lines(solution: Solution) -> list[str]:
    of = solution.residuals
    epochs = of.epoch[of.used]
    lines = [f"{solution.used} of {solution.measures} measures used"]
    if epochs.size:
        turns = significant(np.ptp(epochs) / solution.elements.P, 2)
        lines.append(f"{epochs.min():.1f} to {epochs.max():.1f}, {turns} revolutions")
    lines.append(f"chi2 {solution.chi2:.1f}, {solution.dof} degrees of freedom")
    if solution.error_scale > 1.0:
        lines.append(f"scaled \u03c3 = formal \u00d7 {significant(solution.error_scale, 3)}")
    lines.append("")
    if solution.mass_total is None:
        return [*lines, "total mass not known: no parallax"]
    mass = solution.mass_total
    figures = mass_figures(mass).replace("+/-", "\u00b1")
    lines.append(f"total mass {figures} solar masses")
    parts = [("a\u00b3/P\u00b2", mass.sigma_orbit), ("parallax", mass.sigma_parallax)]
    for name, part in parts:
        lines.append(f"  error from {name}: {error_text(part) if known(part) else 'unknown'}")
    return lines


def _put_ephemeris(figure: Figure, ephemeris: Ephemeris) -> None:
    """The first rows of the ephemeris, at the lower left."""
    rows = ephemeris_rows(ephemeris)
    y = 2.68
    x = MARGIN
    edges = [x, x + 0.6, x + 0.7, x + 1.95, x + 2.46, x + 3.1, x + 3.68]
    heads = ["", "epoch", "date (TT)", "\u03b8 (\u00b0)", "\u03c3", "\u03c1 (\u2033)", "\u03c3"]
    y = _put_table(figure, y, edges, "lrl....", heads,
                   [["", *row] for row in rows[:EPHEMERIS_ROWS]])  # fmt: skip
    if len(rows) > EPHEMERIS_ROWS:
        more = f"and {len(rows) - EPHEMERIS_ROWS} more epochs, not printed here"
        _put(figure, x, y, more, fontsize=SMALL - 1, color=GREY)


def _put_turning_points_and_notes(
    figure: Figure, solution: Solution, points: Sequence[TurningPoint], notes: Sequence[str]
) -> None:
    y = 2.68
    if points:
        x = COLUMN
        edges = [x, x + 1.25, x + 1.37, x + 2.5, x + 3.05]
        rows = [
            [point.kind, row[1], row[3], row[4], row[5]]
            for point, row in zip(points, turning_rows(points), strict=True)
        ]
        heads = ["next", "epoch", "date", "\u03b8 (\u00b0)", "\u03c1 (\u2033)"]
        y = _put_table(figure, y, edges, "l.l..", heads, rows) - 0.1
    indents = {"initial_indent": "\u2022 ", "subsequent_indent": "   "}
    texts = [*(one.text for one in solution.warnings), *notes]
    lines = [line for text in texts for line in textwrap.wrap(text, NOTE_WIDTH, **indents)]
    room = int((y - 0.62) / 0.135)
    if len(lines) > room:
        lines = [*lines[: room - 1], "\u2022 more notes in the text report"]
    for slot, line in enumerate(lines):
        _put(figure, COLUMN, y - 0.135 * slot, line, fontsize=SMALL - 0.5)


def _put_foot(figure: Figure, orientation: str) -> None:
    way = "north up, east left" if orientation == "sky" else "south up, west left (inverted)"
    text = (f"Picture: {way}. Position angles: equinox J2000. \u03c3: one standard deviation. "
            "O\u2212C across: theta as arc length; along: separation.")  # fmt: skip
    _rule(figure, 0.48, MARGIN, PAGE[0] - MARGIN)
    _put(figure, MARGIN, 0.33, text, fontsize=SMALL - 1, color=GREY)
