"""What all figures of measures share: the marks of techniques, legends, quiet axes."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.legend import Legend
from matplotlib.lines import Line2D
from numpy.typing import ArrayLike

from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import FloatArray
from relorbit.show.colours import (
    GREY,
    HAIRLINE,
    INK,
    MARKS,
    SMALL,
    TEXT,
    TITLE,
    hairline,
    mark_size,
)
from relorbit.solve.residuals import Residuals, residuals

LEGEND_ROW = 0.19  # inches
LEGEND_ENTRY = 1.72  # inches a column needs


def compared(
    elements: Elements, measures: Measures | None, given: Residuals | None
) -> Residuals:
    """The residuals given, or those of the measures; of no rows where there are no measures."""
    if given is not None:
        return given
    if measures is None:
        measures = Measures.from_columns({"epoch": [], "theta": [], "rho": []})
    return residuals(elements, measures)


def mark_style(technique: str, used: bool, size: float) -> dict[str, Any]:
    """Keywords of matplotlib for the marker of one measure; hollow where not used."""
    mark = MARKS[technique]
    return {
        "marker": mark.marker,
        "markersize": size * mark.size,
        "markerfacecolor": mark.colour if used else "none",
        "markeredgecolor": mark.outline,
        "markeredgewidth": HAIRLINE if used else 0.7,
        "linestyle": "none",
    }


def draw_marks(
    axes: Axes, x: ArrayLike, y: ArrayLike, of: Residuals, which: ArrayLike | None = None
) -> list[Line2D]:
    """A marker for every row, a line artist for each technique, used and not used.

    Parameters
    ----------
    axes : Axes
    x, y : array_like, shape (n,)
        Data coordinates; rows with NaN are left out.
    of : Residuals, n rows
        Tells technique and use.
    which : bool array, shape (n,), optional
        Only these rows.
    """
    x, y = np.asarray(x, dtype=float), np.asarray(y, dtype=float)
    keep = np.isfinite(x) & np.isfinite(y)
    if which is not None:
        keep &= np.asarray(which)
    size, drawn = mark_size(len(of)), []
    for technique, used in groups(of):
        rows = keep & (of.technique == technique) & (of.used == used)
        if rows.any():
            style = mark_style(technique, used, size)
            (line,) = axes.plot(x[rows], y[rows], zorder=4 if used else 3.5, **style)
            line.set_gid(f"measures {technique} {'used' if used else 'unused'}")
            drawn.append(line)
    return drawn


def groups(of: Residuals) -> list[tuple[str, bool]]:
    """Technique and use of every kind of row there is, in the order of the marks."""
    return [
        (technique, used)
        for used in (True, False)
        for technique in MARKS
        if np.any((of.technique == technique) & (of.used == used))
    ]


def draw_error_bars(
    axes: Axes, x: FloatArray, y: FloatArray, error: FloatArray, of: Residuals
) -> None:
    """Thin vertical error bars in the colour of the technique's outline."""
    good = np.isfinite(y) & np.isfinite(error)
    for technique, used in groups(of):
        rows = good & (of.technique == technique) & (of.used == used)
        axes.vlines(
            x[rows], (y - error)[rows], (y + error)[rows], colors=MARKS[technique].outline,
            linewidth=hairline(len(of)), alpha=0.7 if used else 0.35, zorder=2.5,
        )  # fmt: skip


def mark_handles(of: Residuals) -> list[Line2D]:
    """Legend entries of the techniques, with the number of measures of each."""
    handles = []
    for technique, used in groups(of):
        count = int(np.count_nonzero((of.technique == technique) & (of.used == used)))
        label = f"{technique} ({count})" if used else f"{technique}, not used ({count})"
        handles.append(Line2D([], [], label=label, **mark_style(technique, used, 6.0)))
    return handles


def quiet(axes: Axes) -> None:
    """Thin frame, small ticks inside, small grey figures."""
    for spine in axes.spines.values():
        spine.set_linewidth(0.6)
        spine.set_color(GREY)
    axes.tick_params(
        direction="in", top=True, right=True, length=3.0, width=0.6, color=GREY,
        labelcolor=INK, labelsize=SMALL,
    )  # fmt: skip


def label_axes(axes: Axes, x: str = "", y: str = "") -> None:
    """Name the axes in the size and colour of all text."""
    axes.set_xlabel(x, fontsize=TEXT, color=INK)
    axes.set_ylabel(y, fontsize=TEXT, color=INK)


def legend_rows(handles: Sequence[Artist], width: float) -> tuple[int, int]:
    """Columns and rows of a legend in `width` inches."""
    columns = max(1, min(len(handles), int(width / LEGEND_ENTRY)))
    return columns, -(-len(handles) // columns)


def legend_height(handles: Sequence[Artist], width: float) -> float:
    """Inches a legend needs, its margins included."""
    return LEGEND_ROW * legend_rows(handles, width)[1] + 0.16 if handles else 0.1


def legend_below(figure: Figure, handles: Sequence[Artist], bottom: float = 0.06) -> Legend | None:
    """A legend at the foot of the figure, `bottom` inches above its edge, outside all axes."""
    if not handles:
        return None
    width, height = figure.get_size_inches()
    return figure.legend(
        handles=list(handles), loc="lower center", bbox_to_anchor=(0.5, bottom / height),
        ncols=legend_rows(handles, width)[0], frameon=False, fontsize=SMALL, labelcolor=INK,
        handletextpad=0.5, columnspacing=1.4, borderpad=0.0, borderaxespad=0.0,
    )  # fmt: skip


def say_how_many_beyond(axes: Axes, count: int) -> None:
    """A small note beside the axes that so many measures lie outside the scale, if any does."""
    if count:
        axes.annotate(f"{count} beyond the scale", (1.0, 1.0), xycoords="axes fraction",
                      xytext=(2.0, 0.0), textcoords="offset points", rotation=90, ha="left",
                      va="top", fontsize=SMALL - 1.5, color=GREY)  # fmt: skip


def put_title(figure: Figure, title: str, note: str = "") -> None:
    """Title at the top left, a short note at the top right."""
    top = 1.0 - 0.1 / figure.get_size_inches()[1]
    if title:
        figure.text(0.5, top, title, ha="center", va="top", fontsize=TITLE, color=INK)
    if note:
        figure.text(0.98, top, note, ha="right", va="top", fontsize=SMALL, color=GREY)
