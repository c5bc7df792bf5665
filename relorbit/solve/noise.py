"""What each group of measures is worth, from the residuals of the orbit that is fitted with it.

Each group has two factors, for the errors across and along the direction of the pair, by which
the errors its measures bring (or the usual ones of their technique) are multiplied: the nights,
weights and differing errors within a group keep their meaning. The factors and the orbit are
estimated together:

* The scale equation is that of restricted maximum likelihood (Patterson & Thompson 1971,
  Biometrika 58, 545, from memory): a value with leverage h counts for 1 - h degrees of freedom,
  so that what the orbit took up is not taken for precision.
* Every value has Student's t for likelihood (see `student`), by reweighting.
* The logarithms of the factors of one technique are drawn from a Gaussian around the technique's
  own, whose width is estimated too (starting from `GROUP_SPREAD`, which counts for `SPREAD_WORTH`
  groups); the technique's own is drawn from one around 0 with the width `TECHNIQUE_SPREAD`. The
  three numbers are common practice without a published source.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.kepler import FloatArray
from relorbit.solve.holding import Holding
from relorbit.solve.observations import Observations
from relorbit.solve.refine import places_of_values, polar_problem, refine
from relorbit.solve.student import student

GROUP_SPREAD = 0.5
SPREAD_WORTH = 1.0
TECHNIQUE_SPREAD = 1.5
MOST_ROUNDS = 60
AT_REST = 1e-3  # change of ln sigma in one round
LEAST_FREEDOM = 1e-3  # 1 - h of a value that the orbit follows
STEPS = 8  # of the orbit in one round
LARGEST_CHANGE = 1.0  # of ln sigma in one round
# An estimate that is still behind the best one after so many times its last gain is let go
FIRST_ROUNDS, PATIENCE = 3, 20.0
SAME = 0.05  # deviances that differ by less are those of one orbit


@dataclass(frozen=True)
class Layout:
    """Which value belongs to which group; a value is a theta or a rho of one measure.

    Attributes
    ----------
    names, parents : tuple of str, length g
        The groups, and what each is shrunk towards.
    group : ndarray of int, shape (n,)
        Of each row of the observations.
    offset_groups : tuple of int
        Groups with a zero point of their own.
    """

    names: tuple[str, ...]
    parents: tuple[str, ...]
    group: NDArray[np.intp]
    offset_groups: tuple[int, ...] = ()


@dataclass(frozen=True)
class Noise:
    """Errors and zero points of groups, with the orbit they were found with.

    Attributes
    ----------
    layout : Layout
    log_factor : ndarray, shape (g, 2)
        ln of the factors across and along.
    log_factor_sigma : ndarray, shape (g, 2)
    offset : ndarray, shape (g, 2)
        Zero point of theta (radians) and of ln rho, observed minus true.
    offset_sigma : ndarray, shape (g, 2); NaN where none was fitted.
    weight : ndarray, shape (n, 2)
        What theta and rho of each row count for, over what one without residual does; NaN where
        missing.
    reference_epoch : float
    u : ndarray, shape (7,)
        The orbit, regular coordinates at `reference_epoch`.
    covariance : ndarray, shape (7, 7)
        Of u, zero points and the price of the heavy tail included.
    deviance : float
        Minus twice the logarithm of the posterior density, for comparing orbits.
    rounds : int
    """

    layout: Layout
    log_factor: FloatArray
    log_factor_sigma: FloatArray
    offset: FloatArray
    offset_sigma: FloatArray
    weight: FloatArray
    reference_epoch: float
    u: FloatArray
    covariance: FloatArray
    deviance: float
    rounds: int

    def corrected(self, o: Observations) -> Observations:
        """The observations without zero points, with the errors of their groups."""
        factor = np.exp(-self.log_factor[self.layout.group])
        return replace(
            _without_offset(o, self.layout.group, self.offset),
            per_theta=o.per_theta * factor[:, 0],
            per_rho=o.per_rho * factor[:, 1],
            assumed=np.zeros(len(o), dtype=bool),
        )

    def weighted(self, o: Observations) -> Observations:
        """The same with slips down-weighted: the least squares of these is the robust fit."""
        o = self.corrected(o)
        root = np.sqrt(np.nan_to_num(self.weight, nan=1.0) * student().full_weight)
        return replace(o, per_theta=o.per_theta * root[:, 0], per_rho=o.per_rho * root[:, 1])


def estimate(
    o: Observations,
    layout: Layout,
    u: FloatArray,
    reference_epoch: float,
    held: Holding | None = None,
    start: Noise | None = None,
    on_step: Callable[[], None] | None = None,
    rival: float = np.inf,
) -> Noise:
    """Errors of groups and the orbit nearest to u, together.

    Parameters
    ----------
    o : Observations, n rows
        With the errors as given.
    layout : Layout
    u : ndarray, shape (7,)
        The orbit to start from, regular coordinates at `reference_epoch`.
    held : Holding, optional
    start : Noise, optional
        Factors to start from; by default they are read off the residuals of u, by medians.
    on_step : callable, optional
        Called in each round; what it raises ends the work.
    rival : float
        A deviance that has been reached: what will not come below it is not finished.
    """
    return _Fit(o, layout, reference_epoch, held or Holding()).run(u, start, on_step, rival)


def best_of(
    o: Observations,
    layout: Layout,
    orbits: Sequence[FloatArray],
    reference_epoch: float,
    held: Holding | None = None,
    on_step: Callable[[], None] | None = None,
) -> Noise:
    """The most likely of the estimates that start from several orbits."""
    best = None
    for u in orbits:
        rival = np.inf if best is None else best.deviance
        one = estimate(o, layout, u, reference_epoch, held, None, on_step, rival)
        best = one if best is None or one.deviance < rival else best
    return best


def _without_offset(o: Observations, group: NDArray[np.intp], offset: FloatArray) -> Observations:
    if not offset.any():
        return o
    of_row = offset[group]
    return replace(o, theta=o.theta - of_row[:, 0], rho=o.rho * np.exp(-of_row[:, 1]))


class _Fit:
    """The state of one estimate; of the values, thetas stand first."""

    def __init__(
        self, o: Observations, layout: Layout, reference_epoch: float, held: Holding
    ) -> None:
        self.o, self.layout, self.t0, self.held = o, layout, reference_epoch, held
        theta, rho = np.flatnonzero(o.per_theta), np.flatnonzero(o.per_rho)
        self.rows = np.concatenate([theta, rho])
        self.places = places_of_values(o)
        self.kind = np.repeat([0, 1], [theta.size, rho.size])
        self.cell = 2 * layout.group[self.rows] + self.kind
        self.cells = 2 * len(layout.names)
        parents = sorted(set(layout.parents))
        slot = np.array([parents.index(name) for name in layout.parents])
        # across and along of a technique are two parents
        self.parent = (2 * slot[:, None] + np.arange(2)).ravel()
        self.parents = 2 * len(parents)
        count = self._sum(np.ones(self.cell.size))
        self.present = count > 0.0
        self.members = np.bincount(self.parent, self.present, self.parents)
        self.t = student()
        self.offset = np.zeros((len(layout.names), 2))
        self.spread = np.full(self.parents, GROUP_SPREAD)
        self.centre = np.zeros(self.parents)

    def _sum(self, values: FloatArray) -> FloatArray:
        return np.bincount(self.cell, values, self.cells)

    def run(
        self,
        u: FloatArray,
        start: Noise | None,
        on_step: Callable[[], None] | None,
        rival: float,
    ) -> Noise:
        u = np.array(u, dtype=float)
        if start is None:
            r, _ = self._standardised(u, np.zeros(self.cell.size))
            log_factor = self._from_medians(r)
        else:
            log_factor, self.offset = start.log_factor.ravel().copy(), start.offset.copy()
        r, J = self._standardised(u, log_factor[self.cell])
        weight = self.t.weight(r)
        rounds, deviance = 0, np.inf
        for rounds in range(1, MOST_ROUNDS + 1):
            if on_step is not None:
                on_step()
            u = self._orbit(u, log_factor[self.cell], weight)
            r, J = self._standardised(u, log_factor[self.cell])
            deviance, before = self._deviance(r, log_factor), deviance
            if rounds > FIRST_ROUNDS and self._is_behind(deviance, before - deviance, rival):
                break
            _, design = self._design(J, u)
            freedom = self._freedom(design, weight)
            z = r / np.sqrt(freedom)
            change = self._rescale(z, freedom, log_factor)
            log_factor = log_factor + change
            previous, weight = weight, self.t.weight(z * np.exp(-change[self.cell]))
            still = np.abs(weight - previous).max() < 10 * AT_REST * self.t.full_weight
            if np.abs(change).max() < AT_REST and still:
                break
        return self._result(u, log_factor, weight, rounds)

    def _standardised(self, u: FloatArray, log_sigma: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Residuals, shape (m,), and their Jacobian, shape (7, m), in sigma."""
        o = _without_offset(self.o, self.layout.group, self.offset)
        r, J = polar_problem(o, self.t0).with_jacobian(u[None])
        shrink = np.exp(-log_sigma)
        return r[0][self.places] * shrink, J[0][:, self.places] * shrink

    def _from_medians(self, r: FloatArray) -> FloatArray:
        """ln of the factors from the median residuals; 0.6745 is that of a Gaussian."""
        out = np.zeros(self.cells)
        for cell in np.flatnonzero(self.present):
            sizes = np.abs(r[self.cell == cell])
            share = sizes.size / (sizes.size + 3.0)  # a few values say little by themselves
            out[cell] = share * np.log(max(float(np.median(sizes)) / 0.6745, 1e-3))
        return out

    def _orbit(self, u: FloatArray, log_sigma: FloatArray, weight: FloatArray) -> FloatArray:
        """The orbit (and zero points) at given errors and weights, by a few steps."""
        factor = np.sqrt(weight) * np.exp(-log_sigma)
        split = np.count_nonzero(self.kind == 0)
        per = np.zeros((2, len(self.o)))
        per[0, self.rows[:split]] = factor[:split]
        per[1, self.rows[split:]] = factor[split:]
        o = _without_offset(self.o, self.layout.group, self.offset)
        o = replace(o, per_theta=o.per_theta * per[0], per_rho=o.per_rho * per[1])
        problem = polar_problem(o, self.t0)
        u = refine(problem, u, self.held, STEPS, 1e-4).u[0]
        if self.layout.offset_groups:
            self._step_offsets(u, log_sigma, weight)
        return u

    def _step_offsets(self, u: FloatArray, log_sigma: FloatArray, weight: FloatArray) -> None:
        """Zero points from the joint linear system; the orbit follows in the next round."""
        r, J = self._standardised(u, log_sigma)
        root = np.sqrt(weight)
        basis, design = self._design(J, u)
        step = np.linalg.lstsq(design * root[:, None], r * root, rcond=None)[0]
        for slot, (group, kind) in enumerate(self._zero_points()):
            self.offset[group, kind] += step[basis.shape[1] + slot]

    def _zero_points(self) -> list[tuple[int, int]]:
        return [
            (group, kind)
            for group in self.layout.offset_groups
            for kind in (0, 1)
            if self.present[2 * group + kind]
        ]

    def _design(self, J: FloatArray, u: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Free directions, shape (7, f), and the model's columns in sigma, shape (m, f + k)."""
        directions = self.held.directions(u[None], self.t0)
        basis = np.eye(u.size) if directions is None else directions[0]
        columns = [J.T @ basis]
        zero_points = self._zero_points()
        if zero_points:
            # J of node (theta) and of ln a (rho), kept to the rows of the group
            alpha, beta = u[3] + 1j * u[4], u[5] + 1j * u[6]
            turned = np.array([-alpha.imag, alpha.real, -beta.imag, beta.real])
            grown = np.array([alpha.real, alpha.imag, beta.real, beta.imag])
            for group, kind in zero_points:
                whole = J[3:].T @ (turned if kind == 0 else grown)
                columns.append(np.where(self.cell == 2 * group + kind, whole, 0.0)[:, None])
        return basis, np.concatenate(columns, axis=1)

    def _freedom(self, design: FloatArray, weight: FloatArray) -> FloatArray:
        """1 - h of every value in the weighted fit."""
        scaled = design * np.sqrt(weight)[:, None]
        scaled = scaled / np.maximum(np.linalg.norm(scaled, axis=0), 1e-300)
        Q = np.linalg.qr(scaled)[0]
        return np.maximum(1.0 - np.einsum("ij,ij->i", Q, Q), LEAST_FREEDOM)

    def _rescale(self, z: FloatArray, freedom: FloatArray, log_factor: FloatArray) -> FloatArray:
        """Change of every ln factor that solves its scale equation, shape (cells,)."""
        change = np.zeros(self.cells)
        for _ in range(4):
            z2 = (z * np.exp(-change[self.cell])) ** 2
            size = np.sqrt(z2)
            square = z2 * self.t.weight(size)
            # a slip has no say: else a group of slips alone would have no error at all
            value = self._sum(freedom * (square - self.t.sound(size)))
            slope = self._sum(freedom * 2.0 * square * self.t.core / (self.t.core + z2))
            self._follow_the_technique(log_factor + change, slope)
            pull = 1.0 / self.spread[self.parent] ** 2
            value -= pull * (log_factor + change - self.centre[self.parent])
            change += np.clip(value / (slope + pull), -0.7, 0.7)
            change = np.where(self.present, np.clip(change, -LARGEST_CHANGE, LARGEST_CHANGE), 0.0)
        self.information = slope + pull
        return change

    def _follow_the_technique(self, log_factor: FloatArray, information: FloatArray) -> None:
        """Centre and width of each technique's groups, one round of expectation-maximisation."""
        here = self.present.astype(float)
        narrow = 1.0 / self.spread**2
        total = np.bincount(self.parent, here * log_factor, self.parents)
        self.centre = narrow * total / (narrow * self.members + 1.0 / TECHNIQUE_SPREAD**2)
        gap = (log_factor - self.centre[self.parent]) ** 2
        gap += 1.0 / (information + narrow[self.parent])
        whole = SPREAD_WORTH * GROUP_SPREAD**2 + np.bincount(self.parent, here * gap, self.parents)
        self.spread = np.sqrt(whole / (SPREAD_WORTH + self.members))

    def _deviance(self, r: FloatArray, log_factor: FloatArray) -> float:
        """Minus twice the logarithm of the posterior density."""
        prior = (log_factor - self.centre[self.parent]) / self.spread[self.parent]
        sizes = 2.0 * log_factor[self.cell].sum()
        return float(sizes + self.t.deviance(r).sum() + (prior**2).sum())

    def _is_behind(self, deviance: float, gain: float, rival: float) -> bool:
        """True where an estimate will not come below the deviance of another."""
        gap = deviance - rival
        return gap > PATIENCE * max(gain, 0.0) or (abs(gap) < SAME and abs(gain) < SAME)

    def _result(
        self, u: FloatArray, log_factor: FloatArray, weight: FloatArray, rounds: int
    ) -> Noise:
        log_sigma = log_factor[self.cell]
        r, J = self._standardised(u, log_sigma)
        basis, design = self._design(J, u)
        root = np.sqrt(weight)
        size = np.maximum(np.linalg.norm(design * root[:, None], axis=0), 1e-300)
        R = np.linalg.qr(design * root[:, None] / size, mode="r")
        inverse = np.linalg.pinv(R) / size[:, None]
        whole = inverse @ inverse.T * (self.t.variance * self.t.mean_weight)
        free = basis.shape[1]
        offset_sigma = np.full(self.offset.shape, np.nan)
        for slot, (group, kind) in enumerate(self._zero_points()):
            offset_sigma[group, kind] = np.sqrt(whole[free + slot, free + slot])
        of_row = np.full((len(self.o), 2), np.nan)
        of_row[self.rows, self.kind] = weight / self.t.full_weight
        sigma = np.where(self.present, 1.0 / np.sqrt(self.information), np.nan)
        return Noise(
            self.layout,
            np.where(self.present, log_factor, 0.0).reshape(-1, 2),
            sigma.reshape(-1, 2),
            self.offset,
            offset_sigma,
            of_row,
            self.t0,
            u,
            basis @ whole[:free, :free] @ basis.T,
            self._deviance(r, log_factor),
            rounds,
        )  # fmt: skip
