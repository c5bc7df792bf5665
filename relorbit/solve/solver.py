"""`solve`: from the measures of a pair to its orbit, without a starting guess."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
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
from relorbit.solve.limits import (
    ONE_SIGMA,
    TWO_SIGMA,
    PeriodProfile,
    StraightMotion,
    period_profile,
    rise_at_long_periods,
    straight_motion,
)
from relorbit.solve.noise import best_of
from relorbit.solve.observations import Observations, observe
from relorbit.solve.refine import Holding, Refined, covariance, polar_problem, refine
from relorbit.solve.residuals import residuals
from relorbit.solve.solution import Alternative, Notice, Solution
from relorbit.solve.warnings import gather
from relorbit.solve.weighing import (
    Weighing,
    find_weighed_orbits,
    layout_of,
    settle_with_weights,
    weighing,
)

# An orbit has three unknowns more than a straight line; for chance alone to lower chi2 by this
# much with three unknowns has a probability of 0.001 (chi-square distribution).
CURVATURE = 16.3
MOST_ALTERNATIVES = 12
ERRORS = ("as-given", "from-residuals")


def solve(
    pair: Pair,
    hold: Mapping[str, Any] | None = None,
    *,
    epoch_range: tuple[float, float] | None = None,
    period_range: tuple[float, float] | None = None,
    passage_near: float | None = None,
    errors: str = "as-given",
    group_by: Sequence[str] | str | None = None,
    offsets: Sequence[str] | str | None = None,
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
        Shortest and longest period to search, Julian years. By default from 2.5 time spans
        divided by the number of epochs (not below a fortieth of the span) to 100 time spans.
    passage_near : float, optional
        Julian year; T is the passage nearest to it instead of the weighted mean epoch.
    errors : "as-given" or "from-residuals"
        Take the errors that the measures bring (or the usual ones of their technique), or
        estimate those of each group with the orbit, slips down-weighted: see
        `relorbit.solve.noise`. The solution's `noise` then tells them, its chi2 is weighted, and
        its residuals hold the errors found.
    group_by : sequence of str, or text with commas, optional
        What makes a group: "technique", "observer", "aperture", "era"; see
        `relorbit.solve.groups.group_names`.
    offsets : sequence of str, optional
        Names of groups whose zero points, in theta and in the scale of rho, are fitted too; "all"
        is all but the largest.
    on_progress : callable, optional
        Called with the share done, 0 to 1, in the calling thread; an exception that it raises
        ends the work and is passed on, which is how to cancel.

    Returns
    -------
    Solution

    Raises
    ------
    InputError
        For an element, grouping or group that does not exist, or a value that it cannot have.
    Undetermined
        When the measures do not determine the orbit; `reason` says why and what would cure it,
        `known` what they do say (a lower limit of the period, the motion).
    """
    held = _holding(hold)
    observations = observe(pair.measures, epoch_range)
    _enough(observations, held)
    weighed = None
    if _weighed(errors, group_by, offsets):
        layout = layout_of(pair.measures, observations.rows, group_by, offsets)
        given = observations
        t0, orbits, noise, observations = find_weighed_orbits(
            given, layout, held, _period_range(period_range), on_progress
        )
        weighed = weighing(pair.measures, given, noise, observations)
    else:
        t0, orbits = find_basins(observations, held, _period_range(period_range), on_progress)
    open_period = None
    if not held.values:
        scale = max(1.0, float(orbits.chi2[0]) / (observations.numbers - held.free))
        open_period = _determined(observations, orbits, scale, t0)
    found = [open_period] if open_period else []
    return _solution(pair, observations, held, t0, orbits, passage_near, found, weighed)


def _weighed(
    errors: str, group_by: Sequence[str] | str | None, offsets: Sequence[str] | str | None
) -> bool:
    if errors not in ERRORS:
        raise InputError(f"errors cannot be {errors!r}; take {' or '.join(ERRORS)}")
    if errors == "as-given" and (group_by is not None or offsets):
        raise InputError(
            "groups and zero points belong to errors taken from the residuals; ask for those"
        )
    return errors == "from-residuals"


def refine_from(
    pair: Pair,
    elements: Elements,
    hold: Mapping[str, Any] | None = None,
    *,
    epoch_range: tuple[float, float] | None = None,
    errors: str = "as-given",
    group_by: Sequence[str] | str | None = None,
    offsets: Sequence[str] | str | None = None,
) -> Solution:
    """The orbit at the minimum of chi2 nearest to given elements: no search, no other orbits.

    Parameters and errors as those of `solve`; whether the measures determine the orbit is not
    asked, the errors then say it.
    """
    held = _holding(hold)
    observations = observe(pair.measures, epoch_range)
    _enough(observations, held)
    t0 = observations.mean_epoch
    problem = polar_problem(observations, t0)
    start = regular_from_elements(elements, t0)
    orbits = refine(problem, start, held, LAST_STEPS)
    weighed = None
    if _weighed(errors, group_by, offsets):
        layout = layout_of(pair.measures, observations.rows, group_by, offsets)
        starts = [held.put_back(start[None], t0)[0], orbits.u[0]]
        noise = best_of(observations, layout, starts, t0, held)
        orbits, noise, weighted = settle_with_weights(observations, noise, noise.u[None], t0, held)
        weighed = weighing(pair.measures, observations, noise, weighted)
        observations = weighted
    return _solution(pair, observations, held, t0, orbits, elements.T, [], weighed)


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
    weighed: Weighing | None = None,
) -> Solution:
    """The best of some refined orbits with all that a solution says of it."""
    dof = observations.numbers - held.free
    u = orbits.u[0]
    if weighed is None:
        scale = max(1.0, float(orbits.chi2[0]) / dof)
        matrix = scale * covariance(polar_problem(observations, t0), u, held)
        measures = pair.measures
    else:
        # the errors are those that the residuals show: nothing is left to scale
        scale, matrix, measures = 1.0, weighed.noise.covariance, weighed.measures
        dof -= 2 * len(weighed.noise.layout.offset_groups)
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
        residuals=residuals(elements, measures, used),
        noise=() if weighed is None else weighed.groups,
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


def _period_range(period_range: tuple[float, float] | None) -> tuple[float, float] | None:
    if period_range is None:
        return None
    shortest, longest = (float(value) for value in period_range)
    if not 0.0 < shortest < longest < np.inf:
        raise InputError(
            f"the periods {shortest:g} to {longest:g} years are not a range; give the shortest, "
            "above 0, and then a longer one"
        )
    return shortest, longest


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


def _count(number: int, word: str) -> str:
    return f"{number} {word}{'' if number == 1 else 's'}"


def _determined(o: Observations, orbits: Refined, scale: float, t0: float) -> Notice | None:
    """Refuse an orbit where a straight line, or any long period, does as well.

    Returns a warning where long periods are only worse by less than two standard deviations.
    """
    best = float(orbits.chi2[0])
    line = straight_motion(o)
    if (line.chi2 - best) / scale < CURVATURE:
        profile = period_profile(o)
        raise Undetermined(
            "a straight line fits as well as an orbit "
            f"(chi2 {line.chi2:.1f} with 4 unknowns, {best:.1f} with {SIZE}): no curvature is "
            f"shown yet. {_limit_text(profile, best, scale)} Measure again when the pair has moved "
            "on, or with smaller errors.",
            code="straight-line",
            known=_known(o, orbits, t0, line, profile, scale),
        )
    rise = rise_at_long_periods(o, t0, orbits, scale)
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
