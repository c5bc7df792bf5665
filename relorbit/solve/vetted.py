"""`vet`: every measure of a pair against what the others say, and the slips that explain it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from itertools import count

import numpy as np

from relorbit.errors import Undetermined
from relorbit.measures.dates import other_dates
from relorbit.measures.pair import Pair, RecordedOrbit
from relorbit.measures.repeats import repeated
from relorbit.measures.slips import KINDS, QUADRANT
from relorbit.measures.table import Measures
from relorbit.measures.vetting import Finding, applied, corrected, set_aside
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import SIZE, regular_from_elements
from relorbit.solve.left_in_equinox import left_in_another_equinox
from relorbit.solve.observations import observe
from relorbit.solve.quadrants import clear_majority, joint_orbits
from relorbit.solve.slip_fit import SlipData, factors, likeliest, misfits, slip_data
from relorbit.solve.slip_search import STEPS_IN_ALL, robust_orbits
from relorbit.solve.trying import (
    STRANGE,
    Trial,
    enough_for_an_orbit,
    tried_against_curve,
    tried_against_orbit,
)

AMBIGUOUS = 0.12  # share of quadrants flipped, or unexplained, from which all are in doubt
COARSE = 2.5  # times the errors given, from which a fit may have failed by its quadrants
MOST_STRANGE = 0.15  # share of measures without explanation beyond which none is named


Orbit = Elements | RecordedOrbit | None


def vet(
    pair: Pair,
    orbit: Orbit = None,
    *,
    on_progress: Callable[[float], None] | None = None,
) -> list[Finding]:
    """Find the slips among the measures of a pair. Nothing is changed: see `applied`.

    Parameters
    ----------
    pair : Pair
        Measures set aside already are not looked at.
    orbit : Elements or RecordedOrbit, optional
        Vet against this orbit. By default against the orbit that the measures themselves make
        likeliest, slips allowed for, or against a smooth curve in time where they are too few.
    on_progress : callable, optional
        Called with the share done, 0 to 1; what it raises ends the work.

    Returns
    -------
    list of Finding
        In the order of the measures, at most one for each.
    """
    report = on_progress or (lambda share: None)
    steps = count(1)

    def tell() -> None:
        report(min(0.6 * next(steps) / STEPS_IN_ALL, 0.6))

    report(0.0)
    doubled = repeated(pair.measures)
    rows = {one.row for one in doubled}
    found, trial, d = _against_the_others(pair, orbit, rows, tell)
    report(0.6)
    left: list[Finding] = []
    if d is not None and trial is not None and trial.u is not None:
        sound = [one.row for one in found if one.kind != "unexplained"]
        left = left_in_another_equinox(pair, d, trial, {*rows, *sound})
    if left:
        # theta of date had its part in what the others said: ask them again
        found, _, _ = _against_the_others(applied(pair, left), orbit, rows, tell)
        of_date = {one.row: one for one in left}
        found = [_after(of_date[one.row], one) if one.row in of_date else one for one in found]
        again = {one.row for one in found}
        left = [one for one in left if one.row not in again]
    report(1.0)
    return sorted([*doubled, *found, *left], key=lambda one: one.row)


def _against_the_others(
    pair: Pair, orbit: Orbit, doubled: set[int], tell: Callable[[], None]
) -> tuple[list[Finding], Trial | None, SlipData | None]:
    d = _data(pair.measures, doubled)
    if d is None:
        return [], None, None
    trial = _tried(d, orbit, tell)
    return _findings(pair.measures, d, trial), trial, d


def _after(first: Finding, then: Finding) -> Finding:
    """A finding on a row that another has changed before, as one of the row as it was."""
    change = dict(first.change)
    for name, (before, after) in then.change.items():
        change[name] = (change.get(name, (before,))[0], after)
    return replace(
        then, change={name: both for name, both in change.items() if both[0] != both[1]}
    )


def _data(measures: Measures, doubled: set[int]) -> SlipData | None:
    use = measures.use.copy()
    use[list(doubled)] = False
    try:
        o = observe(replace(measures, use=use))
    except Undetermined:
        return None
    return slip_data(measures, o, other_dates(measures.epoch, measures.epoch_obs))


def _tried(d: SlipData, orbit: Orbit, tell: Callable[[], None]) -> Trial:
    if orbit is not None:
        return _tried_against_that(d, orbit)
    if not enough_for_an_orbit(d.o):
        return tried_against_curve(d)
    u, improbability = robust_orbits(d, tell)[0]
    if _in_doubt(d, u):
        joint, orbits = joint_orbits(d, tell)
        if orbits[0][1] < improbability:
            d, u = joint, orbits[0][0]
    return tried_against_orbit(d, u)


def _in_doubt(d: SlipData, u: FloatArray) -> bool:
    """True where an orbit has so much to explain that quadrants may be in doubt throughout."""
    kinds, out = likeliest(d, u)
    if np.mean((kinds == QUADRANT) | out) > AMBIGUOUS:
        return True
    factor = factors(d, *misfits(d, u[None]))[0]
    return bool((factor[d.given] > COARSE).any())


def _tried_against_that(d: SlipData, orbit: Elements | RecordedOrbit) -> Trial:
    """Against an orbit as it stands, its errors counted where it has any."""
    matrix, elements = np.zeros((SIZE, SIZE)), orbit
    if isinstance(orbit, RecordedOrbit):
        elements = orbit.elements
        if orbit.covariance is not None and orbit.reference_epoch is not None:
            matrix, d = np.asarray(orbit.covariance), replace(d, t0=orbit.reference_epoch)
    return tried_against_orbit(d, regular_from_elements(elements, d.t0), fixed=matrix)


def _findings(m: Measures, d: SlipData, trial: Trial) -> list[Finding]:
    strange = [row for row, v in trial.verdicts.items() if v.kind < 0 and v.before > STRANGE]
    too_many = len(strange) > max(1.0, MOST_STRANGE * len(d.o))
    flipped = trial.kinds == QUADRANT
    joint = ""
    if np.mean(flipped) > AMBIGUOUS:
        joint = "; the quadrants of this list are in doubt throughout and were told together"
        if not clear_majority(flipped):
            joint += ", and all of them turned would be as good"
    findings = []
    for row, verdict in sorted(trial.verdicts.items()):
        where = int(d.o.rows[row])
        before = float(np.sqrt(verdict.before))
        if verdict.kind < 0:
            if row in strange and not too_many:
                text = "no common slip explains it: look at it"
                change = set_aside(m, where, f"{before:.0f} sigma off, unexplained")
                findings.append(
                    Finding(where, "unexplained", text, before, None, verdict.confidence, change)
                )
            continue
        kind, k = KINDS[verdict.kind], verdict.kind
        change = corrected(
            m, where, float(d.tried.epoch[k, row]), float(d.tried.theta[k, row]),
            float(d.tried.rho[k, row]), kind.text,
        )  # fmt: skip
        text = kind.text + joint * (k == QUADRANT)
        findings.append(
            Finding(
                where, kind.name, text, before, float(np.sqrt(verdict.after)), verdict.confidence,
                change,
            )
        )  # fmt: skip
    return findings
