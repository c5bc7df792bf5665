"""The apparent orbit: the picture of a pair as it moves on the sky.

Data coordinates are arcseconds, x to the east and y to the north, in both orientations; what
turns is the direction of the axes.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon
from numpy.typing import NDArray

from relorbit.derive.ephemeris import Ephemeris
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_from_true
from relorbit.show.colours import (
    CURVE,
    CURVE_WIDTH,
    FUTURE,
    GREY,
    HAIRLINE,
    INK,
    MARKS,
    SMALL,
    THIN,
    hairline,
)
from relorbit.show.marks import (
    compared,
    draw_marks,
    groups,
    legend_below,
    legend_height,
    mark_handles,
    put_title,
    quiet,
)
from relorbit.show.overlays import CURVE_POINTS, draw_future, draw_other_orbit, other_style
from relorbit.show.view import (
    FLATTEST,
    View,
    draw_corners,
    frame_axes,
    label_beside,
    place,
    sky,
    view_of,
)
from relorbit.solve.residuals import Residuals

WIDTH = 6.6  # inches
DASH = 0.035  # half the length of a dash for a lone angle or separation, of the view's width


def apparent_orbit(
    elements: Elements,
    measures: Measures | None = None,
    residuals: Residuals | None = None,
    *,
    orientation: str = "sky",
    title: str = "",
    line_of_nodes: bool = False,
    others: Mapping[str, Elements] | None = None,
    future: Ephemeris | None = None,
) -> Figure:
    """The apparent orbit with its measures.

    Parameters
    ----------
    elements : Elements
    measures : Measures, optional
        Compared with the orbit where `residuals` are not given.
    residuals : Residuals, optional
    orientation : "sky" or "eyepiece"
        North up and east left, or turned by 180 degrees as an inverting telescope shows it:
        south up and west left.
    title : str
    line_of_nodes : bool
        Also draw the line of nodes.
    others : mapping of label to Elements, optional
        Other orbits, as thin lines.
    future : Ephemeris, optional
        Places to come, dots with the year beside.

    Raises
    ------
    ValueError
        For another orientation.
    """
    of = compared(elements, measures, residuals)
    others = dict(others or {})
    view = orbit_view(elements, of, others, future, orientation=orientation)
    handles = orbit_handles(elements, of, others, future)
    below = legend_height(handles, WIDTH) + 0.44
    left, right, top = 0.68, 0.15, 0.42 if title or orientation == "eyepiece" else 0.15
    inner = WIDTH - left - right
    height = inner * view.shape + below + top
    figure = Figure(figsize=(WIDTH, height))
    axes = figure.add_axes(
        (left / WIDTH, below / height, inner / WIDTH, inner * view.shape / height)
    )
    draw_apparent_orbit(axes, elements, of, view=view, line_of_nodes=line_of_nodes)
    for slot, (label, other) in enumerate(others.items()):
        draw_other_orbit(axes, other, label, slot)
    if future is not None:
        draw_future(axes, future, view, avoid=_measured(of))
    note = "south up, as in an inverting telescope" if orientation == "eyepiece" else ""
    put_title(figure, title, note)
    legend_below(figure, handles)
    return figure


def draw_apparent_orbit(
    axes: Axes,
    elements: Elements,
    residuals: Residuals,
    *,
    orientation: str = "sky",
    view: View | None = None,
    line_of_nodes: bool = False,
) -> View:
    """Draw the orbit and its measures into axes of any size; returns the view chosen.

    `orientation` counts where no view is given. The axes are set to equal scales.
    """
    if view is None:
        view = orbit_view(elements, residuals, orientation=orientation)
    quiet(axes)
    frame_axes(axes, view)
    draw_primary(axes)
    draw_curve(axes, elements)
    inside = view.holds(*sky(*_as_if_whole(residuals)))
    draw_hairlines(axes, residuals, inside)
    draw_marks(axes, *sky(residuals.theta, residuals.rho), residuals, inside)
    draw_lone_values(axes, residuals, view)
    draw_periastron(axes, elements, view)
    draw_node(axes, elements, view, line=line_of_nodes, avoid=_measured(residuals))
    draw_direction(axes, elements, residuals, view)
    draw_corners(axes, view)
    _say_what_is_outside(axes, residuals, inside)
    return view


def orbit_view(
    elements: Elements,
    of: Residuals,
    others: Mapping[str, Elements] | None = None,
    future: Ephemeris | None = None,
    *,
    orientation: str = "sky",
    flattest: float = FLATTEST,
) -> View:
    """A view of all orbits, places to come and measures.

    Measures not used that lie far away are left out. `flattest` is the least height over width.
    """
    ring = np.linspace(0.0, TWO_PI, 181)
    needed = [place(one, ring) for one in (elements, *(others or {}).values())]
    needed.append((np.zeros(1), np.zeros(1)))
    if future is not None:
        needed.append(sky(future.theta, future.rho))
    measured = _measured(of)
    seen = [np.stack(part, axis=-1) for part in needed]
    return view_of(
        np.concatenate([*seen, measured[of.used]]), measured[~of.used], orientation, flattest
    )


def draw_primary(axes: Axes) -> Line2D:
    """A cross of two thin lines."""
    (cross,) = axes.plot([0.0], [0.0], marker="+", markersize=13, markeredgewidth=0.7,
                         color=INK, linestyle="none", zorder=3)  # fmt: skip
    cross.set_gid("primary")
    return cross


def draw_curve(axes: Axes, elements: Elements) -> Line2D:
    """The whole ellipse as one line."""
    x, y = place(elements, np.linspace(0.0, TWO_PI, CURVE_POINTS))
    (line,) = axes.plot(x, y, color=CURVE, linewidth=CURVE_WIDTH, zorder=2)
    line.set_gid("orbit")
    return line


def draw_hairlines(
    axes: Axes, of: Residuals, which: NDArray[np.bool_] | None = None
) -> list[LineCollection]:
    """From each measure (of those told by `which`) to the place the orbit gives for its epoch.

    A lone angle stands at the orbit's separation, a lone separation at the orbit's angle.
    """
    shown = np.ones(len(of), dtype=bool) if which is None else which
    start = np.stack(sky(*_as_if_whole(of)), axis=-1)
    end = np.stack(sky(of.theta_computed, of.rho_computed), axis=-1)
    segments, drawn = np.stack([start, end], axis=1), []
    for technique, used in groups(of):
        rows = shown & (of.technique == technique) & (of.used == used)
        lines = LineCollection(
            segments[rows], colors=MARKS[technique].outline, linewidths=hairline(len(of)),
            alpha=0.9 if used else 0.4, zorder=3,
        )  # fmt: skip
        lines.set_gid(f"hairlines {technique} {'used' if used else 'unused'}")
        axes.add_collection(lines, autolim=False)
        drawn.append(lines)
    return drawn


def draw_lone_values(axes: Axes, of: Residuals, view: View) -> list[LineCollection]:
    """A dash along the direction of the pair for a lone angle, across it for a lone separation.

    The dash lies along what was not measured, in the middle at the value the orbit gives.
    """
    theta, rho = _as_if_whole(of)
    x, y = sky(theta, rho)
    outward = np.stack(sky(theta, np.ones_like(theta)), axis=-1)
    across = np.stack([outward[:, 1], -outward[:, 0]], axis=-1)
    lone_angle, lone_rho = np.isnan(of.rho), np.isnan(of.theta)
    along = np.where(lone_angle[:, None], outward, across) * DASH * view.width
    middle, drawn = np.stack([x, y], axis=-1), []
    for technique, used in groups(of):
        rows = (lone_angle | lone_rho) & (of.technique == technique) & (of.used == used)
        if not rows.any():
            continue
        ends = np.stack([middle[rows] - along[rows], middle[rows] + along[rows]], axis=1)
        lines = LineCollection(ends, colors=MARKS[technique].outline, zorder=3.6,
                               linewidths=1.4 if used else THIN,
                               linestyles="solid" if used else "dotted")  # fmt: skip
        lines.set_gid(f"lone values {technique} {'used' if used else 'unused'}")
        axes.add_collection(lines, autolim=False)
        drawn.append(lines)
    return drawn


def draw_periastron(axes: Axes, elements: Elements, view: View) -> Polygon | None:
    """A filled tick across the curve; None for a circular orbit, which has no periastron."""
    if elements.e == 0.0:
        return None
    middle = np.array(place(elements, 0.0))
    along = _direction(elements, 0.0)
    across = np.array([along[1], -along[0]]) * 0.022 * view.width
    along = along * 0.005 * view.width
    corners = [middle - along - across, middle + along - across,
               middle + along + across, middle - along + across]  # fmt: skip
    tick = Polygon(corners, facecolor=INK, edgecolor="none", zorder=3.2)
    tick.set_gid("periastron")
    axes.add_patch(tick)
    return tick


def draw_node(
    axes: Axes,
    elements: Elements,
    view: View,
    *,
    line: bool = False,
    avoid: NDArray | None = None,
) -> Line2D | None:
    """A small open ring on the curve with its letter; None for a face-on orbit without nodes.

    `line` also draws the line of nodes; the letter keeps away from the points `avoid`, (n, 2).
    """
    if elements.i in (0.0, 180.0):
        return None
    omega = np.radians(elements.omega)
    x, y = place(elements, eccentric_from_true(np.array([-omega, np.pi - omega]), elements.e))
    if line:
        (nodes,) = axes.plot(x, y, color=GREY, linewidth=HAIRLINE, dashes=(5, 3), zorder=1.5)
        nodes.set_gid("line of nodes")
    (ring,) = axes.plot(x[:1], y[:1], marker="o", markersize=6.5, markerfacecolor="none",
                        markeredgecolor=INK, markeredgewidth=1.0, linestyle="none",
                        zorder=4.4)  # fmt: skip
    ring.set_gid("node")
    spot = np.array([x[0], y[0]])
    label_beside(axes, view, "\u03a9", spot, 10.0, avoid, fontsize=SMALL + 1, color=INK)
    return ring


def draw_direction(axes: Axes, elements: Elements, of: Residuals, view: View) -> Polygon:
    """A small arrowhead on the curve that points where the companion goes."""
    anomaly = _free_anomaly(elements, of)
    tip = np.array(place(elements, anomaly))
    along = _direction(elements, anomaly) * 0.03 * view.width
    across = np.array([along[1], -along[0]]) * 0.36
    # the tip first: the order of the corners tells the direction
    head = [tip + 0.5 * along, tip - 0.5 * along + across, tip - 0.28 * along,
            tip - 0.5 * along - across]  # fmt: skip
    arrow = Polygon(head, facecolor=CURVE, edgecolor="white", linewidth=0.3, zorder=4.3)
    arrow.set_gid("direction")
    axes.add_patch(arrow)
    return arrow


def orbit_handles(
    elements: Elements,
    of: Residuals,
    others: Mapping[str, Elements] | None = None,
    future: Ephemeris | None = None,
) -> list[Artist]:
    """Legend entries of everything on the picture."""
    handles: list[Artist] = list(mark_handles(of))
    for mask, label, dash in (
        (np.isnan(of.rho), "angle alone", "_"),
        (np.isnan(of.theta), "separation alone", "|"),
    ):
        if mask.any():
            handles.append(Line2D([], [], linestyle="none", marker=dash, markersize=11,
                                  markeredgewidth=1.4, color=GREY,
                                  label=f"{label} ({mask.sum()})"))  # fmt: skip
    handles.append(Line2D([], [], color=CURVE, linewidth=CURVE_WIDTH, label="orbit"))
    if elements.e > 0.0:
        handles.append(Line2D([], [], marker="|", markersize=8, markeredgewidth=2.0, color=INK,
                              linestyle="none", label="periastron"))  # fmt: skip
    if elements.i not in (0.0, 180.0):
        handles.append(Line2D([], [], marker="o", markersize=6, markerfacecolor="none",
                              markeredgecolor=INK, linestyle="none", label="node"))  # fmt: skip
    for slot, label in enumerate(others or {}):
        handles.append(Line2D([], [], label=label, **other_style(slot)))
    if future is not None:
        handles.append(Line2D([], [], marker="o", markersize=3.2, color=FUTURE,
                              linestyle="none", label="predicted"))  # fmt: skip
    return handles


def _as_if_whole(of: Residuals) -> tuple[FloatArray, FloatArray]:
    """theta and rho, what was not measured taken from the orbit."""
    theta = np.where(np.isnan(of.theta), of.theta_computed, of.theta)
    return theta, np.where(np.isnan(of.rho), of.rho_computed, of.rho)


def _measured(of: Residuals) -> NDArray:
    """Where the measures stand on the picture, shape (n, 2)."""
    return np.stack(sky(*_as_if_whole(of)), axis=-1)


def _direction(elements: Elements, anomaly: float) -> NDArray:
    """Unit vector of the motion (east, north) at an eccentric anomaly."""
    step = 1e-4
    before, behind = (np.array(place(elements, anomaly + s)) for s in (-step, step))
    size = np.hypot(*(behind - before))
    return (behind - before) / size if size > 0.0 else np.array([0.0, 1.0])


def _free_anomaly(elements: Elements, of: Residuals) -> float:
    """The place on the curve farthest from measures, periastron, nodes and the primary."""
    anomalies = np.linspace(0.0, TWO_PI, 48, endpoint=False)
    omega = np.radians(elements.omega)
    marks = np.append(eccentric_from_true(np.array([-omega, np.pi - omega]), elements.e), 0.0)
    x, y = place(elements, anomalies)
    taken = [np.stack(place(elements, marks), axis=-1), np.zeros((1, 2))]
    taken.append(_measured(of)[:: max(1, len(of) // 500)])
    gaps = np.stack([x, y], axis=-1)[:, None, :] - np.concatenate(taken)[None, :, :]
    return float(anomalies[np.argmax(np.hypot(gaps[..., 0], gaps[..., 1]).min(axis=1))])


def _say_what_is_outside(axes: Axes, of: Residuals, inside: NDArray[np.bool_]) -> None:
    count = int(np.count_nonzero(~inside))
    if count:
        words = "1 measure not used lies" if count == 1 else f"{count} measures not used lie"
        axes.annotate(f"{words} outside the picture", (1.0, 0.0), xycoords="axes fraction",
                      xytext=(0.0, -24.0), textcoords="offset points", ha="right", va="center",
                      fontsize=SMALL - 1, color=GREY)  # fmt: skip
