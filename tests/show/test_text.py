"""Text tables: figures, widths, what is said of elements without an error."""

import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest
from invented_pairs import INVENTED, simulate, solution_of

from relorbit.derive.ephemeris import Ephemeris, TurningPoint, ephemeris, turning_points
from relorbit.derive.mass import mass_budget
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements
from relorbit.show import text
from relorbit.show.numbers import decimals_for
from relorbit.solve.residuals import residuals


def row_of(table: str, first: str) -> list[str]:
    """The words of the row that begins with `first`."""
    return next(line.split() for line in table.split("\n") if line.split()[:1] == [first])


def test_text_needs_no_drawing_library():
    code = "import sys, relorbit.show.text; print('matplotlib' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "False\n"


def test_elements_end_where_two_figures_of_the_scaled_error_end(solution):
    table = text.elements_table(solution)
    for name in ("P", "T", "e", "a", "i", "node", "omega"):
        value, sigma, formal = row_of(table, name)[-3:]
        assert len(value.partition(".")[2]) == decimals_for(solution.sigma[name])
        assert float(value) == pytest.approx(getattr(INVENTED, name), abs=0.6 * float(sigma))
        assert float(sigma) == pytest.approx(solution.sigma[name], rel=0.05)
        assert float(formal) == pytest.approx(solution.sigma[name] / 1.3, rel=0.05)
    assert "scaled: the formal error times 1.30" in table
    assert "formal: from the errors of the measures alone" in table


def test_one_error_where_nothing_was_scaled(pair):
    table = text.elements_table(solution_of(INVENTED, pair))
    assert "formal" not in table and "sigma: one standard deviation" in table
    assert len(row_of(table, "P")) == 5


def test_a_held_element_is_given_whole_and_marked(pair):
    held = solution_of(INVENTED, pair, error_scale=1.2, held={"P": 62.4})
    assert row_of(text.elements_table(held), "P")[-2:] == ["62.4", "held"]
    assert "held" not in row_of(text.elements_table(held), "e")


def test_what_a_circular_face_on_orbit_lacks_is_said(pair):
    flat = Elements(62.4, 1951.4, 0.0, 0.84, 0.0, 0.0, 0.0)
    sigma = {"P": 0.1, "T": None, "e": 0.002, "a": 0.01, "i": None, "node": None, "omega": None}
    table = text.elements_table(flat, sigma)
    for name, words in (("T", "undefined: circular"), ("omega", "undefined: circular"),
                        ("i", "undefined: face-on"), ("node", "undefined: face-on")):  # fmt: skip
        assert " ".join(row_of(table, name)).endswith(words)
    tilted = text.elements_table(replace(flat, i=20.0), sigma)
    assert " ".join(row_of(tilted, "node")).endswith("not determined")


def test_elements_alone_have_no_error_column():
    table = text.elements_table(INVENTED)
    assert "sigma" not in table and row_of(table, "P")[-1] == "62.400"


def test_a_solution_is_told_whole_in_eighty_columns_of_ascii(solution):
    report = text.solution_text(solution)
    assert report.isascii() and max(map(len, report.split("\n"))) <= 80
    assert report.startswith("Invented 1: 60 of 60 measures used, 1920.1 to 2014.9\n")
    assert "covering 1.5 revolutions" in report and "total mass  5.05 +/-" in report
    assert f"chi2 {solution.chi2:.1f} for {solution.dof} degrees of freedom" in report
    assert "Note: a sentence that an observer should read" in report
    assert not report.endswith("\n")


def test_alternatives_tell_how_much_worse_they_are(solution):
    table = text.alternatives_table(solution)
    assert row_of(table, "62.40")[-2:] == ["0.0", "adopted"]
    assert row_of(table, "124.8")[-1] == f"{131.4 - solution.chi2:+.1f}"
    assert text.alternatives_table(replace(solution, alternatives=())) == ""


def test_mass_without_a_parallax(pair):
    bare = solution_of(INVENTED, replace(pair, parallax_mas=None, parallax_err_mas=None))
    assert "not known: the pair has no parallax" in text.mass_text(bare)
    assert text.mass_text(bare).startswith("a^3/P^2     (1.5331 +/- 0.0089)e-4")


