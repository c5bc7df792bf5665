"""Turn of the position angle by precession and proper motion, against astropy and PyMeeus.

The published form is theta_2000 = theta_t + (0.0055675 sin(alpha) sec(delta) +
mu_alpha sin(delta)) (2000 - t), degrees and years, in the textbooks of visual double stars.
"""

import numpy as np
import pytest
from astropy import units as u
from astropy.coordinates import FK5, Distance, SkyCoord
from astropy.time import Time

from relorbit.measures.reduction import reduce_to_j2000
from relorbit.measures.table import Measures

MAS = 1 / 3.6e6
PLACES = [(230.801, 30.288), (12.276, 57.815), (100.0, -60.0), (0.5, 5.0), (180.0, 85.0),
          (300.0, -88.0)]  # fmt: skip


def turned(year, ra, dec, *motion, theta=0.0, equinox="date"):
    one = Measures.from_columns({"epoch": [year], "theta": [theta], "equinox": [equinox]})
    return (reduce_to_j2000(one, ra, dec, *motion).theta[0] - theta + 180) % 360 - 180


def angle(star, other):
    """Position angle from unit vectors through the bearing on the sphere, degrees."""
    ra, dec, ra2, dec2 = (v.to_value(u.rad) for v in (star.ra, star.dec, other.ra, other.dec))
    y = np.sin(ra2 - ra) * np.cos(dec2)
    x = np.cos(dec) * np.sin(dec2) - np.sin(dec) * np.cos(dec2) * np.cos(ra2 - ra)
    return np.rad2deg(np.arctan2(y, x))


@pytest.mark.parametrize(
    ("year", "ra", "dec", "change"),
    [
        # Computed once with astropy's FK5 for 1850 to 2000 and 1900 to 2000, printed to 0.0001 deg.
        (1850.0, 230.801, 30.288, -0.7434),
        (1850.0, 12.276, 57.815, +0.3009),
        (1900.0, 100.0, -60.0, +1.0957),
    ],
)
def test_recorded_changes_of_precession(year, ra, dec, change):
    assert turned(year, ra, dec) == pytest.approx(change, abs=3e-4)


@pytest.mark.parametrize(("ra", "dec"), PLACES)
@pytest.mark.parametrize("year", [1700.0, 1850.0, 1950.0, 2050.0])
def test_precession_against_astropy_fk5(year, ra, dec):
    """The direction to a point 1 arcsec off, before and after a change of equinox by astropy."""
    old = FK5(equinox=Time(year, format="jyear", scale="tt"))
    star = SkyCoord(ra * u.deg, dec * u.deg, frame=FK5(equinox="J2000")).transform_to(old)
    for theta in (20.0, 200.0):
        other = star.directional_offset_by(theta * u.deg, 1 * u.arcsec)
        both = [c.transform_to(FK5(equinox="J2000")) for c in (star, other)]
        astropy_turn = (angle(*both) - angle(star, other) + 180) % 360 - 180
        # FK5's precession (IAU 1976) differs from IAU 2006 by 3 mas a year: 5e-4 deg in three
        # centuries, times up to sec(delta); the offset of 1 arcsec is good to 1e-7 deg or so.
        ours = turned(year, ra, dec, theta=theta)
        scale = 1 / np.cos(np.deg2rad(dec))
        assert ours == pytest.approx(astropy_turn, abs=3e-6 * abs(year - 2000) * scale + 1e-6)


