"""The samples two by two: what goes with what."""

from __future__ import annotations

import warnings
from collections.abc import Callable

import numpy as np
from matplotlib.axis import Axis
from matplotlib.figure import Figure
from matplotlib.ticker import ScalarFormatter

from relorbit.derive.posterior import quantities
from relorbit.errors import Undetermined
from relorbit.show.colours import GREY, INK, SMALL, TEXT
from relorbit.show.marks import put_title
from relorbit.solve.posterior import Posterior
from relorbit.solve.weights import quantiles

LABELS = {
    "P": "P (yr)", "T": "T", "e": "e", "a": "a (arcsec)", "i": "i (°)", "node": "node (°)",
    "omega": "omega (°)", "mass": "mass (suns)",
}  # fmt: skip
PANEL = 1.25  # inches
FEWEST = 50  # effective samples below which a picture would pretend
INNER = 0.995  # share of each quantity that is shown
LOGARITHMIC = 6.0  # ratio of the ends from which P, a and mass are drawn by their logarithm
TURNS = {"node": 180.0, "omega": 360.0}


def corner_of_samples(posterior: Posterior, names: tuple[str, ...] | None = None) -> Figure:
    """A corner plot by the `corner` library, 68 and 95 per cent of the samples inside the lines.

    Parameters
    ----------
    posterior : Posterior
    names : tuple of str, optional
        Of P, T, e, a, i, node, omega, mass; by default all that there are.

    Raises
    ------
    Undetermined
        For too few effective samples: a picture of them would mislead.

    Notes
    -----
    node and omega run on where the circle ends and are folded in pairs, so that no peak is cut or
    doubled; their scales are in degrees of the circle all the same.
    """
    refuse_few(posterior)
    import corner

    found = quantities(posterior)
    chosen = [name for name in (names or LABELS) if name in found]
    columns, labels, ranges = [], [], []
    for name in chosen:
        values, label = found[name], LABELS[name]
        low, high = quantiles(values, posterior.weight, [0.5 - INNER / 2, 0.5 + INNER / 2])
        if name in ("P", "a", "mass") and high > LOGARITHMIC * low:
            values, label = np.log10(values), f"log {label}"
            low, high = np.log10([low, high])
        pad = 0.02 * (high - low) or 1e-9
        columns.append(values)
        labels.append(label)
        ranges.append((low - pad, high + pad))
    size = PANEL * len(chosen) + 0.9
    figure = Figure(figsize=(size, size))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of corner, on contours that fall together
        corner.corner(
            np.stack(columns, axis=-1), weights=posterior.weight, labels=labels, range=ranges,
            fig=figure, bins=30, smooth=0.8, levels=(0.68, 0.95), plot_datapoints=False,
            fill_contours=True, color="#332288", label_kwargs={"fontsize": TEXT, "color": INK},
            hist_kwargs={"linewidth": 0.9}, contour_kwargs={"linewidths": 0.7}, max_n_ticks=4,
        )  # fmt: skip
    _tidy(figure, chosen)
    note = f"{posterior.effective_size:.0f} effective samples"
    put_title(figure, posterior.pair, note)
    return figure


def refuse_few(posterior: Posterior) -> None:
    """Raise Undetermined where there are too few effective samples for a picture."""
    if posterior.effective_size < FEWEST:
        raise Undetermined(
            f"{posterior.effective_size:.0f} effective samples are too few for a picture: at "
            f"least {FEWEST} are needed; sample more",
            code="too-few-samples",
            known={"effective_size": posterior.effective_size},
        )


def _tidy(figure: Figure, names: list[str]) -> None:
    count = len(names)
    for slot, axes in enumerate(figure.axes):
        row, column = divmod(slot, count)
        axes.tick_params(labelsize=SMALL - 1.0, color=GREY, width=0.6, length=2.5)
        for spine in axes.spines.values():
            spine.set_linewidth(0.6)
        # only the outer panels have figures on their scales
        if row == count - 1:
            _write_scale(axes.xaxis, names[column])
        if column == 0 and row > 0:
            _write_scale(axes.yaxis, names[row])


def _write_scale(axis: Axis, name: str) -> None:
    if name in TURNS:
        axis.set_major_formatter(_on_the_circle(TURNS[name]))
        return
    plain = ScalarFormatter(useOffset=False)
    plain.set_scientific(False)
    axis.set_major_formatter(plain)


def _on_the_circle(turn: float) -> Callable[[float, int], str]:
    def figure(value: float, _: int) -> str:
        return f"{round(float(np.mod(value, turn)), 6) % turn:.6g}"

    return figure
