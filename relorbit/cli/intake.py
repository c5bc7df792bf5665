"""Read lists of measures (CSV, TSV, semicolons, blanks, or fixed columns by a layout file) and
append them to a pair file, which is made where it does not exist. Where the position of the pair
is known, position angles of date are brought to equinox J2000; the values as received are kept.

Nothing is written unless every list could be read.
"""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING, Any

from relorbit.cli import common

if TYPE_CHECKING:
    from relorbit.measures.pair import Pair

EXAMPLE = """  relorbit intake measures.csv --into pair.ecsv --name "Invented 12" \\
      --ra "15 23 12.3" --dec "+30 17 16" --parallax 23.4 --parallax-err 0.3
  relorbit intake mail.txt --layout mail.toml --into pair.ecsv
"""

# option, field of the pair, help
IDENTITY = (
    ("--name", "name", "name of the pair"),
    ("--ra", "ra_deg", "right ascension J2000: degrees, or hours as '15 23 12.3'"),
    ("--dec", "dec_deg", "declination J2000: degrees, or '+30 17 16'"),
    ("--pm-ra", "pm_ra_mas_yr", "proper motion in right ascension times cos(dec), mas/yr"),
    ("--pm-dec", "pm_dec_mas_yr", "proper motion in declination, mas/yr"),
    ("--parallax", "parallax_mas", "parallax, mas"),
    ("--parallax-err", "parallax_err_mas", "standard deviation of the parallax, mas"),
    ("--magnitude-primary", "magnitude_primary", "visual magnitude"),
    ("--magnitude-secondary", "magnitude_secondary", "visual magnitude"),
    ("--spectral-primary", "spectral_primary", "spectral type"),
    ("--spectral-secondary", "spectral_secondary", "spectral type"),
)


def configure(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("sources", metavar="SOURCE", nargs="+", help="a list of measures")
    parser.add_argument("--into", metavar="PAIR", required=True, help="the pair file to append to")
    parser.add_argument("--layout", metavar="TOML", help="how the lists are set out")
    for option, field, what in IDENTITY:
        parser.add_argument(option, dest=field, help=what)
    parser.add_argument(
        "--designation",
        action="append",
        default=[],
        help="another name; may be given several times",
    )
    parser.add_argument(
        "--equinox",
        metavar="WHICH",
        help="of rows that do not say: date, J2000 or a year (default: date, J2000 from space)",
    )
    parser.add_argument("--technique", help="of rows that do not say")
    parser.add_argument("--observer", help="of rows that do not say")
    parser.add_argument(
        "--any-epoch", action="store_true", help="also take epochs before 1600 or after 2200"
    )
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.measures.intake import merge, read_list
    from relorbit.measures.reduction import reduce_pair
    from relorbit.show.intake_text import intake_text

    pair = _pair(options)
    reports: list[tuple[str, Any, Any]] = []
    for source in options.sources:
        intake = read_list(
            source,
            options.layout,
            equinox=options.equinox,
            technique=options.technique,
            observer=options.observer,
            allow_any_epoch=options.any_epoch,
        )
        pair, merged = merge(pair, intake)
        reports.append((source, intake, merged))
    pair, reduced = reduce_pair(pair)
    pair.write(options.into)
    if options.json:
        common.print_json(_json(options.into, pair, reports, reduced))
        return
    print(intake_text(options.into, pair, reports, reduced))


def _pair(options: argparse.Namespace) -> Pair:
    """The pair file as it is, or a new pair, with what the options say of its identity."""
    from relorbit.measures.pair import new_pair
    from relorbit.measures.store import read_pair, require_pair_file

    said = {field: getattr(options, field) for _, field, _ in IDENTITY}
    said = {field: value for field, value in said.items() if value is not None}
    if Path(options.into).exists():
        require_pair_file(options.into)
        pair = read_pair(options.into, allow_any_epoch=options.any_epoch)
    else:
        pair = new_pair(Path(options.into).stem)
    return pair.with_identity(**said, designations=options.designation)


def _json(into: str, pair: Pair, reports: list, reduced: int) -> dict[str, Any]:
    return {
        "schema": "relorbit/intake/1",
        "pair": pair.name,
        "file": into,
        "measures": len(pair.measures),
        "brought_to_J2000": reduced,
        "lists": [
            {
                "source": source,
                "columns": dict(intake.columns),
                "read": merged.read,
                "appended": merged.appended,
                "skipped": [{"line": line, "why": why} for line, why in merged.skipped],
                "doubled": [{"line": line, "of": of} for line, of in merged.doubled],
            }
            for source, intake, merged in reports
        ],
    }
