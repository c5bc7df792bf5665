"""Kepler's third law as extended by Newton: the total mass of a pair."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np

from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import Uncertainty, axis_and_period_gradient, regular_from_elements

# Exact by definition: IAU 2015 resolution B3 (nominal solar mass parameter), IAU 2012 resolution
# B2 (au), and the Julian year. A test holds them against astropy.constants.
SUN_GM_M3_S2 = 1.3271244e20
AU_M = 149_597_870_700.0
JULIAN_YEAR_S = 31_557_600.0
# M = MASS_FACTOR (a/au)^3 / (P/yr)^2 in nominal solar masses; 1 within 7e-5
MASS_FACTOR = 4.0 * pi**2 * AU_M**3 / (SUN_GM_M3_S2 * JULIAN_YEAR_S**2)


def mass_from_axis(P: float, a: float, parallax_mas: float) -> float:
    """Total mass in solar masses from P (Julian years), a (arcsec) and the parallax (mas).

    Raises ValueError when the parallax is not above 0.
    """
    if not parallax_mas > 0.0:
        raise ValueError(f"a mass needs a parallax above 0 mas, not {parallax_mas:g}")
    return MASS_FACTOR * (a * 1000.0 / parallax_mas) ** 3 / P**2


@dataclass(frozen=True)
class TotalMass:
    """The dynamical total mass and where its error comes from.

    Attributes
    ----------
    value : float, solar masses.
    sigma : float or None
        One standard deviation of everything that is known; None where neither error is known.
    sigma_orbit : float or None
        The part from a^3/P^2, with the correlation of a and P.
    sigma_parallax : float or None
        The part from the parallax.
    """

    value: float
    sigma: float | None
    sigma_orbit: float | None
    sigma_parallax: float | None

    def to_dict(self) -> dict[str, float | None]:
        return {"value": self.value, "sigma": self.sigma}


def total_mass(
    elements: Elements,
    parallax_mas: float,
    parallax_err_mas: float | None = None,
    uncertainty: Uncertainty | None = None,
) -> TotalMass:
    """Total mass with its error, to first order in the errors of a^3/P^2 and the parallax."""
    value = mass_from_axis(elements.P, elements.a, parallax_mas)
    orbit = parallax = None
    if uncertainty is not None:
        u = regular_from_elements(elements, uncertainty.reference_epoch)
        gradient = axis_and_period_gradient(u)
        orbit = value * float(np.sqrt(max(gradient @ uncertainty.covariance @ gradient, 0.0)))
    if parallax_err_mas is not None:
        parallax = value * 3.0 * parallax_err_mas / parallax_mas
    parts = [part for part in (orbit, parallax) if part is not None]
    sigma = float(np.hypot.reduce(parts)) if parts else None
    return TotalMass(value, sigma, orbit, parallax)


def axis_cubed_over_period_squared(
    elements: Elements, uncertainty: Uncertainty | None
) -> tuple[float, float | None]:
    """a^3/P^2 (arcsec^3/yr^2) and its standard deviation: far better known than a or P alone."""
    value = elements.a**3 / elements.P**2
    if uncertainty is None:
        return value, None
    u = regular_from_elements(elements, uncertainty.reference_epoch)
    gradient: FloatArray = axis_and_period_gradient(u)
    return value, value * float(np.sqrt(max(gradient @ uncertainty.covariance @ gradient, 0.0)))
