"""The options of solve, its input forms, and that it gives the same again."""

from __future__ import annotations

import numpy as np
import pytest
from simulate import observed

import relorbit
from relorbit.errors import InputError
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements
from relorbit.solve.solution import Solution
from relorbit.solve.solver import solve

TRUE = Elements(12.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
EPOCH = np.linspace(1960.0, 2020.0, 60)


@pytest.fixture(scope="module")
def pair() -> Pair:
    return observed(TRUE, EPOCH, 0.02, np.random.default_rng(5))


@pytest.fixture(scope="module")
def free(pair: Pair) -> Solution:
    return solve(pair)


def test_solving_twice_gives_the_same_to_the_last_bit(pair: Pair, free: Solution) -> None:
    assert solve(pair).to_dict() == free.to_dict()


def test_the_room_and_its_function_share_a_name(pair: Pair, free: Solution) -> None:
    assert relorbit.solve(pair).elements == free.elements
    assert relorbit.solve.solver.solve is solve


def test_node_is_below_180_and_omega_below_360() -> None:
    for seed in range(12):
        rng = np.random.default_rng([4, seed])
        elements = Elements(12.0, 2000.0, 0.4, 1.0, rng.uniform(20.0, 160.0),
                            rng.uniform(0.0, 360.0), rng.uniform(0.0, 360.0))  # fmt: skip
        found = solve(observed(elements, EPOCH, 0.005, rng)).elements
        folded = elements.folded()
        assert 0.0 <= found.node < 180.0
        assert 0.0 <= found.omega < 360.0
        gap = (found.node - folded.node + 90.0) % 180.0 - 90.0
        assert abs(gap) < 3.0
        assert (found.i < 90.0) == (elements.i < 90.0)


def test_T_is_the_passage_nearest_the_mean_epoch(free: Solution) -> None:
    mean = free.uncertainty.reference_epoch
    assert 1960.0 < mean < 2020.0
    assert abs(free.elements.T - mean) <= 0.5 * free.elements.P


@pytest.mark.parametrize("near", [1850.0, 1999.0, 2031.0])
def test_another_passage_can_be_asked_for(pair: Pair, free: Solution, near: float) -> None:
    solution = solve(pair, passage_near=near)
    assert abs(solution.elements.T - near) <= 0.5 * solution.elements.P
    turns = (solution.elements.T - free.elements.T) / free.elements.P
    assert turns == pytest.approx(np.rint(turns), abs=1e-9)
    assert solution.chi2 == free.chi2
    assert np.all(np.abs(solution.residuals.theta_in_sigma) < 5.0)
    for one in solution.alternatives:
        assert abs(one.elements.T - near) <= 0.5 * one.elements.P


def test_an_epoch_range_leaves_the_rest_out(pair: Pair) -> None:
    solution = solve(pair, epoch_range=(1970.0, 2010.0))
    inside = (EPOCH >= 1970.0) & (EPOCH <= 2010.0)
    assert solution.used == inside.sum()
    assert solution.measures == 60
    assert np.array_equal(solution.residuals.used, inside)
    m = pair.measures.select(inside)
    alone = solve(Pair.from_arrays(m.epoch, m.theta, m.rho, m.theta_err, m.rho_err))
    assert alone.chi2 == pytest.approx(solution.chi2, rel=1e-9)
    assert abs(alone.elements.P / solution.elements.P - 1.0) < 1e-9


def test_a_period_range_around_the_period_changes_nothing(pair: Pair, free: Solution) -> None:
    solution = solve(pair, period_range=(8.0, 20.0))
    assert solution.chi2 == pytest.approx(free.chi2, abs=1e-6)
    assert abs(solution.elements.P / free.elements.P - 1.0) < 1e-7


def test_a_period_shorter_than_the_search_looks_at_can_be_asked_for() -> None:
    """Four measures a year for ten years, of a pair with 150 revolutions in that time."""
    elements = Elements(0.0667, 2000.0, 0.2, 0.05, 50.0, 60.0, 120.0)
    rng = np.random.default_rng(9)
    epoch = np.sort(rng.uniform(2000.0, 2010.0, 60))
    pair = observed(elements, epoch, 0.002, rng)
    solution = solve(pair, period_range=(0.05, 0.1))
    assert abs(solution.elements.P - 0.0667) < 1e-4
    assert solution.reduced_chi2 < 1.6


@pytest.mark.parametrize(
    "given", [(30.0, 10.0), (0.0, 10.0), (-1.0, 5.0), (10.0, 10.0), (np.nan, 3.0), (1.0, np.inf)]
)
def test_periods_that_are_no_range_are_refused(pair: Pair, given: tuple[float, float]) -> None:
    with pytest.raises(InputError, match="years are not a range; give the lower end, above 0,"):
        solve(pair, period_range=given)


def test_quantities_and_times_are_taken() -> None:
    units = pytest.importorskip("astropy.units")
    m = observed(TRUE, EPOCH, 0.02, np.random.default_rng(5)).measures
    plain = solve(Pair.from_arrays(EPOCH, m.theta, m.rho, m.theta_err, m.rho_err))
    other = solve(Pair.from_arrays(
        EPOCH * units.yr, np.radians(m.theta) * units.rad, 1000.0 * m.rho * units.mas,
        m.theta_err * 60.0 * units.arcmin, m.rho_err / 60.0 * units.arcmin,
    ))  # fmt: skip
    assert other.chi2 == pytest.approx(plain.chi2, rel=1e-6)
    assert abs(other.elements.P / plain.elements.P - 1.0) < 1e-7


def test_theta_that_is_not_at_j2000_is_warned_about(pair: Pair, free: Solution) -> None:
    m = pair.measures
    equinox = ["date" if k < 7 else "J2000" for k in range(60)]
    mixed = Pair.from_arrays(EPOCH, m.theta, m.rho, m.theta_err, m.rho_err, equinox=equinox)
    notices = {one.code: one.text for one in solve(mixed).warnings}
    assert notices["not-at-J2000"].startswith("theta of 7 measures")
    assert "not-at-J2000" not in [one.code for one in free.warnings]


def test_doubled_measures_halve_the_variance(pair: Pair, free: Solution) -> None:
    m = pair.measures
    twice = Pair("twice", m.append(m))
    solution = solve(twice)
    assert solution.chi2 == pytest.approx(2.0 * free.chi2, rel=1e-6)
    for name in ("P", "a", "e"):
        ratio = solution.sigma_formal[name] / free.sigma_formal[name]
        assert ratio == pytest.approx(np.sqrt(0.5), rel=1e-3)


def test_scaling_the_sky_scales_the_axis_alone(pair: Pair, free: Solution) -> None:
    m = pair.measures
    large = solve(Pair.from_arrays(EPOCH, m.theta, 10.0 * m.rho, m.theta_err, 10.0 * m.rho_err))
    assert large.elements.a == pytest.approx(10.0 * free.elements.a, rel=1e-6)
    assert abs(large.elements.P / free.elements.P - 1.0) < 1e-6
    assert large.chi2 == pytest.approx(free.chi2, rel=1e-6)


def test_mirroring_the_sky_turns_the_motion_round(pair: Pair, free: Solution) -> None:
    m = pair.measures
    theta = (360.0 - m.theta) % 360.0
    other = solve(Pair.from_arrays(EPOCH, theta, m.rho, m.theta_err, m.rho_err))
    assert other.chi2 == pytest.approx(free.chi2, rel=1e-6)
    assert other.elements.i == pytest.approx(180.0 - free.elements.i, abs=1e-4)
    assert other.elements.node == pytest.approx(180.0 - free.elements.node, abs=1e-3)


def test_turning_the_sky_turns_the_node_alone(pair: Pair, free: Solution) -> None:
    m = pair.measures
    theta = (m.theta + 40.0) % 360.0
    other = solve(Pair.from_arrays(EPOCH, theta, m.rho, m.theta_err, m.rho_err))
    assert other.elements.node == pytest.approx(free.elements.node + 40.0, abs=1e-4)
    for name in ("P", "T", "e", "a", "i", "omega"):
        before = getattr(free.elements, name)
        assert getattr(other.elements, name) == pytest.approx(before, rel=1e-6)
