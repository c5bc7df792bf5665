"""The periodogram of the residuals, with the heights that chance reaches."""

from __future__ import annotations

from typing import TYPE_CHECKING

from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, NullFormatter

from relorbit.show.colours import CURVE, FUTURE, GREY, INK, SMALL, THIN
from relorbit.show.marks import label_axes, put_title, quiet

if TYPE_CHECKING:
    from relorbit.derive.companion import CompanionSearch

WIDTH, HEIGHT = 7.6, 3.4  # inches


def periodogram(search: CompanionSearch, *, title: str = "") -> Figure:
    """Fall of chi2 against period, on a logarithmic scale of period.

    Lines show what chance reaches at the search's level: dashed analytic, dotted from shuffled
    residuals; a small mark stands over the best period.
    """
    upper, lower = 0.42 if title else 0.2, 0.5
    figure = Figure(figsize=(WIDTH, HEIGHT))
    axes = figure.add_axes(
        (0.72 / WIDTH, lower / HEIGHT, (WIDTH - 0.9) / WIDTH, (HEIGHT - upper - lower) / HEIGHT)
    )
    quiet(axes)
    axes.set_xscale("log")
    axes.plot(search.period, search.power, color=CURVE, linewidth=THIN, zorder=3)
    share = f"{100.0 * search.level:g} % by chance"
    for height, dashes, name in (
        (search.threshold, (0, (6, 2)), "analytic"),
        (search.threshold_permuted, (0, (1, 1.5)), "shuffled"),
    ):
        axes.axhline(height, color=FUTURE, linewidth=THIN, linestyle=dashes, zorder=2,
                     label=f"{share}, {name}")  # fmt: skip
    best = search.wobble
    axes.annotate(f"{best.period:.3g} yr", (best.period, best.gain), xytext=(0.0, 4.0),
                  textcoords="offset points", ha="center", fontsize=SMALL, color=INK)  # fmt: skip
    axes.set_xlim(search.period.min(), search.period.max())
    axes.set_ylim(0.0, 1.18 * max(search.power.max(), search.threshold, search.threshold_permuted))
    plain = FuncFormatter(lambda value, _: f"{value:g}")
    axes.xaxis.set_major_formatter(plain)
    decade = search.period.max() / search.period.min() < 30.0
    axes.xaxis.set_minor_formatter(plain if decade else NullFormatter())
    axes.tick_params(which="minor", labelsize=SMALL, labelcolor=GREY)
    label_axes(axes, "period (years)", "fall of \u03c7\u00b2")
    axes.legend(frameon=False, fontsize=SMALL, loc="upper right", labelcolor=INK)
    put_title(figure, title)
    return figure
