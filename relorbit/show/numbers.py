"""Numbers and tables as text: the error decides how many figures are printed."""

from __future__ import annotations

import math
from collections.abc import Sequence
from datetime import datetime, timedelta
from itertools import pairwise

MOST_DECIMALS = 8
_J2000 = datetime(2000, 1, 1, 12)
_MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")


def known(value: float | None) -> bool:
    """True for a number that is there: neither None nor NaN nor infinite."""
    return value is not None and math.isfinite(value)


def decimals_for(sigma: float) -> int:
    """Decimals that show two significant figures of `sigma` (> 0); below 0 from 100 on."""
    return min(1 - int(f"{sigma:.1e}".split("e")[1]), MOST_DECIMALS)


def fixed(value: float | None, decimals: int, *, sign: bool = False) -> str:
    """`value` with so many decimals, without a minus before zero; a dash where missing."""
    if not known(value):
        return "-"
    number = round(value, decimals) + 0.0
    return f"{number:{'+' if sign and number else ''}.{max(decimals, 0)}f}"


def angle(value: float | None, decimals: int) -> str:
    """An angle in degrees with so many decimals; never 360.00, which is 0.00."""
    if not known(value):
        return "-"
    return fixed(round(value, decimals) % 360.0, decimals)


def significant(value: float, figures: int) -> str:
    """`value` with so many significant figures and no exponent."""
    if value == 0.0 or not known(value):
        return fixed(value, figures - 1)
    exponent = int(f"{value:.{figures - 1}e}".split("e")[1])
    return fixed(value, figures - 1 - exponent)


def error_text(sigma: float | None) -> str:
    """A standard deviation with two significant figures; a dash where unknown."""
    if not known(sigma):
        return "-"
    if sigma <= 0.0:
        return "0"
    text = fixed(sigma, decimals_for(sigma))
    return text if float(text) > 0.0 else f"{sigma:.1e}"


def with_error(value: float | None, sigma: float | None, without: int) -> tuple[str, str]:
    """`value` and `sigma` as text, cut where two figures of sigma end.

    Parameters
    ----------
    value, sigma : float or None
        Of one unit.
    without : int
        Decimals of the value where sigma is missing or zero.
    """
    if known(sigma) and sigma > 0.0:
        return fixed(value, decimals_for(sigma)), error_text(sigma)
    return fixed(value, without), error_text(sigma)


def instant(julian_year: float) -> datetime | None:
    """The calendar instant (Gregorian, TT) of a Julian year; None outside years 1 to 9999."""
    try:
        return _J2000 + timedelta(days=(julian_year - 2000.0) * 365.25)
    except (OverflowError, ValueError):
        return None


def calendar_date(julian_year: float, *, tenths: bool = False) -> str:
    """The calendar date of a Julian year, such as 2031-04-07, with tenths of a day on demand."""
    moment = instant(julian_year)
    if moment is None:
        return "-"
    day = moment.strftime("%m-%d")
    if tenths:
        day += f".{int((moment.hour + moment.minute / 60.0) / 2.4)}"
    return f"{moment.year:04d}-{day}"


def rough_date(julian_year: float, sigma: float | None) -> str:
    """A date no finer than its error (years): a day, a month or a year."""
    moment = instant(julian_year)
    if moment is None:
        return "-"
    if not known(sigma) or sigma < 0.02:
        return f"{moment.year:04d} {_MONTHS[moment.month - 1]} {moment.day}"
    if sigma < 0.3:
        return f"{moment.year:04d} {_MONTHS[moment.month - 1]}"
    return f"{moment.year:04d}" if sigma < 3.0 else f"about {moment.year:04d}"


def dates_of(epochs: Sequence[float]) -> list[str]:
    """Calendar dates of epochs, with tenths of a day where two stand less than two days apart."""
    steps = [abs(b - a) for a, b in pairwise(epochs) if a != b]
    tenths = bool(steps) and min(steps) * 365.25 < 2.0
    return [calendar_date(epoch, tenths=tenths) for epoch in epochs]


def table(
    header: Sequence[str],
    rows: Sequence[Sequence[str]],
    align: str,
    units: Sequence[str] = (),
    *,
    gap: str = "  ",
) -> str:
    """A plain table, without a line end after the last row.

    Parameters
    ----------
    header : sequence of str
        One word a column.
    rows : sequence of sequences of str
    align : str
        One letter a column: l left, r right, "." on the decimal point.
    units : sequence of str, optional
        A second line under the header.
    gap : str
        What stands between two columns.
    """
    heads = [list(header), *([list(units)] if units else [])]
    columns = []
    for slot, kind in enumerate(align):
        cells = [row[slot] for row in rows]
        if kind == ".":
            cells = on_the_point(cells)
        cells = [line[slot] for line in heads] + cells
        width = max(map(len, cells))
        columns.append([c.ljust(width) if kind == "l" else c.rjust(width) for c in cells])
    lines = [gap.join(parts).rstrip() for parts in zip(*columns, strict=True)]
    rule = "-" * max(map(len, lines))
    return "\n".join([*lines[: len(heads)], rule, *lines[len(heads) :]])


def on_the_point(cells: Sequence[str]) -> list[str]:
    """Cells padded on the right so that their decimal points stand in one line."""
    tails = [len(cell.partition(".")[2]) + ("." in cell) for cell in cells]
    widest = max(tails, default=0)
    return [cell + " " * (widest - tail) for cell, tail in zip(cells, tails, strict=True)]
