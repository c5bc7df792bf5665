"""The total mass of a pair from its orbit and parallax, and how much each source of error
(semimajor axis, period, their correlation, parallax) has in the error of the mass.
"""

from __future__ import annotations

import argparse

from relorbit.cli import common
from relorbit.errors import InputError

EXAMPLE = """  relorbit weigh pair.ecsv
  relorbit weigh measures.csv --parallax 23.4 --parallax-err 0.3
"""


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    parser.add_argument(
        "--parallax", type=float, metavar="MAS", help="parallax in mas, instead of the pair file's"
    )
    parser.add_argument(
        "--parallax-err", type=float, metavar="MAS", help="its standard deviation in mas"
    )
    parser.add_argument(
        "--mass-ratio",
        type=float,
        metavar="RATIO",
        help="secondary over primary, known otherwise: gives the two masses",
    )
    common.add_orbit(parser)
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.derive.mass import component_masses, mass_budget
    from relorbit.show.text import component_text, mass_budget_text

    pair = common.read(options)
    parallax, error = pair.parallax_mas, pair.parallax_err_mas
    if options.parallax is not None:
        parallax, error = options.parallax, options.parallax_err
    if parallax is None:
        raise InputError("a mass needs a parallax; give --parallax in mas", path=options.pair)
    if error is not None and not error > 0.0:
        raise InputError(f"--parallax-err: {error:g} is not above 0; leave it out where unknown")
    orbit = common.orbit(pair, options)
    try:
        budget = mass_budget(orbit, parallax, error)
        parts = options.mass_ratio and component_masses(budget.mass.value, options.mass_ratio)
    except ValueError as error:
        raise InputError(str(error)) from None
    if options.json:
        content = budget.to_dict()
        content["component_masses"] = list(parts) if parts else None
        common.print_json(content)
        return
    print(mass_budget_text(budget))
    if parts:
        print("\n" + component_text(parts, options.mass_ratio))
