"""Errors of the elements: against numerical curvature, and against repeated measuring."""

from __future__ import annotations

import numpy as np
import pytest
from simulate import observed

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import NAMES, Elements, positions
from relorbit.orbit.regular import regular_from_elements
from relorbit.solve.observations import observe
from relorbit.solve.refine import covariance, polar_problem
from relorbit.solve.solver import solve

TRUE = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
EPOCH = np.linspace(1960.0, 2020.0, 60)


def invented(error: float = 0.02, seed: int = 5, elements: Elements = TRUE) -> Pair:
    return observed(elements, EPOCH, error, np.random.default_rng(seed))


def standardised(elements: Elements, pair: Pair) -> np.ndarray:
    m = pair.measures
    theta, rho = positions(elements, m.epoch)
    gap = np.remainder(m.theta - theta + 180.0, 360.0) - 180.0
    return np.concatenate([gap / m.theta_err, (m.rho - rho) / m.rho_err])


def test_covariance_is_the_inverse_of_a_numerical_normal_matrix() -> None:
    pair = invented()
    solution = solve(pair)
    best = solution.elements
    columns = []
    for name in NAMES:
        step = 1e-5 * max(abs(getattr(best, name)), 1.0) if name != "T" else 1e-4
        up, down = (
            standardised(Elements(**(best.to_dict() | {name: getattr(best, name) + sign * step})),
                         pair)
            for sign in (1.0, -1.0)
        )  # fmt: skip
        columns.append((up - down) / (2.0 * step))
    jacobian = np.stack(columns, axis=1)
    expected = np.linalg.inv(jacobian.T @ jacobian) * solution.error_scale**2
    size = np.sqrt(np.outer(np.diag(expected), np.diag(expected)))
    assert np.abs((solution.covariance - expected) / size).max() < 1e-4
    assert solution.sigma["P"] == pytest.approx(np.sqrt(expected[0, 0]), rel=1e-4)


def test_covariance_with_a_held_element_is_that_of_the_others_alone() -> None:
    pair = invented()
    free = solve(pair)
    value, wanted = free.elements.e, NAMES.index("e")
    held = solve(pair, hold={"e": value})
    C = free.covariance / free.error_scale**2
    # conditional covariance: what is left when e is known
    expected = C - np.outer(C[:, wanted], C[wanted]) / C[wanted, wanted]
    expected[wanted] = expected[:, wanted] = 0.0
    size = np.sqrt(np.outer(np.diag(C), np.diag(C)))
    assert np.abs((held.covariance / held.error_scale**2 - expected) / size).max() < 1e-4


def test_errors_are_the_scatter_of_repeated_measuring() -> None:
    found = [solve(invented(0.01, seed)) for seed in range(40)]
    for name in NAMES:
        values = np.array([getattr(one.elements, name) for one in found])
        if name == "T":
            values -= 40.0 * np.rint((values - 2000.0) / 40.0)
        stated = np.mean([one.sigma_formal[name] for one in found])
        # the scatter of 40 draws is itself known to 11 %
        assert np.std(values, ddof=1) == pytest.approx(stated, rel=0.4), name
        assert abs(values.mean() - getattr(TRUE, name)) < 4.0 * stated / np.sqrt(40.0), name


def test_chi2_is_one_for_each_degree_of_freedom() -> None:
    found = [solve(invented(0.02, seed)) for seed in range(30)]
    chi2, dof = sum(one.chi2 for one in found), sum(one.dof for one in found)
    assert dof == 30 * (120 - 7)
    assert chi2 == pytest.approx(dof, abs=4.0 * np.sqrt(2.0 * dof))


def test_a_cubed_over_P_squared_is_better_known_than_its_parts() -> None:
    # under half a revolution: a and P go together
    epoch = np.linspace(1998.0, 2016.0, 60)
    pair = observed(TRUE, epoch, 0.004, np.random.default_rng(2))
    solution = solve(pair)
    value, sigma = solution.axis_cubed_over_period_squared
    P, a = solution.elements.P, solution.elements.a
    apart = np.hypot(3.0 * solution.sigma["a"] / a, 2.0 * solution.sigma["P"] / P)
    assert sigma / value < 0.7 * apart
    gradient = np.zeros(7)
    gradient[NAMES.index("a")], gradient[NAMES.index("P")] = 3.0 * value / a, -2.0 * value / P
    assert sigma == pytest.approx(np.sqrt(gradient @ solution.covariance @ gradient), rel=1e-6)
    assert value == pytest.approx(1.0 / 1600.0, abs=4.0 * sigma)


def test_errors_are_scaled_when_the_measures_scatter_more_than_they_say() -> None:
    pair = invented()
    m = pair.measures
    hopeful = Pair.from_arrays(EPOCH, m.theta, m.rho, m.theta_err / 3.0, m.rho_err / 3.0)
    honest, scaled = solve(pair), solve(hopeful)
    assert scaled.chi2 == pytest.approx(9.0 * honest.chi2, rel=1e-6)
    assert scaled.error_scale == pytest.approx(np.sqrt(scaled.chi2 / scaled.dof))
    for name in NAMES:
        assert scaled.sigma[name] == pytest.approx(scaled.error_scale * scaled.sigma_formal[name])
        formal = honest.sigma_formal[name] / 3.0
        assert scaled.sigma_formal[name] == pytest.approx(formal, rel=1e-4)
    notices = {one.code: one.text for one in scaled.warnings}
    assert f"{scaled.error_scale:.2f} times the formal ones" in notices["scaled-errors"]
    assert "poor-fit" in notices


def test_errors_are_never_scaled_down() -> None:
    m = invented().measures
    cautious = Pair.from_arrays(EPOCH, m.theta, m.rho, 3.0 * m.theta_err, 3.0 * m.rho_err)
    solution = solve(cautious)
    assert solution.reduced_chi2 < 0.2
    assert solution.error_scale == 1.0
    assert solution.sigma == solution.sigma_formal
    assert "scaled-errors" not in [notice.code for notice in solution.warnings]


def test_error_of_T_grows_away_from_the_measures() -> None:
    pair = invented()
    here, away = solve(pair), solve(pair, passage_near=2400.0)
    C, turns = here.covariance, 10.0
    expected = C[1, 1] + 2.0 * turns * C[0, 1] + turns**2 * C[0, 0]
    assert abs(away.elements.T - here.elements.T - turns * here.elements.P) < 1e-6
    assert away.sigma["T"] == pytest.approx(np.sqrt(expected), rel=1e-6)
    assert away.sigma["T"] > 5.0 * here.sigma["T"]


def test_covariance_where_a_direction_is_not_determined_is_finite() -> None:
    """Two rho only: the pseudo-inverse says nothing of what the measures say nothing of."""
    observations = observe(invented().measures)
    problem = polar_problem(observations.select(np.arange(3)), 1990.0)
    assert np.all(np.isfinite(covariance(problem, regular_from_elements(TRUE, 1990.0))))
