"""Positions and constants from published elements, to the last digit printed.

Sources stand beside each figure. P in Julian years, T Julian year, a in arcsec, angles in degrees.
"""

from pathlib import Path

import numpy as np
import pytest

from relorbit.orbit.elements import Elements, positions, thiele_innes_from_campbell
from relorbit.orbit.kepler import eccentric_anomaly, true_anomaly

# Meeus, Astronomical Algorithms, ch. 57
ETA_CRB = Elements(41.623, 1934.008, 0.2763, 0.907, 59.025, 23.717, 219.907)
# Heintz 1990; the ephemeris is Meeus's exercise, from memory
GAMMA_VIR = Elements(168.68, 2005.13, 0.885, 3.697, 148.0, 36.9, 256.5)
# Pourbaix 2000, A&AS 145, 215
OPH_70 = Elements(88.38, 1895.94, 0.4992, 4.554, 121.16, 302.12, 14.0)
# elements and position as printed in the BAA Handbook 2025
XI_BOO = Elements(152.9614, 1909.6213, 0.51385, 4.93454, 140.453, 168.795, 25.492)


def test_eta_coronae_borealis_at_1980_step_by_step():
    """Meeus ch. 57; the fifth digits computed once from his elements."""
    mean = 360.0 * ((1980.0 - ETA_CRB.T) / ETA_CRB.P % 1.0)
    E = eccentric_anomaly(np.radians(mean), ETA_CRB.e)
    assert mean == pytest.approx(37.788, abs=5e-4)
    assert np.degrees(E) == pytest.approx(49.896, abs=5e-4)
    assert np.degrees(true_anomaly(E, ETA_CRB.e)) == pytest.approx(63.415, abs=5e-4)
    assert ETA_CRB.a * (1.0 - ETA_CRB.e * np.cos(E)) == pytest.approx(0.74557, abs=5e-6)
    theta, rho = positions(ETA_CRB, 1980.0)
    assert theta == pytest.approx(318.4243, abs=5e-5)
    assert rho == pytest.approx(0.41102, abs=5e-6)


def test_eta_coronae_borealis_by_another_author():
    """Duffett-Smith, for 1980 January 1: 318.5 and 0.41 (his elements are a little different)."""
    theta, rho = positions(ETA_CRB, 1980.0)
    assert theta == pytest.approx(318.5, abs=0.1)
    assert rho == pytest.approx(0.41, abs=0.005)


@pytest.mark.parametrize(
    ("epoch", "theta", "rho"),
    [(1980, 296.65, 3.78), (1988, 288.70, 3.04), (1996, 274.41, 2.08), (2000, 259.34, 1.45),
     (2004, 208.67, 0.59), (2008, 35.54, 1.04)],
)  # fmt: skip
def test_gamma_virginis_through_periastron(epoch, theta, rho):
    """Meeus ch. 57, exercise, from memory."""
    ours = positions(GAMMA_VIR, epoch)
    assert ours[0] == pytest.approx(theta, abs=0.005)
    assert ours[1] == pytest.approx(rho, abs=0.005)


def test_xi_bootis():
    theta, rho = positions(XI_BOO, 2024.333)
    assert theta == pytest.approx(290.9, abs=0.05)
    assert rho == pytest.approx(4.97, abs=0.005)


def test_the_70_ophiuchi_ephemeris_to_its_last_digit():
    """Every row of a published observatory ephemeris, from the elements of Pourbaix 2000."""
    lines = Path(__file__).with_name("ephemeris_70oph.csv").read_text("utf-8").splitlines()
    rows = [line.split(",") for line in lines if line[0].isdigit()]
    assert len(rows) == 19
    for epoch, theta, rho in rows:
        ours = positions(OPH_70, float(epoch))
        for value, printed in zip(ours, (theta, rho), strict=True):
            digits = len(printed.partition(".")[2])
            assert f"{value:.{digits}f}" == printed, f"{epoch}: {value} for {printed}"


@pytest.mark.parametrize(
    ("elements", "constants"),
    [
        (ETA_CRB, (-0.516533, -0.554023, 0.676761, -0.093791)),
        # Procyon, Bond et al. 2015, ApJ 813, 106: a, i, node and omega
        (
            Elements(40.840, 1968.0, 0.4, 4.3075, 31.408, 100.683, 89.23),
            (-3.623042, -0.624560, 0.749882, -4.241618),
        ),
        (OPH_70, (1.866608, -4.045477, -2.522193, -0.282575)),
    ],
)
def test_thiele_innes_constants(elements, constants):
    """Computed apart from this code from the published elements, x north and y east."""
    ours = thiele_innes_from_campbell(elements)
    assert pytest.approx(constants, abs=5e-7) == (ours.A, ours.B, ours.F, ours.G)


def test_the_other_node_is_the_same_sky_path():
    """70 Ophiuchi is also published with node 121.7 and omega 193.4 (rounded, other solution)."""
    other = Elements(88.38, 1895.94, 0.4992, 4.554, 121.16, 122.12, 194.0)
    epochs = np.linspace(1900.0, 2000.0, 41)
    for ours, theirs in zip(positions(OPH_70, epochs), positions(other, epochs), strict=True):
        assert ours == pytest.approx(theirs, rel=1e-12)
    assert OPH_70.folded().node == pytest.approx(122.12)
    assert OPH_70.folded().omega == pytest.approx(194.0)
