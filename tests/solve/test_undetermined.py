"""Where the measures do not determine an orbit: the reason, and what they do say."""

from __future__ import annotations

import json

import numpy as np
import pytest
from simulate import observed

from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, polar
from relorbit.solve.basins import find_basins
from relorbit.solve.holding import Holding
from relorbit.solve.limits import period_profile, straight_motion
from relorbit.solve.observations import observe
from relorbit.solve.solver import solve

LONG = Elements(600.0, 2000.0, 0.3, 3.0, 40.0, 60.0, 120.0)


def refused(pair: Pair, **options: object) -> Undetermined:
    with pytest.raises(Undetermined) as caught:
        solve(pair, **options)
    json.dumps(caught.value.to_dict(), allow_nan=False)
    assert caught.value.to_dict()["schema"] == "relorbit/undetermined/1"
    assert caught.value.to_dict()["code"] == caught.value.code
    return caught.value


def some(count: int) -> Pair:
    epoch = np.linspace(1950.0, 2020.0, count)
    elements = Elements(60.0, 2000.0, 0.3, 1.0, 40.0, 60.0, 120.0)
    return observed(elements, epoch, 0.02, np.random.default_rng(3))


def line(seed: int, count: int = 30, error: float = 0.02) -> Pair:
    """A pair that passes by in a straight line."""
    rng = np.random.default_rng(seed)
    epoch = np.sort(rng.uniform(1950.0, 2020.0, count))
    z = (1.0 + 0.01 * (epoch - 1985.0)) + 1j * (0.5 - 0.02 * (epoch - 1985.0))
    theta, rho = polar(z + error * (rng.normal(size=count) + 1j * rng.normal(size=count)))
    return Pair.from_arrays(
        epoch, theta, rho, np.degrees(np.arctan2(error, rho)), np.full(count, error)
    )


# ---- too little


@pytest.mark.parametrize("count", [1, 2, 3])
def test_fewer_than_four_positions_are_too_few(count: int) -> None:
    error = refused(some(count))
    assert error.code == "too-few-measures"
    assert error.known == {"numbers": 2 * count, "unknowns": 7}
    assert "4 positions" in error.reason


def test_four_positions_are_enough_to_try() -> None:
    solution = solve(some(4))
    assert solution.dof == 1
    assert solution.sigma["P"] is not None


def test_held_elements_lower_what_is_needed() -> None:
    assert solve(some(3), hold={"P": 60.0, "e": 0.3}).dof == 1
    error = refused(some(2), hold={"P": 60.0, "e": 0.3})
    assert error.code == "too-few-measures"
    assert error.known == {"numbers": 4, "unknowns": 5}


@pytest.mark.parametrize("epochs", [1, 2, 3])
def test_too_few_epochs(epochs: int) -> None:
    n = np.arange(12)
    pair = Pair.from_arrays(2000.0 + 5.0 * (n % epochs), 10.0 + n, 1.0 + 0.01 * n)
    error = refused(pair)
    assert error.code == "too-few-epochs"
    assert error.known == {"epochs": epochs}


def test_no_measure_in_use() -> None:
    pair = some(10)
    m = pair.measures
    idle = Pair.from_arrays(m.epoch, m.theta, m.rho, use=np.zeros(10, dtype=bool))
    assert refused(idle).code == "no-measures"
    assert refused(pair, epoch_range=(1700.0, 1710.0)).code == "no-measures"
    assert "four positions" in refused(idle).reason


def test_a_pair_always_at_one_place() -> None:
    epoch = np.linspace(1950.0, 2020.0, 20)
    pair = Pair.from_arrays(epoch, np.full(20, 45.0), np.full(20, 1.0), np.full(20, 1.0),
                            np.full(20, 0.01))  # fmt: skip
    error = refused(pair)
    assert error.code == "straight-line"
    assert error.known["theta"] == pytest.approx(45.0)
    assert abs(error.known["motion_north"]) < 1e-9


def test_a_pair_never_resolved() -> None:
    epoch = np.linspace(1950.0, 2020.0, 20)
    pair = Pair.from_arrays(epoch, np.full(20, 45.0), np.zeros(20), np.full(20, 10.0),
                            np.full(20, 0.01))  # fmt: skip
    assert refused(pair).code == "never-resolved"


