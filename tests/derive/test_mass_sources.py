"""The mass and how much each source of error has in it."""

import json

import numpy as np
import pytest

from relorbit.derive.mass import component_masses, mass_budget
from relorbit.measures.pair import RecordedOrbit
from relorbit.orbit.elements import Elements
from relorbit.orbit.regular import Uncertainty, campbell_covariance

ORBIT = Elements(41.6, 1990.0, 0.28, 0.9, 59.0, 23.7, 219.9)
PARALLAX = 55.0
ROOT = np.random.default_rng(11).normal(size=(7, 7)) * 2e-3
WITH_ERRORS = RecordedOrbit("made up", ORBIT, None, 1987.25, ROOT @ ROOT.T)  # invented


def named(budget):
    return {source.name: source for source in budget.sources}


def test_the_variance_is_the_sum_of_its_sources():
    """Signed squares add up to the square of the whole; shares add up to one."""
    budget = mass_budget(WITH_ERRORS, PARALLAX, 0.6)
    names = ["semimajor axis", "period", "correlation of the two", "parallax"]
    assert [source.name for source in budget.sources] == names
    squares = sum(np.copysign(source.sigma**2, source.sigma) for source in budget.sources)
    assert squares == pytest.approx(budget.mass.sigma**2, rel=1e-9)
    assert sum(source.share for source in budget.sources) == pytest.approx(1.0, rel=1e-12)
    for source in budget.sources:
        expected = np.copysign(source.sigma**2, source.sigma) / budget.mass.sigma**2
        assert source.share == pytest.approx(expected, rel=1e-9)


def test_each_source_by_hand():
    budget = mass_budget(WITH_ERRORS, PARALLAX, 0.6)
    matrix = campbell_covariance(ORBIT, Uncertainty(1987.25, WITH_ERRORS.covariance))
    P_err, a_err = np.sqrt(matrix[0, 0]), np.sqrt(matrix[3, 3])
    mass, found = budget.mass.value, named(budget)
    assert found["semimajor axis"].sigma == pytest.approx(3.0 * mass * a_err / ORBIT.a, rel=1e-12)
    assert found["period"].sigma == pytest.approx(2.0 * mass * P_err / ORBIT.P, rel=1e-12)
    assert found["parallax"].sigma == pytest.approx(3.0 * mass * 0.6 / PARALLAX, rel=1e-12)
    assert budget.correlation == pytest.approx(matrix[0, 3] / (P_err * a_err), rel=1e-12)
    # a and P that rise together leave a^3/P^2 better known than either alone
    assert np.sign(found["correlation of the two"].sigma) == -np.sign(budget.correlation)


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_the_sign_of_the_correlation(sign):
    """ln P alone with the size of both projections: a moves with P by the covariance put in."""
    covariance = np.eye(7) * 1e-10
    covariance[0, 0] = 1e-4
    from relorbit.orbit.regular import campbell_jacobian, regular_from_elements

    axis = campbell_jacobian(regular_from_elements(ORBIT, 1990.0), 1990.0)[3]
    covariance += 1e-4 * np.outer(axis, axis)
    covariance[0] += sign * 5e-5 * axis
    covariance[:, 0] += sign * 5e-5 * axis
    budget = mass_budget(RecordedOrbit("made up", ORBIT, None, 1990.0, covariance), PARALLAX)
    assert np.sign(budget.correlation) == sign
    assert np.sign(named(budget)["correlation of the two"].share) == -sign
    alone = 1.0 - named(budget)["correlation of the two"].share
    assert alone > 1.0 if sign > 0 else alone < 1.0


def test_elements_alone_bring_no_sources():
    budget = mass_budget(ORBIT, PARALLAX)
    assert budget.sources == ()
    assert budget.correlation is None
    assert budget.mass.sigma is None
    assert budget.axis_cubed_over_period_squared == (0.9**3 / 41.6**2, None)
    assert budget.semimajor_axis_au == pytest.approx(900.0 / 55.0)


def test_the_parallax_alone():
    budget = mass_budget(ORBIT, PARALLAX, 0.55)
    (source,) = budget.sources
    assert (source.name, source.share) == ("parallax", 1.0)
    assert source.sigma == pytest.approx(0.03 * budget.mass.value)
    assert budget.mass.sigma == pytest.approx(source.sigma)


def test_json_with_and_without_errors():
    budget = mass_budget(WITH_ERRORS, PARALLAX, 0.6)
    full = json.loads(json.dumps(budget.to_dict(), allow_nan=False))
    assert set(full) == {
        "schema", "mass_total", "sigma_orbit", "sigma_parallax", "axis_cubed_over_period_squared",
        "semimajor_axis_au", "correlation_a_P", "sources",
    }  # fmt: skip
    assert full["schema"] == "relorbit/mass/1"
    assert [set(source) for source in full["sources"]] == [{"name", "sigma", "share"}] * 4
    bare = json.loads(json.dumps(mass_budget(ORBIT, PARALLAX).to_dict(), allow_nan=False))
    assert bare["mass_total"]["sigma"] is None
    assert bare["sources"] == []


@pytest.mark.parametrize("parallax", [0.0, -1.0])
def test_a_mass_needs_a_parallax(parallax):
    message = f"^a mass needs a parallax above 0 mas, not {parallax:g}$"
    with pytest.raises(ValueError, match=message):
        mass_budget(ORBIT, parallax)


def test_component_masses():
    """Procyon's ratio 0.592/1.478 (Bond et al. 2015, ApJ 813, 106) gives its two masses back."""
    primary, secondary = component_masses(2.070, 0.592 / 1.478)
    assert (primary, secondary) == pytest.approx((1.478, 0.592), abs=1e-12)
    assert component_masses(3.0, 1.0) == (1.5, 1.5)


@pytest.mark.parametrize("ratio", [0.0, -0.5, float("nan")])
def test_a_mass_ratio_is_above_0(ratio):
    with pytest.raises(ValueError, match=f"^a mass ratio is above 0, not {ratio:g}$"):
        component_masses(2.0, ratio)
