"""Each measure against the place that the others give it, as it stands and each slip undone."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from relorbit.measures.curve import curve_through
from relorbit.measures.slips import KINDS, NONE, SWAPPED
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import SIZE, position_and_jacobian
from relorbit.solve.observations import Observations
from relorbit.solve.refine import HIGHEST_E, covariance, polar_problem, refine
from relorbit.solve.slip_fit import (
    UNEXPLAINED,
    SlipData,
    corrected_observations,
    factors,
    likeliest,
    misfits,
    per_theta,
    settled,
)
from relorbit.solve.student import student

SUSPECT = 21.0  # chi2 of a measure above which it is looked at: one chance in 36,000
STRANGE = 36.0  # above which one that no slip explains is named
ORDINARY = 18.4  # chi2 that a measure must reach with its slip undone: one chance in 10,000
LEAST_RISE = 5.0  # of its cost over that of the measure as it stands
MOST_ROUNDS = 10
LEAST_FREEDOM = 0.02  # 1 - h of a measure that alone decides the orbit: it cannot be judged
UNKNOWN = 1e12  # variance of a prediction beyond which it is none
MOST_REFITS, REFIT_TURNS = 12, 6
LEAST_WORSE = 6.0  # by which a list must be less likely without a slip, its price counted
FEWEST_FOR_ORBIT = 9  # positions that an orbit and a slip among them need
FEWEST_EPOCHS = 5
FEWEST_NEIGHBOURS = 4  # for a curve to tell a place

# places z, shape (k,), and their covariance in theta (radian) and rho (arcsec), shape (k, 2, 2)
Predict = Callable[[FloatArray], tuple[NDArray[np.complex128], FloatArray]]


@dataclass(frozen=True)
class Verdict:
    """What is made of one measure.

    Attributes
    ----------
    kind : int
        Slot of `relorbit.measures.slips.KINDS`; -1 for one that no slip explains.
    before, after : float
        chi2 as it stands and with the slip undone.
    confidence : float
    """

    kind: int
    before: float
    after: float
    confidence: float


@dataclass(frozen=True)
class Trial:
    """The outcome for all rows.

    Attributes
    ----------
    verdicts : dict of row (of the observations) to Verdict
    u, covariance : ndarray or None
        The orbit of the measures with slips undone, regular coordinates; None for a curve.
    factor : ndarray, shape (n, 2)
    kinds : ndarray of int, shape (n,)
        The slip taken of each row, `NONE` for most.
    """

    verdicts: dict[int, Verdict]
    u: FloatArray | None
    covariance: FloatArray | None
    factor: FloatArray
    kinds: NDArray[np.intp]


def tried_against_orbit(
    d: SlipData, u: FloatArray, fixed: FloatArray | None = None
) -> Trial:
    """Try every measure against the orbit of the others.

    Parameters
    ----------
    d : SlipData, n rows
    u : ndarray, shape (7,)
        Near the orbit.
    fixed : ndarray, shape (7, 7), optional
        Covariance of an orbit that the measures do not change.
    """
    n = len(d.o)
    kinds, out = likeliest(d, u)
    asked = {} if fixed is not None else refits(d, u, kinds)
    seen: set[bytes] = set()
    verdicts: dict[int, Verdict] = {}
    for _ in range(MOST_ROUNDS):
        fit = _Fit.of(d, u, kinds, out, fixed)
        u = fit.u
        chi2 = fit.left_out_chi2()
        verdicts = {}
        for row in np.flatnonzero((chi2 > SUSPECT) | out | (kinds != NONE)):
            verdicts[int(row)] = judged(
                d, int(row), fit.prediction_without(int(row)), fit.factor[row]
            )
            if verdicts[int(row)].kind <= NONE and int(row) in asked:
                verdicts[int(row)] = asked[int(row)]
        kinds, out = np.full(n, NONE), np.zeros(n, dtype=bool)
        verdicts = {row: v for row, v in verdicts.items() if v.kind != NONE}
        for row, verdict in verdicts.items():
            if verdict.kind < 0:
                out[row] = True
            else:
                kinds[row] = verdict.kind
        state = kinds.tobytes() + out.tobytes()
        if state in seen:
            break
        seen.add(state)
    return Trial(verdicts, fit.u, fit.covariance, fit.factor, kinds)


@dataclass(frozen=True)
class _Fit:
    """An orbit with the rows that make it."""

    d: SlipData
    u: FloatArray
    covariance: FloatArray
    factor: FloatArray
    residual: FloatArray
    jacobian: FloatArray
    weight: FloatArray

    @classmethod
    def of(
        cls,
        d: SlipData,
        u: FloatArray,
        kinds: NDArray[np.intp],
        out: NDArray[np.bool_],
        fixed: FloatArray | None,
    ) -> _Fit:
        t = student()
        weight = np.zeros((len(d.o), 2))
        for _ in range(3):
            every = misfits(d, u[None])
            r = np.stack(
                [np.take_along_axis(part[0], kinds[None], axis=0)[0] for part in every], axis=1
            )
            factor = factors(d, *every, kinds, SIZE if fixed is None else 0)[0]
            weight = t.weight(r / factor) / t.full_weight * ~out[:, None]
            o = corrected_observations(d, u, kinds, factor)
            root = np.sqrt(weight)
            fitted = replace(o, per_theta=o.per_theta * root[:, 0], per_rho=o.per_rho * root[:, 1])
            problem = polar_problem(fitted, d.t0)
            if fixed is not None:
                break
            u = refine(problem, u, None, 30, 1e-4).u[0]
        matrix = covariance(problem, u) if fixed is None else fixed
        r, J = polar_problem(o, d.t0).with_jacobian(u[None])
        # theta and rho alternate, rho first: put theta first
        residual = r[0].reshape(-1, 2)[:, ::-1]
        jacobian = np.moveaxis(J[0].reshape(SIZE, -1, 2), 0, -1)[:, ::-1]
        if fixed is not None:
            weight = np.zeros_like(weight)
        return cls(d, u, matrix, factor, residual, jacobian, weight)

    def _without(self, rows: NDArray) -> tuple[FloatArray, FloatArray, NDArray[np.bool_]]:
        """For each of m rows: the change of u without it, (m, 7), its covariance then, (m, 7, 7),
        and whether the other rows tell an orbit at all."""
        root = np.sqrt(self.weight[rows])
        j = self.jacobian[rows] * root[:, :, None]
        across = np.swapaxes(j, 1, 2)
        free = np.eye(2) - j @ self.covariance @ across
        sound = np.linalg.eigvalsh(free)[:, 0] > LEAST_FREEDOM
        free = np.where(sound[:, None, None], free, np.eye(2))
        gain = self.covariance @ across @ np.linalg.inv(free)
        change = -(gain @ (self.residual[rows] * root)[..., None])[..., 0]
        return change, self.covariance + gain @ j @ self.covariance, sound

    def left_out_chi2(self) -> FloatArray:
        """chi2 of every row against the orbit of the others, shape (n,)."""
        change, matrix, sound = self._without(np.arange(len(self.residual)))
        r = self.residual - (self.jacobian @ change[..., None])[..., 0]
        S = np.eye(2) + self.jacobian @ matrix @ np.swapaxes(self.jacobian, 1, 2)
        chi2 = np.einsum("ma,ma->m", r, np.linalg.solve(S, r[..., None])[..., 0])
        return np.where(sound, chi2, 0.0)

    def prediction_without(self, row: int) -> Predict:
        """Places by the orbit of the other rows, or of all where the others tell none."""
        changes, matrices, sound = self._without(np.array([row]))
        u, matrix = self.u + changes[0], matrices[0]
        if not sound[0] or not np.hypot(u[1], u[2]) < HIGHEST_E:
            u, matrix = self.u, self.covariance

        def predict(epochs: FloatArray) -> tuple[NDArray[np.complex128], FloatArray]:
            z, dz = position_and_jacobian(u, self.d.t0, epochs)
            rho = np.maximum(np.abs(z), 1e-9)
            turned = dz * (np.conj(z) / rho)
            J = np.stack([turned.imag / rho, turned.real])  # (2, 7, k)
            return z, np.einsum("aik,ij,bjk->kab", J, matrix, J)

        return predict


def refits(d: SlipData, u: FloatArray, kinds: NDArray[np.intp]) -> dict[int, Verdict]:
    """Verdicts on slips without which no orbit fits as well, by fits that take a measure as it is.

    Where the others hardly tell a place, to first order nothing can be said of a measure; but
    whole orbits can be compared.
    """
    every = misfits(d, u[None])
    factor = factors(d, *every)[0]
    u, whole = settled(d, u, 2)
    verdicts = {}
    for row in np.flatnonzero(kinds != NONE)[:MOST_REFITS]:
        possible = d.tried.possible.copy()
        possible[NONE + 1 :, row] = False
        without = replace(d, tried=replace(d.tried, possible=possible))
        worse = settled(without, u, REFIT_TURNS)[1] - whole
        if worse > LEAST_WORSE:
            price = d.price[kinds[row]]
            confidence = 1.0 / (1.0 + np.exp(-0.5 * min(worse, 700.0)))
            after = sum((part[0, kinds[row], row] / factor[row, column]) ** 2
                        for column, part in enumerate(every))  # fmt: skip
            verdicts[int(row)] = Verdict(
                int(kinds[row]), float(worse + price + after), float(after), float(confidence)
            )
    return verdicts


def judged(d: SlipData, row: int, predict: Predict, factor: FloatArray) -> Verdict:
    """What explains one measure best, given what the others say of it."""
    possible = d.tried.possible[:, row]
    epochs, theta, rho = (
        part[:, row] for part in (d.tried.epoch, d.tried.theta, d.tried.rho)
    )
    z, V = predict(epochs)
    # a prediction that knows nothing
    V = np.where((np.abs(V) < UNKNOWN).all(axis=(1, 2), keepdims=True), V, UNKNOWN * np.eye(2))
    separation = np.maximum(np.abs(z), 1e-9)
    gap = np.stack([
        np.angle(np.exp(1j * np.radians(np.nan_to_num(theta))) * np.conj(z)),
        np.nan_to_num(rho) - separation,
    ], axis=1)  # fmt: skip
    sigma = _errors(d, row, separation) * factor
    has = np.array([d.o.per_theta[row] > 0.0, d.o.per_rho[row] > 0.0])
    S = V + sigma[:, :, None] ** 2 * np.eye(2)
    chi2, size = _chi2_and_size(gap[:, has], S[:, has][:, :, has])
    cost = np.where(possible, chi2 + size + d.price, np.inf)
    before = float(chi2[NONE])
    if before <= SUSPECT:
        return Verdict(NONE, before, before, 1.0)
    best = int(np.argmin(np.where(np.arange(cost.size) == NONE, np.inf, cost)))
    unexplained = float(size[NONE]) + UNEXPLAINED
    likely = np.exp(-0.5 * np.clip(np.append(cost, unexplained) - cost[best], -700.0, 1400.0))
    of_kind = np.array([kind.name == KINDS[best].name for kind in KINDS])
    confidence = float(likely[:-1][of_kind].sum() / likely.sum())
    if chi2[best] < ORDINARY and cost[best] < min(cost[NONE] - LEAST_RISE, unexplained):
        return Verdict(best, before, float(chi2[best]), confidence)
    return Verdict(-1, before, before, 0.5)


def _chi2_and_size(gap: FloatArray, S: FloatArray) -> tuple[FloatArray, FloatArray]:
    """g' S^-1 g and ln det S, shape (k,), each value in its own standard deviation first."""
    scale = np.sqrt(np.maximum(np.diagonal(S, axis1=1, axis2=2), 1e-60))
    own = S / (scale[:, :, None] * scale[:, None, :]) + 1e-10 * np.eye(scale.shape[1])
    g = gap / scale
    chi2 = np.einsum("ka,ka->k", g, np.linalg.solve(own, g[..., None])[..., 0])
    return chi2, np.linalg.slogdet(own)[1] + 2.0 * np.log(scale).sum(axis=1)


