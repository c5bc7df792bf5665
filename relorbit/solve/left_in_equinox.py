"""Groups of measures whose theta was left at the equinox of date: their residuals follow
precession."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from relorbit.measures.pair import Pair
from relorbit.measures.reduction import precession_of_date
from relorbit.measures.vetting import Finding, corrected
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import SIZE
from relorbit.solve.refine import polar_problem
from relorbit.solve.slip_fit import SlipData, corrected_observations
from relorbit.solve.trying import Trial

FEWEST = 6  # measures of a group
SURE = 5.0  # sigma by which the precession must be there, and by which nothing is ruled out
NEAR = 3.0  # sigma within which it must have the rate of precession


def left_in_another_equinox(
    pair: Pair, d: SlipData, trial: Trial, taken: set[int]
) -> list[Finding]:
    """Findings of kind "equinox", one for each measure of a group that was not reduced.

    For every group (technique and observer, observer, technique, or all together) the precession
    of its measures times an unknown factor is fitted with the orbit. The factor is 0 where theta
    is at J2000, and 1 where it still is of date.

    Parameters
    ----------
    pair : Pair
        Without position nothing is found.
    d : SlipData
    trial : Trial
        With an orbit.
    taken : set of int
        Rows of the pair's measures that have a finding of their own.
    """
    m = pair.measures
    if pair.ra_deg is None or pair.dec_deg is None or trial.u is None:
        return []
    rows = d.o.rows
    # what a reduction has turned is not of date any more
    may_be = (m.equinox[rows] == "J2000") & np.isnan(m.theta_obs[rows]) & m.has_theta[rows]
    may_be &= ~np.isin(rows, list(taken))
    if np.count_nonzero(may_be) < FEWEST:
        return []
    turn = precession_of_date(pair, m.epoch[rows])
    found = _best_group(d, trial, np.radians(turn), may_be, _groups(pair, rows))
    if found is None:
        return []
    members, sigma, left, confidence = found
    text = "theta is still of date: its group follows precession; turned to J2000"
    return [
        Finding(
            int(rows[k]), "equinox", text, sigma, left, confidence,
            corrected(m, int(rows[k]), float(m.epoch[rows[k]]),
                      float(m.theta_effective[rows[k]] + turn[k]), float(m.rho[rows[k]]),
                      "theta was of date"),
        )
        for k in np.flatnonzero(members)
    ]  # fmt: skip


def _groups(pair: Pair, rows: NDArray[np.intp]) -> list[NDArray[np.bool_]]:
    m = pair.measures
    both = np.char.add(np.char.add(m.technique[rows], "\n"), m.observer[rows])
    groups = [np.ones(rows.size, dtype=bool)]
    for names in (m.technique[rows], m.observer[rows], both):
        groups += [names == name for name in np.unique(names)]
    return groups


def _best_group(
    d: SlipData,
    trial: Trial,
    turn: FloatArray,
    may_be: NDArray[np.bool_],
    groups: list[NDArray[np.bool_]],
) -> tuple[NDArray[np.bool_], float, float, float] | None:
    """Members, how many sigma from 0 and from 1, and confidence, of the group that gains most."""
    o = corrected_observations(d, trial.u, trial.kinds, trial.factor)
    r, J = polar_problem(o, d.t0).with_jacobian(trial.u[None])
    out = np.zeros(len(o), dtype=bool)
    out[[row for row, verdict in trial.verdicts.items() if verdict.kind < 0]] = True
    keep = np.repeat(~out, 2)
    design = J[0].reshape(SIZE, -1).T
    best = None
    for group in groups:
        members = group & may_be
        if np.count_nonzero(members) < FEWEST:
            continue
        column = np.zeros(r.shape[1])
        # theta less its place: a measure of date lacks what precession adds
        column[1::2] = np.where(members, -turn * o.per_theta, 0.0)
        whole = np.column_stack([design, column])[keep]
        size = np.maximum(np.linalg.norm(whole, axis=0), 1e-300)
        inverse = np.linalg.pinv(whole / size) / size[:, None]
        share, sigma = inverse[-1] @ r[0][keep], np.linalg.norm(inverse[-1])
        from_none, from_whole = share / sigma, abs(share - 1.0) / sigma
        if from_none < SURE or from_whole > NEAR or abs(share - 1.0) > 0.5:
            continue
        if best is None or from_none > best[1]:
            confidence = float(1.0 / (1.0 + np.exp(-0.5 * (from_none**2 - from_whole**2 - 12.0))))
            best = members, float(from_none), float(from_whole), confidence
    return best
