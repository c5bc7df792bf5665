"""What residuals hide: alarms at the rate stated, wobbles found, masses right."""

import json

import numpy as np
import pytest
from noisy_histories import companion_trial

from relorbit.derive.companion import _periodogram, search_companion
from relorbit.derive.wobble import design, gain_of, minimum_mass, scatter_of
from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, complex_position, polar
from relorbit.solve.solver import refine_from

TRUTH = Elements(42.0, 1989.0, 0.46, 0.88, 57.0, 64.0, 212.0)


def solved(extra=lambda epoch: 0.0 * epoch, count=60, seed=2, **who):
    rng = np.random.default_rng(seed)
    epoch = np.sort(rng.uniform(1920.0, 2015.0, count))
    error = rng.choice([0.005, 0.02], count)
    noise = error * (rng.normal(size=count) + 1j * rng.normal(size=count))
    theta, rho = polar(complex_position(TRUTH, epoch) + extra(epoch) + noise)
    theta_err = np.degrees(np.arctan2(error, rho))
    pair = Pair.from_arrays(epoch, theta, rho, theta_err, 2.0 * error, **who)
    return refine_from(pair, TRUTH)


def test_clean_residuals_alarm_as_often_as_they_should():
    """The bar of the benchmark companion_alarms, on fifty simulations."""
    found = [companion_trial(seed, 0.0) for seed in range(50)]
    chance = np.array([one.wobble.probability_permuted for one in found])
    # p is uniform: mean 1/2, standard deviation 0.29
    assert chance.mean() == pytest.approx(0.5, abs=4 * 0.29 / np.sqrt(50))
    assert sum(one.found for one in found) <= 3
    assert all(one.found == (one.wobble.probability_permuted <= 0.01) for one in found)
    assert all(one.text.startswith("nothing") for one in found if not one.found)
    bound = np.array([one.wobble.probability for one in found])
    assert np.mean(bound) > 0.5, "the analytic level is an upper bound"
    drift = np.array([one.drift.probability for one in found])
    assert drift.mean() == pytest.approx(0.5, abs=4 * 0.29 / np.sqrt(50))


def test_a_wobble_of_20_mas_is_found():
    for seed in range(100, 110):
        one = companion_trial(seed, 0.02)
        assert one.found
        assert one.wobble.period == pytest.approx(6.0, abs=5.0 * one.wobble.period_sigma)
        assert one.wobble.amplitude_mas == pytest.approx(
            20.0, abs=5.0 * one.wobble.amplitude_sigma_mas
        )
        assert one.wobble.probability < 1e-6
        assert one.text.startswith("a signal worth following: period")


def test_own_columns_and_astropy_agree():
    """Two ways to the same periodogram, with errors that differ along and across."""
    s = scatter_of(solved().residuals)
    frequency = np.linspace(0.02, 0.4, 57)
    other = gain_of(design(s, frequency), (s.north / s.north_sigma)[None],
                    (s.east / s.east_sigma)[None])[:, 0]  # fmt: skip
    assert _periodogram(s, frequency) == pytest.approx(other, rel=1e-8, abs=1e-9)


def test_residuals_in_their_own_order_are_themselves():
    s = scatter_of(solved().residuals)
    north, east = s.dealt(np.arange(60)[None])
    assert north[0] == pytest.approx(s.north / s.north_sigma)
    assert east[0] == pytest.approx(s.east / s.east_sigma)


def test_residuals_dealt_anew_keep_across_and_along_together():
    s = scatter_of(solved().residuals)
    north, east = s.dealt(np.arange(60)[::-1][None])
    size = np.hypot(north[0] * s.north_sigma, east[0] * s.east_sigma)
    expected = np.hypot(s.across[::-1] * s.across_err, s.along[::-1] * s.along_err)
    assert size == pytest.approx(expected)
    assert not np.allclose(size, np.hypot(s.north, s.east))


def test_a_drift_is_told_from_the_orbit():
    found = search_companion(solved(lambda epoch: (0.002 - 0.001j) * (epoch - 1980.0)))
    assert found.drift.probability < 1e-4
    assert found.drift.north == pytest.approx(2.0, abs=4.0 * found.drift.north_sigma)
    assert found.drift.east == pytest.approx(-1.0, abs=4.0 * found.drift.east_sigma)
    assert "the residuals drift" in found.text
    assert search_companion(solved()).drift.probability > 0.01


def test_least_mass_obeys_the_third_law():
    """A body of 0.3 suns 4 au from a star of 0.9 moves it by a quarter of that, 1 au."""
    assert minimum_mass(1.0, np.sqrt(4.0**3 / 1.2), 0.9) == pytest.approx(0.3, rel=1e-3)
    wobble = lambda epoch: 0.03 * np.exp(2j * np.pi * epoch / 8.0)  # noqa: E731
    solution = solved(wobble, parallax_mas=50.0)
    found = search_companion(solution)
    expected = minimum_mass(
        found.wobble.amplitude_mas / 50.0, found.wobble.period, 0.5 * solution.mass_total.value
    )
    assert found.wobble.mass_minimum == pytest.approx(expected)
    assert "solar masses" in found.text
    assert search_companion(solved(wobble)).wobble.mass_minimum is None


def test_the_same_seed_gives_the_same_answer_and_json():
    solution = solved()
    one, two = search_companion(solution, seed=3), search_companion(solution, seed=3)
    assert one.to_dict() == two.to_dict()
    assert search_companion(solution, seed=4).threshold_permuted != one.threshold_permuted
    told = json.loads(json.dumps(one.to_dict(), allow_nan=False))
    assert told["schema"] == "relorbit/companion/1"
    assert len(told["periodogram"]["period"]) == len(told["periodogram"]["power"])
    assert one.threshold == pytest.approx(one.threshold_permuted, rel=0.25)


def test_what_cannot_be_looked_at_is_refused():
    with pytest.raises(Undetermined, match="8 measures have both theta and rho"):
        search_companion(solved(count=8))
    solution = solved()
    with pytest.raises(InputError, match="99 permutations cannot show a false-alarm"):
        search_companion(solution, level=0.001, permutations=99)
    with pytest.raises(InputError, match="between 0 and 1, not 2"):
        search_companion(solution, level=2.0)
    with pytest.raises(InputError, match="are not a range"):
        search_companion(solution, period_range=(5.0, 2.0))
    with pytest.raises(InputError, match="give a longer shortest period"):
        search_companion(solution, period_range=(1e-4, 2.0))


def test_cancel():
    def stop(share):
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        search_companion(solved(), on_progress=stop)
