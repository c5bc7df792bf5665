"""The measures as figures of the window show them: with an orbit and without one."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from relorbit.desk.model import DeskModel
from relorbit.desk.theme import Palette
from relorbit.orbit.kepler import FloatArray
from relorbit.show.colours import mark_size
from relorbit.show.marks import groups, mark_style


@dataclass(frozen=True)
class Shown:
    """Where the measures stand on the sky, what took them, and whether they are in use.

    Arrays of shape (n,). A lone angle has the separation that the orbit gives, a lone separation
    its angle; NaN while there is no orbit.
    """

    epoch: FloatArray
    theta: FloatArray
    rho: FloatArray
    technique: NDArray[np.str_]
    used: NDArray[np.bool_]

    def __len__(self) -> int:
        return len(self.epoch)


def shown(model: DeskModel) -> Shown:
    """The measures of the pair on the desk."""
    m, following = model.pair.measures, model.consequences
    theta, rho = m.theta_effective, m.rho
    if following is not None:
        of = following.residuals
        theta = np.where(np.isnan(theta), of.theta_computed, theta)
        rho = np.where(np.isnan(rho), of.rho_computed, rho)
    return Shown(m.epoch, theta, rho, m.technique, m.use)


def group_line(
    axes: Axes, technique: str, used: bool, count: int, palette: Palette, **more: object
) -> Line2D:
    """An empty line artist that marks the measures of one technique, used or not."""
    style = mark_style(technique, used, mark_size(count))
    style["markeredgecolor"] = palette.edges[technique]
    (line,) = axes.plot([], [], zorder=4 if used else 3.5, **style, **more)
    return line


def key_mark(technique: str, palette: Palette) -> Line2D:
    """A legend entry."""
    style = {**mark_style(technique, True, 5.5), "markeredgecolor": palette.edges[technique]}
    return Line2D([], [], label=technique, **style)


def draw_groups(axes: Axes, marks: Shown, x: FloatArray, y: FloatArray, palette: Palette) -> None:
    """A marker for every measure."""
    for technique, used in groups(marks):
        rows = (marks.technique == technique) & (marks.used == used)
        group_line(axes, technique, used, len(marks), palette).set_data(x[rows], y[rows])
