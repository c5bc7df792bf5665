"""What an observer should be told beside the samples."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from relorbit.measures.pair import Pair
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import SIZE
from relorbit.solve.posterior import Posterior
from relorbit.solve.solution import Notice
from relorbit.solve.warnings import (
    PLAUSIBLE_MASS,
    POOR_FIT,
    default_errors,
    down_weighted,
    not_at_j2000,
)
from relorbit.solve.weights import quantiles

FEW_VALUES = 10  # values up to which the prior has much to say
EDGE, MUCH = 0.1, 0.05  # share of the range of ln P at its end, and probability that lies there
CONTRADICTION = 3.0  # standard deviations between a prior mass and that of the measures


def gather(
    posterior: Posterior, pair: Pair, best: float, contradiction: Notice | None
) -> Posterior:
    """The posterior with its warnings; `best` is the least chi2."""
    found = [] if contradiction is None else [contradiction]
    found += [*_notices(posterior, best), *_of_the_mass(posterior, pair)]
    found += default_errors(posterior.observations) if not posterior.noise else []
    found += down_weighted(posterior.noise, len(posterior.observations))
    found += not_at_j2000(pair, posterior.observations)
    return replace(posterior, warnings=tuple(found))


def mass_contradiction(
    mass: FloatArray, weight: FloatArray, prior: tuple[float, float]
) -> Notice | None:
    """What to say where a prior mass is far from that of the measures alone (samples)."""
    value, sigma = prior
    low, median, high = map(float, quantiles(mass, weight, (0.16, 0.5, 0.84)))
    side = high - median if value > median else median - low
    gap = abs(value - median) / float(np.hypot(sigma, side))
    if gap < CONTRADICTION:
        return None
    return Notice(
        "prior-contradicts",
        f"the prior mass {value:g} +/- {sigma:g} suns is {gap:.1f} standard deviations from what "
        f"the measures and the parallax say without it, {median:.3g} (68 %: {low:.3g} to "
        f"{high:.3g}): one of the three is wrong",
    )


def _notices(p: Posterior, best: float) -> Iterator[Notice]:
    if p.effective_size < p.size:
        yield Notice(
            "too-few-samples",
            f"{p.effective_size:.0f} effective samples of the {p.size} asked for, from {p.drawn} "
            "draws: the intervals are rough",
        )
    if p.pareto_k > 0.7:
        yield Notice(
            "heavy-tail",
            f"the largest weights fall off slowly (Pareto k {p.pareto_k:.2f}): the tails of the "
            "intervals are not to be trusted",
        )
    o = p.observations
    if o.numbers <= FEW_VALUES:
        yield Notice(
            "prior-speaks",
            f"{o.numbers} values for {SIZE} unknowns: most of what is said here is the prior's "
            f"({p.prior})",
        )
    low, high = np.log(p.prior.period_range)
    at_end = float(p.weight[np.log(p.P) > high - EDGE * (high - low)].sum())
    if at_end > MUCH:
        yield Notice(
            "period-at-the-end",
            f"{100 * at_end:.0f} % of the probability lies at the longest periods looked at (up "
            f"to {p.prior.period_range[1]:.3g} years): the long end is set by the prior",
        )
    dof = o.numbers - SIZE
    if dof > 0 and best / dof > POOR_FIT:
        yield Notice(
            "poor-fit",
            f"reduced chi2 is {best / dof:.2f} with the errors as given: the intervals are too "
            "narrow by about its root; look for slips, or scale the errors",
        )
    if any(group.theta_offset is not None or group.rho_offset is not None for group in p.noise):
        yield Notice(
            "zero-points-held",
            "the zero points of groups were taken off and held: their own errors are not in the "
            "intervals",
        )
    if p.error_scale > 1.0:
        yield Notice("scaled-errors", f"the errors of the measures were multiplied by "
                     f"{p.error_scale:.2f}, the root of reduced chi2")  # fmt: skip


def _of_the_mass(p: Posterior, pair: Pair) -> Iterator[Notice]:
    if p.mass is None:
        if pair.parallax_mas is not None:
            yield Notice(
                "parallax-unusable",
                f"the parallax of {pair.parallax_mas:g} mas is not above 0: no mass is given",
            )
        return
    if p.parallax_err_mas is None:
        yield Notice(
            "parallax-error-missing",
            "the parallax has no error: the intervals of the mass hold that of the orbit only",
        )
    low, high = PLAUSIBLE_MASS
    share = float(p.weight[(p.mass > low) & (p.mass < high)].sum())
    if share < MUCH:
        yield Notice(
            "mass-implausible",
            f"{100 * (1 - share):.0f} % of the samples have a total mass that is not one of stars "
            f"({low:g} to {high:g} suns): check the parallax (in mas), the separations (in arcsec) "
            "and whether it is a pair (relorbit kind)",
        )
