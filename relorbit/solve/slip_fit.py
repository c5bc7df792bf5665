"""An orbit through measures of which some hold slips: each measure counts as the slip, or none,
that explains it best.

For an orbit, every measure has the residuals of every trial of `relorbit.measures.slips`; the
likeliest, its price counted, is taken at its word and fitted by Student's t, and so on in turns.
The errors given are scaled for each technique by the median residual.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from relorbit.measures.slips import KINDS, NONE, QUADRANT, SWAPPED, Trials, trials
from relorbit.measures.table import Measures
from relorbit.measures.vetting import turn_of_reduction
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import regular_position
from relorbit.solve.observations import Observations, default_errors
from relorbit.solve.refine import polar_problem, refine
from relorbit.solve.student import student

UNEXPLAINED = 34.0  # the price of a measure that no slip explains
SMALLEST_FACTOR, LARGEST_FACTOR = 0.05, 1e4
LEAST_FACTOR_OF_GIVEN = 1.0  # errors that a list gives are taken to be no larger than given
BLOCK = 100_000  # trials of measures, times orbits, at a time: bounds the memory
STEPS = 8
FOLDED = 4.0  # price of a flip below which quadrants are as good as unknown


@dataclass(frozen=True)
class SlipData:
    """The measures to fit, with their trials.

    Attributes
    ----------
    o : Observations, n rows
    tried : Trials, shape (k, n) arrays, theta in degrees
    across : ndarray, shape (n,)
        Error across the direction of the pair (arcsec) where theta brings none; else NaN.
    group : ndarray of int, shape (n,)
        Technique of each row.
    given : bool ndarray, shape (n, 2)
        True where a measure brings its own error of theta, of rho.
    price : ndarray, shape (k,)
    t0 : float
        Reference epoch of regular coordinates.
    """

    o: Observations
    tried: Trials
    across: FloatArray
    group: NDArray[np.intp]
    given: NDArray[np.bool_]
    price: FloatArray
    t0: float

    @property
    def folded(self) -> bool:
        """True where a measure may stand on either side of the primary at little price."""
        return bool(self.price[QUADRANT] - self.price[NONE] < FOLDED)

    def in_doubt(self, share: float) -> SlipData:
        """The same where this share of all quadrants is taken to be flipped."""
        price = self.price.copy()
        price[NONE], price[QUADRANT] = -2.0 * np.log([1.0 - share, share])
        return replace(self, price=price)


def slip_data(
    m: Measures, o: Observations, other_date: FloatArray | None = None
) -> SlipData:
    """What is needed of measures and the rows of them that are fitted.

    Parameters
    ----------
    m : Measures, N rows
    o : Observations, n rows of them
    other_date : ndarray, shape (N,), optional
        Epochs with day and month exchanged, NaN where the date shows none.
    """
    rows = o.rows
    other = np.full(len(m), np.nan) if other_date is None else other_date
    tried = trials(
        m.epoch[rows], m.theta_effective[rows], m.rho[rows], turn_of_reduction(m)[rows], other[rows]
    )
    given = np.stack([np.isfinite(m.theta_err[rows]), np.isfinite(m.rho_err[rows])], axis=1)
    # at a separation of 1 arcsec the error across is the tangent of that of the angle
    usual = np.tan(np.radians(default_errors(m, np.ones(len(m)))[0][rows]))
    across = np.where(given[:, 0], np.nan, usual)
    group = np.unique(m.technique[rows], return_inverse=True)[1]
    price = np.array([kind.price for kind in KINDS])
    return SlipData(o, tried, across, group, given, price, _middle(o))


def _middle(o: Observations) -> float:
    """The median epoch: a mistyped year does not move it."""
    return float(np.median(o.epoch))


def per_theta(d: SlipData, rho: FloatArray) -> FloatArray:
    """1/sigma of theta, 1/radian, where the orbit has the separation rho, shape (..., n)."""
    usual = 1.0 / np.arctan2(d.across, np.maximum(rho, 1e-9))
    return np.where(np.isfinite(d.across), usual, d.o.per_theta)


def misfits(d: SlipData, u: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Residuals of theta and rho of every trial, in the errors given, shape (c, k, n), of c orbits.

    A missing value has residual 0, a trial that is not possible is infinite.
    """
    when, which = _epochs(d)
    k, n = d.tried.epoch.shape
    z = regular_position(u, d.t0, when)[:, which].reshape(len(u), k, n)
    rho = np.abs(z)
    turn = np.exp(1j * np.radians(np.nan_to_num(d.tried.theta)))
    scale_theta = per_theta(d, rho)
    scale_rho = np.broadcast_to(d.o.per_rho, (k, n))
    if np.any(d.tried.possible[SWAPPED]):
        # errors written with theta and rho may be interchanged with them
        level = _level(d.o.per_rho)
        scale_rho = scale_rho.copy()
        scale_rho[SWAPPED] = np.minimum(scale_rho[SWAPPED], level)
        across = _level(d.o.per_theta / np.maximum(d.o.sky_rho, 1e-9)) * rho[:, SWAPPED]
        scale_theta = scale_theta.copy()
        scale_theta[:, SWAPPED] = np.minimum(scale_theta[:, SWAPPED], across)
    r_theta = np.angle(turn * np.conj(z)) * np.where(d.o.per_theta > 0.0, scale_theta, 0.0)
    r_rho = (np.nan_to_num(d.tried.rho) - rho) * scale_rho
    impossible = ~d.tried.possible
    r_theta[:, impossible], r_rho[:, impossible] = np.inf, np.inf
    return r_theta, r_rho


