"""How surprising new measures are when the orbit's errors are not small: by a refit.

Errors carried to first order fail where an orbit is weakly known: the orbits that the measures
allow lie along a bent valley. By how much chi2 rises when new measures join the old ones, every
basin searched, has no such limit; for small errors it is the same number. Its root for one value
alone tells how far off that value is (the profile of the likelihood).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from scipy.special import chdtrc

from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import SIZE, elements_from_regular, regular_from_elements
from relorbit.solve.basins import LAST_STEPS, find_basins
from relorbit.solve.observations import observe
from relorbit.solve.refine import polar_problem, refine
from relorbit.solve.residuals import residuals
from relorbit.solve.solution import Solution

WORTH_A_SEARCH = 1.5  # sigma beyond which other basins than the orbit's are tried
MOST_STARTS = 6
# probability of chi2 by chance below which the errors of the measures are taken for too small
TOO_SMALL = 0.05
# rise of chi2 up to which an orbit is as good as the best one of the same measures
THE_SAME = 0.5
# rise of chi2 beyond which an orbit is not that of its own measures: chance alone exceeds it in
# one of two hundred cases with seven unknowns (chi-square distribution)
NOT_THEIRS = 20.3


class RefitTest:
    """The test for one list of measures and one set of new ones.

    Parameters
    ----------
    before : Solution
        The orbit of the measures on record; its errors, and weights, are kept.
    old, new : Measures
        New ones with every error filled in.
    report : callable
        Called before each refit; what it raises ends the work.
    """

    def __init__(
        self, before: Solution, old: Measures, new: Measures, report: Callable[[], None]
    ) -> None:
        self.before, self.new, self.report = before, new, report
        self.old = _with_weights(before, old)
        # a reduced chi2 a little above 1 is chance, and would make every test too lenient
        chance = float(chdtrc(before.dof, before.chi2)) if before.dof > 0 else 1.0
        self.scale = before.error_scale**2 if chance < TOO_SMALL else 1.0
        o = observe(self.old)
        t0 = o.mean_epoch
        start = regular_from_elements(before.elements, t0)
        self.chi2 = float(refine(polar_problem(o, t0), start, None, LAST_STEPS).chi2[0])

    def is_theirs(self, elements: Elements, most: float = NOT_THEIRS) -> bool:
        """True where an orbit fits the old measures about as well as the best one near it."""
        rise = residuals(elements, self.old).chi2 - self.chi2
        return self.before.dof > SIZE and rise <= most * self.scale

    def __call__(self, rows: FloatArray) -> tuple[float, int, float]:
        """Rise of chi2 by some of the new measures, their values, and its probability."""
        new = self.new.select(np.asarray(rows, dtype=int))
        values = int(new.has_theta.sum() + new.has_rho.sum())
        rise = min(self._rise(new, [self.before.elements]), self._search(new)[0])
        return rise, values, float(chdtrc(values, rise))

    def profile(self, row: int) -> tuple[float, float]:
        """How far off theta and rho of a new measure are, each by itself, in sigma; NaN missing.

        The root of the rise of chi2: the profile of the likelihood at the value measured.
        """
        one = self.new.select([row])
        gone = np.array([np.nan])
        alone = {}
        if one.has_theta[0]:
            alone[0] = replace(one, rho=gone, rho_err=gone)
        if one.has_rho[0]:
            alone[1] = replace(one, theta=gone, theta_err=gone)
        rises = {kind: self._rise(part, [self.before.elements]) for kind, part in alone.items()}
        if max(rises.values()) > WORTH_A_SEARCH**2:
            # a value alone cannot raise chi2 by more than both: their orbits are starts too
            orbits = self._search(one)[1]
            for kind, part in alone.items():
                rises[kind] = min(rises[kind], self._rise(part, orbits), self._search(part)[0])
        return tuple(float(np.sqrt(rises.get(kind, np.nan))) for kind in (0, 1))

    def _rise(self, new: Measures, orbits: Sequence[Elements]) -> float:
        """Rise of chi2 by new measures, of the best fit near some orbits."""
        self.report()
        joined = observe(self.old.append(new))
        t0 = joined.mean_epoch
        starts = np.array([regular_from_elements(one, t0) for one in orbits])
        return self._above(refine(polar_problem(joined, t0), starts, None, LAST_STEPS).chi2.min())

    def _search(self, new: Measures) -> tuple[float, list[Elements]]:
        """The same of the best of all orbits, and the best few of these."""
        joined = observe(self.old.append(new))
        t0, found = find_basins(joined, on_progress=lambda share: self.report())
        best = [elements_from_regular(u, t0) for u in found.u[:MOST_STARTS]]
        return self._above(found.chi2[0]), best

    def _above(self, chi2: float) -> float:
        return max(float(chi2) - self.chi2, 0.0) / self.scale


def _with_weights(before: Solution, old: Measures) -> Measures:
    """The old measures with the errors of a solution, larger where it gave them less weight."""
    r = before.residuals
    theta_err, rho_err = r.theta_err.copy(), r.rho_err.copy()
    for group in before.noise:
        rows = np.array(group.rows)
        for error, weight in ((theta_err, group.theta_weight), (rho_err, group.rho_weight)):
            known = np.array([1.0 if w is None else w for w in weight])
            error[rows] /= np.sqrt(known)
    return replace(old, theta_err=theta_err, rho_err=rho_err)
