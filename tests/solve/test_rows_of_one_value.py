"""Rows with theta alone or rho alone, and position angles around north."""

from __future__ import annotations

import numpy as np
import pytest
from simulate import chi2_from_the_truth, observed

from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import NAMES, Elements
from relorbit.solve.basins import find_basins
from relorbit.solve.observations import observe
from relorbit.solve.solver import solve

TRUE = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
ROWS = np.arange(60)


def with_only(keep_theta: np.ndarray, keep_rho: np.ndarray, seed: int = 7) -> Pair:
    """An invented pair of 60 rows of which some have lost theta, some rho."""
    epoch = np.linspace(1960.0, 2020.0, ROWS.size)
    m = observed(TRUE, epoch, 0.03, np.random.default_rng(seed)).measures
    theta, theta_err = (np.where(keep_theta, x, np.nan) for x in (m.theta, m.theta_err))
    rho, rho_err = (np.where(keep_rho, x, np.nan) for x in (m.rho, m.rho_err))
    return Pair.from_arrays(epoch, theta, rho, theta_err, rho_err)


@pytest.mark.parametrize(
    ("keep_theta", "keep_rho"),
    [
        (ROWS >= 0, ROWS % 2 == 0),
        (ROWS % 2 == 0, ROWS >= 0),
        (ROWS >= 0, ROWS < 4),
        (ROWS >= 0, (ROWS == 10) | (ROWS == 30)),
        (ROWS % 12 == 0, ROWS >= 0),
        (ROWS % 3 != 1, ROWS % 3 != 2),
        (ROWS < 32, ROWS > 28),
    ],
    ids=["rho of every other", "theta of every other", "rho of four", "rho of two",
         "theta of five", "one third each", "theta first, rho later"],
)  # fmt: skip
def test_rows_of_one_value_are_used(keep_theta: np.ndarray, keep_rho: np.ndarray) -> None:
    pair = with_only(keep_theta, keep_rho)
    solution = solve(pair)
    assert solution.used == ROWS.size
    assert solution.dof == keep_theta.sum() + keep_rho.sum() - 7
    assert solution.chi2 == pytest.approx(solution.dof, abs=4.0 * np.sqrt(2.0 * solution.dof))
    for name in NAMES:
        gap = getattr(solution.elements, name) - getattr(TRUE, name)
        if name == "T":
            gap -= TRUE.P * np.rint(gap / TRUE.P)
        assert abs(gap) < 4.5 * solution.sigma[name], name
    observations = observe(pair.measures)
    t0, orbits = find_basins(observations)
    assert orbits.chi2[0] <= chi2_from_the_truth(TRUE, observations, t0) + 1e-6


def test_an_angle_alone_still_counts() -> None:
    """Angles added to a list of positions tighten the orbit as much as they should."""
    few = ROWS % 4 == 0
    joined = with_only(ROWS >= 0, few)
    alone = solve(joined.with_measures(joined.measures.select(few))).sigma
    joined = solve(joined).sigma
    for name in ("P", "T", "e", "i", "node", "omega"):
        assert joined[name] < 0.85 * alone[name]


def test_residuals_of_a_value_that_is_not_there_are_missing() -> None:
    keep_theta, keep_rho = ROWS % 2 == 0, (ROWS % 2 == 1) | (ROWS % 3 == 0)
    solution = solve(with_only(keep_theta, keep_rho))
    r = solution.residuals
    assert np.array_equal(np.isfinite(r.d_theta), keep_theta)
    assert np.array_equal(np.isfinite(r.d_rho), keep_rho)
    assert r.chi2 == pytest.approx(solution.chi2)
    rows = r.to_dict()["rows"]
    assert rows[1]["theta"] is None and rows[1]["d_theta"] is None
    assert rows[1]["theta_err"] is None and rows[0]["theta_err"] > 0.0


