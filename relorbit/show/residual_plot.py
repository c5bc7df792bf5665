"""Residuals across and along the direction of the pair, against time."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.markers import CARETDOWN, CARETUP
from matplotlib.ticker import MaxNLocator

from relorbit.orbit.kepler import FloatArray
from relorbit.show.colours import INK, MARKS, THIN
from relorbit.show.marks import (
    draw_error_bars,
    draw_marks,
    groups,
    label_axes,
    legend_below,
    legend_height,
    mark_handles,
    put_title,
    quiet,
    say_how_many_beyond,
)
from relorbit.solve.residuals import Residuals

WIDTH, PANEL = 7.6, 1.95  # inches
IN_MAS = 0.1  # arcsec: where all residuals used are smaller, the scale is in milliarcseconds
EDGE = 0.85  # of the half height: where a residual beyond the scale is marked


def residuals_over_time(residuals: Residuals, *, title: str = "") -> Figure:
    """Two panels of O-C: theta as arc length (across) and rho (along), one scale of time.

    The measures used set the scale; others beyond it stand near the edge, a caret on it.
    """
    handles = mark_handles(residuals)
    upper, lower = 0.42 if title else 0.15, legend_height(handles, WIDTH) + 0.44
    gap = 0.1
    height = upper + 2 * PANEL + gap + lower
    figure = Figure(figsize=(WIDTH, height))
    left, wide = 0.72 / WIDTH, (WIDTH - 0.72 - 0.15) / WIDTH
    along = figure.add_axes((left, lower / height, wide, PANEL / height))
    across = figure.add_axes(
        (left, (lower + PANEL + gap) / height, wide, PANEL / height), sharex=along
    )
    draw_residual_panels(across, along, residuals)
    put_title(figure, title)
    legend_below(figure, handles)
    return figure


def draw_residual_panels(across: Axes, along: Axes, residuals: Residuals) -> None:
    """Both panels, the upper one without figures of time."""
    draw_residuals_across(across, residuals)
    draw_residuals_along(along, residuals)
    across.tick_params(labelbottom=False)
    across.set_xlabel("")
    across.figure.align_ylabels([across, along])


def draw_residuals_across(
    axes: Axes, residuals: Residuals, scale: Residuals | None = None
) -> None:
    """O-C of theta as arc length; `scale` are other residuals that set unit and height."""
    scale = scale or residuals
    limit = panel_limit(scale.arc, scale.arc_err, scale)
    _draw(axes, residuals, residuals.arc, residuals.arc_err, "across", scale, limit)


def draw_residuals_along(
    axes: Axes, residuals: Residuals, scale: Residuals | None = None
) -> None:
    """O-C of rho; `scale` as above."""
    scale = scale or residuals
    limit = panel_limit(scale.d_rho, scale.rho_err, scale)
    _draw(axes, residuals, residuals.d_rho, residuals.rho_err, "along", scale, limit)


def _draw(
    axes: Axes, of: Residuals, value: FloatArray, error: FloatArray, name: str,
    scale: Residuals, limit: float,
) -> None:  # fmt: skip
    unit, factor = residual_unit(scale)
    value, error, limit = value * factor, error * factor, limit * factor
    quiet(axes)
    axes.axhline(0.0, color=INK, linewidth=THIN, zorder=1.5)
    far = np.abs(value) > limit
    draw_error_bars(axes, of.epoch, np.where(far, np.nan, value), error, of)
    draw_marks(axes, of.epoch, np.where(far, np.nan, value), of)
    _draw_beyond(axes, of, np.sign(value) * EDGE * limit, far)
    axes.set_ylim(-limit, limit)
    axes.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10], symmetric=True))
    if len(of):
        first, last = float(of.epoch.min()), float(of.epoch.max())
        pad = 0.04 * (last - first) or 1.0
        axes.set_xlim(first - pad, last + pad)
    axes.xaxis.set_major_locator(MaxNLocator(8, steps=[1, 2, 5, 10]))
    axes.ticklabel_format(axis="x", useOffset=False, style="plain")
    label_axes(axes, "Julian year", f"O\u2212C {name} ({unit})")


def residual_unit(of: Residuals) -> tuple[str, float]:
    """Name of the unit of both panels, and how many of it an arcsecond has."""
    sizes = np.abs(np.concatenate([of.arc[of.used], of.d_rho[of.used]]))
    sizes = sizes[np.isfinite(sizes)]
    return ("mas", 1000.0) if sizes.size and sizes.max() < IN_MAS else ("arcsec", 1.0)


def panel_limit(value: FloatArray, error: FloatArray, of: Residuals) -> float:
    """Half the height of a panel: all residuals used, with error bars unless they are huge."""
    shown = (of.used if of.used.any() else np.ones(len(of), dtype=bool)) & np.isfinite(value)
    if not shown.any():
        return 1.0
    largest = float(np.abs(value[shown]).max())
    reach = float(np.nanmax(np.abs(value[shown]) + error[shown]))
    # beyond the largest by a little, so that its mark is not cut
    return max(1.18 * largest, min(1.04 * reach, max(2.0 * largest, np.median(error[shown]))))


def _draw_beyond(axes: Axes, of: Residuals, height: FloatArray, far: FloatArray) -> None:
    """Marks near the edge, a caret on the edge itself, for residuals beyond the scale."""
    draw_marks(axes, of.epoch, height, of, far)
    for technique, used in groups(of):
        for side, caret in ((1.0, CARETUP), (-1.0, CARETDOWN)):
            rows = far & (of.technique == technique) & (of.used == used)
            rows &= np.sign(height) == side
            axes.plot(of.epoch[rows], height[rows] / EDGE, marker=caret, markersize=4,
                      color=MARKS[technique].outline, linestyle="none", zorder=4)  # fmt: skip
    say_how_many_beyond(axes, int(far.sum()))
