"""Residuals before and after measures were changed, side by side on one scale."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import ArrayLike, NDArray

from relorbit.errors import InputError
from relorbit.orbit.kepler import FloatArray
from relorbit.show.colours import FUTURE, INK, SMALL, TEXT
from relorbit.show.marks import legend_below, legend_height, mark_handles, mark_size, put_title
from relorbit.show.residual_plot import (
    EDGE,
    draw_residuals_across,
    draw_residuals_along,
    residual_unit,
)
from relorbit.solve.residuals import Residuals

WIDTH, PANEL, GAP = 9.4, 1.95, 0.1  # inches
LEFT, RIGHT = 0.72, 0.28
HEAD = 0.24  # inches above each column, for its name
MOST_NUMBERS = 12  # changed rows up to which each has its number beside it
APART = 0.035  # of the width of a panel: numbers nearer than this would overlap


def strips_before_after(
    before: Residuals, after: Residuals, changed: ArrayLike, *, title: str = ""
) -> Figure:
    """O-C across and along against time, before on the left and after on the right.

    All panels of a row have the scale of the residuals used afterwards; what lies beyond it
    stands near the edge, a caret on it. Changed measures are ringed, and numbered where few.

    Parameters
    ----------
    before, after : Residuals, n rows each
        Of the same measures.
    changed : array_like
        Indices of the rows changed, or bool of shape (n,).
    title : str

    Raises
    ------
    InputError
        When the two are not of the same measures, or a row does not exist.
    """
    rows = _rows(before, after, changed)
    told = _told_across(before, after)
    handles = mark_handles(after)
    # both columns must find their marks in the legend
    known = {handle.get_label().rpartition(" (")[0] for handle in handles}
    handles += [h for h in mark_handles(before) if h.get_label().rpartition(" (")[0] not in known]
    if rows.size:
        label = f"changed ({rows.size})"
        handles.append(Line2D([], [], label=label, **_ring_style(6.0)))
    upper, lower = HEAD + (0.42 if title else 0.1), legend_height(handles, WIDTH) + 0.44
    height = upper + 2 * PANEL + GAP + lower
    figure = Figure(figsize=(WIDTH, height))
    wide = (WIDTH - LEFT - 2 * RIGHT) / 2.0
    for slot, (of, name) in enumerate(((before, "before"), (after, "after"))):
        x = (LEFT + slot * (wide + RIGHT)) / WIDTH
        along = figure.add_axes((x, lower / height, wide / WIDTH, PANEL / height))
        across = figure.add_axes(
            (x, (lower + PANEL + GAP) / height, wide / WIDTH, PANEL / height), sharex=along
        )
        _draw_column(across, along, of, after, rows, told)
        across.set_title(name, fontsize=TEXT, color=INK, pad=4.0)
        for axes in (across, along):
            axes.tick_params(labelbottom=axes is along, labelleft=slot == 0)
            if slot:
                axes.set_ylabel("")
    figure.align_ylabels()
    put_title(figure, title)
    legend_below(figure, handles)
    return figure


def _rows(before: Residuals, after: Residuals, changed: ArrayLike) -> NDArray[np.intp]:
    if len(before) != len(after):
        raise InputError(
            f"residuals of {len(before)} measures before and {len(after)} after: give those of "
            "the same measures"
        )
    rows = np.asarray(changed)
    if rows.dtype == bool:
        if rows.shape != (len(after),):
            raise InputError(f"changed tells of {rows.size} measures, there are {len(after)}")
        return np.flatnonzero(rows)
    rows = np.unique(rows.astype(int))
    if rows.size and not 0 <= rows[0] <= rows[-1] < len(after):
        raise InputError(f"no measure of index {rows[-1] if rows[0] >= 0 else rows[0]}; there are "
                         f"{len(after)}")  # fmt: skip
    return rows


def _told_across(before: Residuals, after: Residuals) -> NDArray[np.bool_]:
    """True for rows whose number belongs to the upper panel: where they moved or lay off most."""
    moved, off = (
        [np.nan_to_num(np.abs(value / error)) for value, error in pairs]
        for pairs in (
            ((before.arc - after.arc, after.arc_err), (before.d_rho - after.d_rho, after.rho_err)),
            ((before.arc, after.arc_err), (before.d_rho, after.rho_err)),
        )
    )
    still = (moved[0] < 1.0) & (moved[1] < 1.0)
    return np.where(still, off[0] >= off[1], moved[0] >= moved[1])


def _draw_column(
    across: Axes,
    along: Axes,
    of: Residuals,
    scale: Residuals,
    rows: NDArray[np.intp],
    told: NDArray[np.bool_],
) -> None:
    draw_residuals_across(across, of, scale)
    draw_residuals_along(along, of, scale)
    across.set_xlabel("")
    factor = residual_unit(scale)[1]
    _ring(across, of, factor * of.arc, rows, told)
    _ring(along, of, factor * of.d_rho, rows, ~told)


def _ring_style(size: float) -> dict[str, object]:
    return {"marker": "o", "markersize": 1.9 * size, "markerfacecolor": "none",
            "markeredgecolor": FUTURE, "markeredgewidth": 1.1, "linestyle": "none"}  # fmt: skip


def _ring(
    axes: Axes,
    of: Residuals,
    value: FloatArray,
    rows: NDArray[np.intp],
    told: NDArray[np.bool_],
) -> None:
    """A ring around each changed measure where its mark stands, with its number where few."""
    limit = axes.get_ylim()[1]
    shown = np.where(np.abs(value) > limit, np.sign(value) * EDGE * limit, value)
    rows = rows[np.isfinite(shown[rows])]
    if not rows.size:
        return
    (ring,) = axes.plot(
        of.epoch[rows], shown[rows], zorder=5, **_ring_style(mark_size(len(of)))
    )
    ring.set_gid("changed")
    if rows.size > MOST_NUMBERS:
        return
    rows = rows[told[rows]]
    rows = rows[np.argsort(of.epoch[rows], kind="stable")]
    room = APART * np.diff(axes.get_xlim())[0]
    crowded = {b for a, b in pairwise(rows.tolist()) if of.epoch[b] - of.epoch[a] < room}
    for row in rows.tolist():
        # towards the middle, so that the edge does not cut it; of two neighbours one on either side
        side = -1.0 if (shown[row] > 0.0) != (row in crowded) else 1.0
        axes.annotate(
            str(row + 1), (float(of.epoch[row]), float(shown[row])), xytext=(0.0, 10.5 * side),
            textcoords="offset points", ha="center", va="center", fontsize=SMALL - 1.0,
            color=FUTURE, zorder=6,
        )  # fmt: skip
