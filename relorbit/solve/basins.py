"""From the search's map to the distinct orbits that fit, best first."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.elements import projection_from_constants
from relorbit.orbit.kepler import TWO_PI, FloatArray
from relorbit.solve.holding import Holding
from relorbit.solve.linear import SkyData, fit_constants, sky_data
from relorbit.solve.observations import Observations
from relorbit.solve.refine import (
    HIGHEST_E,
    LARGEST_STEP,
    Problem,
    Refined,
    covariance,
    polar_problem,
    refine,
    sky_problem,
)
from relorbit.solve.search import ECCENTRICITIES, period_grid, search

STARTS = 32  # minima of the map that are followed down
FIRST_STEPS, LATER_STEPS, SETTLING_STEPS, LAST_STEPS = 6, 8, 25, 100
ALWAYS_FOLLOWED = 6, 4  # best orbits that go on whatever their chi2, at first and at last
HOPELESS = 30.0  # times the best chi2: such orbits are followed no further
FOLLOWED_MEASURES = 400  # the starts are followed on this many measures at the most
CLOSE = 0.3  # error of theta (radians) beyond which the side of the primary is uncertain
SPREAD_ORBITS = 1  # orbits that starts are spread around
WIDE, NARROW = (-4.0, -2.0, 2.0, 4.0), (-4.0, 4.0)  # how far, in standard deviations
BRANCHES = 8  # of the orbits so found, those that are followed to the end
SAME = 1e-4  # orbits whose coordinates differ by less than this, in units of their size, are one


def find_basins(
    observations: Observations,
    held: Holding | None = None,
    period_range: tuple[float, float] | None = None,
    on_progress: Callable[[float], None] | None = None,
    starts: FloatArray | None = None,
) -> tuple[float, Refined]:
    """Every distinct orbit that the measures allow, without a starting guess.

    Parameters
    ----------
    observations : Observations
        At least four rows with both values, or more that have one.
    held : Holding, optional
    period_range : (float, float), optional
        Julian years; by default what the span and number of the measures allow.
    on_progress : callable, optional
        Called with the share done, 0 to 1; what it raises ends the work.
    starts : ndarray, shape (c, 7), optional
        What `starting_orbits` found, where it has been asked already.

    Returns
    -------
    reference_epoch : float
        Julian year of the regular coordinates.
    orbits : Refined
        Distinct minima of chi2 in theta and rho, u of shape (m, 7), in rising order of chi2.
    """
    held = held or Holding()
    t0 = observations.mean_epoch
    data = sky_data(observations)
    report = on_progress or (lambda share: None)
    u = starts
    if u is None:
        u = starting_orbits(data, t0, held, period_range, lambda share: report(0.5 * share))
    few = _fewer(observations)
    sky = sky_problem(sky_data(few), t0)
    u = _follow(sky, u, held, lambda: report(0.5))
    if np.any((few.per_theta > 0.0) & (few.per_theta * CLOSE < 1.0)):
        u = _both_sides(sky, polar_problem(few, t0), u, held, lambda: report(0.6))
    return t0, settle(polar_problem(observations, t0), u, held, lambda: report(0.7))


def settle(
    problem: Problem, u: FloatArray, held: Holding, on_step: Callable[[], None] | None = None
) -> Refined:
    """Distinct minima of the problem, best first, from near starts u, shape (c, 7)."""
    rough = refine(problem, u, held, LATER_STEPS, 1e-2, on_step=on_step)
    keep = _near_the_best(_distinct(rough.u, rough.chi2), rough.chi2)
    rough = refine(problem, rough.u[keep], held, SETTLING_STEPS, 1e-2, on_step=on_step)
    keep = _near_the_best(_distinct(rough.u, rough.chi2), rough.chi2)
    fine = refine(problem, rough.u[keep], held, LAST_STEPS, 1e-9, on_step=on_step)
    keep = _near_the_best(_distinct(fine.u, fine.chi2), fine.chi2)
    # what is still on its way is no orbit of its own; the best is the best all the same
    keep = keep[fine.at_rest[keep] | (np.arange(keep.size) == 0)]
    return Refined(
        fine.u[keep], fine.chi2[keep], fine.at_rest[keep], rough.iterations + fine.iterations
    )


def starting_orbits(
    data: SkyData,
    t0: float,
    held: Holding,
    period_range: tuple[float, float] | None,
    on_progress: Callable[[float], None] | None = None,
) -> FloatArray:
    """Regular coordinates, shape (c, 7), of the best minima of the map."""
    span = data.epoch[-1] - data.epoch[0]
    distinct = np.unique(np.round(data.epoch, 3)).size
    periods, eccentricities = period_grid(span, distinct, period_range), ECCENTRICITIES
    if "P" in held.values:
        periods = np.array([held.values["P"]])
    if "e" in held.values:
        eccentricities = (held.values["e"],)
    P, e, T = search(data, periods, eccentricities, on_progress).basins(STARTS)
    if "T" in held.values:
        T = np.full_like(T, held.values["T"])
    return orbits_at(data, t0, P, e, T)


def orbits_at(data: SkyData, t0: float, P: FloatArray, e: FloatArray, T: FloatArray) -> FloatArray:
    """Regular coordinates, shape (m, 7), of the orbits with the best constants at m (P, e, T)."""
    constants = fit_constants(data, P, e, T).constants
    alpha, beta = projection_from_constants(*constants.T)
    turn = np.exp(1j * TWO_PI * (t0 - T) / P)
    g, alpha, beta = e * np.conj(turn), alpha * turn, beta * np.conj(turn)
    columns = np.log(P), g.real, g.imag, alpha.real, alpha.imag, beta.real, beta.imag
    return np.stack(columns, axis=-1)


def _follow(
    problem: Problem, u: FloatArray, held: Holding, on_step: Callable[[], None]
) -> FloatArray:
    """Bring starts down, letting go of those that meet another or lead nowhere."""
    first = refine(problem, u, held, FIRST_STEPS, 1e-2, on_step=on_step)
    keep = _distinct(first.u, first.chi2)
    keep = keep[_hopeful(first.chi2[keep], ALWAYS_FOLLOWED[0])]
    later = refine(problem, first.u[keep], held, LATER_STEPS, 1e-2, on_step=on_step)
    keep = _distinct(later.u, later.chi2)
    return later.u[keep[_hopeful(later.chi2[keep], ALWAYS_FOLLOWED[1])]]


def _both_sides(
    sky: Problem, polar: Problem, u: FloatArray, held: Holding, on_step: Callable[[], None]
) -> FloatArray:
    """Orbits, shape (c, 7), near some minima in x and y, that theta may prefer.

    Where a companion is hardly told from the primary, its angle leaves open on which side of the
    primary the orbit passes, and chi2 in theta has a minimum for each answer. They lie within a
    few standard deviations of one another, so starts are spread around what fits x and y, and
    once more around the best that is found.
    """
    starts = np.concatenate([u, *(_spread(sky, one, held, WIDE) for one in u[:SPREAD_ORBITS])])
    first = refine(polar, starts, held, FIRST_STEPS, 1e-2, on_step=on_step)
    best = first.u[np.argmin(first.chi2)]
    around = _spread(polar, best, held, NARROW)
    second = refine(polar, around, held, FIRST_STEPS, 1e-2, on_step=on_step)
    every, chi2 = np.concatenate([first.u, second.u]), np.append(first.chi2, second.chi2)
    keep = _distinct(every, chi2)
    return every[keep[: len(u) + BRANCHES]]


def _spread(
    problem: Problem, u: FloatArray, held: Holding, scales: tuple[float, ...]
) -> FloatArray:
    """Orbits some standard deviations from u, shape (7,), along each principal axis."""
    matrix = covariance(problem, u, held)
    size = np.sqrt(np.diag(matrix))
    size = np.where(size > 0.0, size, 1.0)
    share, axes = np.linalg.eigh(matrix / np.outer(size, size))
    steps = (axes * np.sqrt(np.maximum(share, 0.0))).T * size
    spread = u + np.concatenate([scale * steps for scale in scales])
    sound = np.all(np.isfinite(spread), axis=1) & (np.hypot(spread[:, 1], spread[:, 2]) < HIGHEST_E)
    return spread[sound & (np.abs(spread[:, 0] - u[0]) < LARGEST_STEP)]


def _hopeful(chi2: FloatArray, always: int) -> NDArray[np.bool_]:
    """Which of some orbits in rising order of chi2 are worth following."""
    return (chi2 <= HOPELESS * chi2[0]) | (np.arange(chi2.size) < always)


def _near_the_best(order: NDArray[np.intp], chi2: FloatArray) -> NDArray[np.intp]:
    """Those of some orbits in rising order of chi2 that an observer may still consider."""
    return order[chi2[order] <= HOPELESS * chi2[order[0]]]


def _distinct(u: FloatArray, chi2: FloatArray) -> NDArray[np.intp]:
    """Indices of orbits that differ from every better one, in rising order of chi2."""
    order = np.argsort(chi2, kind="stable")
    order = order[np.isfinite(chi2[order])]
    size = np.maximum(np.abs(u[:, 3:]).max(axis=1, keepdims=True), 1e-300)
    scaled = np.concatenate([u[:, :3], u[:, 3:] / size, np.log(size)], axis=1)
    kept: list[int] = []
    for index in order:
        near = np.abs(scaled[kept] - scaled[index]).max(axis=1) if kept else np.empty(0)
        if not np.any(near < SAME):
            kept.append(int(index))
    return np.array(kept, dtype=np.intp)


def _fewer(observations: Observations) -> Observations:
    """At most `FOLLOWED_MEASURES`: of rows that follow one another, the one of most weight."""
    count = len(observations)
    if count <= FOLLOWED_MEASURES:
        return observations
    group = np.arange(count) * FOLLOWED_MEASURES // count
    weight = np.maximum(observations.sky_weight, 1e-300)
    order = np.lexsort((weight, group))
    last = np.flatnonzero(np.diff(group[order], append=group[-1] + 1))
    return observations.select(np.sort(order[last]))
