"""What each group of measures is worth, as a table."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from relorbit.show.numbers import error_text, fixed, known, significant, table

if TYPE_CHECKING:
    from relorbit.solve.weighing import NoiseGroup

SIGNIFICANT = 0.01  # probability by chance below which a zero point is called significant
MOST_ROWS = 6  # down-weighted rows named one by one


def noise_table(groups: Sequence[NoiseGroup]) -> str:
    """Errors, zero points, share of the weight and slips of each group; empty without groups."""
    if not groups:
        return ""
    sizes = [x for g in groups for x in (g.across_arcsec, g.along_arcsec) if known(x)]
    unit, scale = ("mas", 1000.0) if sizes and max(sizes) < 0.1 else ("arcsec", 1.0)
    offsets = any(g.theta_offset is not None or g.rho_offset is not None for g in groups)
    rows = []
    for g in groups:
        cells = [g.name, str(g.measures)]
        cells += [_size(x, scale) for x in (g.across_arcsec, g.along_arcsec)]
        cells += [_size(x, 1.0) for x in (g.across_factor, g.along_factor)]
        if offsets:
            cells += [
                _zero_point(g.theta_offset, g.theta_offset_sigma, g.theta_offset_p, 1.0),
                _zero_point(g.rho_offset, g.rho_offset_sigma, g.rho_offset_p, 100.0),
            ]
        rows.append([*cells, fixed(100.0 * g.share, 1), _named(g.down_weighted)])
    heads = ["group", "count", "across", "along", "across", "along"]
    units = ["", "", unit, unit, "times", "times"]
    if offsets:
        heads += ["theta offset", "rho offset"]
        units += ["deg", "%"]
    heads += ["weight", "down-"]
    units += ["%", "weighted"]
    align = "lr" + "...." + ("ll" if offsets else "") + ".l"
    text = (
        "noise: errors of each group from its residuals, as a size and as times those given\n"
        "or usual; the share of the weight; measures that count for little\n"
        + table(heads, rows, align, units)
    )
    if offsets:
        text += (
            "\noffset: observed minus true, +/- its error; * where chance alone has a probability "
            f"below {SIGNIFICANT:g},\nothers are better left out"
        )
    return text


def _size(value: float | None, scale: float) -> str:
    return significant(value * scale, 3) if known(value) else "-"


def _zero_point(
    value: float | None, sigma: float | None, probability: float | None, scale: float
) -> str:
    if value is None or sigma is None or probability is None:
        return "-"
    error = error_text(sigma * scale)
    decimals = len(error.partition(".")[2])
    star = " *" if probability < SIGNIFICANT else ""
    return f"{fixed(value * scale, decimals, sign=True)} +/- {error}{star}"


def _named(rows: Sequence[int]) -> str:
    if not rows:
        return ""
    named = ", ".join(str(row + 1) for row in rows[:MOST_ROWS])
    return named + (f" and {len(rows) - MOST_ROWS} more" if len(rows) > MOST_ROWS else "")
