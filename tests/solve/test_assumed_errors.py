"""Rows without errors: those usual for the technique, less by nights and weight."""

from __future__ import annotations

import numpy as np
import pytest
from simulate import observed

from relorbit.measures.pair import Pair
from relorbit.measures.table import TECHNIQUES
from relorbit.orbit.elements import Elements
from relorbit.solve.observations import DEFAULT_ERRORS, MOST_NIGHTS, complete_errors, observe
from relorbit.solve.solver import solve

TRUE = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
EPOCH = np.linspace(1960.0, 2020.0, 50)
M = observed(TRUE, EPOCH, 0.03, np.random.default_rng(7)).measures


def made(**more: object) -> Pair:
    return Pair.from_arrays(EPOCH, M.theta, M.rho, **more)


def test_every_technique_has_a_default() -> None:
    assert set(DEFAULT_ERRORS) == set(TECHNIQUES)
    for technique in TECHNIQUES:
        theta_err, rho_err, assumed = complete_errors(made(technique=technique).measures)
        across, along = DEFAULT_ERRORS[technique]
        assert rho_err == pytest.approx(along)
        assert M.rho * np.tan(np.radians(theta_err)) == pytest.approx(across)
        assert assumed.all()


def test_nights_help_by_their_square_root_up_to_a_limit() -> None:
    for nights, gain in ((1, 1.0), (4, 2.0), (9, 3.0), (100, np.sqrt(MOST_NIGHTS))):
        _, rho_err, _ = complete_errors(made(nights=nights, technique="camera").measures)
        assert rho_err == pytest.approx(DEFAULT_ERRORS["camera"][1] / gain)


def test_weights_count_relative_to_the_median_of_the_list() -> None:
    weight = np.where(np.arange(50) < 10, 8.0, 2.0)
    _, rho_err, _ = complete_errors(made(weight=weight, technique="plate").measures)
    assert rho_err[:10] == pytest.approx(0.5 * DEFAULT_ERRORS["plate"][1])
    assert rho_err[10:] == pytest.approx(DEFAULT_ERRORS["plate"][1])


def test_weights_scale_nothing_where_there_are_errors() -> None:
    weight = np.where(np.arange(50) < 10, 8.0, 2.0)
    one = solve(Pair.from_arrays(EPOCH, M.theta, M.rho, M.theta_err, M.rho_err))
    other = solve(Pair.from_arrays(EPOCH, M.theta, M.rho, M.theta_err, M.rho_err, weight=weight))
    assert other.elements == one.elements
    assert other.chi2 == one.chi2


def test_heavier_rows_pull_harder() -> None:
    """One of two groups of measures is a tenth too wide; a goes to whichever weighs more."""
    wide = np.arange(50) % 2 == 0
    rho = np.where(wide, 1.1 * M.rho, M.rho)
    found = {}
    for which, weight in (("wide", np.where(wide, 25.0, 1.0)), ("true", np.where(wide, 1.0, 25.0))):
        found[which] = solve(Pair.from_arrays(EPOCH, M.theta, rho, weight=weight)).elements.a
    # (25 x 1.1 + 1) / 26 against (25 + 1.1) / 26
    assert found["wide"] / found["true"] == pytest.approx(1.0962 / 1.0038, abs=0.02)


def test_a_row_of_weight_zero_is_left_out() -> None:
    weight = np.where(np.arange(50) < 5, 0.0, 1.0)
    solution = solve(made(weight=weight))
    assert solution.used == 45
    assert not solution.residuals.used[:5].any()


def test_some_rows_with_errors_and_some_without() -> None:
    stated = np.arange(50) < 25
    theta_err, rho_err = (np.where(stated, x, np.nan) for x in (M.theta_err, M.rho_err))
    pair = Pair.from_arrays(EPOCH, M.theta, M.rho, theta_err, rho_err, technique="interferometer")
    theta_full, rho_full, assumed = complete_errors(pair.measures)
    assert np.array_equal(assumed, ~stated)
    assert np.array_equal(theta_full[stated], M.theta_err[stated])
    assert rho_full[~stated] == pytest.approx(DEFAULT_ERRORS["interferometer"][1])
    notices = {one.code: one.text for one in solve(pair).warnings}
    assert notices["default-errors"].startswith("25 of 50 measures bring no errors")


def test_one_error_of_a_row_may_be_missing() -> None:
    pair = Pair.from_arrays(EPOCH, M.theta, M.rho, M.theta_err, None, technique="camera")
    theta_full, rho_full, assumed = complete_errors(pair.measures)
    assert np.array_equal(theta_full, M.theta_err)
    assert rho_full == pytest.approx(DEFAULT_ERRORS["camera"][1])
    assert assumed.all()


def test_a_list_that_states_its_errors_is_not_warned_about() -> None:
    solution = solve(Pair.from_arrays(EPOCH, M.theta, M.rho, M.theta_err, M.rho_err))
    assert "default-errors" not in [notice.code for notice in solution.warnings]
    assert "default-errors" in [notice.code for notice in solve(made()).warnings]


def test_a_row_without_rho_gets_its_angle_error_from_its_neighbours_separation() -> None:
    rho = np.where(np.arange(50) == 20, np.nan, M.rho)
    pair = Pair.from_arrays(EPOCH, M.theta, rho, technique="plate")
    theta_full, rho_full, _ = complete_errors(pair.measures)
    between = 0.5 * (M.rho[19] + M.rho[21])
    assert theta_full[20] == pytest.approx(np.degrees(np.arctan2(0.02, between)))
    assert np.isnan(rho_full[20])


def test_the_order_of_the_rows_does_not_matter() -> None:
    shuffled = np.random.default_rng(1).permutation(50)
    rho = np.where(np.arange(50) == 20, np.nan, M.rho)
    one = Pair.from_arrays(EPOCH, M.theta, rho)
    other = Pair.from_arrays(EPOCH[shuffled], M.theta[shuffled], rho[shuffled])
    first, second = solve(one), solve(other)
    assert second.chi2 == pytest.approx(first.chi2, rel=1e-9)
    assert second.residuals.d_theta == pytest.approx(first.residuals.d_theta[shuffled], abs=1e-6)
    observations = observe(other.measures)
    assert np.all(np.diff(observations.epoch) > 0.0)
    assert np.array_equal(shuffled[observations.rows], np.arange(50))