@pytest.mark.parametrize(
    ("keep_theta", "keep_rho"),
    [(ROWS >= 0, ROWS < 0), (ROWS < 0, ROWS >= 0), (ROWS % 2 == 0, ROWS % 2 == 1)],
    ids=["no rho", "no theta", "never both"],
)
def test_without_two_full_positions_there_is_no_answer(
    keep_theta: np.ndarray, keep_rho: np.ndarray
) -> None:
    with pytest.raises(Undetermined) as caught:
        solve(with_only(keep_theta, keep_rho))
    assert caught.value.code == "too-few-positions"
    assert "both theta and rho" in caught.value.reason


@pytest.mark.parametrize("node", [0.0, 5.0, 179.0])
def test_position_angles_that_pass_north(node: float) -> None:
    """A pair that swings across north: theta jumps between 359 and 0, its residuals do not."""
    elements = Elements(40.0, 2000.0, 0.3, 1.0, 88.0, node, 120.0)
    epoch = np.linspace(1960.0, 2020.0, 60)
    pair = observed(elements, epoch, 0.01, np.random.default_rng(3))
    assert np.abs(np.diff(pair.measures.theta)).max() > 300.0
    solution = solve(pair)
    assert solution.chi2 < solution.dof + 5.0 * np.sqrt(2.0 * solution.dof)
    assert np.abs(solution.residuals.theta_in_sigma).max() < 5.0
    turned = solve(observed(Elements(40.0, 2000.0, 0.3, 1.0, 88.0, node + 70.0, 120.0), epoch,
                            0.01, np.random.default_rng(3)))  # fmt: skip
    for name in ("P", "e", "a", "i", "omega"):
        gap = getattr(solution.elements, name) - getattr(turned.elements, name)
        gap = (gap + 90.0) % 180.0 - 90.0 if name == "omega" else gap
        assert abs(gap) < 4.5 * np.hypot(solution.sigma[name], turned.sigma[name])


def test_a_measure_at_zero_separation_is_no_trouble() -> None:
    elements = Elements(40.0, 2000.0, 0.3, 1.0, 90.0, 30.0, 120.0)
    epoch = np.linspace(1960.0, 2020.0, 60)
    m = observed(elements, epoch, 0.03, np.random.default_rng(12)).measures
    closest = int(np.argmin(m.rho))
    rho = np.where(np.arange(60) == closest, 0.0, m.rho)
    theta = np.where(np.arange(60) == closest, np.nan, m.theta)
    theta_err = np.where(np.arange(60) == closest, np.nan, m.theta_err)
    solution = solve(Pair.from_arrays(epoch, theta, rho, theta_err, m.rho_err))
    assert abs(solution.elements.P - 40.0) < 5.0 * solution.sigma["P"]
    assert solution.dof == 119 - 7


def test_flipped_rows_are_fitted_on_the_other_side() -> None:
    epoch = np.linspace(1960.0, 2020.0, 60)
    m = observed(TRUE, epoch, 0.03, np.random.default_rng(7)).measures
    wrong = np.isin(ROWS, (4, 20, 41))
    theta = np.where(wrong, (m.theta + 180.0) % 360.0, m.theta)
    straight = solve(Pair.from_arrays(epoch, m.theta, m.rho, m.theta_err, m.rho_err))
    flipped = solve(Pair.from_arrays(epoch, theta, m.rho, m.theta_err, m.rho_err, flip=wrong))
    assert flipped.chi2 == pytest.approx(straight.chi2, rel=1e-9)
    left = solve(Pair.from_arrays(epoch, theta, m.rho, m.theta_err, m.rho_err))
    notice = {one.code: one.text for one in left.warnings}["wrong-side"]
    assert "3 measured at" in notice
    assert f"{epoch[4]:.2f}" in notice


def test_rows_set_aside_are_not_fitted_but_compared() -> None:
    epoch = np.linspace(1960.0, 2020.0, 60)
    m = observed(TRUE, epoch, 0.03, np.random.default_rng(7)).measures
    use = ROWS % 5 != 0
    rho = np.where(use, m.rho, 3.0 * m.rho)
    solution = solve(Pair.from_arrays(epoch, m.theta, rho, m.theta_err, m.rho_err, use=use))
    assert (solution.measures, solution.used) == (60, 48)
    assert np.array_equal(solution.residuals.used, use)
    assert len(solution.residuals) == 60
    assert solution.reduced_chi2 < 1.6
