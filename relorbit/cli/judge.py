"""Judge new measures by the orbit on record, and that orbit by the new measures: the predicted
position with its error, O-C and how surprising it is, a verdict in words, what a refit changes,
and every orbit on record compared. Nothing is written.

New measures are a list, or values: EPOCH,THETA,RHO[,THETA_ERR,RHO_ERR]; an empty one is missing.
"""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from relorbit.cli import common
from relorbit.errors import InputError

if TYPE_CHECKING:
    from relorbit.measures.pair import Pair
    from relorbit.measures.table import Measures

EXAMPLE = """  relorbit judge pair.ecsv new.csv
  relorbit judge pair.ecsv --measure 2026.31,154.2,1.274,0.4,0.01 --technique camera
"""


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    parser.add_argument("new", metavar="NEW", nargs="?", help="a list of new measures")
    parser.add_argument(
        "--measure",
        action="append",
        default=[],
        metavar="VALUES",
        help="a new measure: epoch,theta,rho and perhaps theta_err,rho_err; may be given often",
    )
    parser.add_argument("--orbit", metavar="NAME", help="judge by this orbit (default: the last)")
    parser.add_argument("--layout", metavar="TOML", help="how the list NEW is set out")
    parser.add_argument("--technique", help="of new measures that do not say")
    parser.add_argument("--observer", help="of new measures that do not say")
    parser.add_argument(
        "--equinox",
        metavar="WHICH",
        help="of new measures that do not say: date, J2000 or a year (default: of a list as "
        "relorbit intake has it, of --measure J2000)",
    )
    parser.add_argument(
        "--errors",
        choices=("from-residuals", "as-given"),
        default=common.DEFAULT_ERRORS,
        help=f"errors of measures, and for the refit (default: {common.DEFAULT_ERRORS})",
    )
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.derive.judge import judge
    from relorbit.show.judge_text import judgement_text

    pair = common.read(options)
    new = _new(options, pair)
    with common.waiting("judging"):
        found = judge(pair, new, options.orbit, errors=options.errors)
    if options.json:
        common.print_json(found.to_dict())
        return
    print(judgement_text(found))


def _new(options: argparse.Namespace, pair: Pair) -> Measures:
    """The new measures at equinox J2000, from the list and the values given."""
    from relorbit.measures.intake import read_list
    from relorbit.measures.reduction import reduce_pair

    parts = []
    if options.new is not None:
        parts.append(read_list(
            options.new, options.layout, equinox=options.equinox, technique=options.technique,
            observer=options.observer, allow_any_epoch=options.any_epoch,
        ).measures)  # fmt: skip
    if options.measure:
        parts.append(_values(options))
    if not parts:
        raise InputError("no new measure is given; name a list, or give values with --measure")
    joined = parts[0] if len(parts) == 1 else parts[0].append(parts[1])
    return reduce_pair(pair.with_measures(joined))[0].measures


def _values(options: argparse.Namespace) -> Measures:
    from relorbit.derive.epochs import epoch_from_text
    from relorbit.derive.new_measures import COLUMNS
    from relorbit.measures.table import Measures

    columns: dict[str, list] = {name: [] for name in COLUMNS}
    for text in options.measure:
        words = [word.strip() for word in text.split(",")]
        if not 3 <= len(words) <= len(COLUMNS):
            raise InputError(
                f"--measure: {text!r} has {len(words)} values; write EPOCH,THETA,RHO and perhaps "
                "THETA_ERR,RHO_ERR"
            )
        words += [""] * (len(COLUMNS) - len(words))
        columns["epoch"].append(epoch_from_text(words[0]))
        for name, word in zip(COLUMNS[1:], words[1:], strict=True):
            columns[name].append(_number(name, word))
    count = len(options.measure)
    said = {"technique": options.technique, "observer": options.observer}
    said["equinox"] = options.equinox
    columns |= {name: [word] * count for name, word in said.items() if word is not None}
    try:
        return Measures.from_columns(columns, allow_any_epoch=options.any_epoch)
    except InputError as error:
        raise InputError(f"--measure: {error}") from None


def _number(name: str, word: str) -> float | None:
    if not word:
        return None
    try:
        return float(word)
    except ValueError:
        raise InputError(f"--measure: {word!r} is not a number for {name}") from None
