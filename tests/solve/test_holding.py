"""Elements held at a value: kept exactly, and the best that the others can do."""

from __future__ import annotations

import itertools
import json

import numpy as np
import pytest
from scipy.optimize import least_squares
from simulate import observed

from relorbit.errors import InputError
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import NAMES, Elements, positions
from relorbit.solve.solution import Solution
from relorbit.solve.solver import solve

TRUE = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
# two or three standard deviations away from what the measures say
HELD = {"P": 40.3, "T": 2000.2, "e": 0.405, "a": 1.01, "i": 51.0, "node": 61.0, "omega": 118.5}


def invented(elements: Elements = TRUE, error: float = 0.03) -> Pair:
    epoch = np.linspace(1960.0, 2020.0, 50)
    return observed(elements, epoch, error, np.random.default_rng(5))


@pytest.fixture(scope="module")
def pair() -> Pair:
    return invented()


@pytest.fixture(scope="module")
def free(pair: Pair) -> Solution:
    return solve(pair)


def best_by_scipy(pair: Pair, hold: dict[str, float], start: Elements) -> float:
    """The least chi2 with the elements of `hold` fixed, by a routine with no Jacobian of ours."""
    m = pair.measures
    names = [name for name in NAMES if name not in hold]

    def residuals(values: np.ndarray) -> np.ndarray:
        elements = Elements(**(dict(zip(names, values, strict=True)) | hold))
        theta, rho = positions(elements, m.epoch)
        gap = np.remainder(m.theta - theta + 180.0, 360.0) - 180.0
        return np.concatenate([gap / m.theta_err, (m.rho - rho) / m.rho_err])

    first = [start.to_dict()[name] for name in names]
    if not names:
        return float(np.sum(residuals(np.array([])) ** 2))
    return 2.0 * least_squares(residuals, first, x_scale="jac", xtol=1e-12, ftol=1e-12).cost


COMBINATIONS = [
    *itertools.combinations(NAMES, 1),
    *itertools.combinations(NAMES, 2),
    ("P", "T", "e"),
    ("e", "i", "omega"),
    ("a", "i", "node", "omega"),
    tuple(name for name in NAMES if name != "a"),
    NAMES,
]


@pytest.mark.parametrize("names", COMBINATIONS, ids=" ".join)
def test_held_elements_are_kept_and_the_rest_is_the_best(
    pair: Pair, free: Solution, names: tuple[str, ...]
) -> None:
    hold = {name: HELD[name] for name in names}
    solution = solve(pair, hold=hold)
    for name in names:
        assert getattr(solution.elements, name) == HELD[name]
        assert solution.sigma[name] is None
        assert solution.sigma_formal[name] is None
        assert np.all(solution.covariance[NAMES.index(name)] == 0.0)
    for name in set(NAMES) - set(names):
        assert 0.0 < solution.sigma[name] < 2.0 * free.sigma[name]
    assert solution.held == hold
    assert solution.dof == free.dof + len(names)
    assert solution.chi2 >= free.chi2
    assert solution.chi2 == pytest.approx(best_by_scipy(pair, hold, free.elements), abs=1e-4)
    assert solution.chi2 == pytest.approx(solution.residuals.chi2, abs=1e-4)


@pytest.mark.parametrize("names", COMBINATIONS, ids=" ".join)
def test_a_solution_with_held_elements_is_fit_for_json(
    pair: Pair, names: tuple[str, ...]
) -> None:
    made = solve(pair, hold={name: HELD[name] for name in names}).to_dict()
    again = json.loads(json.dumps(made, allow_nan=False))
    assert again["held"] == {name: HELD[name] for name in names}


def test_holding_an_element_at_its_best_value_costs_nothing(pair: Pair, free: Solution) -> None:
    for name in NAMES:
        held = solve(pair, hold={name: getattr(free.elements, name)})
        assert held.chi2 == pytest.approx(free.chi2, abs=1e-6)


@pytest.mark.parametrize("revolutions", [-1, 1, 3])
def test_a_passage_some_revolutions_away_can_be_held(
    pair: Pair, free: Solution, revolutions: int
) -> None:
    away = solve(pair, passage_near=free.elements.T + revolutions * free.elements.P)
    sigma = away.sigma["T"]
    hold = {"T": away.elements.T + sigma}
    solution = solve(pair, hold=hold)
    # one standard deviation off, so chi2 rises by one
    assert solution.chi2 - free.chi2 == pytest.approx(1.0, abs=0.15)
    assert solution.elements.to_dict()["T"] == hold["T"]
    assert solution.chi2 == pytest.approx(best_by_scipy(pair, hold, away.elements), abs=1e-4)


def test_omega_of_the_other_node_can_be_held(pair: Pair) -> None:
    """As when velocities have named the ascending node: omega and node turn by 180 together."""
    one = solve(pair, hold={"omega": 120.0})
    other = solve(pair, hold={"omega": 300.0})
    assert other.elements.omega == 300.0
    assert other.chi2 == pytest.approx(one.chi2, abs=1e-6)
    assert other.elements.node == pytest.approx(one.elements.node + 180.0, abs=1e-5)


