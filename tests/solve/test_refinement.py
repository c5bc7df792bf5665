"""Refinement: to the minimum from near, one orbit or many at a time."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import least_squares
from simulate import history, observed

from relorbit.orbit.elements import Elements
from relorbit.orbit.regular import regular_from_elements
from relorbit.solve.linear import sky_data
from relorbit.solve.observations import observe
from relorbit.solve.refine import (
    HIGHEST_E,
    Holding,
    Problem,
    polar_problem,
    refine,
    sky_problem,
)

TRUE = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
T0 = 1990.0


def problems() -> dict[str, Problem]:
    epoch = np.linspace(1960.0, 2020.0, 50)
    observations = observe(observed(TRUE, epoch, 0.03, np.random.default_rng(5)).measures)
    sky = sky_problem(sky_data(observations), T0)
    return {"polar": polar_problem(observations, T0), "sky": sky}


PROBLEMS = problems()


@pytest.mark.parametrize("kind", PROBLEMS)
def test_jacobian_is_the_derivative_of_the_model(kind: str) -> None:
    problem = PROBLEMS[kind]
    u = regular_from_elements(Elements(41.0, 2000.6, 0.37, 0.9, 48.0, 63.0, 118.0), T0)
    _, jacobian = problem.with_jacobian(u[None])
    for slot in range(7):
        step = np.zeros(7)
        step[slot] = 1e-6
        up, _ = problem.with_jacobian((u + step)[None])
        down, _ = problem.with_jacobian((u - step)[None])
        # residuals are observed minus computed
        numeric = -(up[0] - down[0]) / 2e-6
        size = np.abs(numeric).max()
        assert np.abs(jacobian[0, slot] - numeric).max() < 1e-6 * size


@pytest.mark.parametrize("kind", PROBLEMS)
def test_minimum_is_that_of_scipy(kind: str) -> None:
    problem = PROBLEMS[kind]
    start = regular_from_elements(Elements(40.6, 2000.3, 0.37, 0.95, 48.0, 62.0, 118.0), T0)
    by_scipy = least_squares(
        lambda u: problem.with_jacobian(u[None])[0][0], start, x_scale="jac", xtol=1e-14,
        ftol=1e-14, gtol=1e-14,
    )  # fmt: skip
    found = refine(problem, start)
    assert found.chi2[0] == pytest.approx(2.0 * by_scipy.cost, abs=1e-6)
    assert found.u[0] == pytest.approx(by_scipy.x, abs=1e-5)
    assert found.iterations < 15


def test_theta_and_rho_are_compared_the_short_way_round() -> None:
    r, _ = PROBLEMS["polar"].with_jacobian(regular_from_elements(TRUE, T0)[None])
    assert r.shape == (1, 100)
    assert np.abs(r).max() < 5.0


def test_many_orbits_at_once_are_refined_as_each_alone() -> None:
    problem = PROBLEMS["polar"]
    rng = np.random.default_rng(3)
    start = regular_from_elements(TRUE, T0) + 0.05 * rng.standard_normal((6, 7))
    together = refine(problem, start, most_iterations=100)
    for row in range(6):
        alone = refine(problem, start[row], most_iterations=100)
        assert alone.chi2[0] == pytest.approx(together.chi2[row], rel=1e-9)
        assert alone.u[0] == pytest.approx(together.u[row], abs=1e-7)


def test_chi2_never_rises_with_more_iterations() -> None:
    problem = PROBLEMS["polar"]
    start = regular_from_elements(Elements(47.0, 2003.0, 0.7, 0.6, 80.0, 20.0, 200.0), T0)
    path = [refine(problem, start, most_iterations=n).chi2[0] for n in range(0, 40, 2)]
    assert np.all(np.diff(path) <= 0.0)
    assert path[-1] < 0.1 * path[0]


def test_columns_hold_the_period_of_many_orbits() -> None:
    problem = PROBLEMS["polar"]
    periods = np.array([30.0, 39.0, 40.0, 55.0])
    start = np.tile(regular_from_elements(TRUE, T0), (4, 1))
    start[:, 0] = np.log(periods)
    found = refine(problem, start, None, 60, columns=slice(1, 7))
    assert found.u[:, 0] == pytest.approx(np.log(periods), abs=1e-14)
    assert np.argmin(found.chi2) == 2
    held = refine(problem, start[1], Holding({"P": 39.0}), 100)
    assert found.chi2[1] == pytest.approx(held.chi2[0], rel=1e-6)


def test_eccentricity_stays_below_one() -> None:
    elements, pair = history(np.random.default_rng([1, 263]))
    observations = observe(pair.measures)
    problem = polar_problem(observations, observations.mean_epoch)
    start = regular_from_elements(elements, problem.reference_epoch)
    rng = np.random.default_rng(1)
    found = refine(problem, start + 0.1 * rng.standard_normal((20, 7)) * np.abs(start).max() / 50.0)
    e = np.hypot(found.u[:, 1], found.u[:, 2])
    assert np.all(e < HIGHEST_E)
    assert np.all(np.isfinite(found.u)) and np.all(np.isfinite(found.chi2))


def test_a_start_at_the_minimum_stays_there() -> None:
    problem = PROBLEMS["polar"]
    best = refine(problem, regular_from_elements(TRUE, T0))
    again = refine(problem, best.u)
    assert again.iterations <= 2
    assert again.u == pytest.approx(best.u, abs=1e-6)


def test_an_element_that_does_not_exist_cannot_be_held() -> None:
    with pytest.raises(ValueError, match="no element is called Q; use P, T, e, a, i, node, omega"):
        Holding({"Q": 1.0})
