"""A figure in the window: still parts drawn once, moving parts laid over them at little cost.

What changes while an element is nudged (the curve, hairlines, residuals) is drawn over a kept
picture of the rest; what changes more often still (the selection, the date) over a kept picture
of that. Pointing, selecting, zooming and panning are the same in every
figure of the window.
"""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from tkinter import ttk
from typing import Any

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.backend_bases import DrawEvent, LocationEvent, MouseEvent
from matplotlib.backends.backend_tkagg import FigureCanvasTkAgg
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from relorbit.desk.model import ORBIT, PAIR, SELECTION, VIEW, DeskModel
from relorbit.desk.theme import Palette, Sizes
from relorbit.desk.words import measure_in_words

REACH = 9  # pixels at 96 dots an inch: how near the pointer a measure must be
DRAG = 4  # pixels: less is a click
ZOOM = 1.25
SHIFT, CONTROL = 0x1, 0x4


@dataclass
class Drag:
    """A mouse button held down: where it went down, what for, and the limits then."""

    x: float
    y: float
    axes: Axes | None
    purpose: str
    moved: bool = False
    outline: int | None = None


class PlotView(ttk.Frame):
    """What the sky plane and the strips share.

    A heir fills `axes`, builds artists in `build`, feeds the moving ones in `feed`, and tells in
    `spots` where the measures stand.

    Attributes
    ----------
    later : int
        Milliseconds before it is drawn anew: not all figures in one turn of the event loop.
    """

    later = 0

    def __init__(
        self, parent: tk.Misc, model: DeskModel, palette: Palette, on_menu: Callable[..., None]
    ) -> None:
        super().__init__(parent)
        self.model, self.palette, self.sizes = model, palette, Sizes(self)
        self.moving: list[Artist] = []
        self.light: list[Artist] = []
        self.spots: dict[Axes, NDArray] = {}
        self.framed = True  # limits follow the orbit until the observer zooms
        self._on_menu = on_menu
        self._kept: Any = None  # the still parts
        self._under: Any = None  # the still and the moving parts
        self._pending: str | None = None
        self._pause: str | None = None
        self._rebuild = True
        self._drag: Drag | None = None
        self._space = False
        self.figure = Figure(figsize=(2.5, 2.0), dpi=96)
        self.canvas = FigureCanvasTkAgg(self.figure, master=self)
        self.widget = self.canvas.get_tk_widget()
        self.widget.configure(highlightthickness=0, takefocus=True)
        self._hover = tk.Label(self.widget, justify="left", font="DeskSmall", borderwidth=1,
                               relief="solid", padx=self.sizes(5), pady=self.sizes(3))  # fmt: skip
        self._listen()

    def _listen(self) -> None:
        # what goes wrong in a callback is for the window's own fault report, not for a print
        self.canvas.callbacks.exception_handler = _raise
        for name, call in (
            ("draw_event", self._on_draw), ("button_press_event", self._on_press),
            ("motion_notify_event", self._on_motion), ("button_release_event", self._on_release),
            ("scroll_event", self._on_scroll), ("figure_leave_event", self._on_leave),
            ("resize_event", self._on_resize),
        ):  # fmt: skip
            self.canvas.mpl_connect(name, call)
        self.widget.bind("<KeyPress-space>", lambda _: setattr(self, "_space", True), add=True)
        self.widget.bind("<KeyRelease-space>", lambda _: setattr(self, "_space", False), add=True)
        self.widget.bind("<Destroy>", lambda _: self._forget_pending(), add=True)

    # -- what an heir fills in -----------------------------------------------------------------

    def build(self) -> None:
        """Make all artists anew, still and moving, and set the limits where they are framed."""
        raise NotImplementedError

    def feed(self) -> None:
        """Give the moving artists, and the light ones, what the model says now."""
        raise NotImplementedError

    def feed_light(self) -> None:
        """Give the light artists what the model says now."""
        raise NotImplementedError

    # -- drawing -------------------------------------------------------------------------------

    def redraw(self, rebuild: bool = True) -> None:
        """Draw all of it, soon and once however often this is asked."""
        self._rebuild = self._rebuild or rebuild
        if self._pending is None:
            self._pending = self.after(self.later, self._draw_soon)

    def _draw_soon(self) -> None:
        self._pending = self.after_idle(self._draw_now)

    def _draw_now(self) -> None:
        self._pending = None
        if self._rebuild:
            self._rebuild = False
            self.figure.set_facecolor(self.palette.ground)
            self.build()
            self.feed()
        self.canvas.draw()

    def repaint(self, light_only: bool = False) -> None:
        """Draw the moving parts, or only the light ones, over the kept picture of the others."""
        if self._pending is not None:
            return
        if self._kept is None:
            self.redraw(rebuild=False)
        elif light_only:
            self.canvas.restore_region(self._under)
            _draw(self.light)
            self.canvas.blit()
        else:
            self.canvas.restore_region(self._kept)
            self._draw_over()
            self.canvas.blit()

    def _draw_over(self) -> None:
        _draw(self.moving)
        self._under = self.canvas.copy_from_bbox(self.figure.bbox)
        _draw(self.light)

    def _on_draw(self, event: DrawEvent) -> None:
        self._kept = self.canvas.copy_from_bbox(self.figure.bbox)
        self._draw_over()

    def _on_resize(self, event: object) -> None:
        self._kept = None
        self.redraw()

    def _forget_pending(self) -> None:
        for name in ("_pending", "_pause"):
            waiting = getattr(self, name)
            if waiting is not None:
                self.after_cancel(waiting)
            setattr(self, name, None)

    def wear(self, palette: Palette) -> None:
        """Take on other colours."""
        self.palette = palette
        self._hover.configure(background=palette.paper, foreground=palette.ink)
        self.widget.configure(background=palette.ground)
        self.redraw()

    def reset(self) -> None:
        """Show all of it again."""
        self.framed = True
        self.redraw()

    # -- the selection -------------------------------------------------------------------------

    def ring(self, axes: Axes) -> Line2D:
        """The moving artist that rings selected measures; `feed_ring` fills it."""
        (ring,) = axes.plot(
            [], [], linestyle="none", marker="o", markersize=13, markerfacecolor="none",
            markeredgecolor=self.palette.accent, markeredgewidth=1.6, zorder=6, animated=True,
        )  # fmt: skip
        return ring

    def feed_ring(self, ring: Line2D) -> None:
        spots = self.spots.get(ring.axes)
        rows = sorted(row for row in self.model.selection if spots is not None and row < len(spots))
        ring.set_data(*(spots[rows].T if rows else ([], [])))
        ring.set_markersize(13 if len(rows) < 200 else 7)

    def nearest(self, event: LocationEvent) -> int | None:
        """The measure under the pointer."""
        spots = self.spots.get(event.inaxes)
        if spots is None or not len(spots):
            return None
        gaps = event.inaxes.transData.transform(spots) - (event.x, event.y)
        gaps = np.where(np.isfinite(gaps), gaps, np.inf)
        distance = np.hypot(gaps[:, 0], gaps[:, 1])
        row = int(np.argmin(distance))
        return row if distance[row] <= self.sizes(REACH) else None

    def _boxed(self, drag: Drag, event: MouseEvent) -> NDArray:
        """Rows inside the box dragged."""
        spots = drag.axes.transData.transform(self.spots[drag.axes])
        corners = np.sort([(drag.x, drag.y), (event.x, event.y)], axis=0)
        inside = np.all((spots >= corners[0]) & (spots <= corners[1]), axis=1)
        return np.flatnonzero(inside)

    # -- the mouse -----------------------------------------------------------------------------

    def _on_press(self, event: MouseEvent) -> None:
        self.widget.focus_set()
        self._hover.place_forget()
        pans = event.button in (2, 3) or self._space
        self._drag = Drag(event.x, event.y, event.inaxes, "pan" if pans else "select")
        if event.dblclick and event.inaxes is not None and self.nearest(event) is None:
            self._drag = None
            self.reset()

    def _on_motion(self, event: MouseEvent) -> None:
        drag = self._drag
        if drag is None:
            self._show_hover(event)
            return
        if not drag.moved and np.hypot(event.x - drag.x, event.y - drag.y) < self.sizes(DRAG):
            return
        drag.moved = True
        if drag.axes is None:
            return
        if drag.purpose == "pan":
            self.pan(drag.axes, drag.x - event.x, drag.y - event.y)
            drag.x, drag.y = event.x, event.y
        else:
            self._outline(drag, event)

    def _on_release(self, event: MouseEvent) -> None:
        drag, self._drag = self._drag, None
        if drag is None:
            return
        if drag.outline is not None:
            self.widget.delete(drag.outline)
        if drag.purpose == "pan":
            if not drag.moved and event.button == 3:
                self._menu(event)
            return
        adds = bool(_state(event) & (SHIFT | CONTROL))
        kept = self.model.selection if adds else frozenset()
        if drag.moved and drag.axes in self.spots:
            self.model.select(kept | set(self._boxed(drag, event).tolist()))
        elif not drag.moved and event.inaxes is not None:
            row = self.nearest(event)
            chosen = frozenset() if row is None else frozenset({row})
            self.model.select(kept ^ chosen if adds else chosen)

    def _menu(self, event: MouseEvent) -> None:
        row = self.nearest(event) if event.inaxes is not None else None
        if row is not None and row not in self.model.selection:
            self.model.select({row})
        self._on_menu(event.guiEvent.x_root, event.guiEvent.y_root)

    def _outline(self, drag: Drag, event: MouseEvent) -> None:
        height = self.widget.winfo_height()
        corners = (drag.x, height - drag.y, event.x, height - event.y)
        if drag.outline is None:
            drag.outline = self.widget.create_rectangle(
                *corners, outline=self.palette.accent, dash=(4, 3)
            )
        self.widget.coords(drag.outline, *corners)

    def _show_hover(self, event: MouseEvent) -> None:
        row = self.nearest(event) if event.inaxes is not None else None
        if row is None:
            self._hover.place_forget()
            return
        self._hover.configure(text=measure_in_words(self.model, row))
        height, offset = self.widget.winfo_height(), self.sizes(14)
        x, y = event.x + offset, height - event.y + offset
        x = max(0, min(x, self.widget.winfo_width() - self._hover.winfo_reqwidth()))
        if y + self._hover.winfo_reqheight() > height:
            y = max(0, height - event.y - offset - self._hover.winfo_reqheight())
        self._hover.place(x=x, y=y)

    def _on_leave(self, event: LocationEvent) -> None:
        self._hover.place_forget()

    def _on_scroll(self, event: MouseEvent) -> None:
        if event.inaxes is not None:
            self._hover.place_forget()
            self.zoom(event.inaxes, ZOOM ** -event.step, (event.x, event.y), _state(event))

    # -- limits --------------------------------------------------------------------------------

    def zoom(
        self, axes: Axes, factor: float, at: tuple[float, float] | None = None, keys: int = 0
    ) -> None:
        """Show `factor` times as much, the place `at` (pixels) staying where it is."""
        box = axes.bbox
        at = at or (0.5 * (box.x0 + box.x1), 0.5 * (box.y0 + box.y1))
        corners = np.array([(box.x0, box.y0), (box.x1, box.y1)])
        self._set_corners(axes, np.array(at) + factor * (corners - at), keys)

    def pan(self, axes: Axes, right: float, up: float) -> None:
        """Move what is shown by pixels."""
        box = axes.bbox
        corners = np.array([(box.x0, box.y0), (box.x1, box.y1)]) + np.array([right, up])
        self._set_corners(axes, corners, 0)

    def _set_corners(self, axes: Axes, corners: NDArray, keys: int) -> None:
        data = axes.transData.inverted().transform(corners)
        size = np.abs(data[1] - data[0])
        if np.all(np.isfinite(data)) and np.all(size > 1e-9) and np.all(size < 1e6):
            self.framed = False
            self.set_limits(axes, tuple(data[:, 0]), tuple(data[:, 1]), keys)

    def set_limits(
        self, axes: Axes, x: tuple[float, float], y: tuple[float, float], keys: int
    ) -> None:
        """Show other limits; an heir may keep some of them."""
        axes.set_xlim(x)
        axes.set_ylim(y)
        self.redraw(rebuild=False)

    # -- the model -----------------------------------------------------------------------------

    def outdated(self, kinds: frozenset[str]) -> bool:
        """Whether a change asks for new artists."""
        raise NotImplementedError

    def on_change(self, kinds: frozenset[str]) -> None:
        """Follow the model, in the cheapest way that will do."""
        if PAIR in kinds or self.outdated(kinds):
            self.redraw()
        elif self._kept is None or self._rebuild:
            return  # all of it is drawn soon
        elif ORBIT in kinds:
            self.feed()
            self.repaint()
        elif kinds & {SELECTION, VIEW}:
            self.feed_light()
            self.repaint(light_only=True)


def _draw(artists: Iterable[Artist]) -> None:
    """Draw artists of a figure, the lowest first, without those that hold nothing."""
    for artist in sorted(artists, key=lambda one: one.get_zorder()):
        if not (isinstance(artist, Line2D) and not len(artist.get_xdata())):
            artist.axes.draw_artist(artist)


def broken(start: NDArray, end: NDArray) -> NDArray:
    """Segments as one line with gaps: shape (2, 3 n) from two arrays of shape (2, n)."""
    return np.stack([start, end, np.full_like(start, np.nan)], axis=-1).reshape(2, -1)


def _state(event: MouseEvent) -> int:
    """Modifier keys held, as Tk counts them."""
    state = getattr(event.guiEvent, "state", 0)
    return state if isinstance(state, int) else 0


def _raise(error: Exception) -> None:
    raise error
