"""Where the posterior may be: a first mixture around the search's basins and map."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from relorbit.orbit.kepler import TWO_PI, FloatArray
from relorbit.orbit.regular import SIZE, regular_position
from relorbit.solve.basins import find_basins
from relorbit.solve.linear import sky_data
from relorbit.solve.mixture import HIGHEST_E, Mixture, coordinates_of, mixture_around
from relorbit.solve.observations import Observations
from relorbit.solve.prior import Prior
from relorbit.solve.refine import Refined, covariance, polar_problem
from relorbit.solve.search import ECCENTRICITIES, period_grid, search
from relorbit.solve.target import Target, target_of

VAGUE = 0.03  # error of ln P or of L from which the search's map joins the start
MAP_PARTS, MAP_RISE = 48, 14.0  # parts of the map that join, and how far up in chi2
UNIFORM, UNIFORM_VAGUE = 0.02, 0.2  # share of draws from anywhere


def start(
    observations: Observations,
    prior: Prior,
    parallax: tuple[float, float] | None,
    on_progress: Callable[[float], None] | None = None,
) -> tuple[Target, Mixture, Refined]:
    """The target, a mixture around every basin, and the basins, best first."""
    t0, orbits = find_basins(observations, None, prior.period_range, on_progress)
    box = tuple(np.log(prior.period_range))
    # the place of the companion at each measure is that of the best orbit, of whatever period
    z = regular_position(orbits.u[0], t0, observations.epoch)
    target = target_of(observations, z, t0, prior, parallax)
    centre, spread, rise = _around_basins(observations, t0, orbits)
    inside = (centre[:, 0] > box[0]) & (centre[:, 0] < box[1])
    vague = np.sqrt(np.einsum("kjj->kj", spread)[:, :2]) > VAGUE
    doubtful = np.any(vague[rise < MAP_RISE]) or not np.all(inside[rise < MAP_RISE])
    centre[:, 0] = np.clip(centre[:, 0], *box)
    uniform = UNIFORM
    if doubtful:
        more = _around_map(observations, t0, prior)
        centre, spread, rise = (
            np.concatenate(both) for both in zip((centre, spread, rise), more, strict=True)
        )
        uniform = UNIFORM_VAGUE
    share = np.exp(-0.25 * np.minimum(rise, 30.0))
    return target, mixture_around(centre, spread, share, box, uniform), orbits


def _around_basins(
    observations: Observations, t0: float, orbits: Refined
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Centre, covariance (doubled) in y and rise of chi2 of every basin."""
    problem = polar_problem(observations, t0)
    most = orbits.chi2 - orbits.chi2[0] < 60.0
    centre, spread = [], []
    for u in orbits.u[most]:
        e = float(np.clip(np.hypot(u[1], u[2]), 1e-4, 0.999 * HIGHEST_E))
        q = np.array([u[0], e, -np.arctan2(u[2], u[1]) / TWO_PI])
        y = coordinates_of(q[None])[0]
        nu = TWO_PI * y[2]
        by_u = np.zeros((3, SIZE))
        by_u[0, 0] = 1.0
        by_e, by_phase = u[1:3] / e, np.array([u[2], -u[1]]) / (e * e * TWO_PI)
        by_u[1, 1:3] = by_e / (1.0 - e)
        eta2, bend = (1.0 - e) * (1.0 + e), 1.0 + e * np.cos(nu)
        by_u[2, 1:3] = by_phase * bend**2 / eta2**1.5
        by_u[2, 1:3] += by_e * np.sin(nu) * (1.0 + bend) / (eta2 * TWO_PI)
        matrix = by_u @ covariance(problem, u) @ by_u.T
        centre.append(y)
        spread.append(2.0 * matrix + np.diag([1e-14, 1e-10, 1e-14]))
    return np.array(centre), np.array(spread), orbits.chi2[most] - orbits.chi2[0]


def _around_map(
    observations: Observations, t0: float, prior: Prior
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """The same for the parts of the search's map that are not much worse than its best."""
    distinct = np.unique(np.round(observations.epoch, 3)).size
    grid = search(
        sky_data(observations), period_grid(observations.span, distinct, prior.period_range)
    )
    rise = np.nan_to_num(grid.chi2 - np.nanmin(grid.chi2), nan=np.inf)
    order = np.argsort(rise, axis=None, kind="stable")
    near = max(MAP_PARTS, np.count_nonzero(rise < MAP_RISE))
    # evenly through the order of chi2: the best, but not only them
    order = order[np.linspace(0, min(near, order.size) - 1, MAP_PARTS).astype(int)]
    p, k = np.unravel_index(np.unique(order), rise.shape)
    step = np.abs(np.gradient(np.log(grid.P)))[p] if grid.P.size > 1 else np.full(p.size, 0.1)
    phase = (t0 - grid.T[p, k]) / grid.P[p]
    centre = coordinates_of(np.stack([np.log(grid.P[p]), grid.e[k], phase], axis=-1))
    wide = np.gradient(-np.log1p(-np.array(ECCENTRICITIES)))[k]
    sigma = np.stack([np.maximum(step, 0.02), wide, np.full(p.size, 0.03)], axis=-1)
    return centre, sigma[:, :, None] * sigma[:, None, :] * np.eye(3), rise[p, k]
