"""Pairs made in Python: plain arrays, quantities, identity, orbits on record."""

import json

import numpy as np
import pytest

from relorbit.errors import InputError
from relorbit.measures.pair import Pair, RecordedOrbit, declination, right_ascension
from relorbit.orbit.elements import Elements

EPOCH, THETA, RHO = [1990.0, 2000.0], [10.0, 20.0], [1.0, np.nan]
ELEMENTS = Elements(P=40.0, T=1990.0, e=0.3, a=1.0, i=60.0, node=20.0, omega=200.0)


def test_plain_arrays():
    pair = Pair.from_arrays(EPOCH, THETA, RHO, name="A", technique="camera", nights=[3, None])
    assert pair.name == "A"
    assert pair.measures.technique.tolist() == ["camera", "camera"]
    assert pair.measures.has_rho.tolist() == [True, False]
    assert pair.measures.equinox.tolist() == ["J2000", "J2000"]
    assert pair.measures.nights[0] == 3 and np.isnan(pair.measures.nights[1])


def test_quantities_and_times_are_converted():
    from astropy import units as u
    from astropy.table import Table
    from astropy.time import Time

    pair = Pair.from_arrays(
        Time([2451545.0, 2451545.0 + 365.25], format="jd", scale="tt"),
        np.deg2rad([30.0, 60.0]) * u.rad,
        [1500.0, 250.0] * u.mas,
        theta_err=[0.1, 0.2] * u.deg,
        rho_err=[1.0, 2.0] * u.mas,
        aperture=60 * u.cm,
        ra=15.5 * u.hourangle,
        dec=-1800 * u.arcmin,
        parallax=0.05 * u.arcsec,
        parallax_err=1 * u.mas,
        pm_ra=1 * u.arcsec / u.yr,
    )
    assert pair.measures.epoch == pytest.approx([2000.0, 2001.0], abs=1e-9)
    assert pair.measures.theta == pytest.approx([30.0, 60.0], rel=1e-14)
    assert pair.measures.rho.tolist() == [1.5, 0.25]
    assert pair.measures.rho_err.tolist() == [0.001, 0.002]
    assert pair.measures.aperture_m == pytest.approx([0.6, 0.6])
    assert (pair.ra_deg, pair.dec_deg) == pytest.approx((232.5, -30.0))
    numbers = pair.parallax_mas, pair.parallax_err_mas, pair.pm_ra_mas_yr
    assert numbers == pytest.approx((50, 1, 1000))
    table = Table({"t": EPOCH, "rho": [100.0, 200.0] * u.mas})
    assert Pair.from_arrays(table["t"], None, table["rho"]).measures.rho.tolist() == [0.1, 0.2]
    with pytest.raises(InputError, match="row 2, column epoch: 2300 is before 1600"):
        Pair.from_arrays([1990.0, 2300.0], THETA, RHO)
    with pytest.raises(InputError, match=r"rho: 'kg' .* not convertible"):
        Pair.from_arrays(EPOCH, THETA, [1.0, 2.0] * u.kg)


def test_wrong_shapes_and_words_are_refused_in_plain_words():
    with pytest.raises(ValueError, match="column theta: 3 values where the epoch has 2"):
        Pair.from_arrays(EPOCH, [1.0, 2.0, 3.0], RHO)
    with pytest.raises(ValueError, match=r"column rho: one value .1\.0. where a list of values"):
        Pair.from_arrays(EPOCH, THETA, 1.0)
    with pytest.raises(ValueError, match="column theta: an array of 2 dimensions"):
        Pair.from_arrays(EPOCH, [THETA], RHO)
    with pytest.raises(TypeError, match="from_arrays has no 'colour'; it takes aperture, apert"):
        Pair.from_arrays(EPOCH, THETA, RHO, colour="blue")
    with pytest.raises(TypeError, match="got ra_deg twice, once as ra"):
        Pair.from_arrays(EPOCH, THETA, RHO, ra_deg=1.0, ra=2.0)


