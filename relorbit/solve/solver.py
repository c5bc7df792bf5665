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
from relorbit.solve.determined import require_determined, require_enough
from relorbit.solve.holding import Holding
from relorbit.solve.noise import best_of
from relorbit.solve.observations import Observations, observe
from relorbit.solve.refine import Refined, covariance, polar_problem, refine
from relorbit.solve.residuals import residuals
from relorbit.solve.solution import Alternative, Notice, Solution
from relorbit.solve.warnings import gather
from relorbit.solve.weighing import (
    Weighing,
    errors_from_residuals,
    find_weighed_orbits,
    layout_of,
    settle_with_weights,
    weighing,
)

MOST_ALTERNATIVES = 12


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
        Shortest and longest period to search, Julian years. By default from four epochs
        to a revolution (not below a fortieth of the time span) to 100 time spans.
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
    epochs, periods = _range(epoch_range, "epochs"), _range(period_range, "periods")
    observations = observe(pair.measures, epochs)
    require_enough(observations, held)
    weighed = None
    if errors_from_residuals(errors, group_by, offsets):
        layout = layout_of(pair.measures, observations.rows, group_by, offsets)
        given = observations
        t0, orbits, noise, observations = find_weighed_orbits(
            given, layout, held, periods, on_progress
        )
        weighed = weighing(pair.measures, given, noise, observations)
    else:
        t0, orbits = find_basins(observations, held, periods, on_progress)
    if periods is not None:
        orbits = _within(orbits, periods)
    open_period = require_determined(observations, orbits, held, t0)
    found = [open_period] if open_period else []
    return _solution(pair, observations, held, t0, orbits, passage_near, found, weighed)


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
    observations = observe(pair.measures, _range(epoch_range, "epochs"))
    require_enough(observations, held)
    t0 = observations.mean_epoch
    problem = polar_problem(observations, t0)
    start = regular_from_elements(elements, t0)
    orbits = refine(problem, start, held, LAST_STEPS)
    weighed = None
    if errors_from_residuals(errors, group_by, offsets):
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
