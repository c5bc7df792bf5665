"""Reduction to J2000: what is left alone, what is kept, and small analytic cases."""

import numpy as np
import pytest

from relorbit.errors import InputError
from relorbit.measures.reduction import reduce_to_j2000
from relorbit.measures.table import Measures

PLACE = (230.801, 30.288)


def measures(**changes):
    columns = {
        "epoch": [1850.0, 1900.0, 1950.0, 1950.0],
        "theta": [10.0, 0.001, 200.0, None],
        "rho": [1.0, 1.0, 1.0, 2.0],
        "equinox": ["date", "date", "J2000", "date"],
        "flip": [True, False, False, False],
        "epoch_obs": ["B1850", "", "", ""],
    }
    return Measures.from_columns({**columns, **changes})


def test_only_rows_that_need_it_are_turned():
    before = measures()
    after = reduce_to_j2000(before, *PLACE)
    assert after.equinox.tolist() == ["J2000"] * 4
    assert after.theta[0] == pytest.approx(10.0 - 0.7434, abs=5e-4)
    assert 359 < after.theta[1] < 360, "turned past north"
    assert after.theta[2] == 200.0 and np.isnan(after.theta[3])
    assert after.theta_obs[:2].tolist() == [10.0, 0.001] and np.isnan(after.theta_obs[2:]).all()
    assert after.epoch_obs.tolist() == ["B1850", "1900.0", "", ""]
    assert after.flip.tolist() == before.flip.tolist() and after.rho.tolist() == before.rho.tolist()
    assert before.theta[0] == 10.0


def test_twice_is_once():
    once = reduce_to_j2000(measures(), *PLACE, 500.0, -300.0)
    assert reduce_to_j2000(once, *PLACE, 500.0, -300.0) == once


def test_an_angle_as_received_is_not_overwritten():
    after = reduce_to_j2000(measures(theta_obs=[9.5, None, None, None]), *PLACE)
    assert after.theta_obs[0] == 9.5


def test_a_named_equinox_precesses_from_that_year_and_no_more():
    named = measures(equinox=["1900.0", "J1900", "B1900.0", "date"])
    after = reduce_to_j2000(named, *PLACE, 3000.0, 3000.0)
    turn = np.mod(after.theta - named.theta + 180, 360) - 180
    at_1900 = reduce_to_j2000(measures(), *PLACE).theta[1] - 360.0 - 0.001
    assert turn[:3] == pytest.approx([at_1900] * 3, abs=2e-3)
    assert turn[1] != turn[2], "Besselian and Julian years of an equinox differ"


def test_the_meridian_turns_as_mu_sin_delta():
    """Beside precession at its place of 1850, theta changes by mu_alpha sin(delta) t."""
    at_2000 = measures(epoch=[2000.0] * 4)
    assert reduce_to_j2000(at_2000, *PLACE, 5000.0, 100.0).theta[0] == pytest.approx(10, abs=1e-9)
    for ra, dec, mu in ((10.0, 60.0, 2000.0), (200.0, -45.0, -1500.0), (0.01, 10.0, 3000.0)):
        way = mu / 3.6e6 / np.cos(np.deg2rad(dec)) * 150
        still = reduce_to_j2000(measures(), (ra - way) % 360, dec)
        moved = reduce_to_j2000(measures(), ra, dec, mu, 0.0)
        turn = moved.theta[0] - still.theta[0]
        assert turn == pytest.approx(way * np.sin(np.deg2rad(dec)), rel=3e-3)


def test_a_position_is_asked_for_only_where_it_is_needed():
    at_j2000 = measures(equinox=["J2000"] * 4)
    assert reduce_to_j2000(at_j2000, None, None) is at_j2000
    with pytest.raises(InputError, match="of date need the star's position; give right asc"):
        reduce_to_j2000(measures(), None, None)
    with pytest.raises(InputError, match=r"position 400, 0 is not on the sky"):
        reduce_to_j2000(measures(), 400, 0)


def test_many_rows_at_once_are_the_same_as_one_by_one():
    rng = np.random.default_rng(3)
    many = Measures.from_columns(
        {
            "epoch": rng.uniform(1800, 2020, 20_000),
            "theta": rng.uniform(0, 360, 20_000),
            "equinox": ["date"] * 20_000,
        }
    )
    all_at_once = reduce_to_j2000(many, 80.0, -70.0, 900.0, 800.0)
    for row in (0, 77, 19_999):
        one = reduce_to_j2000(many.select([row]), 80.0, -70.0, 900.0, 800.0)
        assert one.theta[0] == all_at_once.theta[row]
