"""Whether measures determine an orbit: what is refused, why, and what they say all the same."""

from __future__ import annotations

from typing import Any

import numpy as np

from relorbit.errors import Undetermined
from relorbit.orbit.regular import SIZE, elements_from_regular
from relorbit.solve.holding import Holding
from relorbit.solve.limits import (
    ONE_SIGMA,
    TWO_SIGMA,
    PeriodProfile,
    StraightMotion,
    period_profile,
    rise_at_long_periods,
    straight_motion,
)
from relorbit.solve.observations import Observations
from relorbit.solve.refine import Refined
from relorbit.solve.solution import Notice

# An orbit has three unknowns more than a straight line; for chance alone to lower chi2 by this
# much with three unknowns has a probability of 0.001 (chi-square distribution).
CURVATURE = 16.3


def require_enough(o: Observations, held: Holding) -> None:
    """Refuse what cannot be solved whatever the values are."""
    needed = held.free + 1
    if o.numbers < needed:
        raise Undetermined(
            f"{_count(len(o), 'measure')} in use with {_count(o.numbers, 'value')} (theta and rho "
            f"count one each) for {held.free} unknowns: an orbit needs at least {needed}, that is "
            f"{_count(-(-needed // 2), 'position')}. Measure more, or hold elements.",
            code="too-few-measures",
            known={"numbers": o.numbers, "unknowns": held.free},
        )
    both = (o.per_theta > 0.0) & (o.per_rho > 0.0)
    epochs = np.unique(np.round(o.epoch, 4)).size
    needed_epochs = -(-held.free // 2)
    if epochs < needed_epochs:
        where = "all at one epoch" if epochs == 1 else f"at only {epochs} epochs"
        raise Undetermined(
            f"the measures are {where}: motion shows only between at least {needed_epochs} epochs "
            "well apart. Measure again in a later season.",
            code="too-few-epochs",
            known={"epochs": epochs},
        )
    if np.count_nonzero(both) < 2:
        raise Undetermined(
            "fewer than two measures have both theta and rho: the size of the orbit is not "
            "determined. Measure some separations.",
            code="too-few-positions",
        )
    if not np.any(o.rho[o.per_rho > 0.0] > 0.0):
        raise Undetermined(
            "every separation is 0: the pair was never resolved, and has no orbit to find. Measure "
            "it when it is wider.",
            code="never-resolved",
        )


def _count(number: int, word: str) -> str:
    return f"{number} {word}{'' if number == 1 else 's'}"


def require_determined(o: Observations, orbits: Refined, held: Holding, t0: float) -> Notice | None:
    """Refuse an orbit where a straight line, or any long period, does as well.

    Returns a warning where long periods are only worse by less than two standard deviations.
    """
    best = float(orbits.chi2[0])
    scale = max(1.0, best / (o.numbers - held.free))
    line = straight_motion(o)
    if line.chi2 - best < CURVATURE * scale:
        profile = period_profile(o)
        raise Undetermined(
            "a straight line fits as well as an orbit "
            f"(chi2 {line.chi2:.1f} with 4 unknowns, {best:.1f} with {held.free}): no curvature is "
            f"shown yet. {_limit_text(profile, best, scale)} Measure again when the pair has moved "
            "on, or with smaller errors.",
            code="straight-line",
            known=_known(o, orbits, t0, line, profile, scale),
        )
    if "P" in held.values:
        return None
    rise = rise_at_long_periods(o, t0, orbits, scale, held)
    if rise >= TWO_SIGMA:
        return None
    profile = period_profile(o)
    limit = _limit_text(profile, best, scale)
    if rise < ONE_SIGMA:
        raise Undetermined(
            "the period runs off the end of the search: orbits of any long period fit as well as "
            f"the best. {limit} A longer arc would cure it; an element known otherwise can be "
            "held.",
            code="period-unbounded",
            known=_known(o, orbits, t0, line, profile, scale),
        )
    return Notice(
        "period-open",
        f"orbits of any long period fit within two standard deviations. {limit}",
    )


def _limit_text(profile: PeriodProfile, best: float, scale: float) -> str:
    limit = profile.lower_limit(min(best, profile.chi2.min()), scale)
    return f"The period is longer than about {limit:.3g} years (two standard deviations)."


def _known(
    o: Observations,
    orbits: Refined,
    t0: float,
    line: StraightMotion,
    profile: PeriodProfile,
    scale: float,
) -> dict[str, Any]:
    """What the measures do say, for programs."""
    best = float(orbits.chi2[0])
    return {
        "P_lower_limit": profile.lower_limit(min(best, profile.chi2.min()), scale),
        **line.known(),
        "chi2_straight": line.chi2,
        "chi2_orbit": best,
        "best_of_many": elements_from_regular(orbits.u[0], t0).to_dict(),
        "dof_orbit": o.numbers - SIZE,
    }
