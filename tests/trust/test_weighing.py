"""What the estimate of errors costs: estimates let go, searches not made, long lists in part."""

from dataclasses import replace

import numpy as np
import pytest

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import NAMES, Elements, complex_position, polar
from relorbit.orbit.regular import regular_from_elements
from relorbit.solve import weighing
from relorbit.solve.noise import best_of, estimate
from relorbit.solve.observations import observe
from relorbit.solve.solver import refine_from, solve
from relorbit.solve.weighing import layout_of

TRUTH = Elements(42.0, 1989.0, 0.46, 0.88, 57.0, 64.0, 212.0)
SIZES = {"eyepiece": 0.05, "camera": 0.01, "interferometer": 0.003}


def measured(count, seed=2):
    """Measures of three techniques in turn, errors as stated."""
    rng = np.random.default_rng(seed)
    technique = [list(SIZES)[k % 3] for k in range(count)]
    error = np.array([SIZES[name] for name in technique])
    epoch = np.sort(rng.uniform(1940.0, 2010.0, count))
    z = complex_position(TRUTH, epoch)
    z = z + error * (rng.normal(size=count) + 1j * rng.normal(size=count))
    theta, rho = polar(z)
    return Pair.from_arrays(epoch, theta, rho, np.degrees(error / rho), error, technique=technique)


def test_an_estimate_that_cannot_win_is_let_go():
    pair = measured(60)
    o = observe(pair.measures)
    layout, t0 = layout_of(pair.measures, o.rows), o.mean_epoch
    orbits = [
        regular_from_elements(one, t0)
        for one in (TRUTH, *(replace(TRUTH, P=P, e=0.1) for P in (9.7, 13.0, 17.1, 29.0, 301.0)))
    ]
    rounds = [0, 0]

    def count(slot):
        def step():
            rounds[slot] += 1
        return step

    whole = [estimate(o, layout, u, t0, on_step=count(0)) for u in orbits]
    best = best_of(o, layout, orbits, t0, on_step=count(1))
    assert best.deviance == pytest.approx(min(one.deviance for one in whole), abs=0.05)
    assert rounds[1] < 0.7 * rounds[0], (rounds, [w.rounds for w in whole])


@pytest.mark.parametrize(("slip", "searches"), [(0.0, 1), (0.5, 3)])
def test_other_searches_are_made_only_where_something_is_wrong(monkeypatch, slip, searches):
    pair = measured(300)
    rho = pair.measures.rho.copy()
    rho[11] += slip
    made = []
    search = weighing.find_basins
    monkeypatch.setattr(
        weighing, "find_basins", lambda *some, **more: made.append(1) or search(*some, **more)
    )
    solution = solve(
        pair.with_measures(replace(pair.measures, rho=rho)), errors="from-residuals"
    )
    assert len(made) == searches
    assert abs(solution.elements.P - TRUTH.P) < 4.0 * solution.sigma["P"]


def test_a_long_list_is_searched_in_part_and_weighed_whole(monkeypatch):
    pair = measured(7500)
    rho = pair.measures.rho.copy()
    rho[4321] += 0.4
    pair = pair.with_measures(replace(pair.measures, rho=rho))
    longest = []
    search = weighing.find_basins
    monkeypatch.setattr(
        weighing, "find_basins", lambda o, *some, **more: longest.append(len(o))
        or search(o, *some, **more)
    )  # fmt: skip
    found = solve(pair, errors="from-residuals")
    assert max(longest) <= weighing.ENOUGH
    assert sum(group.measures for group in found.noise) == 7500
    assert 4321 in {row for group in found.noise for row in group.down_weighted}
    whole = refine_from(pair, TRUTH, errors="from-residuals")
    for name in NAMES:
        gap = getattr(found.elements, name) - getattr(whole.elements.near(found.elements.T), name)
        assert abs(gap) < 0.02 * whole.sigma[name], name
    factors = {group.name: group.along_factor for group in found.noise}
    assert all(factor == pytest.approx(1.0, abs=0.06) for factor in factors.values())
