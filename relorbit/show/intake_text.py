"""What became of the lists that were read, in words."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from relorbit.measures.intake import Intake, Merged
from relorbit.measures.pair import Pair

MOST_LINES = 12  # lines named one by one before the rest is counted
CURE = (
    "give --ra and --dec to bring it to J2000,\n"
    "or --equinox J2000 where the list is there already"
)


def intake_text(
    into: str,
    pair: Pair,
    reports: Sequence[tuple[str, Intake, Merged]],
    reduced: int,
    cure: str = CURE,
) -> str:
    """What was read, skipped and doubled, with line numbers, and what the pair file holds.

    `cure` says what to do about position angles that could not be brought to J2000.
    """
    parts = [_list_text(*report) for report in reports]
    m = pair.measures
    held = f"{into}: {pair.name}, {_count(len(m), 'measure')}"
    if len(m):
        held += f", {m.epoch.min():.1f} to {m.epoch.max():.1f}"
    parts.append(held)
    if reduced:
        parts.append(f"theta of {_count(reduced, 'measure')} brought to equinox J2000")
    left = int(np.count_nonzero(m.equinox != "J2000"))
    if left:
        parts.append(
            f"theta of {_count(left, 'measure')} is left at its own equinox: {cure}"
        )
    return "\n".join(parts)


def _list_text(source: str, intake: Intake, merged: Merged) -> str:
    lines = [f"{source}: {_count(merged.read, 'measure')} read, {merged.appended} new"]
    understood = [f"{name} as {what}" for name, what in intake.columns.items() if what]
    if understood:
        lines.append(f"  columns: {'; '.join(understood)}")
    unread = [name for name, what in intake.columns.items() if not what]
    if unread:
        lines.append(f"  columns not read: {', '.join(unread)}")
    lines += _named("skipped", [f"line {line}: {why}" for line, why in merged.skipped])
    doubled = []
    for line, of in merged.doubled:
        repeated = f"line {of}" if isinstance(of, int) else "a measure in the pair file"
        doubled.append(f"line {line}: repeats {repeated}")
    lines += _named("doubled, not appended", doubled)
    return "\n".join(lines)


def _named(what: str, entries: Sequence[str]) -> list[str]:
    lines = [f"  {what}, {entry}" for entry in entries[:MOST_LINES]]
    rest = len(entries) - MOST_LINES
    return [*lines, f"  {what}: {rest} more"] if rest > 0 else lines


def _count(number: int, word: str) -> str:
    return f"{number} {word}{'' if number == 1 else 's'}"