def test_mass_budget_shares_add_up(solution):
    told = text.mass_budget_text(mass_budget(solution, 31.2, 0.4))
    assert row_of(told, "parallax")[-1] == "96" and row_of(told, "together")[-1] == "100"
    assert float(row_of(told, "correlation")[-1]) != 0.0
    assert "total mass           5.05 +/- 0.20 solar masses" in told and told.isascii()
    assert "error of the mass unknown" in text.mass_budget_text(mass_budget(INVENTED, 31.2))


def test_component_masses():
    told = text.component_text((1.234, 0.9), 0.73)
    assert told == "mass ratio 0.73 as given: primary 1.23, secondary 0.900 solar masses"


def test_technique_table_is_in_mas_where_residuals_are_small(solution):
    table = text.technique_table(solution.residuals)
    rms = float(row_of(table, "plate")[3])
    plate = solution.residuals.technique == "plate"
    expected = 1000.0 * np.sqrt(np.mean(solution.residuals.arc[plate] ** 2))
    assert rms == pytest.approx(expected, rel=0.01) and "mas" in table
    assert row_of(table, "plate")[1:3] == ["20", "40"]


def test_every_measure_has_the_figures_of_its_own_error():
    columns = {"epoch": [1990.5, 1991.25, 1992.0, 1993.0], "theta": [20.0, np.nan, 22.6, 28.0],
               "rho": [0.95, 0.9812, np.nan, 1.4], "theta_err": [3.0, np.nan, 0.12, 1.0],
               "rho_err": [0.05, 0.004, np.nan, 0.1],
               "technique": ["eyepiece", "interferometer", "camera", "plate"],
               "observer": ["A", "B", "C", "D"], "use": [True, True, True, False]}  # fmt: skip
    compared = residuals(INVENTED, Measures.from_columns(columns))
    table = text.residuals_table(compared)
    first, second = row_of(table, "1990.500"), row_of(table, "1991.250")
    assert first[1:3] == ["20.0", "0.950"] and first[-2:] == ["eyepiece", "A"]
    assert float(first[3]) == pytest.approx(compared.d_theta[0], abs=0.051)
    assert float(first[4]) == pytest.approx(compared.d_rho[0], abs=0.00051)
    assert float(first[5]) == pytest.approx(compared.arc[0], abs=0.00051)
    assert float(first[7]) == pytest.approx(compared.rho_in_sigma[0], abs=0.051)
    assert second[1] == second[3] == second[5] == "-" and second[2] == "0.9812"
    assert row_of(table, "x")[1] == "1993.000" and "x: not used (1)" in table
    assert max(map(len, table.split("\n"))) <= 80
    assert "not used" not in text.residuals_table(residuals(INVENTED, simulate(INVENTED, 5)))


def test_ephemeris_with_and_without_errors(solution):
    epochs = np.array([2026.0, 2027.0])
    table = text.ephemeris_table(ephemeris(solution, epochs))
    predicted = ephemeris(solution, epochs)
    _epoch, date, theta, sigma, rho, rho_sigma = row_of(table, "2026.000")
    assert date == "2026-01-01" and len(theta.split(".")[1]) == len(sigma.split(".")[1]) == 2
    assert float(rho_sigma) == pytest.approx(predicted.rho_sigma[0], rel=0.05)
    assert float(rho) == pytest.approx(predicted.rho[0], abs=predicted.rho_sigma[0])
    bare = text.ephemeris_table(ephemeris(INVENTED, epochs))
    assert "sigma" not in bare and len(row_of(bare, "2026.000")) == 4


def test_an_angle_that_is_not_known_at_all_is_said():
    lost = Ephemeris(*(np.array([v]) for v in (2100.0, 12.0, 0.5, 180.0, 0.7)))
    assert row_of(text.ephemeris_table(lost), "2100.000")[3] == "any"


def test_turning_points(solution):
    points = turning_points(solution, 2024.0)
    table = text.turning_points_table(points)
    kinds = [line.split()[0] for line in table.split("\n")[3:]]
    assert kinds == ["periastron", "closest", "widest"]
    assert row_of(table, "periastron")[1:5] == ["2076.17", "0.12", "2076", "Mar"]
    bare = text.turning_points_table([TurningPoint("periastron", 2076.17, None, 178.3, 0.35)])
    assert row_of(bare, "periastron")[1:6] == ["2076.17", "-", "2076", "Mar", "3"]


def test_a_pair_file_of_no_use_gives_no_technique_table():
    none = simulate(INVENTED, 4)
    compared = residuals(INVENTED, none, used=np.zeros(4, dtype=bool))
    assert text.technique_table(compared) == ""
