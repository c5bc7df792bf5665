"""A measure from two catalogue positions: theta and rho of B about A at equinox J2000, exact on
the sphere, with the errors of positions and proper motions. --add-to appends it to a pair file.

A and B are each a file (a table with a header line: ra, dec and perhaps epoch, ra_err, dec_err,
correlation, pm_ra, pm_dec, pm_ra_err, pm_dec_err, pm_correlation, name), or such words with
their values: "ra=15 23 12.31 dec=+30 17 16.2 epoch=2016.0 ra_err=0.05 dec_err=0.04". A file of
two rows holds both stars, A first. Right ascension is in degrees or hours (15 23 12.31), errors
in mas and motions in mas/yr unless another unit is said; those of right ascension are times
cos(dec), as catalogues have them.
"""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from relorbit.cli import common
from relorbit.errors import InputError

if TYPE_CHECKING:
    from relorbit.measures.between import Place, PlaceMeasure
    from relorbit.measures.pair import Pair

EXAMPLE = """  relorbit between stars.csv --epoch 2016.0 --add-to pair.ecsv --observer "Catalogue 3"
  relorbit between "ra=231.55000 dec=41.22000 epoch=2016 ra_err=0.03 dec_err=0.03" \\
      "ra=231.55021 dec=41.21966 epoch=2016 ra_err=0.05 dec_err=0.04"
"""


def configure(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("a", metavar="A", help="the primary: a file, or words in quotation marks")
    parser.add_argument("b", metavar="B", nargs="?", help="the secondary; none where A holds both")
    parser.add_argument(
        "--epoch", help="the wanted epoch, a year or a date (default: that of the positions)"
    )
    parser.add_argument("--add-to", metavar="PAIR", help="append the measure to this pair file")
    parser.add_argument(
        "--observer", default="", help="who measured, kept with it: the catalogue's name"
    )
    parser.add_argument("--note", default="", help="a remark kept with the measure")
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.measures.between import between
    from relorbit.show.between_text import between_text

    a, b = _places(options)
    found = between(a, b, options.epoch)
    said: list[str] = []
    if options.add_to is not None:
        said = _append(found, options)
    elif options.observer or options.note:
        raise InputError("--observer and --note are kept with a measure; give --add-to too")
    if options.json:
        added = {"file": options.add_to, "notes": said} if options.add_to is not None else None
        common.print_json({**found.to_dict(), "added_to": added})
        return
    print(between_text(found))
    if said:
        print("\n" + "\n".join(said))


def _places(options: argparse.Namespace) -> tuple[Place, Place]:
    from relorbit.measures.places import read_places

    given = []
    for who, text in (("A", options.a), ("B", options.b)):
        if text is None:
            continue
        try:
            given.append(read_places(text))
        except InputError as error:
            if error.path is not None:
                raise
            raise InputError(f"{who}: {error}") from None
    places = [one for part in given for one in part]
    if len(given) == 1 and len(places) != 2:
        raise InputError(
            f"{options.a!r} holds {_stars(len(places))}; give B too, or a file of two rows"
        )
    for part, text in zip(given, (options.a, options.b), strict=False):
        if len(given) == 2 and len(part) != 1:
            raise InputError(f"{text!r} holds {_stars(len(part))} where one belongs")
    return places[0], places[1]


def _stars(count: int) -> str:
    return "one star" if count == 1 else f"{count} stars"


def _append(found: PlaceMeasure, options: argparse.Namespace) -> list[str]:
    """Append the measure to the pair file, and tell what was done."""
    from relorbit.measures.appending import already, far_from
    from relorbit.measures.store import read_pair, require_pair_file

    pair: Pair = read_pair(options.add_to)
    require_pair_file(options.add_to)
    new = found.measures(options.observer, options.note)
    others = already(pair, new)
    pair.with_measures(pair.measures.append(new)).write(options.add_to)
    said = [f"appended to {options.add_to}: measure {len(pair.measures) + 1}, technique space"]
    if new.theta[0] != found.theta:
        said.append(
            f"its theta is {new.theta[0]:.5f} there: the north of J2000 at the place of A in 2000, "
            "as for all measures of the list"
        )
    if others:
        said.append(f"of that epoch the list also holds measure {', '.join(map(str, others))}")
    gap = far_from(pair, found)
    if gap is not None:
        said.append(f"A stands {gap:.0f} arcsec from the place of {pair.name} in the file: is it "
                    "this pair?")  # fmt: skip
    return said
