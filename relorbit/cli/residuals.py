"""Observed minus computed of every measure, from the orbit on record or a fresh solution."""

from __future__ import annotations

import argparse

from relorbit.cli import common

EXAMPLE = """  relorbit residuals pair.ecsv
  relorbit residuals measures.csv --fresh --json
"""


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    common.add_orbit(parser)
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.derive.ephemeris import elements_and_uncertainty
    from relorbit.show.text import residuals_table, technique_table
    from relorbit.solve.residuals import residuals
    from relorbit.solve.solution import Solution

    pair = common.read(options)
    orbit = common.orbit(pair, options)
    if isinstance(orbit, Solution):
        result = orbit.residuals
    else:
        result = residuals(elements_and_uncertainty(orbit)[0], pair.measures)
    if options.json:
        common.print_json(result.to_dict())
        return
    print(residuals_table(result))
    print("\n" + technique_table(result))
