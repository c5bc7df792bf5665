"""Colours, markers and line widths of every picture, in one place.

The colours of techniques are the "muted" set of Paul Tol (Colour Schemes, SRON/EPS/TN/09-002,
2021, from memory), which people with colour-blindness can tell apart; the markers differ too, so
that a print in grey still reads.
"""

from __future__ import annotations

from dataclasses import dataclass

INK = "#1A1A1A"
GREY = "#6E6E6E"
PALE = "#D9D9D9"
CURVE = "#333333"
FUTURE = "#117733"  # muted green: not the colour of any technique
OTHER_COLOURS = ("#88CCEE", "#AA4499", "#999933", "#6E6E6E")
OTHER_DASHES = ((0, (6, 2)), (0, (2, 1.5)), (0, (7, 2, 1.5, 2)), (0, (1, 1)))

HAIRLINE = 0.5
THIN = 0.8
CURVE_WIDTH = 1.1
SMALL, TEXT, TITLE = 7.5, 8.5, 11.0  # points


@dataclass(frozen=True)
class Mark:
    """How the measures of one technique look: fill, marker of matplotlib, relative size."""

    colour: str
    marker: str
    size: float

    @property
    def outline(self) -> str:
        """The colour darkened, so that a pale one has an edge on white paper."""
        parts = (int(self.colour[k : k + 2], 16) for k in (1, 3, 5))
        return "#" + "".join(f"{int(0.55 * part):02X}" for part in parts)


MARKS = {
    "eyepiece": Mark("#DDCC77", "D", 0.85),
    "plate": Mark("#44AA99", "s", 0.9),
    "camera": Mark("#CC6677", "^", 1.05),
    "interferometer": Mark("#882255", "h", 1.1),
    "space": Mark("#332288", "p", 1.1),
    "unknown": Mark("#BBBBBB", "o", 0.95),
}


def mark_size(count: int) -> float:
    """Size in points of the marker of one among `count` measures: less where there are many."""
    return 6.0 if count <= 60 else max(2.4, 6.0 * (60.0 / count) ** 0.28)


def hairline(count: int) -> float:
    """Width in points of the hairline of one among `count` measures."""
    return HAIRLINE if count <= 300 else 0.6 * HAIRLINE
