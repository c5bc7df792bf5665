"""Trials of noise, slips, judgement and companions on invented measures, one for each seed.

The tests run a few of them, the benchmarks all.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from simulate import history, history_epochs, published_like

from relorbit.derive.companion import search_companion
from relorbit.derive.prediction import deviations
from relorbit.derive.surprise import RefitTest
from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import NAMES, Elements, complex_position, polar
from relorbit.solve.observations import DEFAULT_ERRORS
from relorbit.solve.solution import Solution
from relorbit.solve.solver import refine_from, solve

# five groups: technique and observer
GROUPS = (("eyepiece", "A"), ("eyepiece", "B"), ("plate", "C"), ("camera", "D"),
          ("interferometer", "E"))  # fmt: skip
RANGE = 50.0  # largest over smallest of the true scales
COARSEST = 0.1  # largest true scale, in semimajor axes
FEWEST = 10  # measures of a group
WELL_KNOWN = 0.05  # relative error of P up to which elements scatter as Gaussians do
AHEAD = 10.0  # years


def gaps(found: Elements, truth: Elements) -> np.ndarray:
    """found less truth, each element; the node on the same side, T the same passage."""
    truth = truth.near(found.T)
    if abs((found.node - truth.node + 180.0) % 360.0 - 180.0) > 90.0:
        truth = replace(truth, node=truth.node + 180.0, omega=truth.omega + 180.0)
    out = np.array([getattr(found, name) - getattr(truth, name) for name in NAMES])
    out[5:] = (out[5:] + 180.0) % 360.0 - 180.0
    return out


def sigmas(solution: Solution, formal: bool = False) -> np.ndarray:
    """Errors of the elements, shape (7,); NaN where they have none."""
    told = solution.sigma_formal if formal else solution.sigma
    return np.array([np.nan if told[name] is None else told[name] for name in NAMES])


def five_groups(rng: np.random.Generator) -> tuple[Elements, Pair, Pair, np.ndarray]:
    """Truth, measures that tell no errors, the same with the true ones, scales (5, 2) in arcsec.

    Tangential and radial scales differ, over a range of fifty; ten measures or more of a group.
    """
    while True:
        truth = published_like(rng)
        epoch = history_epochs(truth, rng)
        group = rng.integers(0, len(GROUPS), epoch.size)
        enough = np.bincount(group, minlength=len(GROUPS)).min() >= FEWEST
        if enough and np.ptp(epoch) > 0.75 * truth.P:
            break
    share = np.exp(-rng.uniform(0.0, np.log(RANGE), (len(GROUPS), 2)))
    share[rng.integers(len(GROUPS))], share[rng.integers(len(GROUPS))] = 1.0, 1.0 / RANGE
    scales = COARSEST * truth.a * share
    theta, rho = polar(complex_position(truth, epoch))
    across, along = scales[group].T
    theta_err = np.degrees(np.arctan2(across, rho))
    theta = np.mod(theta + theta_err * rng.normal(size=epoch.size), 360.0) % 360.0
    rho = np.abs(rho + along * rng.normal(size=epoch.size))
    technique, observer = np.array(GROUPS)[group].T
    who = {"technique": technique, "observer": observer, "allow_any_epoch": True}
    untold = Pair.from_arrays(epoch, theta, rho, **who)
    return truth, untold, Pair.from_arrays(epoch, theta, rho, theta_err, along, **who), scales


def noise_trial(seed: int) -> tuple[np.ndarray, np.ndarray, np.ndarray] | None:
    """Estimated over true scales, shape (5, 2), and the elements' errors, shape (7,), of the fit
    from residuals and of the one that knows the true errors, both in the latter's sigma.

    None where the true errors do not determine the orbit well either.
    """
    truth, untold, told, scales = five_groups(np.random.default_rng(seed))
    try:
        known = solve(told)
    except Undetermined:
        return None
    unit = sigmas(known, formal=True)
    if not unit[0] < WELL_KNOWN * truth.P:
        return None
    try:
        found = solve(untold, errors="from-residuals")
    except Undetermined:
        # what the true errors do determine: a failure, and counted as one
        return np.full((5, 2), np.nan), np.full(7, np.inf), gaps(known.elements, truth) / unit
    factors = {g.name: (g.across_factor, g.along_factor) for g in found.noise}
    usual = np.array([DEFAULT_ERRORS[technique] for technique, _ in GROUPS])
    ratio = np.array([factors[", ".join(who)] for who in GROUPS]) * usual / scales
    return ratio, gaps(found.elements, truth) / unit, gaps(known.elements, truth) / unit


def labelled(pair: Pair) -> Pair:
    """The pair with an observer for each of its levels of error."""
    m = pair.measures
    level = np.unique(m.rho_err, return_inverse=True)[1]
    observer = np.array([f"O{k}" for k in level])
    return pair.with_measures(
        replace(m, observer=observer, technique=np.full(len(m), "camera"))
    )


def slip_trial(seed: int, size: float = 30.0) -> tuple[float, float, float, float] | None:
    """Largest change of an element, in its sigma, by one slip of so many sigma in theta or rho:
    of the fit from residuals, of that fit without the measure, and with the errors as given; and
    the relative error of P. None where the orbit is not determined.
    """
    rng = np.random.default_rng(seed)
    while True:
        truth, pair = history(rng)
        m = pair.measures
        if len(m) >= 30 and np.ptp(m.epoch) > 0.75 * truth.P:
            break
    pair = labelled(pair)
    m = pair.measures
    row, column = int(rng.integers(len(m))), rng.choice(["theta", "rho"])
    value = getattr(m, column).copy()
    value[row] += rng.choice([-1.0, 1.0]) * size * getattr(m, f"{column}_err")[row]
    value[row] = value[row] % 360.0 % 360.0 if column == "theta" else abs(value[row])
    use = m.use.copy()
    use[row] = False
    slipped, gone = (
        pair.with_measures(replace(m, **{name: changed}))
        for name, changed in ((column, value), ("use", use))
    )
    try:
        clean = solve(pair, errors="from-residuals")
        others = (
            solve(slipped, errors="from-residuals"),
            solve(gone, errors="from-residuals"),
            solve(slipped),
        )
    except Undetermined:
        return None
    change = [
        float(np.nanmax(np.abs(gaps(one.elements, clean.elements) / sigmas(clean))))
        for one in others
    ]
    unknown = clean.sigma["P"] / clean.elements.P
    return (*change, float(unknown))


def judge_trial(seed: int, errors: str) -> tuple[float, ...] | None:
    """O-C over predicted sigma of theta and rho of a measure ten years ahead, the probability of
    so large a deviation (by a refit where it seems small), the relative error of P; and to first
    order the probability, theta and rho in sigma."""
    rng = np.random.default_rng(seed)
    truth, pair = history(rng)
    pair = labelled(pair)
    try:
        solution = solve(pair, errors=errors)
    except Undetermined:
        return None
    epoch = np.array([pair.measures.epoch.max() + AHEAD])
    error = float(np.median(pair.measures.rho_err))
    noise = error * (rng.normal(size=1) + 1j * rng.normal(size=1))
    theta, rho = polar(complex_position(truth, epoch) + noise)
    new = Pair.from_arrays(
        epoch, theta, rho, np.degrees(np.arctan2(error, rho)), [error], allow_any_epoch=True
    ).measures
    linear = deviations(
        solution.elements, solution.uncertainty, epoch, theta, rho, new.theta_err, new.rho_err
    )
    refit = RefitTest(solution, pair.measures, new, lambda: None)
    found = linear.with_profiles(refit.profile).with_refits(refit)
    return (
        float(found.theta_in_sigma[0]), float(found.rho_in_sigma[0]),
        float(found.probability[0]), solution.sigma["P"] / solution.elements.P,
        float(linear.probability[0]), float(linear.theta_in_sigma[0]),
        float(linear.rho_in_sigma[0]),
    )  # fmt: skip


def companion_trial(seed: int, wobble: float, period: float = 6.0, error: float = 0.01):
    """The search in the residuals of sixty measures of 0.01 arcsec; a circular wobble (arcsec)."""
    rng = np.random.default_rng(seed)
    truth = Elements(
        rng.uniform(40.0, 90.0), rng.uniform(1960.0, 2000.0), rng.uniform(0.0, 0.7),
        rng.uniform(0.5, 1.5), rng.uniform(20.0, 160.0), rng.uniform(0.0, 180.0),
        rng.uniform(0.0, 360.0),
    )  # fmt: skip
    epoch = np.sort(rng.uniform(1950.0, 2020.0, 60))
    turn = rng.choice([-1.0, 1.0]) * 2.0 * np.pi * epoch / period + rng.uniform(0.0, 2.0 * np.pi)
    noise = error * (rng.normal(size=60) + 1j * rng.normal(size=60))
    theta, rho = polar(complex_position(truth, epoch) + wobble * np.exp(1j * turn) + noise)
    pair = Pair.from_arrays(
        epoch, theta, rho, np.degrees(np.arctan2(error, rho)), np.full(60, error)
    )
    return search_companion(refine_from(pair, truth), seed=seed)
