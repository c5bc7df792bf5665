"""Draw a pair: the apparent orbit with the measures and their residuals, theta and rho against
time, the residuals, the same before and after measures were put right or set aside (strips), the
weights of measures, the periodogram of the residuals, or a sheet with all of it fit to print. PNG,
PDF or SVG by the file's name.
"""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING, Any

from relorbit.cli import common

if TYPE_CHECKING:
    from relorbit.measures.pair import Pair
    from relorbit.orbit.elements import Elements

EXAMPLE = """  relorbit draw pair.ecsv --out orbit.png
  relorbit draw pair.ecsv --figure sheet --out sheet.pdf
  relorbit draw pair.ecsv --orientation eyepiece --years 20 --out finder.svg
"""
FIGURES = ("orbit", "time", "residuals", "strips", "weights", "periodogram", "sheet")
SHEET_YEARS = 10


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    parser.add_argument(
        "--out", metavar="FILE", required=True, help="PNG, PDF or SVG file to write"
    )
    parser.add_argument(
        "--figure", choices=FIGURES, default="orbit", help="which figure (default: orbit)"
    )
    parser.add_argument(
        "--orientation",
        choices=("sky", "eyepiece"),
        default="sky",
        help="north up and east left as on the sky (default), or as in an inverting eyepiece",
    )
    parser.add_argument(
        "--years", type=int, default=0, metavar="N", help="mark the places of the next N years"
    )
    parser.add_argument(
        "--compare", action="store_true", help="also draw the other orbits on record, thin"
    )
    common.add_orbit(parser)
    common.add_companion(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.show.files import check_format, save_figure

    check_format(options.out)
    pair = common.read(options)
    figure = _figure(options, pair)
    with common.waiting("drawing"):
        save_figure(figure, options.out)
    print(f"drawn: {options.out}")


def _figure(options: argparse.Namespace, pair: Pair) -> Any:
    from relorbit.derive.ephemeris import elements_and_uncertainty, ephemeris, turning_points
    from relorbit.derive.epochs import coming_years
    from relorbit.show.orbit_plot import apparent_orbit
    from relorbit.show.residual_plot import residuals_over_time
    from relorbit.show.sheet import sheet
    from relorbit.show.time_plot import over_time
    from relorbit.solve.residuals import residuals

    orbit = common.orbit(pair, options)
    elements = elements_and_uncertainty(orbit)[0]
    future = None
    if options.years > 0:
        future = ephemeris(orbit, coming_years(common.today(), options.years))
    if options.figure == "sheet":
        solution = common.as_solution(pair, orbit)
        coming = ephemeris(orbit, coming_years(common.today(), options.years or SHEET_YEARS))
        points = turning_points(orbit, common.today())
        return sheet(solution, pair, coming, points, orientation=options.orientation)
    if options.figure == "weights":
        return _weights(options, pair)
    if options.figure == "periodogram":
        from relorbit.show.periodogram_plot import periodogram

        return periodogram(common.companion(pair, orbit, options), title=pair.name)
    if options.figure == "residuals":
        return residuals_over_time(residuals(elements, pair.measures), title=pair.name)
    if options.figure == "strips":
        return _strips(elements, pair)
    if options.figure == "time":
        return over_time(elements, pair.measures, ephemeris=future, title=pair.name)
    others = {}
    if options.compare:
        others = {one.name: one.elements for one in pair.orbits if one is not orbit}
    return apparent_orbit(
        elements,
        pair.measures,
        orientation=options.orientation,
        title=pair.name,
        others=others,
        future=future,
    )


def _strips(elements: Elements, pair: Pair) -> Any:
    """The list as it was before any measure was corrected, flipped or set aside, and as it is."""
    from relorbit.measures.editing import with_flip, with_use
    from relorbit.measures.vetting import undone
    from relorbit.show.strips_plot import strips_before_after
    from relorbit.solve.residuals import residuals

    m = pair.measures
    rows = [k for k in range(len(m)) if m.flip[k] or not m.use[k] or m.vetted[k]]
    before, _ = undone(pair)
    before = with_flip(before, [k for k in rows if before.measures.flip[k]])
    before = with_use(before, rows, True)
    return strips_before_after(
        residuals(elements, before.measures), residuals(elements, m), rows, title=pair.name
    )


def _weights(options: argparse.Namespace, pair: Pair) -> Any:
    """Weights are those of a fresh fit: an orbit on record does not keep them."""
    from relorbit.show.weight_plot import weights_over_time

    options.errors = options.errors or "from-residuals"
    return weights_over_time(common.solve(pair, options), title=pair.name)
