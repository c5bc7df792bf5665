"""Circles, face-on and edge-on orbits: no NaN, and what does not exist has no error."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest
from simulate import observed

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import NAMES, Elements, complex_position, polar
from relorbit.solve.solver import solve

BASE = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
SHAPES = {
    "circle": {"e": 0.0, "omega": 0.0},
    "face-on": {"i": 0.0, "node": 0.0},
    "face-on, clockwise": {"i": 180.0, "node": 0.0},
    "edge-on": {"i": 90.0},
    "circle face-on": {"e": 0.0, "i": 0.0, "node": 0.0, "omega": 0.0},
    "circle face-on, clockwise": {"e": 0.0, "i": 180.0, "node": 0.0, "omega": 0.0},
    "circle edge-on": {"e": 0.0, "i": 90.0, "omega": 0.0},
}
EPOCH = np.linspace(1960.0, 2020.0, 50)


def without_error(elements: Elements) -> Pair:
    """Measures that say 0.01 arcsec but have no error at all."""
    theta, rho = polar(complex_position(elements, EPOCH))
    theta_err = np.degrees(np.arctan2(0.01, rho))
    return Pair.from_arrays(EPOCH, theta, rho, theta_err, np.full(EPOCH.size, 0.01))


@pytest.mark.parametrize("noise", [False, True], ids=["exact", "noisy"])
@pytest.mark.parametrize("shape", SHAPES)
def test_the_orbit_is_found_and_every_number_is_one(shape: str, noise: bool) -> None:
    elements = replace(BASE, **SHAPES[shape])
    rng = np.random.default_rng(3)
    pair = observed(elements, EPOCH, 0.01, rng) if noise else without_error(elements)
    solution = solve(pair)
    made = solution.to_dict()
    json.dumps(made, allow_nan=False)
    assert all(np.isfinite(made["elements"][name]) for name in NAMES)
    assert solution.chi2 < (150.0 if noise else 1e-6)
    found = solution.elements
    near = 5.0 if noise else 1e-3
    for name in ("P", "a", "e"):
        assert abs(getattr(found, name) - getattr(elements, name)) < near * solution.sigma[name]
    gap = np.abs(complex_position(found, EPOCH) - complex_position(elements, EPOCH))
    assert gap.max() < (0.02 if noise else 1e-6)


@pytest.mark.parametrize("shape", SHAPES)
def test_an_error_is_sensible_or_not_given(shape: str) -> None:
    """An angle unknown by more than half a turn, or T by more than half a period, is unknown."""
    sigma = solve(without_error(replace(BASE, **SHAPES[shape]))).sigma
    for name in ("i", "node", "omega"):
        assert sigma[name] is None or 0.0 < sigma[name] <= 180.0
    assert sigma["T"] is None or 0.0 < sigma["T"] <= 20.0


@pytest.mark.parametrize("i", [0.0, 180.0])
def test_an_exactly_face_on_orbit_has_no_node(i: float) -> None:
    solution = solve(without_error(replace(BASE, i=i, node=0.0)))
    assert solution.elements.i == i
    assert solution.elements.node == 0.0
    assert solution.elements.omega == pytest.approx(120.0, abs=1e-3)
    assert solution.sigma["node"] is None
    assert solution.sigma["omega"] is None
    assert solution.sigma["T"] is not None
    assert "face-on" in [notice.code for notice in solution.warnings]


@pytest.mark.parametrize("shape", ["circle", "circle face-on", "circle edge-on"])
def test_a_circle_is_called_one(shape: str) -> None:
    solution = solve(observed(replace(BASE, **SHAPES[shape]), EPOCH, 0.01,
                              np.random.default_rng(8)))  # fmt: skip
    assert "nearly-circular" in [notice.code for notice in solution.warnings]
    # what depends on the circle alone stays well known
    value, sigma = solution.axis_cubed_over_period_squared
    assert sigma < 0.03 * value
    assert value == pytest.approx(1.0 / 1600.0, abs=5.0 * sigma)


def test_an_orbit_of_middling_shape_is_called_none_of_it() -> None:
    codes = [notice.code for notice in solve(without_error(BASE)).warnings]
    assert not {"nearly-circular", "circular", "face-on", "nearly-face-on"} & set(codes)


@pytest.mark.parametrize(("i", "combined"), [(2.0, "sum"), (178.0, "difference")])
def test_a_nearly_face_on_orbit_is_called_one(i: float, combined: str) -> None:
    pair = observed(replace(BASE, i=i), EPOCH, 0.02, np.random.default_rng(2))
    notices = {notice.code: notice.text for notice in solve(pair).warnings}
    assert combined in notices["nearly-face-on"]


def test_an_edge_on_pair_without_rho_near_the_primary_is_solved() -> None:
    pair = observed(replace(BASE, i=90.0), EPOCH, 0.01, np.random.default_rng(9))
    m = pair.measures
    close = m.rho < 0.25
    assert 4 < close.sum() < 25
    blurred = Pair.from_arrays(
        m.epoch, m.theta, np.where(close, np.nan, m.rho), m.theta_err,
        np.where(close, np.nan, m.rho_err),
    )  # fmt: skip
    solution = solve(blurred)
    for name in NAMES:
        gap = getattr(solution.elements, name) - getattr(replace(BASE, i=90.0), name)
        assert abs(gap) < 5.0 * solution.sigma[name]
