"""What follows from samples: files, intervals, extremes, positions."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from astropy.table import Table
from invented import ORBIT

from relorbit.derive.ephemeris import ephemeris, turning_points
from relorbit.derive.posterior import (
    extremes,
    folded_angles,
    interval,
    sampled_ephemeris,
    summary,
)
from relorbit.errors import InputError
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import positions, projection
from relorbit.solve.sample import sample
from relorbit.solve.saved_samples import read_samples, write_samples
from relorbit.solve.solver import solve
from relorbit.solve.weights import quantiles


@pytest.mark.parametrize("suffix", [".ecsv", ".fits"])
def test_saved_samples_come_back_and_can_be_made_again(posterior, tmp_path, suffix):
    path = tmp_path / f"samples{suffix}"
    write_samples(posterior, path)
    again = read_samples(path)
    for name in ("P", "T", "e", "a", "i", "node", "omega", "weight", "mode", "parallax", "mass"):
        assert getattr(again, name) == pytest.approx(getattr(posterior, name), rel=1e-12), name
    assert again.alpha == pytest.approx(posterior.alpha, abs=1e-12)
    for name in ("seed", "size", "prior", "effective_size", "log_evidence", "reference_epoch"):
        assert getattr(again, name) == pytest.approx(getattr(posterior, name)) or name == "prior"
    assert again.prior == posterior.prior
    # the file alone is enough to make them again
    o = again.observations
    pair = Pair.from_arrays(
        o.epoch, np.degrees(o.theta) % 360.0, o.rho, np.degrees(1.0 / o.per_theta), 1.0 / o.per_rho,
        parallax=again.parallax_mas, parallax_err=again.parallax_err_mas,
    )  # fmt: skip
    anew = sample(pair, again.size, again.seed, again.prior)
    assert quantiles(anew.P, anew.weight, 0.5) == pytest.approx(
        quantiles(again.P, again.weight, 0.5), rel=1e-4
    )


def test_a_saved_table_opens_with_astropy_alone(posterior, tmp_path):
    write_samples(posterior, tmp_path / "s.ecsv")
    table = Table.read(tmp_path / "s.ecsv")
    assert table["P"].unit == "yr"
    assert table.meta["relorbit"]["seed"] == 1
    assert len(table.meta["relorbit"]["measures"]["epoch"]) == 40
    write_samples(posterior, tmp_path / "s.fits")
    assert Table.read(tmp_path / "s.fits", hdu=1)["a"].unit == "arcsec"


def test_bad_sample_files_are_refused_in_one_line(tmp_path, posterior):
    with pytest.raises(InputError, match="name the file so"):
        write_samples(posterior, tmp_path / "s.csv")
    with pytest.raises(InputError, match="no such file"):
        read_samples(tmp_path / "none.ecsv")
    damaged = tmp_path / "d.ecsv"
    damaged.write_text("# %ECSV 1.0\n# ---\n# broken\n1 2 3\n")
    with pytest.raises(InputError, match="not a file of samples, or damaged"):
        read_samples(damaged)
    Table({"a": [1.0]}).write(tmp_path / "other.ecsv")
    with pytest.raises(InputError, match="not a file of samples"):
        read_samples(tmp_path / "other.ecsv")


def test_angles_are_folded_in_pairs_without_a_double_peak(posterior):
    """Nodes on both sides of 0: the fold must keep each apparent orbit and make one peak."""
    turned = replace(
        posterior,
        node=(posterior.node - np.median(posterior.node)) % 180.0,
        omega=np.where(
            posterior.node < np.median(posterior.node), posterior.omega + 180.0, posterior.omega
        ) % 360.0,
    )  # fmt: skip
    assert np.ptp(turned.node) > 170.0
    node, omega = folded_angles(turned)
    assert np.ptp(node) < 30.0
    assert np.ptp(omega) < 40.0
    # node + omega and node - omega are kept, by whole turns
    for sign in (1.0, -1.0):
        gap = (node + sign * omega) - (turned.node + sign * turned.omega)
        assert np.abs(np.remainder(gap + 180.0, 360.0) - 180.0).max() < 1e-9


def test_intervals_hold_what_they_say():
    rng = np.random.default_rng(0)
    one = interval(rng.normal(3.0, 2.0, 50_000), np.full(50_000, 1.0))
    assert one.median == pytest.approx(3.0, abs=0.05)
    assert one.high68 - one.low68 == pytest.approx(2 * 0.9945 * 2.0, rel=0.03)
    assert one.high95 - one.low95 == pytest.approx(2 * 1.96 * 2.0, rel=0.03)


def test_summary_agrees_with_the_turning_points_of_the_fit(covered, posterior):
    found = summary(posterior, 2025.0)
    points = {point.kind: point for point in turning_points(solve(covered), 2025.0)}
    for name, point in (
        ("next periastron", points["periastron"]), ("next closest", points["closest"]),
        ("next widest", points["widest"]),
    ):  # fmt: skip
        one = found.intervals[name]
        assert one.median == pytest.approx(point.epoch, abs=0.3 * point.epoch_sigma + 0.02)
    assert found.intervals["closest"].median == pytest.approx(points["closest"].rho, rel=0.01)
    assert found.intervals["widest"].median == pytest.approx(points["widest"].rho, rel=0.01)
    assert found.modes == ()
    assert found.to_dict()["intervals"]["P"]["median"] == found.intervals["P"].median


def test_extremes_are_those_of_a_fine_ephemeris(posterior):
    rows = np.arange(20)
    found = extremes(posterior, rows, 2025.0)
    for row in rows:
        orbit = posterior.orbit(row)
        epochs = 2025.0 + np.linspace(0.0, orbit.P, 20_001)
        rho = positions(orbit, epochs)[1]
        assert found["closest"][row] == pytest.approx(rho.min(), rel=1e-5)
        assert found["widest"][row] == pytest.approx(rho.max(), rel=1e-5)
        assert found["next widest"][row] == pytest.approx(epochs[np.argmax(rho)], abs=0.05)


def test_positions_of_samples_are_those_of_their_elements(posterior):
    epochs = np.array([1985.3, 2040.0])
    z = posterior.places(np.arange(5), epochs)
    for row in range(5):
        theta, rho = positions(posterior.orbit(row), epochs)
        assert np.abs(z[row]) == pytest.approx(rho, rel=1e-9)
        assert np.degrees(np.angle(z[row])) % 360.0 == pytest.approx(theta, abs=1e-7)


def test_ephemeris_bands_are_those_of_the_fit_where_it_is_good(covered, posterior):
    epochs = [2022.0, 2030.0, 2041.5]
    bands, fit = sampled_ephemeris(posterior, epochs), ephemeris(solve(covered), epochs)
    scale = solve(covered).error_scale
    for k in range(3):
        half = 0.5 * (bands.theta[k, 3] - bands.theta[k, 1])
        assert half == pytest.approx(fit.theta_sigma[k] / scale, rel=0.12)
        assert bands.theta[k, 2] == pytest.approx(fit.theta[k], abs=0.3 * half)
        assert bands.rho[k, 2] == pytest.approx(fit.rho[k], abs=0.3 * fit.rho_sigma[k])


def test_theta_is_taken_on_the_circle(posterior):
    """The whole posterior turned so that the place of 2010 lies at north."""
    place = sampled_ephemeris(posterior, 2010.0).theta[0, 2]
    turn = np.exp(-1j * np.radians(place))
    north = replace(posterior, alpha=posterior.alpha * turn, beta=posterior.beta * turn)
    theta = sampled_ephemeris(north, 2010.0).theta[0]
    assert 0.0 <= theta[2] < 360.0
    assert np.all(np.diff(theta) > 0.0)
    assert theta[4] - theta[0] < 20.0


def test_best_is_the_least_chi2(posterior):
    assert posterior.P[np.argmin(posterior.chi2)] == posterior.best.P
    alpha, _ = projection(posterior.best)
    assert abs(alpha) == pytest.approx(abs(posterior.alpha[np.argmin(posterior.chi2)]))
    assert abs(posterior.best.P - ORBIT.P) < 2.0
