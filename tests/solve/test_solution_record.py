"""What a solution gives away: its JSON, its record in the pair file, its summaries."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from simulate import observed

import relorbit
from relorbit.measures.pair import Pair, RecordedOrbit
from relorbit.orbit.elements import NAMES, Elements, thiele_innes_from_campbell
from relorbit.orbit.third_law import total_mass
from relorbit.solve.solution import Solution, plain_matrix

TRUE = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)


def invented(**who: object) -> Pair:
    epoch = np.linspace(1960.0, 2020.0, 60)
    return observed(TRUE, epoch, 0.02, np.random.default_rng(5), name="Invented 7", **who)


@pytest.fixture(scope="module")
def solution() -> Solution:
    return relorbit.solve(invented(parallax=85.0, parallax_err=0.5))


def test_json_has_the_keys_that_are_promised(solution: Solution) -> None:
    made = json.loads(json.dumps(solution.to_dict(), allow_nan=False))
    promised = {
        "schema", "pair", "measures", "used", "chi2", "dof", "elements", "sigma", "thiele_innes",
        "covariance", "mass_total", "alternatives", "warnings",
    }  # fmt: skip
    assert promised <= set(made)
    assert made["schema"] == "relorbit/solution/1"
    assert made["pair"] == "Invented 7"
    assert (made["measures"], made["used"], made["dof"]) == (60, 60, 113)
    assert list(made["elements"]) == ["P", "T", "e", "a", "i", "node", "omega"]
    assert list(made["sigma"]) == list(made["elements"])
    assert list(made["thiele_innes"]) == ["A", "B", "F", "G"]
    assert set(made["covariance"]) == {"order", "matrix"}
    assert made["covariance"]["order"] == list(NAMES)
    assert set(made["mass_total"]) == {"value", "sigma"}
    for one in made["alternatives"]:
        assert set(one) == {"elements", "chi2"}
    for one in made["warnings"]:
        assert set(one) == {"code", "text"}


def test_json_says_what_the_solution_says(solution: Solution) -> None:
    made = solution.to_dict()
    assert made["elements"]["P"] == solution.elements.P
    matrix = np.array(made["covariance"]["matrix"])
    for slot, name in enumerate(NAMES):
        assert made["sigma"][name] == pytest.approx(np.sqrt(matrix[slot, slot]))
    assert matrix == pytest.approx(matrix.T)
    assert np.linalg.eigvalsh(matrix).min() > -1e-12 * np.abs(matrix).max()
    constants = thiele_innes_from_campbell(Elements(**made["elements"]))
    assert made["thiele_innes"] == constants.to_dict()
    assert made["elements"]["T"] == pytest.approx(2000.0, abs=1.0)
    assert 0.0 <= made["elements"]["node"] < 180.0


def test_mass_is_null_without_a_parallax(solution: Solution) -> None:
    assert relorbit.solve(invented()).to_dict()["mass_total"] is None
    # 1000 mas / 85 mas = 11.76 au in 40 years: 1.017 suns
    mass = solution.mass_total
    assert mass.value == pytest.approx((1000.0 / 85.0) ** 3 / 1600.0, abs=4.0 * mass.sigma)
    assert mass.sigma == pytest.approx(np.hypot(mass.sigma_orbit, mass.sigma_parallax))
    assert mass.sigma_parallax == pytest.approx(3.0 * mass.value * 0.5 / 85.0)


def test_mass_without_a_parallax_error_has_that_of_the_orbit_alone() -> None:
    mass = relorbit.solve(invented(parallax=85.0)).mass_total
    assert mass.sigma_parallax is None
    assert mass.sigma == mass.sigma_orbit > 0.0


def test_a_mass_that_no_star_has_is_warned_about() -> None:
    for parallax in (1.0, 900.0):
        codes = [one.code for one in relorbit.solve(invented(parallax=parallax)).warnings]
        assert "mass-implausible" in codes


def test_alternatives_rise_and_are_worse(solution: Solution) -> None:
    chi2 = [one.chi2 for one in solution.alternatives]
    assert chi2 == sorted(chi2)
    assert all(value >= solution.chi2 for value in chi2)


def test_a_record_keeps_the_orbit_and_its_errors(solution: Solution) -> None:
    record = solution.to_record("first", recorded="2026-01-02", source="a test", note="why")
    text = json.dumps(record.to_dict(), allow_nan=False)
    again = RecordedOrbit.from_dict(json.loads(text))
    assert again == record
    assert again.elements == solution.elements
    assert again.sigma == solution.sigma
    assert np.array_equal(again.covariance, solution.uncertainty.covariance)
    assert again.reference_epoch == solution.uncertainty.reference_epoch
    assert (again.chi2, again.dof) == (solution.chi2, solution.dof)
    assert (again.recorded, again.source, again.note) == ("2026-01-02", "a test", "why")


def test_a_record_goes_through_a_pair_file(solution: Solution, tmp_path: Path) -> None:
    pair = invented(parallax=85.0).with_orbit(solution.to_record("first"))
    pair.write(tmp_path / "pair.ecsv")
    again = relorbit.read(tmp_path / "pair.ecsv")
    record = again.orbit("first")
    assert record.elements == solution.elements
    assert record.covariance == pytest.approx(solution.uncertainty.covariance, rel=1e-12)
    kept = relorbit.solve(again)
    assert kept.chi2 == pytest.approx(solution.chi2, rel=1e-9)
    mass = total_mass(record.elements, 85.0, 0.5, solution.uncertainty)
    assert mass.value == pytest.approx(solution.mass_total.value)


def test_a_record_of_a_held_circle_holds_no_nan() -> None:
    record = relorbit.solve(invented(), hold={"e": 0.0, "i": 0.0}).to_record("round")
    again = RecordedOrbit.from_dict(json.loads(json.dumps(record.to_dict(), allow_nan=False)))
    assert again.sigma["e"] is None and again.sigma["node"] is None
    assert again.sigma["P"] > 0.0


def test_a_matrix_for_json_has_none_for_what_is_not() -> None:
    assert plain_matrix(np.array([[1.0, np.nan], [np.inf, 2.0]])) == [[1.0, None], [None, 2.0]]


def test_summaries_of_each_technique_add_up() -> None:
    epoch = np.linspace(1960.0, 2020.0, 60)
    technique = np.where(epoch < 1990.0, "eyepiece", "plate")
    error = np.where(epoch < 1990.0, 0.06, 0.02)
    pair = observed(TRUE, epoch, error, np.random.default_rng(5), technique=list(technique))
    made = relorbit.solve(pair)
    summaries = {one.technique: one for one in made.residuals.by_technique()}
    assert set(summaries) == {"eyepiece", "plate"}
    assert sum(one.measures for one in summaries.values()) == 60
    assert sum(one.numbers for one in summaries.values()) == 120
    assert sum(one.chi2 for one in summaries.values()) == pytest.approx(made.chi2)
    assert summaries["eyepiece"].rms_along == pytest.approx(0.06, rel=0.4)
    assert summaries["plate"].rms_across == pytest.approx(0.02, rel=0.4)


def test_a_solution_cannot_be_changed(solution: Solution) -> None:
    with pytest.raises(AttributeError):
        solution.chi2 = 0.0
