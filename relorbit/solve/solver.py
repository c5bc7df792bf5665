"""`solve`: from the measures of a pair to its orbit, without a starting guess."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from typing import Any

import numpy as np

from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair, RecordedOrbit
from relorbit.orbit.elements import Elements
from relorbit.orbit.regular import (
    SIZE,
    Uncertainty,
    elements_from_regular,
    regular_from_elements,
)
from relorbit.orbit.third_law import TotalMass, total_mass
from relorbit.solve.basins import LAST_STEPS, find_basins
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
from relorbit.solve.observations import Observations, observe
from relorbit.solve.refine import Refined, covariance, polar_problem, refine
from relorbit.solve.residuals import residuals
from relorbit.solve.solution import Alternative, Notice, Solution
from relorbit.solve.warnings import gather

# An orbit has three unknowns more than a straight line; for chance alone to lower chi2 by this
# much with three unknowns has a probability of 0.001 (chi-square distribution).
CURVATURE = 16.3
MOST_ALTERNATIVES = 12


def solve(
    pair: Pair,
    hold: Mapping[str, Any] | None = None,
    *,
    epoch_range: tuple[float, float] | None = None,
    period_range: tuple[float, float] | None = None,
    passage_near: float | None = None,
    on_progress: Callable[[float], None] | None = None,
) -> Solution:
    """Find the orbit of a pair.

    Parameters
    ----------
    pair : Pair
    hold : mapping, optional
        Elements to keep at a value, such as ``{"e": 0.0}`` or ``{"P": 41.6}``, in the units of
        `Elements` (or Quantity).
    epoch_range : (float, float), optional
        Julian years; measures outside are not fitted.
    period_range : (float, float), optional
        Shortest and longest period to search, Julian years. By default from four epochs
        to a revolution (not below a fortieth of the time span) to 100 time spans.
    passage_near : float, optional
        Julian year; T is the passage nearest to it instead of the weighted mean epoch.
    on_progress : callable, optional
        Called with the share done, 0 to 1, in the calling thread; an exception that it raises
        ends the work and is passed on, which is how to cancel.

    Returns
    -------
    Solution

    Raises
    ------
    InputError
        For an element that does not exist, or a value that it cannot have.
    Undetermined
        When the measures do not determine the orbit; `reason` says why and what would cure it,
        `known` what they do say (a lower limit of the period, the motion).
    """
    held = _holding(hold)
    epochs, periods = _range(epoch_range, "epochs"), _range(period_range, "periods")
    observations = observe(pair.measures, epochs)
    _enough(observations, held)
    t0, orbits = find_basins(observations, held, periods, on_progress)
    if periods is not None:
        orbits = _within(orbits, periods)
    open_period = _determined(observations, orbits, held, t0)
    found = [open_period] if open_period else []
    return _solution(pair, observations, held, t0, orbits, passage_near, found)


def refine_from(
    pair: Pair,
    elements: Elements,
    hold: Mapping[str, Any] | None = None,
    *,
    epoch_range: tuple[float, float] | None = None,
) -> Solution:
    """The orbit at the minimum of chi2 nearest to given elements: no search, no other orbits.

    Parameters and errors as those of `solve`; whether the measures determine the orbit is not
    asked, the errors then say it.
    """
    held = _holding(hold)
    observations = observe(pair.measures, _range(epoch_range, "epochs"))
    _enough(observations, held)
    t0 = observations.mean_epoch
    problem = polar_problem(observations, t0)
    orbits = refine(problem, regular_from_elements(elements, t0), held, LAST_STEPS)
    return _solution(pair, observations, held, t0, orbits, elements.T, [])


def recorded_solution(pair: Pair, record: RecordedOrbit) -> Solution:
    """What an orbit on record says of the measures that the pair has now.

    chi2 and residuals are those of the present measures in use; the errors are those recorded,
    all None where the record has none.
    """
    observations = observe(pair.measures)
    known = record.covariance is not None and record.reference_epoch is not None
    uncertainty = Uncertainty(
        record.reference_epoch if known else observations.mean_epoch,
        np.asarray(record.covariance) if known else np.full((SIZE, SIZE), np.nan),
    )
    used = np.zeros(len(pair.measures), dtype=bool)
    used[observations.rows] = True
    found = residuals(record.elements, pair.measures, used)
    return Solution(
        pair=pair.name,
        elements=record.elements,
        uncertainty=uncertainty,
        chi2=found.chi2,
        dof=max(1, observations.numbers - SIZE),
        error_scale=1.0,
        held={},
        measures=len(pair.measures),
        used=len(observations),
        residuals=found,
        mass_total=_mass(pair, record.elements, uncertainty if known else None),
        span=observations.span,
        parallax_mas=pair.parallax_mas,
        parallax_err_mas=pair.parallax_err_mas,
    )


def _mass(pair: Pair, elements: Elements, uncertainty: Uncertainty | None) -> TotalMass | None:
    if pair.parallax_mas is None or not pair.parallax_mas > 0.0:
        return None
    return total_mass(elements, pair.parallax_mas, pair.parallax_err_mas, uncertainty)


def _solution(
    pair: Pair,
    observations: Observations,
    held: Holding,
    t0: float,
    orbits: Refined,
    passage_near: float | None,
    found: list[Notice],
) -> Solution:
    """The best of some refined orbits with all that a solution says of it."""
    dof = observations.numbers - held.free
    scale = max(1.0, float(orbits.chi2[0]) / dof)
    u = orbits.u[0]
    matrix = scale * covariance(polar_problem(observations, t0), u, held)
    elements = _elements(u, t0, held, passage_near)
    used = np.zeros(len(pair.measures), dtype=bool)
    used[observations.rows] = True
    uncertainty = Uncertainty(t0, matrix)
    solution = Solution(
        pair=pair.name,
        elements=elements,
        uncertainty=uncertainty,
        chi2=float(orbits.chi2[0]),
        dof=dof,
        error_scale=float(np.sqrt(scale)),
        held=dict(held.values),
        measures=len(pair.measures),
        used=len(observations),
        residuals=residuals(elements, pair.measures, used),
        alternatives=tuple(_alternatives(orbits, t0, held, passage_near)),
        mass_total=_mass(pair, elements, uncertainty),
        span=observations.span,
        parallax_mas=pair.parallax_mas,
        parallax_err_mas=pair.parallax_err_mas,
    )
    return gather(solution, pair, observations, found)


def _holding(hold: Mapping[str, Any] | None) -> Holding:
    """Held elements as plain numbers, each checked by the rules of `Elements`."""
    if not hold:
        return Holding()
    allowed = {"P": 1.0, "T": 2000.0, "e": 0.0, "a": 1.0, "i": 0.0, "node": 0.0, "omega": 0.0}
    unknown = set(hold) - set(allowed)
    if unknown:
        raise InputError(
            f"{sorted(unknown)[0]} is not an element; hold one of {', '.join(allowed)}"
        )
    try:
        checked = Elements(**{**allowed, **hold}).to_dict()
    except (TypeError, ValueError) as error:
        raise InputError(f"cannot hold that: {error}") from None
    return Holding({name: checked[name] for name in hold})


def _range(ends: tuple[float, float] | None, what: str) -> tuple[float, float] | None:
    if ends is None:
        return None
    low, high = (float(value) for value in ends)
    least = 0.0 if what == "periods" else -np.inf
    if not least < low < high < np.inf:
        above = ", above 0," if what == "periods" else ""
        raise InputError(
            f"the {what} {low:g} to {high:g} years are not a range; give the lower end{above} and "
            "then a higher one"
        )
    return low, high


def _within(orbits: Refined, periods: tuple[float, float]) -> Refined:
    """Those orbits whose period is in the range that was asked for."""
    P = np.exp(orbits.u[:, 0])
    keep = (periods[0] <= P) & (periods[1] >= P)
    if not keep.any():
        raise Undetermined(
            f"no orbit with a period of {periods[0]:g} to {periods[1]:g} years is a minimum of "
            f"chi2: from there the fit leads to {P[0]:.4g} years. Ask for a wider range.",
            code="no-orbit-in-range",
        )
    return Refined(orbits.u[keep], orbits.chi2[keep], orbits.at_rest[keep], orbits.iterations)


def _enough(o: Observations, held: Holding) -> None:
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


def _determined(o: Observations, orbits: Refined, held: Holding, t0: float) -> Notice | None:
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
        "epoch": line.epoch,
        "theta": line.theta,
        "theta_sigma": line.theta_sigma,
        "rho": line.rho,
        "rho_sigma": line.rho_sigma,
        "motion_north": line.motion_north,
        "motion_east": line.motion_east,
        "motion_sigma": line.motion_sigma,
        "chi2_straight": line.chi2,
        "chi2_orbit": best,
        "best_of_many": elements_from_regular(orbits.u[0], t0).to_dict(),
        "dof_orbit": o.numbers - SIZE,
    }


def _elements(u: Any, t0: float, held: Holding, passage_near: float | None) -> Elements:
    elements = elements_from_regular(u, t0)
    if held.values:
        elements = held.on(elements)
    if passage_near is not None:
        elements = elements.near(passage_near)
    return elements


def _alternatives(
    orbits: Refined, t0: float, held: Holding, passage_near: float | None
) -> Iterable[Alternative]:
    for u, chi2 in zip(orbits.u[1:MOST_ALTERNATIVES], orbits.chi2[1:], strict=False):
        yield Alternative(_elements(u, t0, held, passage_near), float(chi2))
