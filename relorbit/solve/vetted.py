"""`vet`: every measure of a pair against what the others say, and the slips that explain it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from relorbit.errors import Undetermined
from relorbit.measures.dates import other_dates
from relorbit.measures.pair import Pair, RecordedOrbit
from relorbit.measures.repeats import repeated
from relorbit.measures.slips import KINDS, QUADRANT
from relorbit.measures.table import Measures
from relorbit.measures.vetting import Finding, corrected, set_aside
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import SIZE, regular_from_elements
from relorbit.solve.left_in_equinox import left_in_another_equinox
from relorbit.solve.observations import observe
from relorbit.solve.quadrants import clear_majority, on_the_side_of_most
from relorbit.solve.slip_fit import SlipData, likeliest, slip_data
from relorbit.solve.slip_search import robust_orbits
from relorbit.solve.trying import (
    STRANGE,
    Trial,
    enough_for_an_orbit,
    tried_against_curve,
    tried_against_orbit,
)

AMBIGUOUS = 0.12  # share of quadrants flipped, or unexplained, from which all are in doubt
MOST_STRANGE = 0.15  # share of measures without explanation beyond which none is named


def vet(
    pair: Pair,
    orbit: Elements | RecordedOrbit | None = None,
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
    measures = pair.measures
    findings = repeated(measures)
    d = _data(measures, {one.row for one in findings})
    report(0.1)
    if d is not None:
        trial = _tried(d, orbit)
        report(0.9)
        found = _findings(measures, d, trial)
        findings += found
        if trial.u is not None:
            findings += left_in_another_equinox(pair, d, trial, {one.row for one in findings})
    report(1.0)
    return sorted(findings, key=lambda one: one.row)


def _data(measures: Measures, doubled: set[int]) -> SlipData | None:
    use = measures.use.copy()
    use[list(doubled)] = False
    try:
        o = observe(replace(measures, use=use))
    except Undetermined:
        return None
    return slip_data(measures, o, other_dates(measures.epoch, measures.epoch_obs))


def _tried(d: SlipData, orbit: Elements | RecordedOrbit | None) -> Trial:
    if orbit is not None:
        elements = orbit if isinstance(orbit, Elements) else orbit.elements
        u = regular_from_elements(elements, d.t0)
        return tried_against_orbit(d, u, fixed=_covariance(orbit, d.t0))
    if not enough_for_an_orbit(d.o):
        return tried_against_curve(d)
    u = robust_orbits(d)[0][0]
    kinds, out = likeliest(d, u)
    if np.mean((kinds == QUADRANT) | out) > AMBIGUOUS:
        joint = replace(d, price=np.where(np.arange(d.price.size) == QUADRANT, 0.0, d.price))
        other = on_the_side_of_most(joint, robust_orbits(joint)[0][0])[0]
        if likeliest(joint, other)[1].sum() <= out.sum():
            d, u = joint, other
    return tried_against_orbit(d, u)


def _covariance(orbit: Elements | RecordedOrbit, t0: float) -> FloatArray:
    """Covariance of an orbit on record in regular coordinates at t0; zero where it has none."""
    if isinstance(orbit, Elements) or orbit.covariance is None or orbit.reference_epoch is None:
        return np.zeros((SIZE, SIZE))
    start = regular_from_elements(orbit.elements, orbit.reference_epoch)
    move = np.empty((SIZE, SIZE))
    # the derivative of a change of reference epoch, by differences
    from relorbit.orbit.regular import elements_from_regular

    size = np.maximum(np.sqrt(np.maximum(np.diag(orbit.covariance), 0.0)), 1e-12) * 1e-2
    for slot in range(SIZE):
        shift = np.zeros(SIZE)
        shift[slot] = size[slot]
        high, low = (
            regular_from_elements(
                elements_from_regular(start + sign * shift, orbit.reference_epoch), t0
            )
            for sign in (1.0, -1.0)
        )
        move[:, slot] = (high - low) / (2.0 * size[slot])
    return move @ orbit.covariance @ move.T


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
