"""What may be laid over an apparent orbit: other orbits, and places to come."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from relorbit.derive.ephemeris import Ephemeris
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import TWO_PI
from relorbit.show.colours import FUTURE, OTHER_COLOURS, OTHER_DASHES, SMALL, THIN
from relorbit.show.view import View, label_beside, place, points_per_arcsec, sky

CURVE_POINTS = 721
LABEL_GAP = 26.0  # points from one year to the next


def draw_other_orbit(axes: Axes, elements: Elements, label: str, slot: int = 0) -> Line2D:
    """Another orbit as a thin line; `slot` chooses colour and dashes."""
    x, y = place(elements, np.linspace(0.0, TWO_PI, CURVE_POINTS))
    (line,) = axes.plot(x, y, zorder=1.8, **other_style(slot), label=label)
    line.set_gid("other orbit")
    return line


def draw_future(
    axes: Axes, future: Ephemeris, view: View, avoid: NDArray | None = None
) -> Line2D:
    """Places to come as dots, with the year where there is room for it.

    Labels keep away from the points `avoid`, shape (n, 2), east and north in arcsec.
    """
    x, y = sky(future.theta, future.rho)
    (dots,) = axes.plot(x, y, marker="o", markersize=3.2, color=FUTURE, markeredgecolor="white",
                        markeredgewidth=0.3, linestyle="none", zorder=4.2)  # fmt: skip
    dots.set_gid("future")
    last = None
    for epoch, spot in zip(future.epoch, np.stack([x, y], axis=-1), strict=True):
        if last is None or np.hypot(*(spot - last)) * points_per_arcsec(axes, view) > LABEL_GAP:
            last, text = spot, f"{epoch:.1f}".removesuffix(".0")
            label_beside(axes, view, text, spot, 15.0, avoid, fontsize=SMALL - 1, color=FUTURE)
    return dots


def other_style(slot: int) -> dict[str, Any]:
    """Colour and dashes of the other orbit number `slot`."""
    return {"color": OTHER_COLOURS[slot % len(OTHER_COLOURS)], "linewidth": THIN,
            "linestyle": OTHER_DASHES[slot % len(OTHER_DASHES)]}  # fmt: skip