def test_four_epochs_that_lie_exactly_on_a_line() -> None:
    n = np.arange(8)
    pair = Pair.from_arrays(1990.0 + 10.0 * (n % 4), np.full(8, 10.0), 1.0 + 0.1 * (n % 4))
    assert refused(pair).code == "straight-line"


# ---- straight lines


def test_straight_motion_is_called_so() -> None:
    found = [refused(line(seed)) for seed in range(8)]
    assert {error.code for error in found} == {"straight-line"}
    for error in found:
        known = error.known
        assert abs(known["motion_north"] - 0.01) < 5.0 * known["motion_sigma"]
        assert abs(known["motion_east"] + 0.02) < 5.0 * known["motion_sigma"]
        # a line is the limit of orbits of ever longer period, which the search ends short of
        assert known["chi2_orbit"] - 0.1 < known["chi2_straight"] < known["chi2_orbit"] + 40.0
        assert known["P_lower_limit"] > 70.0
        assert "straight line fits as well" in error.reason
        assert f"{known['P_lower_limit']:.3g} years" in error.reason


def test_straight_motion_agrees_with_a_fit_to_x_and_y() -> None:
    observations = observe(line(3, error=0.001).measures)
    found = straight_motion(observations)
    z = observations.rho * np.exp(1j * observations.theta)
    time = observations.epoch - found.epoch
    north, east = np.polyfit(time, z.real, 1), np.polyfit(time, z.imag, 1)
    assert found.motion_north == pytest.approx(north[0], abs=3e-7)
    assert found.motion_east == pytest.approx(east[0], abs=3e-7)
    assert found.rho == pytest.approx(np.hypot(north[1], east[1]), abs=3e-6)
    expected = 0.001 / np.sqrt(np.sum((time - time.mean()) ** 2))
    assert found.motion_sigma == pytest.approx(expected, rel=0.01)
    assert found.theta_sigma == pytest.approx(np.degrees(found.rho_sigma / found.rho), rel=0.02)
    assert found.chi2 == pytest.approx(56.0, abs=45.0)


def test_a_line_through_the_primary_is_a_line_too() -> None:
    rng = np.random.default_rng(4)
    epoch = np.linspace(1950.0, 2020.0, 30)
    z = 0.01 * (epoch - 1984.0) * (1.0 - 2.0j) + 0.01
    theta, rho = polar(z + 0.002 * (rng.normal(size=30) + 1j * rng.normal(size=30)))
    pair = Pair.from_arrays(epoch, theta, rho, np.degrees(np.arctan2(0.002, rho)),
                            np.full(30, 0.002))  # fmt: skip
    assert refused(pair).code == "straight-line"


def test_a_line_is_refused_whatever_is_held() -> None:
    """A held shape does not make an orbit of a straight line: the period runs away all the same."""
    error = refused(line(1), hold={"e": 0.5})
    assert error.code in ("straight-line", "period-unbounded")


# ---- short arcs


def arcs() -> list[tuple[int, Pair]]:
    """Seeded arcs of 8 to 14 % of a revolution of pairs with a period of 600 years."""
    pairs = []
    for seed in range(24):
        rng = np.random.default_rng([8, seed])
        elements = Elements(
            600.0, 2000.0 + rng.uniform(-300.0, 300.0), rng.uniform(0.0, 0.8), 3.0,
            np.degrees(np.arccos(rng.uniform(-1.0, 1.0))), *rng.uniform(0.0, 360.0, 2),
        )  # fmt: skip
        epoch = np.linspace(2020.0 - rng.uniform(50.0, 85.0), 2020.0, 30)
        pairs.append((seed, observed(elements, epoch, 0.05, rng)))
    return pairs


def test_lower_limits_lie_below_the_true_period() -> None:
    limits, codes, solved = [], set(), []
    for _, pair in arcs():
        try:
            solved.append(solve(pair))
        except Undetermined as error:
            codes.add(error.code)
            limits.append(error.known["P_lower_limit"])
            assert "longer than about" in error.reason
    assert len(limits) >= 16
    assert codes == {"straight-line", "period-unbounded"}
    below = np.mean(np.array(limits) < 600.0)
    assert below >= 0.9
    # and they are worth something: some lie beyond the arc itself
    assert np.mean(np.array(limits) > 60.0) > 0.5
    for solution in solved:
        warned = {notice.code for notice in solution.warnings}
        assert "short-arc" in warned or solution.elements.P < 113.0


