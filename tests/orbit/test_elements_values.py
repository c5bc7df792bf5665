"""What `Elements` takes, what it refuses, and how it keeps it."""

import dataclasses

import astropy.units as u
import numpy as np
import pytest
from astropy.time import Time
from hypothesis import given
from hypothesis import strategies as st
from orbit_strategies import orbits, properties

from relorbit.orbit.elements import NAMES, Elements

GOOD = {"P": 41.6, "T": 1934.0, "e": 0.3, "a": 0.9, "i": 59.0, "node": 23.7, "omega": 219.9}


def elements(**changed):
    return Elements(**{**GOOD, **changed})


def test_the_names_and_their_order():
    assert NAMES == ("P", "T", "e", "a", "i", "node", "omega")
    assert list(elements().to_dict().items()) == list(GOOD.items())


def test_quantities_are_converted_at_the_door():
    orbit = Elements(
        P=41.6 * 365.25 * u.day, T=Time(1934.0, format="jyear", scale="tt"),
        e=0.3 * u.one, a=900.0 * u.mas, i=np.radians(59.0) * u.rad, node=23.7 * 60 * u.arcmin,
        omega=219.9 * u.deg,
    )  # fmt: skip
    for name, value in GOOD.items():
        assert getattr(orbit, name) == pytest.approx(value, rel=1e-12)
        assert type(getattr(orbit, name)) is float


def test_time_is_brought_to_tt():
    utc = Time("2000-01-01T12:00:00", scale="utc")
    seconds = (elements(T=utc).T - 2000.0) * 365.25 * 86400.0
    assert seconds == pytest.approx(64.184, abs=1e-4)  # TAI - UTC 32 s and TT - TAI 32.184 s


def test_integers_and_single_precision_become_floats():
    orbit = Elements(40, np.int64(1990), np.float32(0.5), 1, np.int32(45), np.float64(10), 20)
    assert orbit == Elements(40.0, 1990.0, 0.5, 1.0, 45.0, 10.0, 20.0)
    assert all(type(value) is float for value in orbit.to_dict().values())


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"P": 0.0}, "P must be above 0, not 0"),
        ({"P": -41.6}, "P must be above 0, not -41.6"),
        ({"e": 1.0}, "e must be in 0 <= e < 1, not 1"),
        ({"e": -0.1}, "e must be in 0 <= e < 1, not -0.1"),
        ({"a": 0.0}, "a must be above 0, not 0"),
        ({"a": -2.5}, "a must be above 0, not -2.5"),
        ({"i": -0.5}, "i must be in 0 to 180 degrees, not -0.5"),
        ({"i": 180.5}, "i must be in 0 to 180 degrees, not 180.5"),
        ({"P": float("nan")}, "P must be a finite number, not nan"),
        ({"T": float("inf")}, "T must be a finite number, not inf"),
        ({"omega": float("-inf")}, "omega must be a finite number, not -inf"),
    ],
)
def test_values_that_cannot_be_are_refused(changed, message):
    with pytest.raises(ValueError) as caught:
        elements(**changed)
    assert str(caught.value) == message


def test_a_wrong_unit_is_refused():
    with pytest.raises(u.UnitConversionError, match=r"'arcsec' .angle. and 'yr' .time. are not"):
        elements(P=3.0 * u.arcsec)
    with pytest.raises(u.UnitConversionError, match=r"'yr' .time. and 'deg' .angle. are not"):
        elements(node=3.0 * u.yr)


@properties
@given(st.floats(-1e4, 1e4))
def test_bearings_are_kept_in_0_to_360(angle):
    orbit = elements(node=angle, omega=angle)
    for kept in (orbit.node, orbit.omega):
        assert 0.0 <= kept < 360.0
        assert abs(np.exp(1j * np.radians(kept)) - np.exp(1j * np.radians(angle))) < 1e-11


@pytest.mark.parametrize("tiny", [-1e-20, -1e-15, -5e-324])
def test_a_tiny_negative_bearing_is_north_and_not_360(tiny):
    orbit = elements(node=tiny, omega=tiny)
    assert (orbit.node, orbit.omega) == (0.0, 0.0)
    assert orbit.folded() == orbit


@pytest.mark.parametrize(
    ("node", "omega", "folded"),
    [(302.12, 14.0, (122.12, 194.0)), (180.0, 200.0, (0.0, 20.0)), (179.9, 200.0, (179.9, 200.0))],
)
def test_folded(node, omega, folded):
    orbit = elements(node=node, omega=omega).folded()
    assert (orbit.node, orbit.omega) == pytest.approx(folded, abs=1e-12)


@properties
@given(orbits(), st.floats(1600.0, 2200.0))
def test_near_is_within_half_a_period(orbit, epoch):
    moved = orbit.near(epoch)
    assert abs(moved.T - epoch) <= 0.5 * orbit.P * (1.0 + 1e-12) + 1e-12
    turns = (moved.T - orbit.T) / orbit.P
    assert turns == pytest.approx(round(turns), abs=1e-9)
    assert dataclasses.replace(moved, T=orbit.T) == orbit


def test_an_orbit_cannot_be_changed():
    with pytest.raises(dataclasses.FrozenInstanceError):
        elements().P = 3.0
