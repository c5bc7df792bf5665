"""Find slips among the measures of a pair: swapped quadrants, mirrored angles, misplaced decimals,
mistyped years, nights entered twice, theta left at another equinox. Each finding says how far the
measure lies from where the others put it, before and after, how sure it is, and the exact change.

Nothing is changed without --apply; what was observed is kept, and --undo takes the changes back.
"""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING, Any

from relorbit.cli import common
from relorbit.errors import InputError

if TYPE_CHECKING:
    from relorbit.measures.pair import Pair
    from relorbit.measures.vetting import Finding

EXAMPLE = """  relorbit vet pair.ecsv
  relorbit vet pair.ecsv --apply --measures 12,40
  relorbit vet pair.ecsv --undo
"""


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    what = parser.add_mutually_exclusive_group()
    what.add_argument(
        "--apply", action="store_true", help="put right what was found, in the pair file"
    )
    what.add_argument(
        "--undo", action="store_true", help="take back what --apply changed, in the pair file"
    )
    parser.add_argument(
        "--measures", metavar="NUMBERS", help="only these, by their place in the list: 12,40"
    )
    parser.add_argument(
        "--orbit", metavar="NAME",
        help="vet against the orbit on record of this name (default: against the orbit that the "
        "measures make likeliest, or a curve through few)",
    )  # fmt: skip
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.measures.vetting import SCHEMA

    pair = common.read(options)
    rows = _rows(options.measures, len(pair.measures))
    if options.apply or options.undo:
        _require_pair_file(options.pair)
    if options.undo:
        _undo(pair, rows, options)
        return
    findings = _found(pair, rows, options)
    done = _applied(pair, findings, options) if options.apply else False
    if options.json:
        common.print_json({
            "schema": SCHEMA, "pair": pair.name, "measures": len(pair.measures),
            "findings": [one.to_dict() for one in findings], "applied": done,
        })  # fmt: skip
        return
    _print(pair, findings, done, options)


def _found(pair: Pair, rows: set[int] | None, options: argparse.Namespace) -> list[Finding]:
    from relorbit.solve.vetted import vet

    orbit = None if options.orbit is None else pair.orbit(options.orbit)
    with common.progress("vetting") as report:
        findings = vet(pair, orbit, on_progress=report)
    return [one for one in findings if rows is None or one.row in rows]


def _applied(pair: Pair, findings: list[Finding], options: argparse.Namespace) -> bool:
    from relorbit.measures.vetting import applied

    changed = applied(pair, findings)
    if changed is not pair:
        changed.write(options.pair)
    return changed is not pair


def _print(
    pair: Pair, findings: list[Finding], done: bool, options: argparse.Namespace
) -> None:
    from relorbit.show.vet_text import findings_text

    print(findings_text(pair, findings))
    if done:
        print(f"\nput right in {options.pair}; --undo takes it back")
    elif findings and not options.apply:
        print("\nnothing is changed; --apply puts it right, --undo takes that back")


def _undo(pair: Pair, rows: set[int] | None, options: argparse.Namespace) -> None:
    from relorbit.measures.vetting import undone
    from relorbit.show.vet_text import undone_text

    before = pair.measures.vetted
    changed, refused = undone(pair, rows)
    count = int((changed.measures.vetted != before).sum())
    if changed is not pair:
        changed.write(options.pair)
    if options.json:
        content: dict[str, Any] = {"pair": pair.name, "undone": count, "refused": list(refused)}
        common.print_json({"schema": "relorbit/undone/1", **content})
        return
    print(undone_text(pair, count, refused))


def _rows(text: str | None, count: int) -> set[int] | None:
    if text is None:
        return None
    rows = set()
    for word in text.split(","):
        if not word.strip().isdecimal():
            raise InputError(f"--measures: {word.strip()!r} is not a number; write 12,40")
        if not 1 <= int(word) <= count:
            raise InputError(f"--measures: there is no measure {int(word)}; the pair has {count}")
        rows.add(int(word) - 1)
    return rows


def _require_pair_file(path: str) -> None:
    from relorbit.measures.store import require_pair_file

    try:
        require_pair_file(path)
    except InputError:
        raise InputError(
            "is a plain list, which would lose what was observed; make a pair file of it with "
            "relorbit intake",
            path=path,
        ) from None
