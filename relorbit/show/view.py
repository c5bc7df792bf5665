"""What part of the sky a picture shows, how it is turned, and what stands in its corners."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon
from matplotlib.patheffects import withStroke
from matplotlib.text import Annotation
from matplotlib.ticker import MultipleLocator
from matplotlib.transforms import Affine2D, ScaledTranslation, Transform
from numpy.typing import ArrayLike, NDArray

from relorbit.orbit.elements import Elements, projection
from relorbit.orbit.kepler import FloatArray, unit_ellipse
from relorbit.show.colours import INK, SMALL, TEXT

ORIENTATIONS = ("sky", "eyepiece")
MARGIN = 0.07  # of the size of what is seen, on each side
FLATTEST, TALLEST = 0.55, 1.25  # height over width of a picture
CORNER = 0.19  # a corner that holds the compass or the scale bar, of the width
IN_MAS = 0.2  # arcsec: a narrower picture is in milliarcseconds
FAR = 0.35  # a measure not used farther beyond the rest than this (of its size) is left out
HALO = [withStroke(linewidth=2.2, foreground="white")]


@dataclass(frozen=True)
class View:
    """Limits of the picture in arcseconds, and its free corners.

    Attributes
    ----------
    x, y : (float, float)
        East at the left and at the right edge, north at the lower and at the upper edge.
    corners : tuple of (int, int)
        Right or left (1 or 0) and upper or lower (1 or 0), the emptiest first.
    orientation : str
    """

    x: tuple[float, float]
    y: tuple[float, float]
    corners: tuple[tuple[int, int], ...]
    orientation: str

    @property
    def width(self) -> float:
        return abs(self.x[1] - self.x[0])

    @property
    def shape(self) -> float:
        """Height over width."""
        return abs(self.y[1] - self.y[0]) / self.width

    def on_page(self, vector: ArrayLike) -> NDArray:
        """A vector (east, north) as (right, up)."""
        return np.asarray(vector) * np.array(
            [np.sign(self.x[1] - self.x[0]), np.sign(self.y[1] - self.y[0])]
        )

    def holds(self, x: ArrayLike, y: ArrayLike) -> NDArray[np.bool_]:
        """True for points inside the picture; False for NaN."""
        x, y = np.asarray(x), np.asarray(y)
        return (x > min(self.x)) & (x < max(self.x)) & (y > min(self.y)) & (y < max(self.y))


def sky(theta: FloatArray, rho: FloatArray) -> tuple[FloatArray, FloatArray]:
    """x to the east and y to the north (arcsec) of theta (degrees) and rho."""
    angle = np.radians(theta)
    return rho * np.sin(angle), rho * np.cos(angle)


def place(elements: Elements, anomaly: FloatArray | float) -> tuple[FloatArray, FloatArray]:
    """x to the east and y to the north (arcsec) at eccentric anomalies (radians)."""
    alpha, beta = projection(elements)
    X, Y = unit_ellipse(anomaly, elements.e)
    w = X + 1j * Y
    z = alpha * w + beta * np.conj(w)
    return z.imag, z.real


def view_of(
    needed: NDArray, extra: NDArray, orientation: str = "sky", flattest: float = FLATTEST
) -> View:
    """A view of all that must be seen, wide enough to leave two corners free.

    Parameters
    ----------
    needed, extra : arrays of shape (n, 2) and (m, 2)
        East and north (arcsec) of what must be seen, and of what may be left out where it is far.
    orientation : "sky" or "eyepiece"
    flattest : float
        The least height over width.

    Raises
    ------
    ValueError
        For another orientation.
    """
    if orientation not in ORIENTATIONS:
        raise ValueError(f"orientation is {' or '.join(ORIENTATIONS)}, not {orientation!r}")
    low, high = needed.min(axis=0), needed.max(axis=0)
    size = float(max(high - low)) or 1.0
    near = np.all((extra > low - FAR * size) & (extra < high + FAR * size), axis=1)
    seen = np.concatenate([needed, extra[near]])
    turn = np.array([-1.0, 1.0]) if orientation == "sky" else np.array([1.0, -1.0])
    page = seen * turn
    low, high = page.min(axis=0), page.max(axis=0)
    middle, size = 0.5 * (low + high), high - low
    width = max(size[0], size[1] / TALLEST, 1e-12)
    height = float(np.clip(size[1], flattest * width, TALLEST * width))
    factor = 1.0 + 2.0 * MARGIN
    for _ in range(12):
        span = factor * np.array([width, height])
        corners = _by_emptiness((page - middle) / span + 0.5, height / width)
        if corners[1][0] == 0:
            break
        factor *= 1.06
    edges = turn[:, None] * (middle[:, None] + 0.5 * span[:, None] * np.array([-1.0, 1.0]))
    x, y = (tuple(map(float, pair)) for pair in edges)
    return View(x, y, tuple(corner for _, corner in corners), orientation)


def _by_emptiness(page: NDArray, shape: float) -> list[tuple[int, tuple[int, int]]]:
    """How many points lie in each corner, the emptiest first; `page` is in fractions."""
    found = []
    for corner in ((1, 1), (0, 0), (1, 0), (0, 1)):
        gap = np.abs(page - np.array(corner))
        taken = (gap[:, 0] < CORNER) & (gap[:, 1] < CORNER / shape)
        found.append((int(np.count_nonzero(taken)), corner))
    return sorted(found, key=lambda one: one[0])


def frame_axes(axes: Axes, view: View) -> None:
    """Equal scales, the limits of the view, one step of figures on both axes."""
    axes.set_aspect("equal", adjustable="box")
    axes.set_xlim(view.x)
    axes.set_ylim(view.y)
    unit, factor = ("mas", 1000.0) if view.width < IN_MAS else ("arcsec", 1.0)
    for axis, name in ((axes.xaxis, "east"), (axes.yaxis, "north")):
        axis.set_major_locator(MultipleLocator(round_length(0.26 * view.width)))
        axis.set_major_formatter(lambda value, _: f"{value * factor:.6g}".replace("-", "\u2212"))
        axis.set_label_text(f"{name} ({unit})", fontsize=TEXT, color=INK)


def points_per_arcsec(axes: Axes, view: View) -> float:
    """How many points of the page an arcsecond takes."""
    return axes.get_position().width * axes.figure.get_size_inches()[0] * 72.0 / view.width


def label_beside(
    axes: Axes, view: View, text: str, spot: NDArray, distance: float, avoid: NDArray | None,
    **font: object,
) -> Annotation:  # fmt: skip
    """A label some points outward or inward of `spot`, where fewer of the points `avoid` are."""
    page = view.on_page(spot)
    outward = page / (np.hypot(*page) or 1.0)
    if avoid is not None and len(avoid):
        scale = points_per_arcsec(axes, view)
        gaps = [view.on_page(avoid - spot) * scale - side * distance * outward for side in (1, -1)]
        crowd = [np.count_nonzero(np.hypot(gap[:, 0], gap[:, 1]) < 0.8 * distance) for gap in gaps]
        if crowd[1] < crowd[0]:
            outward = -outward
    return axes.annotate(text, tuple(spot), xytext=tuple(distance * outward), ha="center",
                         va="center", textcoords="offset points", zorder=5, path_effects=HALO,
                         **font)  # fmt: skip


def draw_corners(axes: Axes, view: View) -> None:
    """The compass in one free corner, the scale bar in another."""
    draw_compass(axes, view, view.corners[0])
    draw_scale_bar(axes, view, view.corners[1])


def draw_compass(axes: Axes, view: View, corner: tuple[int, int]) -> None:
    """Two arrows, to the north and to the east, of a fixed size on the page."""
    arm, inset = 22.0, 17.0
    ways = {"N": view.on_page((0.0, 1.0)), "E": view.on_page((1.0, 0.0))}
    both = ways["N"] + ways["E"]
    # an arm that points out of the corner starts deeper inside the picture
    start = np.array([
        (1 - 2 * side) * inset + (-arm * sign if (sign > 0) == bool(side) else 0.0)
        for side, sign in zip(corner, both, strict=True)
    ])  # fmt: skip
    points = _points_from_corner(axes, corner)
    for letter, way in ways.items():
        tip, aside = start + arm * way, np.array([way[1], way[0]]) * 2.4
        arm_line = Line2D(*zip(start, tip - 4.0 * way, strict=True), color=INK, linewidth=0.8)
        head = Polygon([tip, tip - 6.5 * way + aside, tip - 6.5 * way - aside], color=INK,
                       linewidth=0.0)  # fmt: skip
        for artist in (arm_line, head):
            artist.set_gid(f"compass {letter}")
            artist.set_transform(points)
            artist.set_zorder(5)
            axes.add_artist(artist)
        axes.text(*(tip + 6.5 * way), letter, transform=points, ha="center", va="center",
                  fontsize=SMALL, color=INK, zorder=5)  # fmt: skip


def _points_from_corner(axes: Axes, corner: tuple[int, int]) -> Transform:
    """Coordinates in points, right and up from a corner of the axes."""
    scale = Affine2D().scale(1.0 / 72.0) + axes.figure.dpi_scale_trans
    return scale + ScaledTranslation(*corner, axes.transAxes)


def draw_scale_bar(axes: Axes, view: View, corner: tuple[int, int]) -> Line2D:
    """A bar of a round length with its length beside, in arcsec or mas."""
    length = round_length(0.16 * view.width)
    text = f"{length:g}\u2033" if length >= 0.1 else f"{length * 1000:g} mas"
    fraction = length / view.width
    left = 0.035 if corner[0] == 0 else 0.965 - fraction
    up = 0.045 if corner[1] == 0 else 0.955
    (bar,) = axes.plot([left, left + fraction], [up, up], transform=axes.transAxes, color=INK,
                       linewidth=1.0, marker="|", markersize=5, markeredgewidth=0.8,
                       zorder=5)  # fmt: skip
    bar.set_gid("scale bar")
    axes.annotate(text, (left + 0.5 * fraction, up), xycoords="axes fraction",
                  xytext=(0.0, 3.0 if corner[1] == 0 else -3.5), textcoords="offset points",
                  ha="center", va="bottom" if corner[1] == 0 else "top", fontsize=SMALL,
                  color=INK, zorder=5)  # fmt: skip
    return bar


def round_length(wanted: float) -> float:
    """The largest of 1, 2, 5 times a power of ten that does not exceed `wanted`."""
    power = 10.0 ** int(f"{wanted:.9e}".split("e")[1])
    return max(k * power for k in (1, 2, 5) if k * power <= wanted * (1.0 + 1e-9))
