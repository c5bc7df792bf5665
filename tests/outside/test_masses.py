"""Kepler's third law against published masses, the IAU's constants, and the Earth's orbit."""

import csv
from decimal import Decimal
from pathlib import Path

import numpy as np
import pytest
from astropy import constants
from astropy import units as u

from relorbit.orbit import third_law
from relorbit.orbit.third_law import MASS_FACTOR, mass_from_axis


def half_unit(printed):
    """Half a unit of the last digit of a printed number."""
    return 0.5 * 10.0 ** Decimal(printed).as_tuple().exponent


def range_of(P, a, parallax_mas):
    """Least and largest mass that round-off of the printed P, a and parallax allows."""
    dP, da, dp = half_unit(P), half_unit(a), half_unit(parallax_mas)
    P, a, parallax_mas = float(P), float(a), float(parallax_mas)
    low = mass_from_axis(P + dP, a - da, parallax_mas + dp)
    return low, mass_from_axis(P - dP, a + da, parallax_mas - dp)


@pytest.fixture(scope="module")
def rows():
    """Soederhjelm 1999, A&A 341, 121, tables 1, 3 and 4: all 209 rows with a mass sum."""
    lines = Path(__file__).with_name("mass_sums_1999.csv").read_text("utf-8").splitlines()
    found = list(csv.DictReader(line for line in lines if not line.startswith("#")))
    assert len(found) == 209
    return found


def agrees(row):
    low, high = range_of(row["P_yr"], row["a_arcsec"], row["parallax_mas"])
    slack = half_unit(row["mass_sum_msun"])
    return low - slack <= float(row["mass_sum_msun"]) <= high + slack


def ratio(row):
    P, a, parallax = (float(row[key]) for key in ("P_yr", "a_arcsec", "parallax_mas"))
    return mass_from_axis(P, a, parallax) / float(row["mass_sum_msun"])


def test_mass_sums_within_the_rounding_of_the_printed_figures(rows):
    """Some rows were derived from unrounded figures, which no rounding of the printed ones undoes.

    Counted once and held here: within the rounding are 29 of the 30 rows of table 1 (the other,
    HIP 7580, is off by 2.8 % of the mass), 22 of 40 of table 3 and 96 of 139 of table 4. Why the
    rest differ the paper does not say; they do so to both sides, and with the factor of the third
    law off by 1 % far fewer agree.
    """
    count = {t: sum(agrees(row) for row in rows if row["table"] == t) for t in ("1", "3", "4")}
    assert count == {"1": 29, "3": 22, "4": 96}
    assert [row["hip"] for row in rows if row["table"] == "1" and not agrees(row)] == ["7580"]


def test_the_rest_agree_within_the_published_errors(rows):
    """All but seven of the 209 within one standard deviation, and those within one and a half.

    Only the parallax and orbit errors are in it, and the printed P, a and parallax are the
    author's own solution, so this is closer than chance would have it: 1.5 is no widened 1.
    """
    off = {
        row["hip"] + row["component"]:
        abs(ratio(row) - 1.0) * 100.0 / float(row["mass_err_percent"])
        for row in rows
    }  # fmt: skip
    beyond = {hip for hip, value in off.items() if value > 1.0}
    assert beyond == {"46404", "51986", "72659", "101955", "102782", "104887", "113048"}
    assert max(off.values()) < 1.5


def test_no_bias_of_the_mass_sums(rows):
    """The median ratio is free of the odd rows and pins the factor a hundred times closer."""
    ratios = np.array([ratio(row) for row in rows])
    assert np.median(ratios) == pytest.approx(1.0, abs=0.003)
    assert np.median(ratios[[row["table"] == "1" for row in rows]]) == pytest.approx(1.0, abs=0.003)


