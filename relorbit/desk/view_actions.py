"""How the pair is looked at: turned, zoomed, dark or light, larger or smaller."""

from __future__ import annotations

from typing import TYPE_CHECKING

from relorbit.desk.commands import Command
from relorbit.desk.settings import LARGEST_SCALE, SMALLEST_SCALE

if TYPE_CHECKING:
    from relorbit.desk.window import Desk

LARGER = 1.1


class ViewActions:
    """Handlers, and the commands that name them."""

    def __init__(self, desk: Desk) -> None:
        self.desk = desk

    def commands(self) -> tuple[Command, ...]:
        d = self.desk
        return (
            Command("orientation", "Turn: as on the sky, as in the eyepiece", "View", "o",
                    self.turn, d.on_desk),
            Command("phase", "Strips: by time, by phase", "View", "p", self.by_phase,
                    d.has_orbit),
            Command("reset", "Show all again", "View", "0", self.reset, d.on_desk),
            Command("zoom_in", "Zoom in", "View", "plus", lambda: self.zoom(1 / 1.25), d.on_desk),
            Command("zoom_out", "Zoom out", "View", "minus", lambda: self.zoom(1.25), d.on_desk),
            Command("others", "Orbits on record: show, hide", "View", "r", self.toggle_others,
                    lambda: bool(d.model.pair.orbits)),
            Command("dark", "Dark or light", "View", "Control-d", d.toggle_dark),
            Command("larger", "Larger text", "View", "Control-plus",
                    lambda: self.rescale(LARGER)),
            Command("smaller", "Smaller text", "View", "Control-minus",
                    lambda: self.rescale(1 / LARGER)),
        )  # fmt: skip

    def turn(self) -> None:
        model = self.desk.model
        model.look(orientation="sky" if model.orientation == "eyepiece" else "eyepiece")

    def by_phase(self) -> None:
        self.desk.model.look(by_phase=not self.desk.model.by_phase)

    def reset(self) -> None:
        self.desk.sky.reset()
        self.desk.strips.reset()

    def zoom(self, factor: float) -> None:
        self.desk.sky.zoom(self.desk.sky.axes, factor)

    def toggle_others(self) -> None:
        self.desk.show_others = not self.desk.show_others
        self.desk.sky.redraw()

    def rescale(self, factor: float) -> None:
        settings = self.desk.settings
        scale = (settings.scale or 1.0) * factor
        settings.scale = min(max(scale, SMALLEST_SCALE), LARGEST_SCALE)
        self.desk.say(f"Sizes change to {settings.scale:.0%} when the window is opened next.")
