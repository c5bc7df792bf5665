"""The strips: residuals across and along the direction of the pair, against time or phase."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.markers import CARETDOWN, CARETUP
from matplotlib.ticker import MaxNLocator

from relorbit.derive.glance import phase
from relorbit.desk.marks import group_line, key_mark
from relorbit.desk.model import ORBIT, VIEW, DeskModel
from relorbit.desk.plot_view import SHIFT, PlotView, broken
from relorbit.desk.theme import Palette, recolour
from relorbit.measures.table import TECHNIQUES
from relorbit.orbit.kepler import FloatArray
from relorbit.show.colours import INK, SMALL, THIN, hairline
from relorbit.show.marks import groups, label_axes, quiet
from relorbit.show.residual_plot import panel_limit, residual_unit
from relorbit.solve.residuals import Residuals

INSETS = (56.0, 10.0, 32.0, 26.0, 8.0)  # left, right, bottom, top, between: pixels at 96 an inch
LOW = 130  # pixels at 96 an inch: a lower panel has room for a short title only
EDGE = 0.95  # of half the height: where a residual beyond the scale is marked
MOST_BARS = 3000  # of more measures the error bars would be one solid band
SLACK = (0.45, 1.25)  # the scale follows when what it must hold is smaller or larger than this


class StripsView(PlotView):
    """Two panels of O-C with one axis of time or phase."""

    later = 12

    def __init__(
        self, parent: tk.Misc, model: DeskModel, palette: Palette, on_menu: Callable[..., None]
    ) -> None:
        super().__init__(parent, model, palette, on_menu)
        self.along: Axes = self.figure.add_axes((0.1, 0.1, 0.8, 0.4))
        self.across: Axes = self.figure.add_axes((0.1, 0.5, 0.8, 0.4))
        self._panels = (self.across, self.along)
        self._by_phase = model.by_phase
        self._lines: dict[Axes, dict[tuple[str | int, bool], Line2D]] = {}
        self._over: dict[Axes, tuple[Line2D, Line2D]] = {}
        self._half = {panel: 1.0 for panel in self._panels}
        self._x = (0.0, 1.0)
        self._empty = tk.Label(self.widget, font="TkDefaultFont", justify="center",
                               text="Residuals need an orbit: press Solve.")  # fmt: skip
        self.widget.pack(fill="both", expand=True)

    # -- artists -------------------------------------------------------------------------------

    def build(self) -> None:
        following = self.model.consequences
        kept = None if self.framed or self._by_phase != self.model.by_phase else (
            self.along.get_xlim(), [panel.get_ylim() for panel in self._panels])  # fmt: skip
        self._by_phase = self.model.by_phase
        self.moving, self.light, self.spots, self._lines, self._over = [], [], {}, {}, {}
        self._put_axes()
        for legend in list(self.figure.legends):
            legend.remove()
        self._empty.configure(background=self.palette.ground, foreground=self.palette.quiet)
        for panel in self._panels:
            panel.clear()
            panel.set_visible(following is not None)
            panel.set_facecolor(self.palette.paper)
        if following is None:
            self._empty.place(relx=0.5, rely=0.5, anchor="center")
            return
        self._empty.place_forget()
        self._unit = residual_unit(following.residuals)
        for panel, name in zip(self._panels, ("across", "along"), strict=True):
            self._build_panel(panel, name, following.residuals)
        self._put_key(following.residuals)
        self._set_time(kept and kept[0])
        if kept:
            for panel, limits in zip(self._panels, kept[1], strict=True):
                panel.set_ylim(limits)
        self.across.tick_params(labelbottom=False)
        self.across.set_xlabel("")

    def _put_key(self, of: Residuals) -> None:
        """Which marker is which technique, over the strips."""
        handles = [key_mark(technique, self.palette) for technique in TECHNIQUES
                   if np.any(of.technique == technique)]  # fmt: skip
        legend = self.figure.legend(
            handles=handles, loc="upper left", ncols=len(handles), frameon=False, fontsize=SMALL,
            bbox_to_anchor=(self.across.get_position().x0, 1.0), labelcolor=self.palette.ink,
            handletextpad=0.2, columnspacing=1.2, borderaxespad=0.35, borderpad=0.3,
        )  # fmt: skip
        legend.set_in_layout(False)

    def _put_axes(self) -> None:
        left, right, bottom, top, between = (self.sizes(length) for length in INSETS)
        width, height = self.figure.bbox.size
        each = (height - bottom - top - between) / 2
        if each > 15 and width > left + right + 20:
            wide = 1 - (left + right) / width
            self.along.set_position((left / width, bottom / height, wide, each / height))
            low = (bottom + each + between) / height
            self.across.set_position((left / width, low, wide, each / height))

    def _build_panel(self, panel: Axes, name: str, of: Residuals) -> None:
        quiet(panel)
        title = f"O\u2212C {name} ({self._unit[0]})"
        if panel.bbox.height < self.sizes(LOW):
            title = f"{name} ({self._unit[0]})"
        panel.axhline(0.0, color=INK, linewidth=THIN, zorder=1.5)
        label_axes(panel, "phase" if self._by_phase else "Julian year",
                   title)  # fmt: skip
        panel.yaxis.set_major_locator(MaxNLocator(4, steps=[1, 2, 5, 10], symmetric=True))
        panel.xaxis.set_major_locator(MaxNLocator(7, steps=[1, 2, 5, 10]))
        panel.ticklabel_format(axis="x", useOffset=False, style="plain")
        value, error = self._values(of)[panel]
        self._half[panel] = panel_limit(value, error, of)
        panel.set_ylim(-self._half[panel], self._half[panel])
        recolour(panel, self.palette)
        self._lines[panel] = {}
        for technique, used in groups(of):
            edge = self.palette.edges[technique]
            (bars,) = panel.plot([], [], color=edge, linewidth=hairline(len(of)), zorder=2.5,
                                 alpha=0.7 if used else 0.35, animated=True,
                                 antialiased=False)  # fmt: skip
            line = group_line(panel, technique, used, len(of), self.palette, animated=True)
            self._lines[panel][technique, used] = line
            line.bars = bars
            self.moving += [bars, line]
        for caret in (CARETUP, CARETDOWN):
            (line,) = panel.plot([], [], linestyle="none", marker=caret, markersize=6, zorder=4.5,
                                 color=self.palette.quiet, animated=True)  # fmt: skip
            self._lines[panel][caret, True] = line
            self.moving.append(line)
        today = panel.axvline(0.0, color=self.palette.today, linewidth=0.9, zorder=2,
                              animated=True)  # fmt: skip
        ring = self.ring(panel)
        self._over[panel] = today, ring
        self.light += [today, ring]

    def _values(self, of: Residuals) -> dict[Axes, tuple[FloatArray, FloatArray]]:
        """O-C and error of both panels, in the unit of the strips."""
        factor = self._unit[1]
        return {
            self.across: (of.arc * factor, of.arc_err * factor),
            self.along: (of.d_rho * factor, of.rho_err * factor),
        }

    def _set_time(self, kept: tuple[float, float] | None) -> None:
        epochs = self.model.pair.measures.epoch
        if kept is not None:
            limits = kept
        elif self._by_phase:
            limits = (-0.02, 1.02)
        elif len(epochs):
            pad = 0.04 * float(np.ptp(epochs)) or 1.0
            limits = (float(epochs.min()) - pad, float(epochs.max()) + pad)
        else:
            limits = (self.model.epoch - 1.0, self.model.epoch + 1.0)
        for panel in self._panels:
            panel.set_xlim(limits)

    def feed(self) -> None:
        following = self.model.consequences
        if following is None or not self._lines:
            return
        of = following.residuals
        x = self._time(of.epoch)
        for panel, (value, error) in self._values(of).items():
            self._feed_panel(panel, of, x, value, error)
        self.feed_light()

    def feed_light(self) -> None:
        if self.model.consequences is None:
            return
        at = self._time(np.array([self.model.epoch]))
        for date, ring in self._over.values():
            date.set_xdata(np.repeat(at, 2))
            self.feed_ring(ring)

    def _time(self, epochs: FloatArray) -> FloatArray:
        """What the strips run along, at some epochs."""
        return phase(self.model.elements, epochs) if self._by_phase else epochs

    def _feed_panel(
        self, panel: Axes, of: Residuals, x: FloatArray, value: FloatArray, error: FloatArray
    ) -> None:
        lines, (low, high) = self._lines[panel], panel.get_ylim()
        above, below = value > high, value < low
        inside = ~(above | below)
        for technique, used in groups(of):
            line = lines[technique, used]
            rows = inside & (of.technique == technique) & (of.used == used)
            line.set_data(x[rows], value[rows])
            if len(of) <= MOST_BARS:
                low_ends = np.stack([x[rows], value[rows] - error[rows]])
                high_ends = np.stack([x[rows], value[rows] + error[rows]])
                line.bars.set_data(*broken(low_ends, high_ends))
        edge = {CARETUP: (above, low + EDGE * (high - low)),
                CARETDOWN: (below, high - EDGE * (high - low))}  # fmt: skip
        seen = np.array(value)
        for caret, (rows, level) in edge.items():
            seen[rows] = level
            lines[caret, True].set_data(x[rows], seen[rows])
        self.spots[panel] = np.stack([x, seen], axis=-1)

    # -- following -----------------------------------------------------------------------------

    def outdated(self, kinds: frozenset[str]) -> bool:
        begun = (self.model.consequences is None) != (not self._lines)
        refolded = VIEW in kinds and self._by_phase != self.model.by_phase
        return begun or refolded or (ORBIT in kinds and self.framed and self._outgrown())

    def _outgrown(self) -> bool:
        """Whether the scale must change: at once after a fit, seldom while nudging."""
        following = self.model.consequences
        if following is None or not self._lines:
            return True
        if not self.model.nudging or residual_unit(following.residuals) != self._unit:
            return True
        for panel, (value, error) in self._values(following.residuals).items():
            share = panel_limit(value, error, following.residuals) / self._half[panel]
            if not SLACK[0] < share < SLACK[1]:
                return True
        return False

    def set_limits(
        self, axes: Axes, x: tuple[float, float], y: tuple[float, float], keys: int
    ) -> None:
        """Time is shared by both panels; with Shift held the wheel changes the residuals."""
        scaled = bool(keys & SHIFT)
        if not scaled:
            for panel in self._panels:
                panel.set_xlim(x)
        if scaled or self._drag is not None:
            axes.set_ylim(y)
        self.feed()
        self.redraw(rebuild=False)
