"""The sky plane: the apparent orbit, the measures, their hairlines, and the time slider."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable, Mapping
from tkinter import ttk

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.lines import Line2D

from relorbit.derive.ephemeris import ephemeris
from relorbit.derive.epochs import epoch_from_text
from relorbit.derive.glance import range_of_dates
from relorbit.desk.marks import Shown, draw_groups, shown
from relorbit.desk.model import ORBIT, PAIR, VIEW, DeskModel
from relorbit.desk.plot_view import PlotView, broken
from relorbit.desk.theme import Palette, recolour
from relorbit.desk.words import position_in_words, words_of
from relorbit.errors import InputError
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import TWO_PI
from relorbit.show.colours import CURVE_WIDTH, SMALL, hairline
from relorbit.show.marks import quiet
from relorbit.show.numbers import fixed
from relorbit.show.orbit_plot import (
    draw_direction,
    draw_lone_values,
    draw_node,
    draw_periastron,
    draw_primary,
    orbit_view,
)
from relorbit.show.overlays import CURVE_POINTS, draw_other_orbit
from relorbit.show.sampled_plots import draw_sheaf, smaller_orbits
from relorbit.show.view import View, draw_corners, frame_axes, place, sky, view_of
from relorbit.solve.posterior import Posterior

PAUSE = 150  # milliseconds
RING = np.linspace(0.0, TWO_PI, CURVE_POINTS)
SHEAF = 60  # sampled orbits drawn
INSETS = (46.0, 8.0, 32.0, 8.0)  # left, right, bottom, top: pixels at 96 dots an inch


class SkyView(PlotView):
    """The pair as it moves on the sky."""

    def __init__(
        self,
        parent: tk.Misc,
        model: DeskModel,
        palette: Palette,
        on_menu: Callable[..., None],
        others: Callable[[], Mapping[str, Elements]],
    ) -> None:
        self._others = others
        self._orientation = model.orientation
        self._decor: list[Artist] = []
        self._decor_of: Elements | None = None
        self._corners: list[Artist] = []
        self._sheaf: Posterior | None = None
        self._scale = 1.0  # arcsec a pixel
        super().__init__(parent, model, palette, on_menu)
        self.axes: Axes = self.figure.add_axes((0.1, 0.1, 0.8, 0.8))
        self.dates = DateBar(self, model)
        self.dates.pack(side="bottom", fill="x", padx=self.sizes(4))
        self.widget.pack(fill="both", expand=True)

    # -- artists -------------------------------------------------------------------------------

    def build(self) -> None:
        axes, model = self.axes, self.model
        kept = None if self.framed or self._orientation != model.orientation else (
            np.mean(axes.get_xlim()), np.mean(axes.get_ylim()), self._scale)  # fmt: skip
        self._orientation = model.orientation
        axes.clear()
        axes.set_facecolor(self.palette.paper)
        self._corners, self._decor, self._decor_of = [], [], None
        marks = shown(model)
        quiet(axes)
        self._put_axes()
        others = self._others()
        self._sheaf = model.samples if model.sheaf else None
        self._frame(marks, others, kept)
        draw_primary(axes)
        if self._sheaf is not None:
            draw_sheaf(axes, self._sheaf, self._sheaf.equal_rows(SHEAF), self.palette.curve)
        for slot, (label, elements) in enumerate(others.items()):
            draw_other_orbit(axes, elements, label, slot)
        draw_groups(axes, marks, *sky(marks.theta, marks.rho), self.palette)
        if others:
            right, upper = self._view.corners[2]
            where = f"{'upper' if upper else 'lower'} {'right' if right else 'left'}"
            axes.legend(loc=where, frameon=False, fontsize=SMALL,
                        labelcolor=self.palette.ink)  # fmt: skip
        self._put_corners()
        recolour(axes, self.palette)
        self._build_moving()

    def _put_axes(self) -> None:
        left, right, bottom, top = (self.sizes(length) for length in INSETS)
        width, height = self.figure.bbox.size
        if width > left + right + 20 and height > bottom + top + 20:
            self.axes.set_position(
                (left / width, bottom / height, 1 - (left + right) / width,
                 1 - (bottom + top) / height)
            )  # fmt: skip

    def _frame(self, marks: Shown, others: Mapping[str, Elements], kept: tuple | None) -> None:
        following, elements = self.model.consequences, self.model.elements
        if following is not None:
            view = orbit_view(
                elements, following.residuals, others, orientation=self.model.orientation
            )
        else:
            x, y = sky(marks.theta, marks.rho)
            places = np.stack([x, y], axis=-1)[np.isfinite(x) & np.isfinite(y)]
            needed = np.concatenate([places, [(0.0, 0.0)]])
            if self._sheaf is not None:
                rows = self._sheaf.equal_rows(SHEAF)
                needed = np.concatenate([needed, smaller_orbits(self._sheaf, rows)])
            if len(needed) == 1:
                needed = np.array([(-1.0, -1.0), (1.0, 1.0)])
            view = view_of(needed, np.empty((0, 2)), self.model.orientation)
        self._view = view
        wide, high = self.axes.bbox.size
        spans = view.width / wide, view.width * view.shape / high
        self._show(*(kept or (np.mean(view.x), np.mean(view.y), max(spans))))

    def _show(self, x: float, y: float, scale: float) -> None:
        """Show the sky around a place (east, north), `scale` arcsec a pixel both ways."""
        half = 0.5 * scale * self.axes.bbox.size
        right, up = self._view.on_page((1.0, 1.0))
        self._scale = scale
        self.axes.set_xlim(x - right * half[0], x + right * half[0])
        self.axes.set_ylim(y - up * half[1], y + up * half[1])

    def _put_corners(self) -> None:
        """Compass and scale bar for the limits there are now."""
        for artist in self._corners:
            artist.remove()
        axes = self.axes
        view = View(axes.get_xlim(), axes.get_ylim(), self._view.corners, self.model.orientation)
        before = set(axes.get_children())
        frame_axes(axes, view)
        axes.set_aspect("auto")  # the limits make the scales equal
        draw_corners(axes, view)
        self._corners = [one for one in axes.get_children() if one not in before]
        self._view = view
        for artist in self._corners:
            recolour(artist, self.palette)

    def _build_moving(self) -> None:
        axes, p = self.axes, self.palette
        count = len(self.model.pair.measures)

        def line(**style: object) -> Line2D:
            return axes.plot([], [], animated=True, **style)[0]

        self._hairs = line(color=p.quiet, linewidth=hairline(count) * 1.4, zorder=3)
        self._curve = line(color=p.curve, linewidth=CURVE_WIDTH * 1.2, zorder=2)
        self._radius = line(color=p.today, linewidth=0.8, zorder=2.5)
        self._companion = line(marker="o", markersize=7, markerfacecolor=p.today, zorder=5,
                               markeredgecolor=p.paper, linestyle="none")  # fmt: skip
        self._periastron = line(marker="D", markersize=4, color=p.ink, linestyle="none", zorder=3)
        self._ring = self.ring(axes)
        self._lines = [self._hairs, self._curve, self._periastron]
        self.light = [self._radius, self._companion, self._ring]

    def feed(self) -> None:
        following, elements = self.model.consequences, self.model.elements
        marks = shown(self.model)
        measured = np.stack(sky(marks.theta, marks.rho))
        self.spots = {self.axes: measured.T}
        self._follow_decor()
        if following is not None:
            of = following.residuals
            self._curve.set_data(*place(elements, RING))
            self._hairs.set_data(*broken(measured, np.stack(sky(of.theta_computed,
                                                                of.rho_computed))))  # fmt: skip
        else:
            self._curve.set_data([], [])
            self._hairs.set_data([], [])
        self.moving = [*self._lines, *self._decor]
        self.feed_light()

    def feed_light(self) -> None:
        self._feed_companion()
        self.feed_ring(self._ring)

    def _follow_decor(self) -> None:
        """What stands on the curve is taken away while one nudges, and put back in a pause."""
        elements = self.model.elements
        if elements is not None and elements is self._decor_of:
            return
        for artist in self._decor:
            artist.remove()
        self._decor, self._decor_of = [], None
        if self._pause is not None:
            self.after_cancel(self._pause)
            self._pause = None
        if elements is not None and self.model.nudging:
            self._periastron.set_data(*place(elements, np.zeros(1)))
            self._pause = self.after(PAUSE, self._paused)
        elif elements is not None:
            self._put_decor(elements)

    def _paused(self) -> None:
        self._pause = None
        if self.model.elements is not None and not self._rebuild:
            self._put_decor(self.model.elements)
            self.moving = [*self._lines, *self._decor]
            self.repaint()

    def _put_decor(self, elements: Elements) -> None:
        """Periastron, node, arrowhead, lone angles and separations."""
        axes, of, view = self.axes, self.model.consequences.residuals, self._view
        self._decor_of = elements
        self._periastron.set_data([], [])
        before = set(axes.get_children())
        draw_periastron(axes, elements, view)
        draw_node(axes, elements, view)
        draw_direction(axes, elements, of, view)
        draw_lone_values(axes, of, view)
        self._decor = [one for one in axes.get_children() if one not in before]
        for artist in self._decor:
            recolour(artist, self.palette)
            artist.set_animated(True)

    def _feed_companion(self) -> None:
        elements = self.model.elements
        if elements is None:
            self._companion.set_data([], [])
            self._radius.set_data([], [])
            return
        at = ephemeris(elements, self.model.epoch)
        x, y = sky(at.theta, at.rho)
        self._companion.set_data(x, y)
        self._radius.set_data([0.0, *x], [0.0, *y])

    # -- following -----------------------------------------------------------------------------

    def on_change(self, kinds: frozenset[str]) -> None:
        self.dates.on_change(kinds)
        super().on_change(kinds)

    def outdated(self, kinds: frozenset[str]) -> bool:
        model = self.model
        turned = VIEW in kinds and self._orientation != model.orientation
        sampled = self._sheaf is not (model.samples if model.sheaf else None)
        return turned or sampled or (ORBIT in kinds and self.framed and not self.model.nudging)

    def set_limits(
        self, axes: Axes, x: tuple[float, float], y: tuple[float, float], keys: int
    ) -> None:
        self._show(np.mean(x), np.mean(y), abs(x[1] - x[0]) / axes.bbox.width)
        self._put_corners()
        self._decor_of = None  # its size goes with the view
        self.feed()
        self.redraw(rebuild=False)


class DateBar(ttk.Frame):
    """A slider and a field for a date, and where the companion is then."""

    def __init__(self, parent: tk.Misc, model: DeskModel) -> None:
        super().__init__(parent)
        self.model = model
        self._moved_by_model = False
        ttk.Label(self, text="at", style="Quiet.TLabel").grid(row=0, column=0)
        self.field = ttk.Entry(self, width=10)
        self.field.grid(row=0, column=1, padx=4, pady=2)
        self.slider = ttk.Scale(self, orient="horizontal", command=self._slid)
        self.slider.grid(row=0, column=2, sticky="ew", padx=4)
        self.place = ttk.Label(self, anchor="e", width=17)
        self.place.grid(row=0, column=3)
        self.columnconfigure(2, weight=1)
        self.field.bind("<Return>", self._typed)
        self.field.bind("<FocusOut>", self._typed)

    def on_change(self, kinds: frozenset[str]) -> None:
        if kinds & {PAIR, ORBIT, VIEW}:
            model = self.model
            first, last = range_of_dates(model.pair.measures, model.elements, model.epoch)
            self._moved_by_model = True
            self.slider.configure(from_=first, to=last)
            self.slider.set(model.epoch)
            self._moved_by_model = False
            self._write(fixed(model.epoch, 2))
            text = ""
            if model.elements is not None:
                at = ephemeris(model.elements, model.epoch)
                text = position_in_words(at.theta[0], at.rho[0])
            self.place.configure(text=text)

    def _write(self, text: str) -> None:
        self.field.configure(style="TEntry")
        self.field.delete(0, "end")
        self.field.insert(0, text)

    def _slid(self, value: str) -> None:
        if not self._moved_by_model:
            self.model.look(epoch=round(float(value), 3))

    def _typed(self, _: tk.Event) -> None:
        text = self.field.get().strip()
        if text == fixed(self.model.epoch, 2):
            return
        try:
            self.model.look(epoch=epoch_from_text(text))
        except InputError as error:
            self.field.configure(style="Wrong.TEntry")
            self.place.configure(text=words_of(error))
