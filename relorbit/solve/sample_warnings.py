"""What an observer should be told beside the samples."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import SIZE
from relorbit.solve.posterior import Posterior
from relorbit.solve.solution import Notice
from relorbit.solve.weights import quantiles

FEW_VALUES = 10  # values up to which the prior has much to say
EDGE, MUCH = 0.1, 0.05  # share of the range of ln P at its end, and probability that lies there
POOR_FIT = 2.0
CONTRADICTION = 3.0  # standard deviations between a prior mass and that of the measures


def gather(posterior: Posterior, best: float, contradiction: Notice | None) -> Posterior:
    """The posterior with its warnings; `best` is the least chi2."""
    found = [] if contradiction is None else [contradiction]
    return replace(posterior, warnings=(*found, *_notices(posterior, best)))


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
    if p.error_scale > 1.0:
        yield Notice("scaled-errors", f"the errors of the measures were multiplied by "
                     f"{p.error_scale:.2f}, the root of reduced chi2")  # fmt: skip