def _errors(d: SlipData, row: int, separation: FloatArray) -> FloatArray:
    """sigma of theta (radian) and rho (arcsec) of every trial of a row, shape (k, 2)."""
    one = replace(d, o=d.o.select(np.array([row])), across=d.across[[row]])
    per = np.stack([
        per_theta(one, separation[:, None])[:, 0], np.full(separation.size, d.o.per_rho[row])
    ], axis=1)  # fmt: skip
    known = d.o.per_theta > 0.0, d.o.per_rho > 0.0
    if known[0][row] and known[1][row]:
        arc = np.median((d.o.per_theta / np.maximum(d.o.sky_rho, 1e-9))[known[0]])
        per[SWAPPED, 0] = min(per[SWAPPED, 0], arc * separation[SWAPPED])
        per[SWAPPED, 1] = min(per[SWAPPED, 1], np.median(d.o.per_rho[known[1]]))
    return 1.0 / np.where(per > 0.0, per, 1.0)


def enough_for_an_orbit(o: Observations) -> bool:
    """True where an orbit can serve as the curve, whether or not it is determined."""
    both = (o.per_theta > 0.0) & (o.per_rho > 0.0) & (o.rho > 0.0)
    epochs = np.unique(np.round(o.epoch[both], 3)).size
    return bool(np.count_nonzero(both) >= FEWEST_FOR_ORBIT and epochs >= FEWEST_EPOCHS)


