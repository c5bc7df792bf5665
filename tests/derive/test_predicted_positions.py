"""`ephemeris`: every kind of orbit and of epoch, and the errors against independent propagation."""

import json

import astropy.units as u
import numpy as np
import pytest
from astropy.time import Time

import relorbit
from relorbit.derive.ephemeris import ephemeris
from relorbit.measures.pair import RecordedOrbit
from relorbit.orbit.elements import Elements, positions
from relorbit.orbit.regular import regular_from_elements, regular_position

TRUTH = Elements(38.0, 1986.2, 0.41, 0.92, 52.0, 71.0, 133.0)  # an invented pair
AHEAD = np.array([2001.0, 2009.5, 2024.0])


@pytest.fixture(scope="module")
def solution():
    random = np.random.default_rng(12)
    epochs = np.sort(random.uniform(1955.0, 2000.0, 45))
    theta, rho = positions(TRUTH, epochs)
    theta_err, rho_err = np.degrees(0.01 / rho), np.full(45, 0.01)
    theta = (theta + theta_err * random.normal(size=45)) % 360.0
    rho = rho + rho_err * random.normal(size=45)
    pair = relorbit.Pair.from_arrays(epochs, theta, rho, theta_err, rho_err, parallax=40.0)
    return relorbit.solve(pair, period_range=(20.0, 80.0))


def test_elements_bring_no_errors():
    table = ephemeris(TRUTH, AHEAD)
    theta, rho = positions(TRUTH, AHEAD)
    np.testing.assert_array_equal(table.epoch, AHEAD)
    np.testing.assert_array_equal(table.theta, theta)
    np.testing.assert_array_equal(table.rho, rho)
    assert np.isnan(table.theta_sigma).all()
    assert np.isnan(table.rho_sigma).all()
    assert [row["theta_sigma"] for row in table.rows()] == [None, None, None]


def test_json_has_the_fixed_keys(solution):
    whole = json.loads(json.dumps(ephemeris(solution, AHEAD).to_dict(), allow_nan=False))
    assert whole["schema"] == "relorbit/ephemeris/1"
    assert [list(row) for row in whole["rows"]] == [
        ["epoch", "theta", "rho", "theta_sigma", "rho_sigma"]
    ] * 3
    assert [row["epoch"] for row in whole["rows"]] == AHEAD.tolist()
    assert all(row["theta_sigma"] > 0.0 and row["rho_sigma"] > 0.0 for row in whole["rows"])


def test_a_recorded_orbit_predicts_what_its_solution_did(solution):
    kept = RecordedOrbit.from_dict(json.loads(json.dumps(solution.to_record("mine").to_dict())))
    for name in ("theta", "rho", "theta_sigma", "rho_sigma"):
        ours, theirs = (getattr(ephemeris(orbit, AHEAD), name) for orbit in (kept, solution))
        np.testing.assert_allclose(ours, theirs, rtol=1e-12)


def test_a_recorded_orbit_without_covariance():
    table = ephemeris(RecordedOrbit("old", TRUTH, sigma={"P": 0.1}), AHEAD)
    np.testing.assert_array_equal(table.theta, positions(TRUTH, AHEAD)[0])
    assert np.isnan(table.rho_sigma).all()


@pytest.mark.parametrize(
    "epochs",
    [
        AHEAD.tolist(),
        AHEAD * u.yr,
        (AHEAD * 365.25) * u.day,
        Time(AHEAD, format="jyear", scale="tt"),
        Time(AHEAD, format="jyear", scale="tt").tdb,
    ],
)
def test_epochs_of_every_kind(epochs):
    table, plain = ephemeris(TRUTH, epochs), ephemeris(TRUTH, AHEAD)
    np.testing.assert_allclose(table.epoch, AHEAD, rtol=0.0, atol=1e-9)
    np.testing.assert_allclose(table.theta, plain.theta, atol=1e-7)


