"""The two-body equation integrated in space and projected by astropy's sky coordinates.

Independent of this project: GM of the Sun, the au and the Julian year are astropy's, the orbit is
integrated by scipy's DOP853 from periastron (not solved by Kepler's equation), and the sky is a
sphere (`SkyCoord.position_angle` and `separation`).

What an orbit in the tangent plane leaves out is perspective: a companion nearer by z is seen wider
by z/d, and rho is an angle, not its tangent. theta, the bearing at the primary, has no such term.
So rho may differ by up to rho z/d: for a pair of 0.05 arcsec that is 2e-8 arcsec, far below what
anyone measures, for one of 7.5 arcsec 5e-4.
"""

import astropy.units as u
import numpy as np
import pytest
from astropy.constants import GM_sun
from astropy.coordinates import SkyCoord
from scipy.integrate import solve_ivp

from relorbit.orbit.elements import Elements, positions
from relorbit.orbit.third_law import mass_from_axis

GM = GM_sun.to_value(u.au**3 / u.yr**2)
ARCSEC = np.radians(1.0 / 3600.0)
MASS = 1.7  # solar, invented
PLACES = [(197.5, 17.5), (0.0001, -72.0), (310.0, 60.0)]  # (ra, dec) in degrees, invented
GEOMETRY = {
    "inclined": (0.45, 58.0, 35.0, 212.0),
    "retrograde": (0.45, 131.0, 160.0, 70.0),
    "ascending node beyond 180": (0.3, 40.0, 250.0, 300.0),
    "very eccentric": (0.9, 65.0, 110.0, 15.0),
    "edge-on": (0.5, 90.0, 75.0, 40.0),
    "circular": (0.0, 50.0, 20.0, 0.0),
    "circular and face-on": (0.0, 0.0, 0.0, 0.0),
    "face-on, backwards": (0.6, 180.0, 30.0, 100.0),
}


def turn(axis, degrees):
    """Matrix of the right-handed turn about axis 0 or 2."""
    c, s = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))
    if axis == 2:
        return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])
    return np.array([[1.0, 0.0, 0.0], [0.0, c, -s], [0.0, s, c]])


def integrated(a_au, e, i, node, omega, years):
    """Relative place (n, 3) in au: north, east, and along the line of sight.

    Periastron at year 0; turned by omega in the plane, i about the line of nodes and node about
    the line of sight, the turn being from north to east.
    """
    speed = np.sqrt(GM * MASS / a_au * (1.0 + e) / (1.0 - e))
    start = np.array([a_au * (1.0 - e), 0.0, 0.0, 0.0, speed, 0.0])

    def motion(_, state):
        r = state[:3]
        return np.concatenate([state[3:], -GM * MASS * r / np.linalg.norm(r) ** 3])

    path = solve_ivp(
        motion, (0.0, years[-1]), start, method="DOP853", t_eval=years, rtol=1e-13,
        atol=1e-13 * a_au,
    )  # fmt: skip
    assert path.success
    return (turn(2, node) @ turn(0, i) @ turn(2, omega) @ path.y[:3]).T


def on_the_sky(place_au, ra, dec, distance_au):
    """theta (degrees) and rho (arcsec) of the secondary, on the sphere."""
    alpha, delta = np.radians([ra, dec])
    out = np.array([np.cos(delta) * np.cos(alpha), np.cos(delta) * np.sin(alpha), np.sin(delta)])
    east = np.array([-np.sin(alpha), np.cos(alpha), 0.0])
    north = np.cross(out, east)
    there = distance_au * out + place_au @ np.stack([north, east, out])
    primary = SkyCoord(*(distance_au * out), representation_type="cartesian", unit="au")
    secondary = SkyCoord(*there.T, representation_type="cartesian", unit="au")
    primary, secondary = (SkyCoord(c.spherical.lon, c.spherical.lat) for c in (primary, secondary))
    return (
        primary.position_angle(secondary).to_value("deg"),
        primary.separation(secondary).to_value("arcsec"),
    )


def both(name, place, a_arcsec, a_au):
    """(theta, rho) from the sky and from `positions`, with the period and the distance."""
    e, i, node, omega = GEOMETRY[name]
    period = 2.0 * np.pi * np.sqrt(a_au**3 / (GM * MASS))
    distance_au = a_au / (a_arcsec * ARCSEC)
    years = np.sort(np.random.default_rng(7).uniform(0.0, 2.3 * period, 60))
    sky = on_the_sky(integrated(a_au, e, i, node, omega, years), *place, distance_au)
    elements = Elements(period, 2000.0, e, a_arcsec, i, node, omega)
    return sky, positions(elements, 2000.0 + years), period, distance_au


def perspective(name, a_arcsec):
    """Largest rho z/d in arcsec: r is a (1 + e) at most, z that times sin i; and 1e-9 besides."""
    e, i, *_ = GEOMETRY[name]
    return a_arcsec**2 * ARCSEC * (1.0 + e) ** 2 * np.sin(np.radians(i)) + 1e-9


@pytest.mark.parametrize("name", GEOMETRY)
@pytest.mark.parametrize("place", PLACES)
def test_integrated_orbit(name, place):
    (theta, rho), (theta_ours, rho_ours), *_ = both(name, place, 0.05, 11.0)
    gap = np.radians((theta_ours - theta + 180.0) % 360.0 - 180.0)
    # 1e-8 arcsec across: the integration and the double precision of right ascension
    assert np.abs(rho * gap).max() < 1e-8
    assert np.abs(rho_ours - rho).max() < perspective(name, 0.05)


def test_a_wide_pair_differs_by_the_perspective_alone():
    (theta, rho), (theta_ours, rho_ours), *_ = both("inclined", PLACES[0], 7.5, 20.0)
    gap = np.radians((theta_ours - theta + 180.0) % 360.0 - 180.0)
    assert np.abs(rho * gap).max() < 1e-7
    gap = np.abs(rho_ours - rho).max()
    # a tenth of the bound at the least: the perspective is really there
    assert 0.1 * perspective("inclined", 7.5) < gap < perspective("inclined", 7.5)


def test_the_mass_that_was_put_in_comes_out():
    """The period is the integrated one: after it the companion is back where it was."""
    *_, period, distance_au = both("very eccentric", PLACES[0], 0.05, 11.0)
    place = integrated(11.0, 0.9, 65.0, 110.0, 15.0, np.array([0.0, period]))
    # at periastron, 14 au a year: 1e-9 au is 2 milliseconds of time
    assert np.abs(place[1] - place[0]).max() < 1e-9
    parallax_mas = 1000.0 / (distance_au * ARCSEC)
    assert mass_from_axis(period, 0.05, parallax_mas) == pytest.approx(MASS, rel=1e-7)
