"""Samples over the measures: a sheaf of orbits, bands in time, the mass."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from numpy.typing import NDArray

from relorbit.derive.posterior import SampledEphemeris, interval
from relorbit.errors import InputError
from relorbit.measures.table import Measures
from relorbit.orbit.kepler import TWO_PI, FloatArray, unit_ellipse
from relorbit.show.colours import CURVE, CURVE_WIDTH, FUTURE, GREY, INK, PALE, SMALL, TEXT
from relorbit.show.corner_plot import refuse_few
from relorbit.show.marks import (
    compared,
    draw_error_bars,
    draw_marks,
    label_axes,
    legend_below,
    legend_height,
    mark_handles,
    put_title,
    quiet,
)
from relorbit.show.orbit_plot import WIDTH, draw_primary
from relorbit.show.posterior_text import mass_line
from relorbit.show.time_plot import angle_scale, finish, limits
from relorbit.show.view import View, draw_corners, frame_axes, sky, view_of
from relorbit.solve.posterior import Posterior
from relorbit.solve.residuals import Residuals
from relorbit.solve.weights import quantiles

ORBITS = 120  # curves of a sheaf
SEEN = 0.75  # the view holds this share of the orbits, the smaller ones, whole
POINTS = 361  # on a curve
SINGLE_STARS = 0.08, 100.0  # solar masses: common practice, no published source
PANEL, TIME_WIDTH = 2.55, 7.6  # inches
BESIDE = 0.015  # of the width, left free so that no mark is cut
BAND = {68: 0.38, 95: 0.18}  # opacity


def sheaf_of_orbits(
    posterior: Posterior,
    measures: Measures | None = None,
    *,
    count: int = ORBITS,
    orientation: str = "sky",
    title: str = "",
    seed: int = 0,
) -> Figure:
    """Apparent orbits drawn in proportion to their probability, over the measures.

    Parameters
    ----------
    posterior : Posterior
    measures : Measures, optional
    count : int
        Number of orbits.
    orientation : "sky" or "eyepiece"
    title : str
    seed : int
        Which orbits are drawn.

    Raises
    ------
    Undetermined
        For too few effective samples.
    """
    refuse_few(posterior)
    rows = posterior.equal_rows(count, seed)
    of = compared(posterior.best, measures, None)
    east, north = sky(of.theta, of.rho)
    places = np.stack([east, north], axis=-1)
    known = np.all(np.isfinite(places), axis=1)
    needed = [smaller_orbits(posterior, rows), np.zeros((1, 2)), places[known & of.used]]
    view = view_of(np.concatenate(needed), places[known & ~of.used], orientation)
    handles = mark_handles(of)
    handles.append(Line2D([], [], color=CURVE, linewidth=0.8, label=f"{count} orbits that fit"))
    figure, axes = _picture(view, handles, bool(title) or orientation == "eyepiece")
    quiet(axes)
    frame_axes(axes, view)
    draw_primary(axes)
    draw_sheaf(axes, posterior, rows)
    draw_marks(axes, east, north, of, view.holds(east, north))
    draw_corners(axes, view)
    put_title(figure, title, "south up" if orientation == "eyepiece" else "")
    legend_below(figure, handles)
    return figure


def draw_sheaf(
    axes: Axes, posterior: Posterior, rows: NDArray[np.intp], colour: str = CURVE
) -> LineCollection:
    """Lay the orbits of `rows` under what is on a sky plane (east and north in arcsec)."""
    curves = _curves(posterior, rows)
    alpha = float(np.clip(20.0 / len(curves), 0.08, 0.5))
    lines = LineCollection(list(curves), colors=colour, linewidths=0.5, alpha=alpha, zorder=1.8)
    lines.set_gid("sheaf")
    axes.add_collection(lines, autolim=False)
    return lines


def smaller_orbits(posterior: Posterior, rows: NDArray[np.intp]) -> FloatArray:
    """East and north of points on those sampled orbits that a view should hold, shape (n, 2)."""
    small = np.argsort(posterior.a[rows], kind="stable")[: max(1, int(SEEN * len(rows)))]
    return _curves(posterior, rows[small]).reshape(-1, 2)


def _curves(p: Posterior, rows: np.ndarray) -> FloatArray:
    """East and north of whole orbits, shape (count, POINTS, 2)."""
    X, Y = unit_ellipse(np.linspace(0.0, TWO_PI, POINTS), p.e[rows][:, None])
    w = X + 1j * Y
    z = p.alpha[rows][:, None] * w + p.beta[rows][:, None] * np.conj(w)
    return np.stack([z.imag, z.real], axis=-1)


def _picture(view: View, handles: list, titled: bool) -> tuple[Figure, Axes]:
    below = legend_height(handles, WIDTH) + 0.44
    left, right, top = 0.68, 0.15, 0.42 if titled else 0.15
    inner = WIDTH - left - right
    height = inner * view.shape + below + top
    figure = Figure(figsize=(WIDTH, height))
    place = (left / WIDTH, below / height, inner / WIDTH, inner * view.shape / height)
    return figure, figure.add_axes(place)


def ephemeris_bands(
    ephemeris: SampledEphemeris, residuals: Residuals | None = None, *, title: str = ""
) -> Figure:
    """theta and rho in time: median, and bands that hold 68 and 95 per cent of the orbits.

    `residuals` brings the measures, which are drawn too.
    """
    epochs = ephemeris.epoch
    theta = ephemeris.theta + 360.0 * _turns(ephemeris.theta[:, 2])[:, None]
    of = residuals
    handles = [] if of is None else mark_handles(of)
    handles += [Patch(color=FUTURE, alpha=deep, label=f"{share} %") for share, deep in BAND.items()]
    handles.append(Line2D([], [], color=CURVE, linewidth=CURVE_WIDTH, label="median"))
    upper, lower, gap = 0.42 if title else 0.15, legend_height(handles, TIME_WIDTH) + 0.44, 0.1
    height = upper + 2 * PANEL + gap + lower
    figure = Figure(figsize=(TIME_WIDTH, height))
    left, wide = 0.72 / TIME_WIDTH, (TIME_WIDTH - 0.87) / TIME_WIDTH
    below = figure.add_axes((left, lower / height, wide, PANEL / height))
    above = figure.add_axes(
        (left, (lower + PANEL + gap) / height, wide, PANEL / height), sharex=below
    )
    for axes, values, name in ((above, theta, "theta"), (below, ephemeris.rho, "rho")):
        _draw_bands(axes, epochs, values)
        label = "position angle (°)" if name == "theta" else "separation (arcsec)"
        pad = BESIDE * float(epochs[-1] - epochs[0])
        finish(axes, float(epochs[0]) - pad, float(epochs[-1]) + pad, label)
        seen = values.ravel()
        if of is not None:
            measured = _draw_measures(axes, of, epochs, values[:, 2], name)
            seen = np.concatenate([seen, measured[of.used & np.isfinite(measured)]])
        limits(axes, seen.tolist(), 0.0 if name == "rho" else None)
    angle_scale(above)
    above.tick_params(labelbottom=False)
    above.set_xlabel("")
    figure.align_ylabels([above, below])
    put_title(figure, title)
    legend_below(figure, handles)
    return figure


def _turns(median: FloatArray) -> FloatArray:
    """Whole turns that make a median on the circle run on."""
    step = np.diff(median, prepend=median[:1])
    return -np.cumsum(np.rint(step / 360.0))


def _draw_bands(axes: Axes, epochs: FloatArray, values: FloatArray) -> None:
    for (low, high), share in (((0, 4), 95), ((1, 3), 68)):
        band = axes.fill_between(
            epochs, values[:, low], values[:, high], color=FUTURE, alpha=BAND[share], linewidth=0.0,
            zorder=1.5,
        )  # fmt: skip
        band.set_gid(f"band {share}")
    (line,) = axes.plot(epochs, values[:, 2], color=CURVE, linewidth=CURVE_WIDTH, zorder=2)
    line.set_gid("median")


def _draw_measures(
    axes: Axes, of: Residuals, epochs: FloatArray, median: FloatArray, name: str
) -> FloatArray:
    """Draw the measures of theta or rho; returns them on the scale of the median."""
    values, error = getattr(of, name), getattr(of, f"{name}_err")
    if name == "theta":
        values = values + 360.0 * np.rint((np.interp(of.epoch, epochs, median) - values) / 360.0)
    draw_error_bars(axes, of.epoch, values, error, of)
    draw_marks(axes, of.epoch, values, of)
    return values


def mass_histogram(posterior: Posterior, *, bins: int = 50) -> Figure:
    """Histogram of the total mass, with the range of single stars marked.

    Raises
    ------
    InputError
        Where the pair has no parallax.
    Undetermined
        For too few effective samples.
    """
    refuse_few(posterior)
    mass = posterior.mass
    if mass is None:
        raise InputError("a mass needs the parallax of the pair; it has none")
    low, high = quantiles(mass, posterior.weight, [0.001, 0.999])
    wide = high > 8.0 * low
    edges = np.geomspace(low, high, bins + 1) if wide else np.linspace(low, high, bins + 1)
    figure = Figure(figsize=(6.0, 3.4))
    axes = figure.add_axes((0.1, 0.15, 0.87, 0.68))
    quiet(axes)
    axes.hist(mass, bins=edges, weights=posterior.weight, histtype="stepfilled", color="#88CCEE",
              edgecolor=INK, linewidth=0.7)  # fmt: skip
    if wide:
        axes.set_xscale("log")
        axes.xaxis.set_major_formatter("{x:g}")
        axes.xaxis.set_minor_formatter("{x:g}" if high < 30.0 * low else "")
    for edge in SINGLE_STARS:
        if edges[0] < edge < edges[-1]:
            line = axes.axvline(edge, color=GREY, linewidth=0.8, linestyle=(0, (5, 2)))
            line.set_gid("end of single stars")
    outside = axes.get_xlim()
    axes.axvspan(max(outside[0], SINGLE_STARS[0]), min(outside[1], SINGLE_STARS[1]), color=PALE,
                 alpha=0.35, linewidth=0.0, zorder=0).set_gid("single stars")  # fmt: skip
    axes.set_xlim(outside)
    label_axes(axes, "total mass (solar masses); shaded: the range of single stars, 0.08 to 100",
               "probability a bin")  # fmt: skip
    axes.tick_params(which="both", labelsize=SMALL, labelcolor=INK, direction="in")
    put_title(figure, posterior.pair)
    axes.set_title(mass_line(interval(mass, posterior.weight)), fontsize=SMALL, color=GREY)
    axes.xaxis.label.set_fontsize(TEXT)
    return figure