@pytest.mark.parametrize(
    ("P", "a", "parallax_arcsec", "mass", "published", "within"),
    [
        # Procyon, Bond et al. 2015, ApJ 813, 106; their own errors are near 1 %
        ("40.840", "4.3075", "0.28456", "2.080", 1.478 + 0.592, 0.01),
        # Sirius, Bond et al. 2017, ApJ 840, 70 (their P is 50.13): 2.063 +- 0.023, 1.018 +- 0.011
        ("50.090", "7.50", "0.37921", "3.08", 2.063 + 1.018, 0.01),
        # 70 Ophiuchi, Pourbaix 2000, A&AS 145, 215; two decimals printed
        ("88.38", "4.554", "0.19557", "1.616", 0.90 + 0.70, 0.02),
        # zeta Herculis, Morel et al. 2001, A&A 379, 245
        ("34.45", "1.33", "0.09332", "2.44", 1.45 + 0.98, 0.01),
        # xi Bootis, two decimals printed
        ("151.505", "4.9044", "0.14898", "1.554", 0.90 + 0.66, 0.01),
        # gamma Virginis, one decimal printed, 0.1 for the two; and 1 % of the parallax, which the
        # source of the sum need not share, is 3 % of the mass
        ("169.104", "3.639", "0.08558", "2.69", 1.4 + 1.4, 0.05),
    ],
)
def test_masses_of_well_known_pairs(P, a, parallax_arcsec, mass, published, within):
    ours = mass_from_axis(float(P), float(a), 1000.0 * float(parallax_arcsec))
    assert ours == pytest.approx(float(mass), abs=half_unit(mass) * 1.2)
    assert ours == pytest.approx(published, rel=within)


def test_constants_are_those_of_the_iau():
    """IAU 2015 resolution B3, 2012 resolution B2, as astropy holds them."""
    assert constants.GM_sun.to_value("m3/s2") == third_law.SUN_GM_M3_S2
    assert constants.au.to_value("m") == third_law.AU_M
    assert (1.0 * u.yr).to_value("s") == third_law.JULIAN_YEAR_S
    factor = 4.0 * np.pi**2 * constants.au**3 / (constants.GM_sun * u.yr**2)
    assert factor.to_value(u.one) == pytest.approx(MASS_FACTOR, rel=1e-14)


def test_the_earths_orbit_weighs_one_sun():
    """One au in one Julian year is 1.00004: Gauss's year of a massless planet at 1 au is longer.

    With the sidereal year of 365.256363 d and the Earth's mean distance of 1.000001018 au (both
    from memory) the Sun, the Earth and the Moon weigh 1 within 1e-5, of which 3e-6 is the Earth.
    """
    at_one_parsec = 1000.0
    assert mass_from_axis(1.0, 1.0, at_one_parsec) == pytest.approx(1.0, abs=4e-5)
    assert mass_from_axis(1.0, 1.0, at_one_parsec) == pytest.approx(
        (365.2568983 / 365.25) ** 2, abs=2e-9
    )  # the Gaussian year, 365.2568983 d, from memory
    sidereal = 365.256363 / 365.25
    assert mass_from_axis(sidereal, 1.000001018, at_one_parsec) == pytest.approx(1.0, abs=1e-5)


def test_the_mass_scales_as_the_law_says():
    one = mass_from_axis(10.0, 1.0, 50.0)
    assert mass_from_axis(10.0, 2.0, 50.0) == pytest.approx(8.0 * one, rel=1e-14)
    assert mass_from_axis(20.0, 1.0, 50.0) == pytest.approx(one / 4.0, rel=1e-14)
    assert mass_from_axis(10.0, 1.0, 25.0) == pytest.approx(8.0 * one, rel=1e-14)


@pytest.mark.parametrize("parallax_mas", [0.0, -3.0, float("nan")])
def test_a_mass_needs_a_parallax(parallax_mas):
    message = f"^a mass needs a parallax above 0 mas, not {parallax_mas:g}$"
    with pytest.raises(ValueError, match=message):
        mass_from_axis(10.0, 1.0, parallax_mas)
