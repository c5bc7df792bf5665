"""Find the orbit of a pair without a starting guess: elements with errors, the total mass where
the parallax is known, the other orbits that fit, and what the measures of each observer and
technique are worth. Their errors are estimated from the residuals together with the orbit, so
that slips count for little; --errors as-given takes those that the measures bring.

Exit status 3 says that the measures do not determine an orbit, and why.
"""

from __future__ import annotations

import argparse
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from relorbit import __version__
from relorbit.cli import common
from relorbit.errors import Undetermined

if TYPE_CHECKING:
    from relorbit.measures.pair import Pair
    from relorbit.solve.solution import Solution

EXAMPLE = """  relorbit solve pair.ecsv
  relorbit solve measures.csv --hold e=0 --json
  relorbit solve pair.ecsv --errors as-given
  relorbit solve pair.ecsv --record "first orbit" --note "before the new season"
"""


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    common.add_fit(parser)
    parser.add_argument("--record", metavar="NAME", help="keep the orbit in the pair file")
    parser.add_argument("--note", default="", help="a remark kept with the recorded orbit")
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.measures.store import require_pair_file
    from relorbit.show.text import solution_text

    pair = common.read(options)
    if options.record is not None:
        require_pair_file(options.pair)
    try:
        solution = common.solve(pair, options)
    except Undetermined as error:
        with common.waiting("looking at what the arc does say"):
            answer = common.short_arc(pair, options, error)
        if options.json:
            common.print_json(answer.to_dict())
        raise answer from None
    if options.record is not None:
        _keep(pair, solution, options)
    if options.json:
        common.print_json(solution.to_dict())
        return
    print(solution_text(solution))
    if options.record is not None:
        print(f"\nkept on record as {options.record!r} in {options.pair}")


def _keep(pair: Pair, solution: Solution, options: argparse.Namespace) -> None:
    record = solution.to_record(
        options.record,
        recorded=datetime.now(UTC).date().isoformat(),
        source=f"relorbit {__version__}",
        note=options.note,
    )
    pair.with_orbit(record).write(options.pair)