def _level(per: FloatArray) -> float:
    known = per[per > 0.0]
    return float(np.median(known)) if known.size else np.inf


def _epochs(d: SlipData) -> tuple[FloatArray, NDArray[np.intp]]:
    """Every epoch that a trial asks for, once, and where each trial, (k n,), finds its own."""
    return np.unique(d.tried.epoch.ravel(), return_inverse=True)


def factors(
    d: SlipData,
    r_theta: FloatArray,
    r_rho: FloatArray,
    kinds: NDArray[np.intp] | None = None,
    unknowns: int = 7,
) -> FloatArray:
    """By how much the errors of each row must be multiplied, shape (c, n, 2), by medians.

    The residuals are those of the trials `kinds`, shape (n,), or of measures as they stand, or as
    near as either quadrant brings them where quadrants are unknown; few slips do not move a median.
    """
    shape = r_theta[:, NONE].shape
    which = np.full(shape, NONE) if kinds is None else np.broadcast_to(kinds, shape)
    if d.folded and kinds is None:
        flipped = np.abs(r_theta[:, QUADRANT]) < np.abs(r_theta[:, NONE])
        which = np.where(flipped, QUADRANT, NONE)
    out = np.ones((*shape, 2))
    values = np.count_nonzero(d.o.per_theta) + np.count_nonzero(d.o.per_rho)
    taken = np.sqrt(values / max(values - unknowns, 0.25 * values, 1.0))
    for column, (r, per) in enumerate(((r_theta, d.o.per_theta), (r_rho, d.o.per_rho))):
        size = np.abs(np.take_along_axis(r, which[:, None], axis=1)[:, 0])
        for one in np.unique(d.group):
            rows = (d.group == one) & (per > 0.0)
            count = np.count_nonzero(rows)
            if not count:
                continue
            median = np.median(size[:, rows], axis=1) / 0.6745 * taken
            share = count / (count + 3.0)
            factor = np.clip(median, SMALLEST_FACTOR, LARGEST_FACTOR) ** share
            least = np.where(d.given[rows, column], LEAST_FACTOR_OF_GIVEN, 0.0)
            out[:, rows, column] = np.maximum(factor[:, None], least)
    return out


