"""Positions of the companion at other dates, with errors, and the next periastron, closest and
widest apparent separation.

The orbit is the one on record in the pair file, or a fresh solution where there is none or
--fresh is given, or the one that --elements spells out without any file.
"""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from relorbit.cli import common
from relorbit.errors import InputError

if TYPE_CHECKING:
    from relorbit.derive.ephemeris import AnyOrbit

EXAMPLE = """  relorbit ephemeris pair.ecsv --from 2027 --to 2037 --step 1y
  relorbit ephemeris pair.ecsv --from 2027-03-01 --to 2027-09-01 --step 30d --json
  relorbit ephemeris --from-samples samples.ecsv --from 2027 --to 2060 --step 3y
  relorbit ephemeris --elements P=41.6,T=1934.0,e=0.28,a=0.9,i=59,node=24,omega=220 --at 1980.0
"""


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser, optional=True)
    parser.add_argument(
        "--elements",
        metavar="P=..,T=..,..",
        help="the seven elements, without a file: P, T in years, a in arcsec, angles in degrees",
    )
    parser.add_argument(
        "--from", dest="first", metavar="EPOCH", help="first epoch (default: today)"
    )
    parser.add_argument(
        "--to", dest="last", metavar="EPOCH", help="last epoch (default: 10 steps on)"
    )
    parser.add_argument("--step", default="1 year", help="such as 1y, 6mo or 30d (default: 1 year)")
    parser.add_argument(
        "--at", metavar="EPOCH,EPOCH,...", help="these epochs instead: years or dates"
    )
    parser.add_argument(
        "--from-samples", metavar="FILE",
        help="medians and intervals from samples that `relorbit sample --out` has saved",
    )  # fmt: skip
    common.add_orbit(parser)
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    if options.from_samples is not None:
        _from_samples(options)
        return
    from relorbit.derive.ephemeris import ephemeris, turning_points
    from relorbit.derive.epochs import chosen_epochs
    from relorbit.show.text import ephemeris_table, turning_points_table

    epochs = chosen_epochs(options.at, options.first, options.last, options.step, common.today())
    orbit = _orbit(options)
    result = ephemeris(orbit, epochs)
    points = turning_points(orbit, float(epochs[0]))
    if options.json:
        content = result.to_dict()
        content["turning_points"] = [point.to_dict() for point in points]
        common.print_json(content)
        return
    print(ephemeris_table(result))
    if points:
        print("\n" + turning_points_table(points))
    print("\nTheta at equinox J2000. Never point a telescope near the Sun.")


def _from_samples(options: argparse.Namespace) -> None:
    from relorbit.derive.epochs import chosen_epochs
    from relorbit.derive.posterior import sampled_ephemeris
    from relorbit.show.posterior_text import sampled_ephemeris_table
    from relorbit.show.text import warnings_text
    from relorbit.solve.saved_samples import read_samples

    if options.pair is not None or options.elements is not None:
        raise InputError("--from-samples brings the orbits itself; leave PAIR and --elements out")
    epochs = chosen_epochs(options.at, options.first, options.last, options.step, common.today())
    posterior = read_samples(options.from_samples)
    found = sampled_ephemeris(posterior, epochs)
    if options.json:
        content = found.to_dict()
        content |= {"pair": posterior.pair, "effective_size": posterior.effective_size,
                    "warnings": [one.to_dict() for one in posterior.warnings]}  # fmt: skip
        common.print_json(content)
        return
    print(sampled_ephemeris_table(found))
    print(f"\n{posterior.pair}: medians, and intervals that hold 68 and 95 % of "
          f"{posterior.effective_size:.0f} effective samples.")  # fmt: skip
    print("Theta at equinox J2000. Never point a telescope near the Sun.")
    if posterior.warnings:
        print("\n" + warnings_text(posterior.warnings))


def _orbit(options: argparse.Namespace) -> AnyOrbit:
    if (options.pair is None) == (options.elements is None):
        raise InputError("give either a pair file or --elements, one of the two")
    if options.elements is not None:
        return common.elements(options.elements)
    return common.orbit(common.read(options), options)
