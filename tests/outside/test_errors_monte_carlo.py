"""Do the errors mean what they say? Two hundred simulated histories of one invented pair.

Of N draws of a Gaussian the standard deviation is known to 1/sqrt(2 N) and the mean to
1/sqrt(N); all bounds below are four of those. The formal errors are judged: scaled ones are
never below them, and therefore larger on average where the errors given are right.
"""

import numpy as np
import pytest

import relorbit
from relorbit.orbit.elements import positions

TRUTH = relorbit.Elements(42.0, 1989.0, 0.46, 0.88, 57.0, 64.0, 212.0)
NAMES = ("P", "T", "e", "a", "i", "node", "omega")
DRAWS = 200
AHEAD = np.array([2003.0, 2012.0, 2030.0])
PARALLAX_MAS = 40.0


def history(random):
    epochs = np.sort(random.uniform(1950.0, 2000.0, 50))
    theta, rho = positions(TRUTH, epochs)
    rho_err = random.choice([0.005, 0.01, 0.03], epochs.size)
    theta_err = np.degrees(rho_err / rho)
    theta = theta + theta_err * random.normal(size=epochs.size)
    rho = rho + rho_err * random.normal(size=epochs.size)
    return relorbit.Pair.from_arrays(
        epochs, theta % 360.0, rho, theta_err, rho_err, parallax=PARALLAX_MAS
    )


@pytest.fixture(scope="module")
def solutions():
    random = np.random.default_rng(1848)
    how = {"passage_near": TRUTH.T, "period_range": (30.0, 60.0)}  # a short search, to be quick
    return [relorbit.solve(history(random), **how) for _ in range(DRAWS)]


def assert_gaussian(pulls, name):
    assert abs(pulls.mean()) < 4.0 / np.sqrt(DRAWS), f"{name}: mean {pulls.mean():.2f}"
    spread = pulls.std(ddof=1)
    assert abs(spread - 1.0) < 4.0 / np.sqrt(2.0 * DRAWS), f"{name}: spread {spread:.2f}"


@pytest.mark.parametrize("name", NAMES)
def test_scatter_of_each_element(solutions, name):
    pulls = [
        (getattr(s.elements, name) - getattr(TRUTH, name)) / s.sigma_formal[name]
        for s in solutions
    ]
    assert_gaussian(np.array(pulls), name)


def test_correlations(solutions):
    """d' C^-1 d of the seven elements is chi-square with 7 degrees of freedom: 7 +- sqrt(14/N)."""
    squares = []
    for s in solutions:
        gap = np.array([getattr(s.elements, name) - getattr(TRUTH, name) for name in NAMES])
        squares.append(gap @ np.linalg.solve(s.covariance / s.error_scale**2, gap))
    assert np.mean(squares) == pytest.approx(7.0, abs=4.0 * np.sqrt(14.0 / DRAWS))


def test_reduced_chi2_is_one(solutions):
    dof = solutions[0].dof
    assert dof == 93
    mean = np.mean([s.reduced_chi2 for s in solutions])
    assert mean == pytest.approx(1.0, abs=4.0 * np.sqrt(2.0 / (dof * DRAWS)))


@pytest.mark.parametrize("slot", range(AHEAD.size))
def test_scatter_of_predicted_positions(solutions, slot):
    theta, rho = positions(TRUTH, AHEAD)
    tables = [relorbit.ephemeris(s, AHEAD) for s in solutions]
    scale = np.array([s.error_scale for s in solutions])
    gap = np.array([(t.theta[slot] - theta[slot] + 180.0) % 360.0 - 180.0 for t in tables])
    across = scale * gap / np.array([t.theta_sigma[slot] for t in tables])
    along = scale * np.array([(t.rho[slot] - rho[slot]) / t.rho_sigma[slot] for t in tables])
    assert_gaussian(across, f"theta at {AHEAD[slot]}")
    assert_gaussian(along, f"rho at {AHEAD[slot]}")


def test_scatter_of_the_mass(solutions):
    """a^3/P^2 with its correlation: without it the spread would be far from one."""
    truth = TRUTH.a**3 / TRUTH.P**2
    pairs = [s.axis_cubed_over_period_squared for s in solutions]
    pulls = [
        s.error_scale * (value - truth) / sigma
        for s, (value, sigma) in zip(solutions, pairs, strict=True)
    ]
    assert_gaussian(np.array(pulls), "a^3/P^2")
    for s, (value, sigma) in zip(solutions, pairs, strict=True):
        assert s.mass_total.sigma / s.mass_total.value == pytest.approx(sigma / value, rel=1e-9)


def test_scatter_of_the_turning_points(solutions):
    truth = {p.kind: p.epoch for p in relorbit.turning_points(TRUTH, 2010.0)}
    points = [{p.kind: p for p in relorbit.turning_points(s, 2010.0)} for s in solutions]
    assert set(truth) == {"periastron", "closest", "widest"}
    for kind, epoch in truth.items():
        pulls = [
            s.error_scale * (one[kind].epoch - epoch) / one[kind].epoch_sigma
            for s, one in zip(solutions, points, strict=True)
        ]
        assert_gaussian(np.array(pulls), kind)
