"""What vetting found, as a table with a line for each change."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from relorbit.show.numbers import angle, fixed, table

if TYPE_CHECKING:
    from relorbit.measures.pair import Pair
    from relorbit.measures.vetting import Finding

WIDTH = 80
SAID_BY_REASON = ("reason",)
OF_RECEIVED = ("theta_obs", "rho_obs", "epoch_obs")


def findings_text(pair: Pair, findings: Sequence[Finding]) -> str:
    """The findings in the order of the measures, each with its evidence and its change."""
    count = len(pair.measures)
    if not findings:
        return f"{pair.name}: no slip found in {count} measure{'' if count == 1 else 's'}"
    m = pair.measures
    rows = [
        [
            str(one.row + 1), fixed(float(m.epoch[one.row]), 3),
            angle(_known(m.theta[one.row]), 2), fixed(_known(m.rho[one.row]), 4), one.kind,
            _sigma(one.sigma_before), _sigma(one.sigma_after), f"{100.0 * one.confidence:.0f}",
        ]
        for one in findings
    ]  # fmt: skip
    head = f"{pair.name}: {len(findings)} of {count} measures look wrong"
    lines = [
        _wrapped(f"measure {one.row + 1}: {one.text}: {change_text(one)}") for one in findings
    ]
    return f"{head}\n\n" + table(
        ["measure", "epoch", "theta", "rho", "finding", "before", "after", "sure"], rows,
        "r...l..r", ["", "", "deg", "arcsec", "", "sigma", "sigma", "%"],
    ) + "\n\n" + "\n".join(lines)  # fmt: skip


def change_text(finding: Finding) -> str:
    """The change of a finding in words."""
    parts = []
    for name, (before, after) in finding.change.items():
        if name in SAID_BY_REASON or name in OF_RECEIVED:
            continue
        if name == "use":
            parts.append("set aside")
        elif name == "flip":
            parts.append("flip" if after else "flip no more")
        else:
            parts.append(f"{name} {_plain(before)} -> {_plain(after)}")
    return ", ".join(parts) or "as it is"


def undone_text(pair: Pair, count: int, refused: Sequence[str]) -> str:
    """How many measures were put back, and what could not be."""
    done = f"{pair.name}: {count} measure{'' if count == 1 else 's'} put back as received"
    return "\n".join([done, *(_wrapped(line) for line in refused)])


def _known(value: Any) -> float | None:
    return None if value != value else float(value)


def _sigma(value: float | None) -> str:
    return "" if value is None else fixed(value, 1)


def _plain(value: Any) -> str:
    return "none" if value is None else format(value, ".9g")


def _wrapped(text: str) -> str:
    return textwrap.fill(text, WIDTH, subsequent_indent="  ")
