"""A measure of two positions against astropy's sphere and space motion, and its errors by drawing.

`SkyCoord.position_angle` and `separation` (Vincenty's formula), `apply_space_motion` (the IAU's
SOFA routine pmsafe): none of it is used by relorbit for this.
"""

import numpy as np
import pytest
from astropy import units as u
from astropy.coordinates import SkyCoord
from astropy.time import Time
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from relorbit.errors import InputError
from relorbit.measures.between import Place, between
from relorbit.measures.reduction import reduce_to_j2000
from relorbit.measures.table import Measures

RA = st.one_of(st.floats(0.0, 359.999), st.floats(0.0, 1e-3), st.floats(359.999, 359.99999))
DEC = st.one_of(st.floats(-89.0, 89.0), st.floats(89.0, 89.99), st.floats(-89.99, -89.0))
OFFSET = st.floats(-30.0, 30.0)  # arcsec


def beside(ra: float, dec: float, east: float, north: float) -> tuple[float, float]:
    """A place about so many arcsec to the east and north; astropy is asked for the truth."""
    other = SkyCoord(ra * u.deg, dec * u.deg).directional_offset_by(
        np.arctan2(east, north) * u.rad, np.hypot(east, north) * u.arcsec
    )
    return float(other.ra.deg) % 360.0, float(other.dec.deg)


@settings(deadline=None, max_examples=150)
@given(RA, DEC, OFFSET, OFFSET)
def test_theta_and_rho_are_those_of_astropy(ra, dec, east, north):
    assume(np.hypot(east, north) > 0.01)
    place = beside(ra, dec, east, north)
    a, b = (SkyCoord(*one, unit="deg") for one in ((ra, dec), place))
    found = between(Place(ra, dec, 2016.0), Place(*place, 2016.0))
    # right ascension in degrees is rounded at 1e-13 deg: 1e-9 arcsec here
    gap = (found.theta - a.position_angle(b).deg + 180.0) % 360.0 - 180.0
    assert abs(np.radians(gap)) * found.rho < 2e-9
    assert found.rho == pytest.approx(a.separation(b).arcsec, abs=2e-9)
    assert 0.0 <= found.theta < 360.0


@pytest.mark.parametrize("ra", [0.00001, 359.99999, 231.55])
@pytest.mark.parametrize("dec", [-66.0, 3.0, 89.5])
@pytest.mark.parametrize("epoch", [1991.25, 2000.0, 2030.0])
def test_proper_motion_is_that_of_astropy(ra, dec, epoch):
    motions = ((1210.0, -3664.0), (1190.0, -3690.0))
    places = ((ra, dec), beside(ra, dec, 3.1, -2.2))
    ours, theirs = [], []
    for (alpha, delta), (pm_ra, pm_dec) in zip(places, motions, strict=True):
        ours.append(Place(alpha, delta, 2016.0, pm_ra_mas_yr=pm_ra, pm_dec_mas_yr=pm_dec))
        there = SkyCoord(
            alpha * u.deg, delta * u.deg, pm_ra_cosdec=pm_ra * u.mas / u.yr,
            pm_dec=pm_dec * u.mas / u.yr, distance=2.0 * u.pc, radial_velocity=0.0 * u.km / u.s,
            obstime=Time(2016.0, format="jyear", scale="tdb"),
        )  # fmt: skip
        theirs.append(there.apply_space_motion(Time(epoch, format="jyear", scale="tdb")))
    found = between(*ours, epoch)
    # SOFA also counts the time the light takes: hardly anything at 35 km/s across
    assert found.rho == pytest.approx(theirs[0].separation(theirs[1]).arcsec, abs=2e-6)
    angle = theirs[0].position_angle(theirs[1]).deg
    assert abs((found.theta - angle + 180.0) % 360.0 - 180.0) < 1e-4


@pytest.mark.parametrize("dec", [41.22, -80.0, 89.9])
@pytest.mark.parametrize("epoch", [2016.0, 1950.0])
def test_errors_are_the_scatter_of_drawn_positions(dec, epoch):
    """20,000 draws of places and motions: standard deviations within 3 %, correlation 0.03."""
    rng = np.random.default_rng(11)
    a = Place(0.0002, dec, 2016.0, 0.8, 0.3, 0.5, 212.0, -164.0, 0.06, 0.02, -0.4)
    b = Place(*beside(0.0002, dec, -1.1, 0.7), 2016.0, 0.5, 0.9, -0.7, 205.0, -171.0, 0.03, 0.05)
    found = between(a, b, epoch)
    places = []
    for one in (a, b):
        shift, motion = (
            rng.multivariate_normal(
                [0.0, 0.0], [[x * x, c * x * y], [c * x * y, y * y]], 20_000
            )
            for x, y, c in (
                (one.ra_err_mas, one.dec_err_mas, one.correlation),
                (one.pm_ra_err_mas_yr, one.pm_dec_err_mas_yr, one.pm_correlation),
            )
        )  # fmt: skip
        motion = motion + np.array([one.pm_ra_mas_yr, one.pm_dec_mas_yr])
        # the drawn place, then a straight way in space, by Cartesian coordinates
        way = (shift + motion * (epoch - 2016.0)) * (u.mas.to(u.rad))
        alpha, delta = np.radians([one.ra_deg, one.dec_deg])
        axis = np.array([np.cos(delta) * np.cos(alpha), np.cos(delta) * np.sin(alpha),
                         np.sin(delta)])  # fmt: skip
        east = np.array([-np.sin(alpha), np.cos(alpha), 0.0])
        xyz = axis + way[:, :1] * east + way[:, 1:] * np.cross(axis, east)
        places.append(SkyCoord(*xyz.T, representation_type="cartesian"))
    angle = places[0].position_angle(places[1]).deg
    theta = (angle - found.theta + 180.0) % 360.0 - 180.0
    rho = places[0].separation(places[1]).arcsec
    assert np.std(theta) == pytest.approx(found.theta_err, rel=0.03)
    assert np.std(rho) == pytest.approx(found.rho_err, rel=0.03)
    assert np.corrcoef(theta, rho)[0, 1] == pytest.approx(found.correlation, abs=0.03)


