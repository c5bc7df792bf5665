"""The orbit of a list that holds slips, found without a guess and without trust in any one measure.

Starts come from searches that each forgive something else: all errors of one size and separations
capped; measures off a curve through their neighbours left out; quadrants not asked for. The
likeliest by `relorbit.solve.slip_fit.scores` are settled, and the best one's corrected list is
searched once more.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from relorbit.measures.curve import off_curve
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import elements_from_regular
from relorbit.solve.basins import FIRST_STEPS, STARTS, orbits_at
from relorbit.solve.folded import folded_search, unfolded
from relorbit.solve.linear import SkyData, sky_data
from relorbit.solve.observations import Observations
from relorbit.solve.refine import polar_problem, refine, sky_problem
from relorbit.solve.search import period_grid, search
from relorbit.solve.slip_fit import (
    SlipData,
    corrected_observations,
    factors,
    likeliest,
    misfits,
    scores,
    settled,
)

FIRST, SECOND, LAST = 14, 5, 8  # orbits tried at first and then, and the most turns of the best
STEPS_IN_ALL = 2 * (FIRST + SECOND)
CAP = 2.5  # separations beyond this many times the upper quartile are cut
FLATTEST = 0.1  # sine of the inclination below which it is not told from 0
FEWEST_ON_CURVE = 0.6  # share of measures that a curve must explain to be trusted


def robust_orbits(
    d: SlipData, on_step: Callable[[], None] | None = None
) -> list[tuple[FloatArray, float]]:
    """The orbits that make the measures likeliest, slips allowed for, the best first.

    Each is u, shape (7,), with minus twice the logarithm of its probability, but for a constant.
    `on_step` is called about `STEPS_IN_ALL` times; what it raises ends the work.
    """
    tell = on_step or (lambda: None)
    pool = [_starts(d, levelled(d.o))]
    trusted = _on_the_curve(d.o)
    if trusted is not None:
        pool.append(_starts(d, trusted))
    if d.folded:
        pool.append(_folded_starts(d, levelled(d.o)))
    found = _best(d, np.concatenate(pool), tell)
    again = _starts(d, without_slips(d, found[0][0]))
    other = _best(d, np.concatenate([found[0][0][None], again]), tell)
    return sorted(found + other, key=lambda one: one[1])


def _best(
    d: SlipData, pool: FloatArray, tell: Callable[[], None]
) -> list[tuple[FloatArray, float]]:
    pool = pool[np.all(np.isfinite(pool), axis=1)]
    first = pool[np.argsort(scores(d, pool), kind="stable")[:FIRST]]
    tried = []
    for u in first:
        tell()
        tried.append(settled(d, u, 2))
    order = np.argsort([score for _, score in tried], kind="stable")[:SECOND]
    ready = []
    for slot in order:
        tell()
        ready.append(settled(d, tried[slot][0], LAST)[0])
    return sorted(((u, improbability(d, u)) for u in ready), key=lambda one: one[1])


def improbability(d: SlipData, u: FloatArray) -> float:
    """Minus twice the logarithm of the evidence for the orbits around u, by Laplace's method.

    The prior is that of the posterior: uniform in log P, e, phase, orientation and log a, a weight
    1/(a^4 sin^2 i) on the constants. Without it an orbit of enormous eccentricity that passes
    through a slip on its way out is preferred to the slip.
    """
    kinds, out = likeliest(d, u)
    every = misfits(d, u[None])
    o = corrected_observations(d, u, kinds, factors(d, *every)[0])
    o = o.select(np.flatnonzero(~out))
    _, J = polar_problem(o, d.t0).with_jacobian(u[None])
    information = np.linalg.slogdet(J[0] @ J[0].T)
    elements = elements_from_regular(u, d.t0)
    tilt = max(np.sin(np.radians(elements.i)), FLATTEST)
    prior = 8.0 * np.log(max(elements.a, 1e-12)) + 4.0 * np.log(tilt)
    volume = information[1] if information[0] > 0.0 else 0.0
    return float(scores(d, u[None])[0] + prior + volume)


def levelled(o: Observations) -> Observations:
    """All errors of one size in x and y, and no separation far beyond the usual."""
    rho = o.rho[o.per_rho > 0.0]
    cap = CAP * float(np.quantile(rho, 0.75)) if rho.size else 1.0
    rho = np.minimum(o.rho, cap)
    both = (o.per_theta > 0.0) & (o.per_rho > 0.0)
    size = max(0.05 * cap, 1e-9)
    return replace(
        o,
        rho=rho,
        per_theta=np.where(both, np.maximum(rho, 0.1 * size) / size, 0.0),
        per_rho=np.where(both, 1.0 / size, 0.0),
    )


def _on_the_curve(o: Observations) -> Observations | None:
    both = (o.per_theta > 0.0) & (o.per_rho > 0.0)
    rows = np.flatnonzero(both)
    if rows.size < 8:
        return None
    z = o.rho[rows] * np.exp(1j * o.theta[rows])
    keep = rows[~off_curve(o.epoch[rows], z)]
    return o.select(keep) if keep.size >= max(6, FEWEST_ON_CURVE * rows.size) else None


def _starts(d: SlipData, o: Observations) -> FloatArray:
    """Orbits, shape (c, 7), at the minima of the search's map, raw and brought down a little."""
    o = o.select(np.flatnonzero((o.per_theta > 0.0) & (o.per_rho > 0.0)))
    o = o.select(np.argsort(o.epoch, kind="stable"))
    if not o.span > 0.0:
        return np.empty((0, 7))
    data = sky_data(o)
    found = search(data, _periods(o.epoch)).basins(STARTS)
    return _brought_down(data, d.t0, orbits_at(data, d.t0, *found))


def _brought_down(data: SkyData, t0: float, u: FloatArray) -> FloatArray:
    return np.concatenate([u, refine(sky_problem(data, t0), u, None, FIRST_STEPS, 1e-2).u])


def _periods(epoch: FloatArray) -> FloatArray:
    # a mistyped year must not stretch the span
    low, high = np.quantile(epoch, [0.0, 1.0])
    return period_grid(float(high - low), np.unique(np.round(epoch, 3)).size)


def _folded_starts(d: SlipData, o: Observations) -> FloatArray:
    """Orbits, shape (c, 7), at the minima of the map in z^2."""
    o = o.select(np.flatnonzero(o.per_rho > 0.0))
    if not o.span > 0.0:
        return np.empty((0, 7))
    z = o.rho * np.exp(1j * o.theta)
    weight = 1.0 / np.maximum(o.rho, 0.2 * np.median(o.rho)) ** 2
    P, e, T = folded_search(o.epoch, z, weight, _periods(o.epoch)).basins(STARTS)
    sides = unfolded(o.epoch, z, weight, P, e, T)
    out = []
    for slot in range(P.size):
        data = sky_data(replace(o, theta=np.angle(sides[slot])))
        u = orbits_at(data, d.t0, P[slot : slot + 1], e[slot : slot + 1], T[slot : slot + 1])
        out.append(_brought_down(data, d.t0, u))
    return np.concatenate(out)


def without_slips(d: SlipData, u: FloatArray) -> Observations:
    """The observations as the orbit u, shape (7,), takes them; what it cannot explain left out."""
    kinds, out = likeliest(d, u)
    factor = factors(d, *misfits(d, u[None]))[0]
    o = corrected_observations(d, u, kinds, factor)
    o = o.select(np.flatnonzero(~out))
    return o.select(np.argsort(o.epoch, kind="stable"))
