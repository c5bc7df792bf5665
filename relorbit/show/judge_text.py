"""A judgement of new measures in words and tables."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

from relorbit.show.numbers import (
    angle,
    decimals_for,
    error_text,
    fixed,
    known,
    significant,
    table,
    with_error,
)

if TYPE_CHECKING:
    from relorbit.derive.judge import Judgement
    from relorbit.derive.refitting import Change

WIDTH = 80
UNITS = {
    "P": "yr", "T": "Julian yr", "a": "arcsec", "i": "deg", "node": "deg", "omega": "deg",
    "mass": "suns",
}  # fmt: skip
ANGLES = ("node", "omega")
WITHOUT = 4  # decimals of an element without error


def judgement_text(judgement: Judgement) -> str:
    """The verdict, the measures, what a refit changes, and the orbits compared."""
    parts = [
        _wrapped(f"{judgement.pair}, by the orbit {judgement.orbit!r}: {judgement.text}."),
        measures_table(judgement),
        _slips(judgement),
        changes_table(judgement),
        influence_table(judgement),
        ephemerides_table(judgement),
        orbits_table(judgement),
        "\n".join(_wrapped(f"note: {note}") for note in judgement.notes),
    ]
    return "\n\n".join(part for part in parts if part)


def measures_table(judgement: Judgement) -> str:
    """Each measure, where the orbit puts it, O-C, and how surprising it is."""
    rows = []
    for one in judgement.measures:
        theta, theta_error = _angle_and_error(one.theta_predicted, one.theta_predicted_sigma)
        rho, rho_error = with_error(one.rho_predicted, one.rho_predicted_sigma, WITHOUT)
        rows.append([
            fixed(one.epoch, 3), _observed(one.theta, one.theta_err, True),
            _observed(one.rho, one.rho_err, False), theta, theta_error, rho, rho_error,
            fixed(one.d_theta, _places(one.theta_err), sign=True),
            fixed(one.d_rho, _places(one.rho_err), sign=True),
            fixed(one.theta_in_sigma, 1, sign=True), fixed(one.rho_in_sigma, 1, sign=True),
            _chance(one.probability), "odd" if one.odd else "",
        ])  # fmt: skip
    heads = ["", "", "", "predicted", "", "predicted", "", "O-C", "O-C", "O-C", "O-C", "chance", ""]
    units = ["epoch", "theta", "rho", "theta", "sigma", "rho", "sigma", "theta", "rho", "th/s",
             "rho/s", "%", ""]  # fmt: skip
    count = f"{judgement.values} value{'' if judgement.values == 1 else 's'}"
    return table(heads, rows, "...........rl", units, gap=" ") + "\n" + _wrapped(
        "O-C over sigma counts the errors of measure and prediction; chance: how often so large "
        f"a deviation comes by itself. All together: chi2 {fixed(judgement.chi2, 1)} for {count}, "
        f"chance {_chance(judgement.probability)} %"
    )  # fmt: skip


def _slips(judgement: Judgement) -> str:
    lines = []
    for one in judgement.measures:
        if one.slip is not None:
            lines.append(
                f"{one.epoch:.3f}: {one.slip.text}; then O-C would be ordinary "
                f"(chance {_chance(one.slip.probability)} %)"
            )
        if one.already:
            lines.append(f"{one.epoch:.3f}: {one.already}")
    return "\n".join(_wrapped(line) for line in lines)


def changes_table(judgement: Judgement) -> str:
    """Old and refitted elements side by side; empty where there is no refit."""
    if not judgement.changes:
        return ""
    rows = [_change(one) for one in judgement.changes]
    text = table(
        ["", "", "old", "sigma", "refitted", "sigma", "change", "change"], rows, "ll......",
        ["", "", "", "", "", "", "", "sigma"],
    )  # fmt: skip
    if judgement.changes[-1].name == "mass":
        text += "\nmass: its errors are those of the orbit alone, the parallax being the same"
    return text


def _change(one: Change) -> list[str]:
    sigma = one.new_sigma if known(one.new_sigma) else one.old_sigma
    decimals = decimals_for(sigma) if known(sigma) and sigma > 0.0 else WITHOUT
    show = angle if one.name in ANGLES else fixed
    share = one.change / one.old_sigma if known(one.old_sigma) and one.old_sigma > 0.0 else None
    return [
        one.name, UNITS.get(one.name, ""), show(one.old, decimals), error_text(one.old_sigma),
        show(one.new, decimals), error_text(one.new_sigma),
        fixed(one.change, decimals, sign=True), fixed(share, 1, sign=True),
    ]  # fmt: skip


def influence_table(judgement: Judgement) -> str:
    """What each new measure does to the refitted orbit; empty where none was used."""
    rows = []
    for one in judgement.measures:
        if one.influence is not None:
            by = one.influence
            rows.append([
                fixed(one.epoch, 3), fixed(by.distance, 2), by.element,
                fixed(by.in_sigma, 2, sign=True), _signed(by.period),
            ])  # fmt: skip
    if not rows:
        return ""
    return "influence of each new measure: the refitted orbit with it less the one without\n" + (
        table(["epoch", "in all", "most on", "by", "on P"], rows, "..l..",
              ["", "sigma", "", "sigma", "yr"])
    )  # fmt: skip


def ephemerides_table(judgement: Judgement) -> str:
    """The next ten years by both orbits."""
    if judgement.ephemeris_new is None:
        return ""
    rows = []
    for old, new in zip(
        judgement.ephemeris_old.rows(), judgement.ephemeris_new.rows(), strict=True
    ):
        gap = (new["theta"] - old["theta"] + 180.0) % 360.0 - 180.0
        rows.append([
            fixed(old["epoch"], 1),
            *_angle_and_error(old["theta"], old["theta_sigma"]),
            *with_error(old["rho"], old["rho_sigma"], WITHOUT),
            *_angle_and_error(new["theta"], new["theta_sigma"]),
            *with_error(new["rho"], new["rho_sigma"], WITHOUT),
            fixed(gap, 2, sign=True), fixed(new["rho"] - old["rho"], WITHOUT, sign=True),
        ])  # fmt: skip
    heads = ["", "old", "", "old", "", "refitted", "", "refitted", "", "change", "change"]
    units = ["epoch", "theta", "sigma", "rho", "sigma", "theta", "sigma", "rho", "sigma", "theta",
             "rho"]  # fmt: skip
    return table(heads, rows, "...........", units, gap=" ")


def orbits_table(judgement: Judgement) -> str:
    """Reduced chi2 of every orbit on all measures, the last thirty years, and the new ones."""
    rows = [
        [
            one.name,
            *(significant(x, 3) if known(x) else "-" for x in (one.all, one.recent, one.new)),
        ]
        for one in judgement.orbits
    ]
    return "reduced chi2 of each orbit\n" + table(
        ["orbit", "all", "last 30 years", "new"], rows, "l..."
    )


def _observed(value: float | None, sigma: float | None, is_angle: bool) -> str:
    return (angle if is_angle else fixed)(value, _places(sigma))


def _places(sigma: float | None) -> int:
    return max(decimals_for(sigma), 0) if known(sigma) and sigma > 0.0 else WITHOUT


def _angle_and_error(value: float, sigma: float | None) -> tuple[str, str]:
    return angle(value, _places(sigma) if known(sigma) else 2), error_text(sigma)


def _chance(probability: float) -> str:
    share = 100.0 * probability
    return "<0.001" if share < 0.001 else significant(share, 2)


def _signed(value: float) -> str:
    return ("-" if value < 0.0 else "+") + significant(abs(value), 2)


def _wrapped(text: str) -> str:
    return textwrap.fill(text, WIDTH, subsequent_indent="  ")