def costs(
    d: SlipData, r_theta: FloatArray, r_rho: FloatArray, factor: FloatArray
) -> FloatArray:
    """What each trial of each measure costs, shape (c, k, n): deviance of Student's t and price."""
    t = student()
    deviance = t.deviance(r_theta / factor[:, None, :, 0])
    deviance += t.deviance(r_rho / factor[:, None, :, 1])
    return deviance + d.price[:, None]


def scores(d: SlipData, u: FloatArray) -> FloatArray:
    """Minus twice the logarithm of how likely the measures are by each orbit, shape (c,)."""
    found = []
    step = max(1, BLOCK // d.tried.epoch.size)
    for start in range(0, len(u), step):
        r_theta, r_rho = misfits(d, u[start : start + step])
        factor = factors(d, r_theta, r_rho)
        best = costs(d, r_theta, r_rho, factor).min(axis=1)
        total = np.minimum(best, UNEXPLAINED).sum(axis=1)
        for column, per in ((0, d.o.per_theta), (1, d.o.per_rho)):
            total += 2.0 * np.log(factor[..., column])[:, per > 0.0].sum(axis=1)
        found.append(np.where(np.isfinite(total), total, np.inf))
    return np.concatenate(found)


def corrected_observations(
    d: SlipData, u: FloatArray, kinds: NDArray[np.intp], factor: FloatArray
) -> Observations:
    """The observations with slips undone and errors scaled, in the order of the rows of d."""
    n = np.arange(kinds.size)
    z = regular_position(u, d.t0, d.tried.epoch[kinds, n])
    scale = np.where(d.o.per_theta > 0.0, per_theta(d, np.abs(z)), 0.0)
    return replace(
        d.o,
        epoch=d.tried.epoch[kinds, n],
        theta=np.radians(np.nan_to_num(d.tried.theta[kinds, n])),
        rho=np.nan_to_num(d.tried.rho[kinds, n]),
        per_theta=scale / factor[:, 0],
        per_rho=d.o.per_rho / factor[:, 1],
    )


def likeliest(d: SlipData, u: FloatArray) -> tuple[NDArray[np.intp], NDArray[np.bool_]]:
    """The trial of each measure that the orbit u, shape (7,), makes likeliest, (n,), and where none
    explains it."""
    every = misfits(d, u[None])
    cost = costs(d, *every, factors(d, *every))[0]
    kinds = np.argmin(cost, axis=0)
    out = cost.min(axis=0) >= UNEXPLAINED
    return np.where(out, NONE, kinds), out


def step(d: SlipData, u: FloatArray, steps: int = STEPS) -> tuple[FloatArray, NDArray[np.intp]]:
    """The orbit u, shape (7,), fitted to what its measures are likeliest to mean; and that."""
    r_theta, r_rho = misfits(d, u[None])
    factor = factors(d, r_theta, r_rho)
    cost = costs(d, r_theta, r_rho, factor)[0]
    kinds = np.argmin(cost, axis=0)
    n = np.arange(kinds.size)
    kinds = np.where(cost[kinds, n] < UNEXPLAINED, kinds, NONE)
    o = corrected_observations(d, u, kinds, factor[0])
    t = student()
    w_theta = np.sqrt(t.weight(r_theta[0, kinds, n] / factor[0, :, 0]) / t.full_weight)
    w_rho = np.sqrt(t.weight(r_rho[0, kinds, n] / factor[0, :, 1]) / t.full_weight)
    o = replace(o, per_theta=o.per_theta * w_theta, per_rho=o.per_rho * w_rho)
    return refine(polar_problem(o, d.t0), u, None, steps, 1e-3).u[0], kinds


def settled(
    d: SlipData, u: FloatArray, most_turns: int, steps: int = STEPS
) -> tuple[FloatArray, float]:
    """Turns of `step` while the measures get likelier; the orbit and its score."""
    best, score = u, float(scores(d, u[None])[0])
    for _ in range(most_turns):
        u, _ = step(d, u, steps)
        new = float(scores(d, u[None])[0])
        if not new < score:
            break
        gained = score - new
        best, score = u, new
        if gained < 0.05:
            break
    return best, score
