"""New measures judged against the orbit on record, and the orbit against the new measures."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from relorbit.derive.ephemeris import AnyOrbit, Ephemeris, elements_and_uncertainty, ephemeris
from relorbit.derive.new_measures import NewMeasures, take_in
from relorbit.derive.prediction import Deviations
from relorbit.derive.refitting import (
    Change,
    Influence,
    OrbitCompared,
    compare_orbits,
    element_changes,
    influences,
    refitted,
)
from relorbit.derive.surprise import THE_SAME, RefitTest
from relorbit.derive.verdict import Trial, measured_deviations, odd_ones, slips_of
from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair, RecordedOrbit
from relorbit.measures.slips import Slip
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements
from relorbit.orbit.third_law import total_mass
from relorbit.solve.solution import Solution
from relorbit.solve.solver import refine_from, solve

SCHEMA = "relorbit/judgement/1"
YEARS_AHEAD = 10
SMALLER = 0.5  # errors below this share of those of a refit are not those of the measures


@dataclass(frozen=True)
class JudgedMeasure:
    """One new measure against the prediction. Angles in degrees, lengths in arcsec, None missing.

    Attributes
    ----------
    epoch, theta, rho, theta_err, rho_err : float
        The measure, a flip applied, and the errors it is judged by.
    theta_predicted, rho_predicted, theta_predicted_sigma, rho_predicted_sigma : float
    d_theta, d_rho : float
        Observed minus predicted.
    theta_in_sigma, rho_in_sigma : float
        The same over the errors of measure and prediction together. Where the orbit is that of
        the measures on record, the error of a prediction is that of the profile of their
        likelihood on the side where the measure lies, else that of the covariance.
    chi2, values, probability : float, int, float
        Of theta and rho together, and of so large a chi2 by chance; where that seems small, by
        the rise of chi2 in a refit instead of errors to first order.
    odd : bool
        Too far off for chance, the number of new measures considered.
    slip : Slip or None
        What would explain an odd measure.
    already : str
        What the pair's list holds of the same epoch, in words; else empty.
    influence : Influence or None
        None for a measure that the refit does not use.
    """

    epoch: float
    theta: float | None
    rho: float | None
    theta_err: float | None
    rho_err: float | None
    theta_predicted: float
    rho_predicted: float
    theta_predicted_sigma: float | None
    rho_predicted_sigma: float | None
    d_theta: float | None
    d_rho: float | None
    theta_in_sigma: float | None
    rho_in_sigma: float | None
    chi2: float
    values: int
    probability: float
    odd: bool
    slip: Slip | None
    already: str
    influence: Influence | None

    def to_dict(self) -> dict[str, Any]:
        plain = {name: getattr(self, name) for name in self.__dataclass_fields__}
        plain["slip"] = self.slip and self.slip.to_dict()
        plain["influence"] = self.influence and self.influence.to_dict()
        return plain


@dataclass(frozen=True)
class Judgement:
    """What new measures say of an orbit, and it of them.

    Attributes
    ----------
    pair, orbit : str
        Names of the pair and of the orbit judged by.
    errors_from : str
        Where the errors of the prediction come from: "record"; "refit" of the measures on record,
        where the record brings none; "none".
    measures : tuple of JudgedMeasure
    chi2, values, probability : float, int, float
        Of all new measures as one set, the errors of the orbit they share considered.
    verdict : str, one of `relorbit.derive.verdict.VERDICTS`
    text : str
        The verdict in words.
    solution : Solution or None
        The orbit refitted with the new measures, but for those that look wrong; None where that
        cannot be.
    changes : tuple of Change
        The seven elements, then "mass" where the parallax is known.
    ephemeris_old, ephemeris_new : Ephemeris
        The next ten years by the orbit on record and by the refitted one.
    orbits : tuple of OrbitCompared
        Every orbit on record, and the refitted one.
    notes : tuple of str
    """

    pair: str
    orbit: str
    errors_from: str
    measures: tuple[JudgedMeasure, ...]
    chi2: float
    values: int
    probability: float
    verdict: str
    text: str
    solution: Solution | None
    changes: tuple[Change, ...]
    ephemeris_old: Ephemeris
    ephemeris_new: Ephemeris | None
    orbits: tuple[OrbitCompared, ...]
    notes: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        """The JSON of ``relorbit judge --json``, schema relorbit/judgement/1."""
        return {
            "schema": SCHEMA,
            "pair": self.pair,
            "orbit": self.orbit,
            "errors_from": self.errors_from,
            "verdict": self.verdict,
            "text": self.text,
            "chi2": self.chi2,
            "values": self.values,
            "probability": self.probability,
            "measures": [one.to_dict() for one in self.measures],
            "changes": [one.to_dict() for one in self.changes],
            "ephemeris_old": list(self.ephemeris_old.rows()),
            "ephemeris_new": self.ephemeris_new and list(self.ephemeris_new.rows()),
            "orbits": [one.to_dict() for one in self.orbits],
            "solution": self.solution and self.solution.to_dict(),
            "notes": list(self.notes),
        }


def judge(
    pair: Pair,
    new: Pair | Measures | Mapping[str, Any] | Sequence[Sequence[float]],
    orbit: str | AnyOrbit | None = None,
    *,
    errors: str = "as-given",
    after: float | None = None,
    on_progress: Callable[[float], None] | None = None,
) -> Judgement:
    """Judge new measures by the orbit on record, and that orbit by the new measures.

    Parameters
    ----------
    pair : Pair
        With the measures that are on record.
    new : Pair, Measures, mapping of columns, or rows of (epoch, theta, rho[, theta_err, rho_err])
        Julian years, degrees at equinox J2000, arcsec; NaN or None where missing.
    orbit : str, RecordedOrbit, Solution or Elements, optional
        By default the orbit recorded last; a fresh solution where none is on record.
    errors : "as-given" or "from-residuals"
        Of new measures and for the refit: see `relorbit.solve`. New measures take the error of
        their group, or of its technique.
    after : float, optional
        Julian year from which the next ten years are counted; by default the last new measure.
    on_progress : callable, optional
        Called with the share done, 0 to 1; what it raises ends the work.

    Raises
    ------
    InputError
        For a measure with a value that cannot be, or an orbit that is not on record.
    Undetermined
        Where no orbit is on record and the measures determine none.
    """
    report = on_progress or (lambda share: None)
    name, chosen = _chosen(pair, orbit, errors)
    elements, uncertainty = elements_and_uncertainty(chosen)
    before = _refit_of_the_old(pair, elements, errors)
    report(0.1)
    fresh = take_in(pair, new, before)
    errors_from = "record" if uncertainty is not None else "refit" if before else "none"
    if uncertainty is None and before is not None:
        uncertainty = before.uncertainty
    found = measured_deviations(elements, uncertainty, fresh.measures)
    if before is not None:
        refit = RefitTest(before, pair.measures, fresh.measures, lambda: report(0.1))
        if refit.is_theirs(elements) and _errors_like(chosen, before):
            if refit.is_theirs(elements, THE_SAME):
                found = found.with_profiles(refit.profile)
            found = found.with_refits(refit)
    slips = slips_of(elements, uncertainty, fresh.measures, found)
    solution, why = _with_the_new(fresh, elements, errors, lambda share: report(0.1 + 0.3 * share))
    verdict = Trial(found, slips, before, solution, fresh).verdict()
    if verdict.wrong:
        fresh = fresh.without(verdict.wrong)
        solution, why = _with_the_new(
            fresh, elements, errors, lambda share: report(0.4 + 0.3 * share)
        )
    moved: list[Influence | None] = [None] * len(fresh.measures)
    if solution is not None:
        rows = [row for row in fresh.rows if row is not None]
        each = iter(influences(fresh.joined, solution, rows, errors,
                               lambda share: report(0.7 + 0.3 * share)))  # fmt: skip
        moved = [None if row is None else next(each) for row in fresh.rows]
    start = float(fresh.measures.epoch.max()) if after is None else after
    coming = np.floor(start) + 1.0 + np.arange(YEARS_AHEAD)
    chi2, values, probability = found.together()
    return Judgement(
        pair.name, name, errors_from,
        _judged(fresh, found, slips, moved),
        chi2, values, probability, verdict.code, verdict.text, solution,
        _changes(pair, chosen, solution),
        ephemeris(chosen, coming), solution and ephemeris(solution, coming),
        _compared(fresh, pair, name, elements, solution, errors),
        (*fresh.notes, *_notes(errors_from, why)),
    )  # fmt: skip


def _chosen(pair: Pair, orbit: str | AnyOrbit | None, errors: str) -> tuple[str, AnyOrbit]:
    if orbit is None and not pair.orbits:
        return "fresh solution", solve(pair, errors=errors)
    if orbit is None or isinstance(orbit, str):
        record = pair.orbit(orbit)
        return record.name, record
    return (orbit.name if isinstance(orbit, RecordedOrbit) else "orbit given"), orbit


def _refit_of_the_old(pair: Pair, elements: Elements, errors: str) -> Solution | None:
    """The orbit of the measures on record alone, next to that on record."""
    try:
        return refine_from(pair, elements, errors=errors)
    except Undetermined:
        return None


def _errors_like(orbit: AnyOrbit, before: Solution) -> bool:
    """True unless an orbit states far smaller errors than its measures give it."""
    stated = {} if isinstance(orbit, Elements) else orbit.sigma or {}
    ratios = [
        stated[name] / sigma for name, sigma in before.sigma.items() if sigma and stated.get(name)
    ]
    return not ratios or float(np.median(ratios)) > SMALLER


def _with_the_new(
    fresh: NewMeasures, elements: Elements, errors: str, report: Callable[[float], None]
) -> tuple[Solution | None, str]:
    try:
        return refitted(fresh.joined, elements, errors, report)
    except Undetermined as why:
        return None, why.reason


def _judged(
    fresh: NewMeasures,
    found: Deviations,
    slips: list[Slip | None],
    moved: list[Influence | None],
) -> tuple[JudgedMeasure, ...]:
    m, odd = fresh.measures, odd_ones(found)
    columns = (
        m.epoch, m.theta_effective, m.rho, m.theta_err, m.rho_err, found.theta, found.rho,
        np.where(found.theta_sigma > 0, found.theta_sigma, np.nan),
        np.where(found.rho_sigma > 0, found.rho_sigma, np.nan),
        found.d_theta, found.d_rho, found.theta_in_sigma, found.rho_in_sigma,
    )  # fmt: skip
    return tuple(
        JudgedMeasure(
            *(float(part[k]) if np.isfinite(part[k]) else None for part in columns),
            float(found.chi2[k]), int(found.values[k]), float(found.probability[k]),
            bool(odd[k]), slips[k], fresh.already[k], moved[k],
        )
        for k in range(len(m))
    )  # fmt: skip


def _changes(pair: Pair, orbit: AnyOrbit, solution: Solution | None) -> tuple[Change, ...]:
    if solution is None:
        return ()
    elements, uncertainty = elements_and_uncertainty(orbit)
    sigma = {} if isinstance(orbit, Elements) else dict(orbit.sigma or {})
    found = element_changes(elements, sigma, solution.elements, solution.sigma)
    if pair.parallax_mas is None or not pair.parallax_mas > 0.0:
        return found
    # the parallax is the same in both: only the orbit's part of the error is compared
    old, new = (
        total_mass(one, pair.parallax_mas, None, errors)
        for one, errors in (
            (elements, uncertainty), (solution.elements, solution.uncertainty)
        )
    )  # fmt: skip
    return (*found, Change("mass", old.value, old.sigma_orbit, new.value, new.sigma_orbit))


def _compared(
    fresh: NewMeasures,
    pair: Pair,
    name: str,
    elements: Elements,
    solution: Solution | None,
    errors: str,
) -> tuple[OrbitCompared, ...]:
    orbits = [(one.name, one.elements) for one in pair.orbits]
    if name not in dict(orbits):
        orbits.append((name, elements))
    if solution is not None:
        orbits.append(("refitted", solution.elements))
    measures = fresh.joined.measures
    if solution is not None:
        r = solution.residuals
        measures = replace(measures, theta_err=r.theta_err, rho_err=r.rho_err)
    is_new = np.zeros(len(measures), dtype=bool)
    is_new[[row for row in fresh.rows if row is not None]] = True
    return compare_orbits(orbits, measures, is_new, errors == "from-residuals")


def _notes(errors_from: str, why: str) -> list[str]:
    notes = []
    if errors_from == "refit":
        notes.append("the orbit on record brings no errors: those of a refit of the measures on "
                     "record are taken")  # fmt: skip
    if errors_from == "none":
        notes.append("the orbit brings no errors: only those of the new measures are counted")
    if why:
        notes.append(f"old and new measures do not determine an orbit by themselves: {why}")
    return notes

