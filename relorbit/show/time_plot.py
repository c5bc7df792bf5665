"""Position angle and separation against time, with the curve of the orbit."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import MaxNLocator, MultipleLocator

from relorbit.derive.ephemeris import Ephemeris
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements, positions
from relorbit.orbit.kepler import TWO_PI, FloatArray, mean_anomaly
from relorbit.show.colours import CURVE, CURVE_WIDTH, FUTURE
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
    say_how_many_beyond,
)
from relorbit.solve.residuals import Residuals

WIDTH, PANEL = 7.6, 2.55  # inches
STEP = 5.0  # degrees: the curve of theta is sampled at least as finely as this
MOST_TURNS = 2.5  # a theta that runs over more turns is folded into one
MOST_SAMPLES = 60_000
ROUND_ANGLES = (1, 2, 5, 10, 15, 30, 45, 90, 180)


def over_time(
    elements: Elements,
    measures: Measures | None = None,
    residuals: Residuals | None = None,
    *,
    ephemeris: Ephemeris | None = None,
    title: str = "",
) -> Figure:
    """theta and rho of the measures against time, over the curve of the orbit.

    Parameters
    ----------
    elements : Elements
    measures : Measures, optional
        Compared with the orbit where `residuals` are not given.
    residuals : Residuals, optional
    ephemeris : Ephemeris, optional
        Its epochs are shown too, with a band of one standard deviation where it has errors.
    title : str
    """
    of = compared(elements, measures, residuals)
    handles = mark_handles(of)
    handles.append(Line2D([], [], color=CURVE, linewidth=CURVE_WIDTH, label="orbit"))
    if ephemeris is not None and np.isfinite(ephemeris.rho_sigma).any():
        handles.append(
            Line2D([], [], color=FUTURE, linewidth=6, alpha=0.3, label="predicted error")
        )
    upper, lower = 0.42 if title else 0.15, legend_height(handles, WIDTH) + 0.44
    gap = 0.1
    height = upper + 2 * PANEL + gap + lower
    figure = Figure(figsize=(WIDTH, height))
    left, wide = 0.72 / WIDTH, (WIDTH - 0.72 - 0.15) / WIDTH
    rho_axes = figure.add_axes((left, lower / height, wide, PANEL / height))
    theta_axes = figure.add_axes(
        (left, (lower + PANEL + gap) / height, wide, PANEL / height), sharex=rho_axes
    )
    draw_theta_over_time(theta_axes, elements, of, ephemeris)
    draw_rho_over_time(rho_axes, elements, of, ephemeris)
    theta_axes.tick_params(labelbottom=False)
    theta_axes.set_xlabel("")
    figure.align_ylabels([theta_axes, rho_axes])
    put_title(figure, title)
    legend_below(figure, handles)
    return figure


def draw_theta_over_time(
    axes: Axes, elements: Elements, residuals: Residuals, ephemeris: Ephemeris | None = None
) -> None:
    """Position angles, each on the branch of the curve nearest to it.

    The curve runs on through 360 degrees (the scale is in [0, 360) all the same); where it
    would run through more than two and a half turns it is folded instead, and broken there.
    """
    first, last = time_range(elements, residuals, ephemeris)
    epochs, theta = theta_curve(elements, first, last)
    folded = np.ptp(theta) > 360.0 * MOST_TURNS

    def branch(epoch: FloatArray, angle: FloatArray) -> FloatArray:
        turns = np.rint((np.interp(epoch, epochs, theta) - angle) / 360.0)
        return angle + 360.0 * turns

    computed = branch(residuals.epoch, residuals.theta_computed)
    observed = computed + residuals.d_theta
    curve_epochs, curve = _broken(epochs, theta, folded)
    if ephemeris is not None and not folded:
        _band(axes, epochs, theta, ephemeris.epoch, ephemeris.theta_sigma)
    if folded:
        observed = np.mod(observed, 360.0)
        axes.set_ylim(0.0, 360.0)
    (line,) = axes.plot(curve_epochs, curve, color=CURVE, linewidth=CURVE_WIDTH, zorder=2)
    line.set_gid("orbit")
    draw_error_bars(axes, residuals.epoch, observed, residuals.theta_err, residuals)
    draw_marks(axes, residuals.epoch, observed, residuals)
    finish(axes, first, last, "position angle (\u00b0)")
    if not folded:
        used = observed[residuals.used]
        limits(axes, [*theta, *used[np.isfinite(used)]])
    _say_beyond(axes, observed)
    angle_scale(axes)


def draw_rho_over_time(
    axes: Axes, elements: Elements, residuals: Residuals, ephemeris: Ephemeris | None = None
) -> None:
    """Separations over the curve of the orbit."""
    first, last = time_range(elements, residuals, ephemeris)
    epochs, _ = theta_curve(elements, first, last)
    rho = positions(elements, epochs)[1]
    if ephemeris is not None:
        _band(axes, epochs, rho, ephemeris.epoch, ephemeris.rho_sigma)
    (line,) = axes.plot(epochs, rho, color=CURVE, linewidth=CURVE_WIDTH, zorder=2)
    line.set_gid("orbit")
    draw_error_bars(axes, residuals.epoch, residuals.rho, residuals.rho_err, residuals)
    draw_marks(axes, residuals.epoch, residuals.rho, residuals)
    finish(axes, first, last, "separation (arcsec)")
    used = residuals.rho[residuals.used]
    limits(axes, [*rho, *used[np.isfinite(used)]], floor=0.0)
    _say_beyond(axes, residuals.rho)


def time_range(
    elements: Elements, of: Residuals, ephemeris: Ephemeris | None
) -> tuple[float, float]:
    """First and last epoch shown: a little more than is measured or predicted."""
    epochs = [of.epoch, *([] if ephemeris is None else [ephemeris.epoch])]
    epochs = np.concatenate(epochs)
    if not epochs.size:
        return elements.T - 0.55 * elements.P, elements.T + 0.55 * elements.P
    first, last = float(epochs.min()), float(epochs.max())
    pad = 0.04 * (last - first) or 0.05 * elements.P
    return first - pad, last + pad


def theta_curve(elements: Elements, first: float, last: float) -> tuple[FloatArray, FloatArray]:
    """Epochs from `first` to `last`, and theta there running on through 360 degrees.

    The epochs are even in eccentric anomaly, where the companion is fast they are close; they
    are halved wherever theta changes by more than 5 degrees from one to the next.
    """
    turns = (last - first) / elements.P
    each = int(np.clip(MOST_SAMPLES / max(turns, 1.0), 24, 720))
    start = np.floor((first - elements.T) / elements.P)
    anomaly = np.linspace(0.0, TWO_PI * (np.ceil(turns) + 1), int(each * (np.ceil(turns) + 1)) + 1)
    epochs = elements.T + elements.P * (start + mean_anomaly(anomaly, elements.e) / TWO_PI)
    inside = epochs[(epochs > first) & (epochs < last)]
    epochs = np.concatenate([[first], inside, np.linspace(first, last, 50)[1:]])
    epochs = np.unique(epochs)
    for _ in range(12):
        theta = positions(elements, epochs)[0]
        jumps = np.abs(np.remainder(np.diff(theta) + 180.0, 360.0) - 180.0) > STEP
        if not jumps.any() or epochs.size > 2 * MOST_SAMPLES:
            break
        middles = 0.5 * (epochs[:-1] + epochs[1:])[jumps]
        epochs = np.unique(np.concatenate([epochs, middles]))
    return epochs, np.unwrap(positions(elements, epochs)[0], period=360.0)


def _broken(
    epochs: FloatArray, theta: FloatArray, folded: bool
) -> tuple[FloatArray, FloatArray]:
    """The curve with a gap (NaN) where it would be drawn straight up or down.

    That is where the fold is, and where an orbit seen exactly edge-on passes the primary.
    """
    shown = np.mod(theta, 360.0) if folded else theta
    after = np.flatnonzero(np.abs(np.diff(shown)) > 90.0) + 1
    return np.insert(epochs, after, epochs[after]), np.insert(shown, after, np.nan)


def _band(
    axes: Axes, epochs: FloatArray, curve: FloatArray, known: FloatArray, sigma: FloatArray
) -> None:
    """One standard deviation on either side of the curve, between epochs where it is known."""
    good = np.isfinite(sigma)
    if not good.any():
        return
    order = np.argsort(known[good])
    width = np.interp(epochs, known[good][order], sigma[good][order], left=np.nan, right=np.nan)
    band = axes.fill_between(epochs, curve - width, curve + width, color=FUTURE, alpha=0.3,
                             linewidth=0.0, zorder=1.5)  # fmt: skip
    band.set_gid("predicted error")


def finish(axes: Axes, first: float, last: float, name: str) -> None:
    """Scales and labels of a panel in time."""
    quiet(axes)
    axes.set_xlim(first, last)
    axes.xaxis.set_major_locator(MaxNLocator(8, steps=[1, 2, 5, 10]))
    axes.ticklabel_format(axis="x", useOffset=False, style="plain")
    label_axes(axes, "Julian year", name)


def limits(axes: Axes, seen: list[float], floor: float | None = None) -> None:
    """Limits around what must be seen, whatever the error bars of a few measures do."""
    low, high = min(seen), max(seen)
    pad = 0.06 * (high - low) or 0.05 * abs(high) or 0.05
    low = low - pad if floor is None else max(low - pad, floor)
    axes.set_ylim(low, high + pad)


def _say_beyond(axes: Axes, values: FloatArray) -> None:
    low, high = axes.get_ylim()
    say_how_many_beyond(axes, int(np.count_nonzero((values < low) | (values > high))))


def angle_scale(axes: Axes) -> None:
    """Round angles, in [0, 360) also where the curve runs on."""
    low, high = axes.get_ylim()
    wanted = (high - low) / 10.0
    if wanted >= 1.0:
        step = min((s for s in ROUND_ANGLES if s >= wanted), default=360 * np.ceil(wanted / 360))
        axes.yaxis.set_major_locator(MultipleLocator(step))
    full = 360.0 if axes.get_ylim() == (0.0, 360.0) else None

    def figure(value: float, _: int) -> str:
        return "360" if value == full else f"{round(np.mod(value, 360.0), 6) % 360.0:.6g}"

    axes.yaxis.set_major_formatter(figure)