@pytest.mark.parametrize(
    ("who", "message"),
    [
        ({"ra_deg": 360.0}, "right ascension 360 is outside [0, 360) degrees"),
        ({"dec_deg": -90.5}, "declination -90.5 is outside -90 to 90 degrees"),
        ({"parallax_err_mas": 0.0},
         "parallax error 0 is not above 0; leave it out where unknown"),
        ({"parallax_mas": np.nan},
         "parallax_mas: nan is not a finite number; leave it out where unknown"),
        ({"magnitude_primary": "bright"}, "magnitude_primary: 'bright' is not a number"),
        ({"designations": "ABC"}, "designations is one word; give a list of names"),
    ],
)  # fmt: skip
def test_identity_that_cannot_be_is_refused(who, message):
    with pytest.raises(InputError) as caught:
        Pair.from_arrays(EPOCH, THETA, RHO, **who)
    assert str(caught.value) == message


def test_positions_in_words():
    assert right_ascension("230.5") == 230.5
    assert right_ascension("15 23 12.3") == pytest.approx(15 * (15 + 23 / 60 + 12.3 / 3600))
    assert right_ascension("15h23m12.3s") == right_ascension("15:23:12.3")
    assert declination("-00 30 00") == -0.5
    assert declination("\u221212d30m") == -12.5
    assert declination("+30:17:16") == pytest.approx(30 + 17 / 60 + 16 / 3600)
    for bad in ("15 61 0", "24 0 0", "-3 0 0", "15d 3m", "up", "", "1 2 60"):
        with pytest.raises(InputError, match="is not a right ascension; write it in decimal"):
            right_ascension(bad)
    with pytest.raises(InputError, match="'north' is not a declination"):
        declination("north")


def test_orbits_on_record():
    pair = Pair.from_arrays(EPOCH, THETA, RHO, name="A")
    with pytest.raises(InputError, match="A has no orbit on record; record one first"):
        pair.orbit()
    first, second = RecordedOrbit("first", ELEMENTS), RecordedOrbit("second", ELEMENTS)
    pair = pair.with_orbit(first).with_orbit(second)
    assert pair.orbit() is second and pair.orbit("first") is first
    again = RecordedOrbit("first", ELEMENTS, chi2=3.0)
    pair = pair.with_orbit(again)
    assert [o.name for o in pair.orbits] == ["second", "first"] and pair.orbit().chi2 == 3.0
    with pytest.raises(InputError, match="A has no orbit 'third' on record; it has second, first"):
        pair.orbit("third")


def test_recorded_orbit_through_json():
    matrix = np.arange(49.0).reshape(7, 7) / 3
    orbit = RecordedOrbit(
        "mine", ELEMENTS, {"P": 0.1, "T": None}, 1995.5, matrix, 12.5, np.int64(9), "2020-01-02"
    )
    back = RecordedOrbit.from_dict(json.loads(json.dumps(orbit.to_dict())))
    assert back == orbit and np.array_equal(back.covariance, matrix)
    with pytest.raises(InputError, match="a recorded orbit has no 'elements'"):
        RecordedOrbit.from_dict({"name": "x"})
    with pytest.raises(InputError, match=r"a recorded orbit cannot be read: .*colour"):
        RecordedOrbit.from_dict({**orbit.to_dict(), "colour": 1})
    with pytest.raises(InputError, match=r"the covariance has shape \(2, 2\)"):
        RecordedOrbit("x", ELEMENTS, covariance=np.eye(2))


def test_to_dict_is_plain():
    pair = Pair.from_arrays(EPOCH, THETA, RHO, name="A", designations=["B"])
    plain = json.loads(json.dumps(pair.to_dict(), allow_nan=False))
    assert plain["measures"]["rho"] == [1.0, None]
    assert plain["designations"] == ["B"] and plain["parallax_mas"] is None
