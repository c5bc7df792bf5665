"""Is it a pair at all? Compares stars at rest to each other, straight motion and an orbit by their
marginal likelihoods, tests the motion against the speed of escape where the parallax is known,
and says what further measure would decide.
"""

from __future__ import annotations

import argparse

from relorbit.cli import common

EXAMPLE = """  relorbit kind pair.ecsv
  relorbit kind pair.ecsv --mass 2.1:0.4
  relorbit kind pair.ecsv --secondary parallax=21.3,parallax_err=0.2
  relorbit kind pair.ecsv --secondary pm_ra=-40.1,pm_dec=12.0,pm_err=0.3
"""
SECONDARY = {
    "parallax": "parallax_mas", "parallax_err": "parallax_err_mas", "pm_ra": "pm_ra_mas_yr",
    "pm_dec": "pm_dec_mas_yr", "pm_err": "pm_err_mas_yr",
}  # fmt: skip


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    parser.add_argument("--seed", type=int, default=0, help="the same seed, the same odds")
    parser.add_argument("--prior", metavar="WORDS", help="of the orbit, as for `relorbit sample`")
    parser.add_argument(
        "--mass", metavar="VALUE:ERROR", help="total mass in suns, for the speed of escape"
    )
    parser.add_argument(
        "--secondary", action="append", default=[], metavar="NAME=VALUE,...",
        help="of the companion: parallax, parallax_err (mas), pm_ra, pm_dec (mas a year), "
        "pm_err (of the difference of the two)",
    )  # fmt: skip
    parser.add_argument(
        "--speeds", metavar="SLOWEST:FASTEST", help="of passing stars, arcsec a year"
    )
    parser.add_argument(
        "--epoch-range", metavar="FIRST:LAST", help="use only measures of these years"
    )
    common.add_errors(parser, "as-given")
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.errors import InputError
    from relorbit.show.kind_text import kind_text
    from relorbit.solve.kind import SPEEDS, Secondary, kind

    given = common.assignments(options.secondary, "--secondary")
    unknown = [name for name in given if name not in SECONDARY]
    if unknown:
        raise InputError(f"--secondary: {unknown[0]} is not one of {', '.join(SECONDARY)}")
    secondary = Secondary(**{SECONDARY[name]: value for name, value in given.items()})
    mass = None if options.mass is None else common.value_and_error(options.mass, "--mass")
    with common.progress("comparing") as report:
        found = kind(
            common.read(options),
            options.seed,
            options.prior,
            speed_range=common.range_of(options.speeds, "--speeds") or SPEEDS,
            mass=mass,
            secondary=secondary if given else None,
            **common.measured(options),
            on_progress=report,
        )
    if options.json:
        common.print_json(found.to_dict())
        return
    print(kind_text(found))