def test_a_single_epoch_is_a_table_of_one_row(solution):
    time = Time(2009.5, format="jyear", scale="tt")
    for one in (2009.5, np.float32(2009.5), 2009.5 * u.yr, time):
        table = ephemeris(solution, one)
        assert table.theta.shape == table.rho_sigma.shape == (1,)
        assert table.rho[0] == pytest.approx(ephemeris(solution, AHEAD).rho[1], rel=1e-12)
    assert ephemeris(solution, 2010).epoch.tolist() == [2010.0]
    assert list(ephemeris(solution, []).rows()) == []


@pytest.mark.parametrize("bad", [float("nan"), [2000.0, float("inf")]])
def test_an_epoch_that_is_no_number_is_refused(bad):
    message = r"^an epoch must be a finite number of Julian years$"
    with pytest.raises(ValueError, match=message):
        ephemeris(TRUTH, bad)


def test_what_is_no_orbit_is_refused():
    message = r"^an orbit is Elements, a RecordedOrbit or a Solution, not dict$"
    with pytest.raises(TypeError, match=message):
        ephemeris(TRUTH.to_dict(), AHEAD)


def test_errors_by_finite_differences(solution):
    """sigma^2 = g' C g with the gradient g taken by differences of positions alone."""
    t0, covariance = solution.uncertainty.reference_epoch, solution.uncertainty.covariance
    centre = regular_from_elements(solution.elements, t0)
    z = regular_position(centre, t0, AHEAD)
    gradients = []
    for slot in range(7):
        step = np.zeros(7)
        step[slot] = 1e-6
        ends = [regular_position(centre + sign * step, t0, AHEAD) for sign in (-1, 1)]
        gradients.append(np.log(ends[1] / ends[0]) / 2e-6)
    gradients = np.array(gradients)
    table = ephemeris(solution, AHEAD)
    for k in range(AHEAD.size):
        for part, scale, ours in (
            (gradients.imag[:, k], np.degrees(1.0), table.theta_sigma[k]),
            (gradients.real[:, k], abs(z[k]), table.rho_sigma[k]),
        ):
            assert ours == pytest.approx(scale * np.sqrt(part @ covariance @ part), rel=1e-6)


def test_errors_by_drawing_orbits(solution):
    """Four thousand draws: the spread is known to 1.1 %, and 5 % is over four of that."""
    t0 = solution.uncertainty.reference_epoch
    centre = regular_from_elements(solution.elements, t0)
    draws = np.random.default_rng(4).multivariate_normal(
        centre, solution.uncertainty.covariance, 4000
    )
    z = regular_position(draws, t0, AHEAD) / np.exp(
        1j * np.radians(positions(solution.elements, AHEAD)[0])
    )
    table = ephemeris(solution, AHEAD)
    np.testing.assert_allclose(np.degrees(np.angle(z)).std(axis=0), table.theta_sigma, rtol=0.05)
    np.testing.assert_allclose(np.abs(z).std(axis=0), table.rho_sigma, rtol=0.05)


def test_errors_are_least_where_the_measures_are(solution):
    """At one place of the orbit: among the measures, and three revolutions later."""
    table = ephemeris(solution, 1985.0 + 3.0 * solution.elements.P * np.arange(2))
    assert table.rho[0] == pytest.approx(table.rho[1], rel=1e-9)
    assert table.rho_sigma[0] < 0.01
    assert table.theta_sigma[1] > 3.0 * table.theta_sigma[0]


def test_an_unknown_angle_is_180_degrees_and_no_more(solution):
    table = ephemeris(solution, [1e6])
    assert table.theta_sigma[0] == 180.0


def test_nothing_depends_on_the_passage_named(solution):
    from dataclasses import replace

    e = solution.elements
    moved = replace(solution, elements=replace(e, T=e.T + 5.0 * e.P))
    for name in ("theta", "rho", "theta_sigma", "rho_sigma"):
        ours, theirs = (getattr(ephemeris(orbit, AHEAD), name) for orbit in (moved, solution))
        np.testing.assert_allclose(ours, theirs, rtol=1e-7)