@pytest.mark.parametrize(
    ("ra", "dec", "pm_ra", "pm_dec"),
    [(12.276, 57.815, 1086.7, 0.0), (12.276, 57.815, 1086.7, -559.4), (269.45, 4.69, -802.8,
      10362.5), (40.0, -80.0, 3000.0, -2000.0), (359.999, 70.0, 5000.0, 1000.0)],
)  # fmt: skip
@pytest.mark.parametrize("year", [1700.0, 1900.0, 2100.0])
def test_proper_motion_against_astropy_space_motion(ra, dec, pm_ra, pm_dec, year):
    """Two stars that move as one body through space: astropy moves both, theta is compared.

    The second star's velocity is the first's, so that the offset vector stays fixed in space;
    both are moved by `apply_space_motion`, at J2000 axes throughout.
    """
    distance = Distance(parallax=100 * u.mas)
    primary = SkyCoord(
        ra * u.deg, dec * u.deg, distance, pm_ra_cosdec=pm_ra * u.mas / u.yr,
        pm_dec=pm_dec * u.mas / u.yr, radial_velocity=0 * u.km / u.s, frame="icrs",
        obstime=Time(2000.0, format="jyear", scale="tdb"),
    )  # fmt: skip
    when = Time(year, format="jyear", scale="tdb")
    then = primary.apply_space_motion(when)
    secondary = then.directional_offset_by(65 * u.deg, 1 * u.arcsec)
    offset = secondary.cartesian.xyz.value - then.cartesian.xyz.value / then.distance.pc
    way = then.cartesian.xyz.value / then.distance.pc, primary.cartesian.xyz.value / distance.pc
    # The offset is carried along the great circle by the one rotation that takes then to now.
    axis = np.cross(*way)
    sine, cosine = np.linalg.norm(axis), float(np.dot(*way))
    axis = axis / sine
    carried = offset * cosine + np.cross(axis, offset) * sine
    carried += axis * np.dot(axis, offset) * (1 - cosine)
    there = way[1] + carried
    now = SkyCoord(*there, representation_type="cartesian", frame="icrs").spherical
    now = SkyCoord(now.lon, now.lat)
    expected = angle(primary, now) - angle(then, secondary)
    # The row says it is at the equinox of its own epoch; take away precession alone.
    place = [then.ra.deg, then.dec.deg]
    ours = turned(year, ra, dec, pm_ra, pm_dec) - turned(year, *place)
    assert ours == pytest.approx(expected, abs=2e-6)
    assert abs(expected) > 1e-3


def test_recorded_turn_of_the_meridian():
    """+0.04794 deg in a century at (12.276, +57.815), 1.0867 arcsec/yr in right ascension.

    Later minus earlier, computed with the rectilinear motion of the J2000 position to 2100; a
    position angle of 2100 is therefore brought back by that much.
    """
    way = 108.67 / 3600 / np.cos(np.deg2rad(57.815))
    for year, sign in ((2100.0, -1), (1900.0, +1)):
        # Precession acts at the place of the epoch; taken away, the meridian's turn is left.
        still = turned(year, 12.276 - sign * way, 57.815)
        ours = turned(year, 12.276, 57.815, 1086.7, 0.0) - still
        assert ours == pytest.approx(sign * 0.04794, abs=3e-5)


@pytest.mark.parametrize(("ra", "dec"), [place for place in PLACES if place[1] < 84])
def test_precession_against_pymeeus(ra, dec):
    """Meeus, Astronomical Algorithms, ch. 21, by PyMeeus: a point 36 arcsec off is precessed.

    PyMeeus 0.5.12 returns cos(dec) for dec above 85 degrees; that place is left to astropy.
    """
    from pymeeus.Angle import Angle
    from pymeeus.Coordinates import precession_equatorial
    from pymeeus.Epoch import Epoch

    start = Epoch(2451545.0 - 100 * 365.25)
    size = 0.01

    def precessed(lon, lat):
        new = precession_equatorial(start, Epoch(2451545.0), Angle(lon), Angle(lat))
        return SkyCoord(float(new[0]) * u.deg, float(new[1]) * u.deg)

    old = FK5(equinox=Time(1900.0, format="jyear", scale="tt"))
    star = SkyCoord(ra * u.deg, dec * u.deg, frame=FK5(equinox="J2000")).transform_to(old)
    other = star.directional_offset_by(40 * u.deg, size * u.deg)
    both = precessed(star.ra.deg, star.dec.deg), precessed(other.ra.deg, other.dec.deg)
    expected = angle(*both) - angle(star, other)
    # PyMeeus keeps about 1e-9 deg, of an offset of 0.01 deg: 1e-5 deg; models differ as above.
    scale = 1 / np.cos(np.deg2rad(dec))
    assert turned(1900.0, ra, dec, theta=40.0) == pytest.approx(expected, abs=3e-4 * scale)


@pytest.mark.parametrize(("ra", "dec", "mu"), [(100.0, 40.0, 800.0), (250.0, -35.0, -1200.0)])
def test_the_textbook_formula_is_the_first_order(ra, dec, mu):
    """With the coordinates of the middle epoch its constant holds to 0.1 %."""
    year, rad = 1900.0, np.deg2rad
    middle = SkyCoord(ra * u.deg, dec * u.deg, frame=FK5(equinox="J2000")).transform_to(
        FK5(equinox=Time(1950.0, format="jyear", scale="tt"))
    )
    precession = 0.0055675 * np.sin(middle.ra.rad) / np.cos(middle.dec.rad) * (2000 - year)
    assert turned(year, ra, dec) == pytest.approx(precession, rel=2e-3)
    motion = mu * MAS / np.cos(rad(dec)) * np.sin(rad(dec)) * (2000 - year)
    ours = turned(year, ra, dec, mu, 0.0) - turned(year, ra, dec)
    assert ours == pytest.approx(motion, rel=2e-2)
