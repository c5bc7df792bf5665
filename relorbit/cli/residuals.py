"""Observed minus computed of every measure, from the orbit on record or a fresh solution; with
--companion, what the residuals still hide: a wobble with a period, or a drift.
"""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from relorbit.cli import common

if TYPE_CHECKING:
    from relorbit.derive.ephemeris import AnyOrbit
    from relorbit.measures.pair import Pair

EXAMPLE = """  relorbit residuals pair.ecsv
  relorbit residuals measures.csv --fresh --json
  relorbit residuals pair.ecsv --fresh --companion
"""


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    common.add_orbit(parser)
    common.add_companion(parser)
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.derive.ephemeris import elements_and_uncertainty
    from relorbit.show.text import residuals_table, technique_table
    from relorbit.solve.residuals import residuals
    from relorbit.solve.solution import Solution

    pair = common.read(options)
    orbit = common.orbit(pair, options)
    if options.companion:
        _companion(pair, orbit, options)
        return
    if isinstance(orbit, Solution):
        result = orbit.residuals
    else:
        result = residuals(elements_and_uncertainty(orbit)[0], pair.measures)
    if options.json:
        common.print_json(result.to_dict())
        return
    print(residuals_table(result))
    print("\n" + technique_table(result))


def _companion(pair: Pair, orbit: AnyOrbit, options: argparse.Namespace) -> None:
    from relorbit.show.companion_text import companion_text

    with common.waiting("looking for a companion"):
        found = common.companion(pair, orbit, options)
    if options.json:
        common.print_json(found.to_dict())
        return
    print(companion_text(found))
