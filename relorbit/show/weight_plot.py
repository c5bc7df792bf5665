"""The weight of every measure against time, a mark for each, by technique."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import MaxNLocator

from relorbit.errors import InputError
from relorbit.show.colours import GREY, INK, MARKS, SMALL, THIN
from relorbit.show.marks import (
    label_axes,
    legend_below,
    legend_height,
    mark_size,
    mark_style,
    put_title,
    quiet,
)
from relorbit.solve.solution import Solution
from relorbit.solve.weighing import NoiseGroup

WIDTH, PANEL = 7.6, 3.1  # inches
DOWN = 0.3  # relative weight below which a mark is hollow and ringed


def weights_over_time(solution: Solution, *, title: str = "") -> Figure:
    """1/error^2 across and along together, on a logarithmic scale, as the fit counted it.

    A line at the height of each group's own weight shows when it was at work; a down-weighted
    measure is hollow, a hairline from its group's weight down to its own.

    Raises
    ------
    InputError
        For a solution whose errors were taken as given.
    """
    if not solution.noise:
        raise InputError("the errors were taken as given: take them from the residuals to see "
                         "weights")  # fmt: skip
    techniques = [str(name) for name in solution.residuals.technique]
    used = [techniques[row] for group in solution.noise for row in group.rows]
    handles = [
        Line2D([], [], label=f"{name} ({used.count(name)})", **mark_style(name, True, 6.0))
        for name in MARKS
        if name in used
    ]
    upper, lower = 0.42 if title else 0.15, legend_height(handles, WIDTH) + 0.44
    height = upper + PANEL + lower
    figure = Figure(figsize=(WIDTH, height))
    axes = figure.add_axes(
        (0.8 / WIDTH, lower / height, (WIDTH - 0.95) / WIDTH, PANEL / height)
    )
    quiet(axes)
    axes.set_yscale("log")
    for slot, group in enumerate(solution.noise):
        _draw_group(axes, solution, group, at_the_end=bool(slot % 2))
    axes.xaxis.set_major_locator(MaxNLocator(8, steps=[1, 2, 5, 10]))
    axes.ticklabel_format(axis="x", useOffset=False, style="plain")
    label_axes(axes, "Julian year", "weight (1/arcsec\u00b2)")
    put_title(figure, title)
    legend_below(figure, handles)
    return figure


def _draw_group(axes: Axes, solution: Solution, group: NoiseGroup, at_the_end: bool) -> None:
    r, rows = solution.residuals, np.array(group.rows)
    across = np.radians(r.theta_err[rows]) * r.rho_computed[rows]
    full = np.nan_to_num(1.0 / across**2) + np.nan_to_num(1.0 / r.rho_err[rows] ** 2)
    theta, rho = (
        np.array([np.nan if value is None else value for value in part], dtype=float)
        for part in (group.theta_weight, group.rho_weight)
    )
    counted = np.nan_to_num(theta / across**2) + np.nan_to_num(rho / r.rho_err[rows] ** 2)
    epoch = r.epoch[rows]
    colour = MARKS[str(r.technique[rows[0]])].outline
    middle = float(np.median(full))
    axes.plot([epoch.min(), epoch.max()], [middle, middle], color=colour, linewidth=THIN, zorder=2)
    axes.annotate(
        group.name, (float(epoch.max() if at_the_end else epoch.min()), middle),
        xytext=(0.0, 2.5), textcoords="offset points", ha="right" if at_the_end else "left",
        fontsize=SMALL - 1.5, color=INK, zorder=5,
    )  # fmt: skip
    down = np.fmin(theta, rho) < DOWN
    axes.vlines(epoch[down], counted[down], full[down], colors=GREY, linewidth=0.5, zorder=2.5)
    for k, technique in enumerate(r.technique[rows].tolist()):
        style = mark_style(technique, not down[k], mark_size(len(r)))
        axes.plot([epoch[k]], [counted[k]], zorder=4, **style)
