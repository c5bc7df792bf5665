"""All orbits that fit, in proportion to their probability: medians and intervals of the elements,
the mass, the next periastron and the widest and closest separation, for whole orbits and for
short arcs alike. Says which separate orbits there are, where there are several.

Exit status 3 says that the measures cannot be sampled, and why.
"""

from __future__ import annotations

import argparse
from math import isfinite
from typing import TYPE_CHECKING, Any

from relorbit.cli import common

if TYPE_CHECKING:
    from relorbit.solve.posterior import Posterior

EXAMPLE = """  relorbit sample pair.ecsv
  relorbit sample pair.ecsv --size 50000 --out samples.fits --corner corner.png
  relorbit sample pair.ecsv --prior thermal --orbits sheaf.pdf --bands bands.pdf
  relorbit sample pair.ecsv --errors from-residuals
  relorbit sample pair.ecsv --prior mass=2.1:0.2 --json
"""
FIGURES = {
    "corner": "the samples two by two",
    "orbits": "a sheaf of sampled orbits over the measures",
    "bands": "theta and rho in time with 68 and 95 %% bands",
    "masses": "a histogram of the total mass",
}


def configure(parser: argparse.ArgumentParser) -> None:
    common.add_pair(parser)
    parser.add_argument(
        "--size", type=int, default=10_000, metavar="N",
        help="effective samples wanted (default: 10000)",
    )  # fmt: skip
    parser.add_argument("--seed", type=int, default=0, help="the same seed, the same samples")
    parser.add_argument(
        "--prior", metavar="WORDS", default=None,
        help="with commas: thermal (e), flat-constants (Thiele-Innes), mass=VALUE:ERROR (suns)",
    )  # fmt: skip
    parser.add_argument(
        "--period-range", metavar="SHORTEST:LONGEST", help="only these periods, in years"
    )
    parser.add_argument(
        "--epoch-range", metavar="FIRST:LAST", help="use only measures of these years"
    )
    common.add_errors(parser, "as-given")
    parser.add_argument(
        "--scale-errors", action="store_true",
        help="enlarge the errors given by the root of reduced chi2, where that is above 1",
    )  # fmt: skip
    parser.add_argument("--out", metavar="FILE", help="save the samples: .ecsv or .fits")
    for name, what in FIGURES.items():
        parser.add_argument(f"--{name}", metavar="FILE", help=f"draw {what}: PNG, PDF or SVG")
    common.add_json(parser)


def run(options: argparse.Namespace) -> None:
    from relorbit.derive.posterior import summary
    from relorbit.show.posterior_text import posterior_text

    _check_names(options)
    posterior = sampled(options)
    found = summary(posterior, common.today())
    if options.out is not None:
        posterior.write(options.out)
    drawn = _draw(options, posterior)
    if options.json:
        content = found.to_dict()
        content |= {
            "pair": posterior.pair, "size": posterior.size, "seed": posterior.seed,
            "effective_size": posterior.effective_size,
            "pareto_k": posterior.pareto_k if isfinite(posterior.pareto_k) else None,
            "drawn": posterior.drawn, "prior": posterior.prior.to_dict(),
            "errors": posterior.errors, "error_scale": posterior.error_scale,
            "noise": [group.to_dict() for group in posterior.noise],
            "warnings": [one.to_dict() for one in posterior.warnings],
        }  # fmt: skip
        common.print_json(content)
        return
    print(posterior_text(posterior, found))
    for path in ([options.out] if options.out else []) + drawn:
        print(f"written: {path}")


def sampled(options: argparse.Namespace) -> Posterior:
    """The samples that the options ask for."""
    from dataclasses import replace

    from relorbit.solve.prior import Prior
    from relorbit.solve.sample import sample

    prior = Prior.of(options.prior)
    if options.period_range is not None:
        periods = common.range_of(options.period_range, "--period-range")
        prior = replace(prior, period_range=periods)
    with common.progress("sampling") as report:
        return sample(
            common.read(options),
            options.size,
            options.seed,
            prior,
            **common.measured(options),
            scale_errors=options.scale_errors,
            on_progress=report,
        )


def _check_names(options: argparse.Namespace) -> None:
    """Refuse a name before the work rather than after it."""
    from relorbit.solve.saved_samples import check_samples_name

    if options.out is not None:
        check_samples_name(options.out)
    paths = [getattr(options, name) for name in FIGURES if getattr(options, name) is not None]
    if paths:
        from relorbit.show.files import check_format

        for path in paths:
            check_format(path)


def _draw(options: argparse.Namespace, posterior: Posterior) -> list[str]:
    if not any(getattr(options, name) for name in FIGURES):
        return []
    from relorbit.derive.epochs import band_epochs
    from relorbit.derive.posterior import sampled_ephemeris
    from relorbit.show.corner_plot import corner_of_samples, refuse_few
    from relorbit.show.files import save_figure
    from relorbit.show.sampled_plots import ephemeris_bands, mass_histogram, sheaf_of_orbits
    from relorbit.solve.residuals import residuals

    refuse_few(posterior)
    pair = common.read(options)
    makers: dict[str, Any] = {
        "corner": lambda: corner_of_samples(posterior),
        "orbits": lambda: sheaf_of_orbits(posterior, pair.measures, title=pair.name),
        "bands": lambda: ephemeris_bands(
            sampled_ephemeris(posterior, band_epochs(posterior.observations.epoch), 4000),
            residuals(posterior.best, pair.measures), title=pair.name,
        ),
        "masses": lambda: mass_histogram(posterior),
    }  # fmt: skip
    done = []
    for name, make in makers.items():
        path = getattr(options, name)
        if path is not None:
            save_figure(make(), path)
            done.append(path)
    return done