def tried_against_curve(d: SlipData) -> Trial:
    """Try every measure against a smooth curve through the others, where no orbit can be had."""
    o = d.o
    n = len(o)
    both = np.flatnonzero((o.per_theta > 0.0) & (o.per_rho > 0.0))
    verdicts: dict[int, Verdict] = {}
    kinds, factor = np.full(n, NONE), np.ones((n, 2))
    z = o.rho * np.exp(1j * o.theta)
    for row in range(n):
        others = both[both != row]
        if others.size < FEWEST_NEIGHBOURS:
            continue
        verdict = judged(d, row, _curve(o.epoch[others], z[others]), factor[row])
        if verdict.kind != NONE:
            verdicts[row] = verdict
            kinds[row] = max(verdict.kind, NONE)
    return Trial(verdicts, None, None, factor, kinds)


def _curve(epoch: FloatArray, z: NDArray[np.complex128]) -> Predict:
    low, high = np.quantile(epoch, [0.1, 0.9])
    reach = max(high - low, 1.0)

    def predict(at: FloatArray) -> tuple[NDArray[np.complex128], FloatArray]:
        place, scatter = curve_through(epoch, z, at)
        beyond = np.maximum(np.maximum(low - at, at - high), 0.0) / reach
        scatter = np.maximum(scatter, 0.01 * np.abs(place)) * (1.0 + 4.0 * beyond**2)
        rho = np.maximum(np.abs(place), 1e-9)
        V = np.zeros((at.size, 2, 2))
        V[:, 0, 0], V[:, 1, 1] = np.minimum(scatter / rho, np.pi) ** 2, scatter**2
        return place, V

    return predict
