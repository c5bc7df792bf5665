"""Which of the two is wrong, the measure or the orbit: the verdict and its words."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import chdtrc

from relorbit.derive.new_measures import NewMeasures
from relorbit.derive.prediction import Deviations, deviations
from relorbit.derive.refitting import squares
from relorbit.measures.slips import Slip, explain
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements
from relorbit.orbit.regular import Uncertainty
from relorbit.solve.solution import Solution

SURPRISING = 0.01  # probability below which a deviation is not put down to chance
VERDICTS = ("agrees", "measure-looks-wrong", "orbit-needs-correction", "unclear")


KNOWN_BETTER = (
    "the orbit needs correction: the measures on record, refitted, predict the new ones, the orbit "
    "on record does not"
)
VAGUER = (
    "the orbit needs correction: another that fits the measures on record as well passes through "
    "the new ones; it was less well known than its errors say"
)
NO_REFIT = (
    "the new measures do not agree with the orbit, and no refit can be made to tell which of the "
    "two is wrong"
)
AT_ODDS = (
    "the new measures agree neither with the orbit nor, after a refit, with each other: their "
    "errors are larger than stated, or several are wrong"
)


@dataclass(frozen=True)
class Verdict:
    """One of `VERDICTS`, its words, and which of the new measures look wrong."""

    code: str
    text: str
    wrong: tuple[int, ...] = ()


def measured_deviations(
    elements: Elements, uncertainty: Uncertainty | None, m: Measures
) -> Deviations:
    """O-C of new measures in the light of all errors."""
    return deviations(
        elements, uncertainty, m.epoch, m.theta_effective, m.rho, m.theta_err, m.rho_err
    )


def odd_ones(found: Deviations) -> np.ndarray:
    """Measures too far off for chance, each of n being one chance in n."""
    return found.probability < SURPRISING / found.probability.size


def slips_of(
    elements: Elements, uncertainty: Uncertainty | None, m: Measures, found: Deviations
) -> list[Slip | None]:
    """What would explain each odd measure; None for the others."""
    slips: list[Slip | None] = [None] * len(m)
    for k in np.flatnonzero(odd_ones(found)):

        def deviation(
            epoch: float, theta: float, rho: float, k: int = int(k)
        ) -> tuple[float, float]:
            # the error of theta as an arc stays what it was
            theta_err = m.theta_err[k]
            if rho > 0.0 and m.rho[k] > 0.0:
                theta_err = min(theta_err * m.rho[k] / rho, 90.0) if rho < m.rho[k] else theta_err
            one = deviations(elements, uncertainty, *(np.array([value]) for value in (
                epoch, theta, rho, theta_err, m.rho_err[k])))  # fmt: skip
            return float(one.chi2[0]), float(one.probability[0])

        slips[k] = explain(m.epoch[k], m.theta_effective[k], m.rho[k], deviation)
    return slips


@dataclass(frozen=True)
class Trial:
    """All that a verdict rests on."""

    found: Deviations
    slips: list[Slip | None]
    before: Solution | None
    solution: Solution | None
    fresh: NewMeasures

    def verdict(self) -> Verdict:
        """The verdict; `solution`, the refit with all new measures, is made when it is needed."""
        odd = np.flatnonzero(odd_ones(self.found))
        _, _, probability = self.found.together()
        if probability >= SURPRISING and not odd.size:
            return Verdict("agrees", _agreement(probability))
        if odd.size and all(self.slips[k] is not None for k in odd):
            rest = np.setdiff1d(np.arange(self.found.chi2.size), odd)
            if self.found.together(rest)[2] >= SURPRISING:
                return self._wrong(odd, explained=True)
        if self._old_measures_know_better():
            return Verdict("orbit-needs-correction", KNOWN_BETTER)
        if self._refit_is_free():
            return Verdict("orbit-needs-correction", VAGUER)
        alone = self._odd_ones_out()
        if alone is not None:
            return self._wrong(alone, explained=False)
        if self.solution is None:
            return Verdict("unclear", NO_REFIT)
        if self._refit_holds():
            return Verdict("orbit-needs-correction", self._correction())
        if self.found.chi2.size == 1:
            return self._wrong(np.array([0]), explained=False)
        return Verdict("unclear", AT_ODDS)

    def _old_measures_know_better(self) -> bool:
        if self.before is None:
            return False
        again = measured_deviations(
            self.before.elements, self.before.uncertainty, self.fresh.measures
        )
        return again.together()[2] >= SURPRISING and not odd_ones(again).any()

    def _refit_is_free(self) -> bool:
        """True where the refit fits old and new measures as well as may be expected.

        The rise of chi2 by the new measures is what the linear prediction estimates; here the
        errors of the orbit need not be small.
        """
        if self.before is None or self.solution is None:
            return False
        r = self.before.residuals
        old = self.fresh.joined.measures.select(np.arange(len(r)))
        old = replace(old, theta_err=r.theta_err, rho_err=r.rho_err)
        robust = bool(self.before.noise)
        after, before = (
            np.nansum(squares(one.elements, old, robust)[0])
            for one in (self.solution, self.before)
        )
        chi2, values = self._of_the_new()
        rise = max(after - before + chi2, 0.0)
        return values > 0 and bool(chdtrc(values, rise) >= SURPRISING)

    def _of_the_new(self) -> tuple[float, int]:
        """chi2 of the new measures about the refitted orbit, and how many values they have."""
        after = measured_deviations(self.solution.elements, None, self.fresh.measures)
        used = [k for k, row in enumerate(self.fresh.rows) if row is not None]
        return after.together(np.array(used, dtype=int))[:2]

    def _odd_ones_out(self) -> np.ndarray | None:
        """The fewest measures, under half of them, without which the others agree."""
        left = np.arange(self.found.chi2.size)
        gone: list[int] = []
        while len(gone) + 1 < 0.5 * self.found.chi2.size:
            trials = [self.found.together(np.delete(left, k)) for k in range(left.size)]
            best = int(np.argmax([trial[2] for trial in trials]))
            gone.append(int(left[best]))
            left = np.delete(left, best)
            if trials[best][2] >= SURPRISING:
                return np.array(sorted(gone))
        return None

    def _refit_holds(self) -> bool:
        """True where the refitted orbit passes through the new measures within their errors."""
        chi2, values = self._of_the_new()
        return values > 0 and bool(chdtrc(values, chi2) >= SURPRISING)

    def _correction(self) -> str:
        text = "the orbit needs correction: the new measures disagree with it"
        if self.found.chi2.size > 1:
            return f"{text}, and agree with each other on a corrected one"
        return (
            f"{text} and a corrected orbit passes through both old and new; one measure alone may "
            "also be wrong in a way that no common slip explains: confirm it"
        )

    def _wrong(self, odd: np.ndarray, explained: bool) -> Verdict:
        one = odd.size == 1
        epochs = ", ".join(f"{self.fresh.measures.epoch[k]:.3f}" for k in odd[:6])
        text = f"the measure{'' if one else 's'} of {epochs} look{'s' if one else ''} wrong"
        if explained:
            reasons = list(dict.fromkeys(self.slips[k].text for k in odd))
            text += f": {'; '.join(reasons)}, it seems"
        else:
            text += f"; no common slip explains {'it' if one else 'all of them'}"
        if odd.size < self.found.chi2.size:
            text += ". The others agree with the orbit"
        return Verdict("measure-looks-wrong", text, tuple(odd.tolist()))


def _agreement(probability: float) -> str:
    share = f"{100.0 * probability:.0f}" if probability < 0.995 else "over 99"
    return (
        f"the new measures agree with the orbit: {share} % of such sets lie further off by chance"
    )