@pytest.mark.parametrize(("ra", "dec"), [(231.5, 41.2), (0.001, -75.0), (100.0, 85.0)])
def test_the_list_counts_theta_from_the_north_of_2000(ra, dec):
    """The turn is the one that reduction gives to a measure of date, precession taken off."""
    a = Place(ra, dec, 2000.0, pm_ra_mas_yr=900.0, pm_dec_mas_yr=-400.0)
    b = Place(*beside(ra, dec, 2.0, 1.0), 2000.0, pm_ra_mas_yr=900.0, pm_dec_mas_yr=-400.0)
    found = between(a, b, 1950.0)
    rows = Measures.from_columns(
        {"epoch": [1950.0], "theta": [10.0], "equinox": ["date"]}
    )
    there = ra - 50.0 * 0.9 / 3600.0 / np.cos(np.radians(dec)), dec + 50.0 * 0.4 / 3600.0
    still = reduce_to_j2000(rows, there[0] % 360.0, there[1])
    moving = reduce_to_j2000(rows, ra, dec, 900.0, -400.0)
    turn = moving.theta[0] - still.theta[0]
    assert found.meridian_turn == pytest.approx(turn, rel=1e-3)
    # the textbooks' mu_alpha sin(delta) (2000 - t), with mu_alpha = 0.9 arcsec / cos(delta)
    textbook = 50.0 * 0.9 / 3600.0 * np.tan(np.radians(dec))
    assert found.meridian_turn == pytest.approx(textbook, rel=0.03)
    row = found.measures("Catalogue 3")
    assert row.theta[0] == pytest.approx((found.theta + found.meridian_turn) % 360.0)
    assert row.theta_obs[0] == found.theta
    assert (row.technique[0], row.equinox[0]) == ("space", "J2000")


def test_what_cannot_be_is_refused():
    here = Place(10.0, 20.0, 2000.0, 0.1, 0.1)
    there = Place(10.001, 20.0, 2000.0, 0.1, 0.1)
    with pytest.raises(InputError, match="at the same place"):
        between(here, Place(10.0, 20.0, 2000.0))
    with pytest.raises(InputError, match="opposite sides"):
        between(here, Place(190.0, -20.0, 2000.0))
    with pytest.raises(InputError, match="stands at the pole"):
        between(Place(0.0, 90.0, 2000.0), there)
    with pytest.raises(InputError, match="A has no proper motion, so its place at 2016"):
        between(here, there, 2016.0)
    with pytest.raises(InputError, match="say for which epoch"):
        between(here, Place(10.001, 20.0, 2016.0))
    with pytest.raises(InputError, match="B has no epoch"):
        between(here, Place(10.001, 20.0))
    with pytest.raises(InputError, match="dec_deg: nan is not a finite number"):
        Place(10.0, float("nan"), 2000.0)
    with pytest.raises(InputError, match="not on the sky"):
        Place(360.0, 0.0, 2000.0)
    with pytest.raises(InputError, match="only one of ra_err_mas and dec_err_mas"):
        Place(10.0, 20.0, 2000.0, 0.1)
    with pytest.raises(InputError, match="ra_err_mas: 0 is not a standard deviation"):
        Place(10.0, 20.0, 2000.0, 0.0, 0.1)
    with pytest.raises(InputError, match="correlation: 1 is not between"):
        Place(10.0, 20.0, 2000.0, 0.1, 0.1, 1.0)
    with pytest.raises(InputError, match="a place has no colour"):
        between({"ra": 1.0, "dec": 2.0, "colour": 3.0}, here)


def test_what_is_not_known_is_said():
    a = Place(10.0, 20.0, 2000.0, 0.1, 0.1, 0.0, 5.0, 5.0)
    b = Place(10.001, 20.0, 2000.0, 0.1, 0.1, 0.0, 5.0, 5.0, 0.1, 0.1)
    assert between(a, b).notes == ()
    assert between(a, b, 2010.0).notes == (
        "the proper motion of A brings no errors: those of the measure are lower limits",
    )
    bare = between(Place(10.0, 20.0, 2000.0), b)
    assert bare.theta_err is None and bare.rho_err is None and bare.correlation is None
    assert bare.notes == ("the position of A brings no errors, so the measure has none",)
    assert "hardly apart" in between(b, Place(10.001, 20.00000005, 2000.0, 0.1, 0.1)).notes[0]
    assert "of one pair?" in between(b, Place(10.5, 20.0, 2000.0, 0.1, 0.1)).notes[0]


def test_units_of_astropy_and_words_are_taken():
    plain = between(
        Place(230.801292, 30.287833, 2016.0, 0.05, 0.04), Place(230.8015, 30.288, 2016.0, 0.1, 0.1)
    )
    typed = between(
        {"ra": 230.801292 * u.deg, "dec": "30.287833", "epoch": Time(2016.0, format="jyear",
         scale="tt"), "ra_err_mas": 50.0 * u.uas, "dec_err_mas": 0.04},
        {"ra": 230.8015 * u.deg, "dec": 30.288 * u.deg, "epoch": "2016.0", "ra_err_mas": 0.1,
         "dec_err_mas": 0.1},
    )  # fmt: skip
    assert (typed.theta, typed.theta_err, typed.rho_err) == pytest.approx(
        (plain.theta, plain.theta_err, plain.rho_err)
    )