def test_a_node_beyond_180_can_be_held(pair: Pair) -> None:
    one, other = solve(pair, hold={"node": 61.0}), solve(pair, hold={"node": 241.0})
    assert other.elements.node == 241.0
    assert other.chi2 == pytest.approx(one.chi2, abs=1e-6)
    assert other.elements.omega == pytest.approx(one.elements.omega + 180.0, abs=1e-5)
    assert other.sigma["omega"] == pytest.approx(one.sigma["omega"], rel=1e-4)


# ---- a circle has no periastron


CIRCLE = Elements(40.0, 2000.0, 0.0, 1.0, 50.0, 60.0, 0.0)


@pytest.fixture(scope="module")
def circle() -> Pair:
    return invented(CIRCLE)


def test_a_circle_has_two_unknowns_less(circle: Pair) -> None:
    solution = solve(circle, hold={"e": 0.0})
    assert solution.dof == 2 * len(circle.measures) - 5
    assert solution.elements.e == 0.0
    assert solution.elements.omega == 0.0
    assert solution.sigma["T"] is None and solution.sigma["omega"] is None
    assert abs(solution.elements.P - 40.0) < 5.0 * solution.sigma["P"]
    assert abs(solution.elements.T - 2000.0) < 0.5
    hold = {"e": 0.0, "omega": 0.0}
    assert solution.chi2 == pytest.approx(best_by_scipy(circle, hold, CIRCLE), abs=1e-4)


@pytest.mark.parametrize("more", [{"omega": 30.0}, {"T": 2007.0}, {"T": 1961.0}])
def test_omega_or_T_held_on_a_circle_binds_nothing(
    circle: Pair, more: dict[str, float]
) -> None:
    plain = solve(circle, hold={"e": 0.0})
    solution = solve(circle, hold={"e": 0.0, **more})
    assert solution.chi2 == pytest.approx(plain.chi2, abs=1e-6)
    assert solution.dof == plain.dof
    for name, value in more.items():
        assert getattr(solution.elements, name) == value
    for name in ("P", "a", "i", "node"):
        assert solution.sigma[name] == pytest.approx(plain.sigma[name], rel=1e-3)


def test_omega_and_T_held_on_a_circle_bind_the_place_in_it(circle: Pair) -> None:
    hold = {"e": 0.0, "omega": 0.0, "T": 2000.1}
    solution = solve(circle, hold=hold)
    assert solution.dof == 2 * len(circle.measures) - 4
    assert solution.chi2 == pytest.approx(best_by_scipy(circle, hold, CIRCLE), abs=1e-4)


def test_a_circle_held_where_there_is_none_fits_badly_and_says_so(pair: Pair) -> None:
    solution = solve(pair, hold={"e": 0.0})
    assert solution.elements.e == 0.0
    codes = [notice.code for notice in solution.warnings]
    assert {"circular", "poor-fit", "scaled-errors"} <= set(codes)


# ---- a face-on orbit has no node


@pytest.mark.parametrize("i", [0.0, 180.0])
def test_a_face_on_orbit_has_two_unknowns_less(i: float) -> None:
    elements = Elements(40.0, 2000.0, 0.4, 1.0, i, 0.0, 120.0)
    flat = invented(elements)
    solution = solve(flat, hold={"i": i})
    assert solution.dof == 2 * len(flat.measures) - 5
    assert solution.elements.i == i
    assert solution.elements.node == 0.0
    assert solution.sigma["node"] is None and solution.sigma["omega"] is None
    assert "face-on" in [notice.code for notice in solution.warnings]
    hold = {"i": i, "node": 0.0}
    assert solution.chi2 == pytest.approx(best_by_scipy(flat, hold, elements), abs=1e-4)
    both = solve(flat, hold={"i": i, "node": 30.0})
    assert both.chi2 == pytest.approx(solution.chi2, abs=1e-6)
    assert both.dof == solution.dof
    assert both.elements.node == 30.0


def test_a_circle_seen_face_on_keeps_three_unknowns() -> None:
    flat = invented(Elements(40.0, 2000.0, 0.0, 1.0, 0.0, 0.0, 0.0))
    solution = solve(flat, hold={"e": 0.0, "i": 0.0})
    assert solution.dof == 2 * len(flat.measures) - 3
    hold = {"e": 0.0, "i": 0.0, "node": 0.0, "omega": 0.0}
    assert solution.chi2 == pytest.approx(best_by_scipy(flat, hold, solution.elements), abs=1e-4)


# ---- what cannot be held


@pytest.mark.parametrize(
    ("hold", "said"),
    [
        ({"inclination": 3.0}, "inclination is not an element; hold one of P, T, e, a, i, node"),
        ({"e": 1.0}, "e must be in 0 <= e < 1, not 1"),
        ({"P": 0.0}, "P must be above 0, not 0"),
        ({"a": -1.0}, "a must be above 0, not -1"),
        ({"i": 181.0}, "i must be in 0 to 180 degrees, not 181"),
        ({"T": float("nan")}, "T must be a finite number"),
        ({"e": "round"}, "round"),
    ],
)
def test_what_no_element_can_be_is_refused(pair: Pair, hold: dict, said: str) -> None:
    with pytest.raises(InputError) as caught:
        solve(pair, hold=hold)
    assert said in str(caught.value)


def test_held_elements_take_quantities(pair: Pair) -> None:
    units = pytest.importorskip("astropy.units")
    solution = solve(pair, hold={"P": 40.3 * units.yr, "a": 1010.0 * units.mas})
    assert solution.elements.P == 40.3
    assert solution.elements.a == pytest.approx(1.01)