def test_an_unbounded_period_is_called_so_and_tells_what_is_known() -> None:
    epoch = np.linspace(1960.0, 2020.0, 40)
    error = refused(observed(LONG, epoch, 0.05, np.random.default_rng(21)))
    assert error.code == "period-unbounded"
    assert 60.0 < error.known["P_lower_limit"] < 600.0
    assert error.known["chi2_straight"] > error.known["chi2_orbit"] + 16.3
    assert set(error.known["best_of_many"]) == {"P", "T", "e", "a", "i", "node", "omega"}
    assert error.known["dof_orbit"] == 73
    assert "longer arc" in error.reason


def test_holding_the_period_cures_a_short_arc() -> None:
    epoch = np.linspace(1960.0, 2020.0, 40)
    pair = observed(LONG, epoch, 0.05, np.random.default_rng(21))
    assert refused(pair).code == "period-unbounded"
    solution = solve(pair, hold={"P": 600.0})
    assert solution.elements.P == 600.0
    assert "short-arc" in [notice.code for notice in solution.warnings]


@pytest.mark.parametrize(("span", "provisional"), [(200.0, True), (440.0, True), (460.0, False)])
def test_less_than_three_quarters_of_a_revolution_is_provisional(
    span: float, provisional: bool
) -> None:
    epoch = np.linspace(2020.0 - span, 2020.0, 80)
    solution = solve(observed(LONG, epoch, 0.004, np.random.default_rng(2)))
    notices = {notice.code: notice.text for notice in solution.warnings}
    assert ("short-arc" in notices) is provisional
    if provisional:
        assert f"{100.0 * span / solution.elements.P:.0f} % of a revolution" in notices["short-arc"]


def test_a_vague_period_is_warned_about() -> None:
    epoch = np.linspace(1870.0, 2020.0, 40)
    solution = solve(observed(LONG, epoch, 0.05, np.random.default_rng(1)))
    assert solution.sigma["P"] > 0.2 * solution.elements.P
    codes = [notice.code for notice in solution.warnings]
    assert {"short-arc", "period-uncertain"} <= set(codes)


# ---- the profile of the period


def test_the_profile_falls_to_the_true_period() -> None:
    epoch = np.linspace(1990.0, 2020.0, 40)
    elements = Elements(60.0, 2000.0, 0.3, 1.0, 40.0, 60.0, 120.0)
    observations = observe(observed(elements, epoch, 0.01, np.random.default_rng(3)).measures)
    profile = period_profile(observations)
    assert profile.P[0] == pytest.approx(15.0)
    assert profile.P[-1] == pytest.approx(9000.0)
    best = profile.chi2.min()
    limit = profile.lower_limit(best, 1.0)
    assert 30.0 < limit < 60.0
    periods = profile.P
    assert np.all(profile.chi2[periods < 0.9 * limit] > best + 4.0)
    assert abs(np.log(periods[np.argmin(profile.chi2)] / 60.0)) < 0.15


@pytest.mark.parametrize("seed", [1, 4, 8, 11, 12, 13])
def test_the_limit_lies_two_standard_deviations_up(seed: int) -> None:
    pair = arcs()[seed][1]
    known = refused(pair).known
    best = min(known["chi2_orbit"], period_profile(observe(pair.measures)).chi2.min())
    scale = max(1.0, known["chi2_orbit"] / known["dof_orbit"])
    _, orbits = find_basins(observe(pair.measures), Holding({"P": known["P_lower_limit"]}))
    assert (orbits.chi2[0] - best) / scale == pytest.approx(4.0, abs=1.5)


def test_a_larger_scale_lowers_the_limit() -> None:
    observations = observe(line(2).measures)
    profile = period_profile(observations)
    best = profile.chi2.min()
    assert profile.lower_limit(best, 4.0) < profile.lower_limit(best, 1.0)
