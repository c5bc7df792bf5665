"""The posterior as text: intervals, modes, ephemeris, kinds."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

from relorbit.derive.posterior import UNITS, Interval, PosteriorSummary, SampledEphemeris
from relorbit.show.noise_text import noise_table
from relorbit.show.numbers import angle, dates_of, decimals_for, fixed, significant, table
from relorbit.show.text import WIDTH, warnings_text
from relorbit.solve.posterior import Posterior

ANY = 180.0  # half width in degrees from which an angle is not known at all
NARROW = 54  # letters of a line at the side of a window
SMALL = 1e-3  # numbers below are printed with an exponent
LABELS = {
    "next periastron": "next periastron", "closest": "closest on the sky",
    "next closest": "  comes next", "widest": "widest on the sky", "next widest": "  comes next",
    "mass": "total mass",
}  # fmt: skip
ERRORS = {"as-given": "as given", "from-residuals": "from the residuals"}
ANGLES = {"node": 180.0, "omega": 360.0}


def posterior_text(
    posterior: Posterior, summary: PosteriorSummary, *, narrow: bool = False
) -> str:
    """All that is to be said of the samples of one pair; `narrow` for the side of a window."""
    made_of = made_of_text(posterior)
    if narrow:
        made_of = "\n".join(textwrap.fill(line, NARROW) for line in made_of.split("\n"))
    parts = [
        made_of,
        interval_table(summary.intervals, narrow=narrow),
        modes_table(summary),
        noise_table(posterior.noise),
        warnings_text(posterior.warnings),
    ]
    return "\n\n".join(part for part in parts if part)


def made_of_text(p: Posterior) -> str:
    """What was sampled, how well, and under which prior."""
    low, high = p.prior.period_range
    lines = [
        f"{p.pair}: {p.effective_size:.0f} effective samples from {p.drawn} draws "
        f"(seed {p.seed}, Pareto k {fixed(p.pareto_k, 2)})",
        f"{len(p.observations)} measures, {p.observations.epoch[0]:.1f} to "
        f"{p.observations.epoch[-1]:.1f}; errors {ERRORS[p.errors]}"
        + (f", times {p.error_scale:.2f}" if p.error_scale > 1.0 else ""),
        paragraph(f"prior: {p.prior}; periods {low:.4g} to {high:.4g} years"),
    ]
    return "\n".join(lines)


def interval_table(intervals: dict[str, Interval], *, narrow: bool = False) -> str:
    """Medians with the central intervals of 68 and 95 per cent.

    `narrow` leaves long units out, and names what is known by a word.
    """
    rows = []
    for name, one in intervals.items():
        places = _places(one)
        turn = ANGLES.get(name)
        median = one.median if turn is None else one.median % turn
        shift = median - one.median
        numbers = [one.low68, one.high68, one.low95, one.high95]
        cells = [_figure(value + shift, places) for value in [one.median, *numbers]]
        if turn is not None and one.high68 - one.low68 > 0.6 * turn:
            cells = ["any", "", "", "", ""]
        label, unit = LABELS.get(name, name), UNITS[name]
        if narrow:
            rows.append([f"{name} {unit}" if len(unit) < 4 else name, *cells])
        else:
            rows.append([label, unit, *cells])
    if narrow:
        return table(["", "median", "68 %", "to", "95 %", "to"], rows, "lrrrrr", gap=" ")
    heads = ["", "unit", "median", "68 % from", "to", "95 % from", "to"]
    return table(heads, rows, "ll.....")


def _places(one: Interval) -> int | None:
    """Decimals with two figures of half the 68 per cent interval; None for an exponent."""
    half = 0.5 * (one.high68 - one.low68)
    if 0.0 < abs(one.median) < SMALL:
        return None
    return max(decimals_for(half), 0) if half > 0.0 else 4


def _figure(value: float, places: int | None) -> str:
    return f"{value:.3e}" if places is None else fixed(value, places)


def modes_table(summary: PosteriorSummary) -> str:
    """The separate parts with their probability; an empty string where there is one only."""
    if not summary.modes:
        return ""
    rows = []
    for mode in summary.modes:
        row = [f"{100.0 * mode.probability:.3g}"]
        for name in ("P", "e", "T", "a", "i"):
            one = mode.intervals[name]
            places = _places(one)
            half = 0.5 * (one.high68 - one.low68)
            row += [_figure(one.median, places), "" if places is None else fixed(half, places)]
        rows.append(row)
    heads = ["per cent", "P", "+/-", "e", "+/-", "T", "+/-", "a", "+/-", "i", "+/-"]
    return "the samples fall into separate parts: medians and half of the 68 % interval\n" + table(
        heads, rows, "." * len(heads)
    )


def sampled_ephemeris_table(ephemeris: SampledEphemeris) -> str:
    """Medians and intervals of theta and rho."""
    rows = []
    dates = dates_of(ephemeris.epoch.tolist())
    for epoch, date, theta, rho in zip(
        ephemeris.epoch, dates, ephemeris.theta, ephemeris.rho, strict=True
    ):
        places = max(decimals_for(max(0.5 * (theta[3] - theta[1]), 1e-6)), 0)
        angles = [angle(value, places) for value in theta]
        if theta[4] - theta[0] > 2 * 0.9 * ANY:
            angles = ["any"] * 5 if theta[3] - theta[1] > ANY else angles
        rho_places = max(decimals_for(max(0.5 * (rho[3] - rho[1]), 1e-6)), 0)
        lengths = [fixed(value, rho_places) for value in rho]
        rows.append([fixed(epoch, 3), date, *_ordered(angles), *_ordered(lengths)])
    heads = ["epoch", "date (TT)", "theta", "68 %", "", "95 %", "", "rho", "68 %", "", "95 %", ""]
    units = ["Julian yr", "", "deg", "from", "to", "from", "to", "arcsec", "from", "to", "from",
             "to"]  # fmt: skip
    return table(heads, rows, ".l" + "." * 10, units, gap=" ")


def _ordered(cells: Sequence[str]) -> list[str]:
    """Median first, then the ends of the narrow and of the wide interval."""
    return [cells[2], cells[1], cells[3], cells[0], cells[4]]


def paragraph(text: str) -> str:
    """A wrapped paragraph."""
    return textwrap.fill(text, WIDTH)


def mass_line(one: Interval) -> str:
    """The mass in one line."""
    return (
        f"total mass {significant(one.median, 3)} solar masses (95 %: {significant(one.low95, 3)} "
        f"to {significant(one.high95, 3)})"
    )
