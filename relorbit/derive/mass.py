"""The total mass, and how much each source of error has in it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from relorbit.derive.ephemeris import AnyOrbit, elements_and_uncertainty
from relorbit.orbit.regular import campbell_covariance
from relorbit.orbit.third_law import (
    TotalMass,
    axis_cubed_over_period_squared,
    mass_from_axis,
    total_mass,
)

__all__ = ["ErrorSource", "MassBudget", "component_masses", "mass_budget", "mass_from_axis"]


@dataclass(frozen=True)
class ErrorSource:
    """One source of the mass's error.

    Attributes
    ----------
    name : str
    sigma : float
        Standard deviation of the mass from this source alone, solar masses.
    share : float
        Its share of the variance; the correlation of a and P may take some away (below 0).
    """

    name: str
    sigma: float
    share: float


@dataclass(frozen=True)
class MassBudget:
    """The total mass with the sources of its error.

    Attributes
    ----------
    mass : TotalMass
    axis_cubed_over_period_squared : (float, float or None), arcsec^3/yr^2 and its error.
    semimajor_axis_au : float
    sources : tuple of ErrorSource
        "semimajor axis", "period", "correlation of the two" and "parallax", those that are known.
    correlation : float or None
        Correlation coefficient of a and P.
    """

    mass: TotalMass
    axis_cubed_over_period_squared: tuple[float, float | None]
    semimajor_axis_au: float
    sources: tuple[ErrorSource, ...]
    correlation: float | None

    def to_dict(self) -> dict[str, Any]:
        value, sigma = self.axis_cubed_over_period_squared
        return {
            "schema": "relorbit/mass/1",
            "mass_total": self.mass.to_dict(),
            "sigma_orbit": self.mass.sigma_orbit,
            "sigma_parallax": self.mass.sigma_parallax,
            "axis_cubed_over_period_squared": {"value": value, "sigma": sigma},
            "semimajor_axis_au": self.semimajor_axis_au,
            "correlation_a_P": self.correlation,
            "sources": [vars(source) for source in self.sources],
        }


def mass_budget(
    orbit: AnyOrbit, parallax_mas: float, parallax_err_mas: float | None = None
) -> MassBudget:
    """Total mass of an orbit and what its error is made of.

    Parameters
    ----------
    orbit : Solution, RecordedOrbit or Elements
    parallax_mas, parallax_err_mas : float
        Milliarcseconds; the error None where unknown.

    Raises
    ------
    ValueError
        When the parallax is not above 0.

    Notes
    -----
    To first order, var M / M^2 = 9 var a/a^2 + 4 var P/P^2 - 12 cov(a, P)/(a P)
    + 9 var pi/pi^2.
    """
    elements, uncertainty = elements_and_uncertainty(orbit)
    mass = total_mass(elements, parallax_mas, parallax_err_mas, uncertainty)
    parts: list[tuple[str, float]] = []
    correlation = None
    if uncertainty is not None:
        covariance = campbell_covariance(elements, uncertainty)
        var_P = covariance[0, 0] / elements.P**2
        var_a = covariance[3, 3] / elements.a**2
        mixed = covariance[0, 3] / (elements.a * elements.P)
        parts = [("semimajor axis", 9.0 * var_a), ("period", 4.0 * var_P)]
        parts.append(("correlation of the two", -12.0 * mixed))
        if var_P > 0.0 and var_a > 0.0:
            correlation = float(mixed / np.sqrt(var_P * var_a))
    if parallax_err_mas is not None:
        parts.append(("parallax", 9.0 * (parallax_err_mas / parallax_mas) ** 2))
    whole = sum(variance for _, variance in parts)
    sources = tuple(
        ErrorSource(
            name,
            float(np.copysign(mass.value * np.sqrt(abs(variance)), variance)),
            float(variance / whole) if whole > 0.0 else 0.0,
        )
        for name, variance in parts
    )
    return MassBudget(
        mass,
        axis_cubed_over_period_squared(elements, uncertainty),
        elements.a * 1000.0 / parallax_mas,
        sources,
        correlation,
    )


def component_masses(mass_total: float, mass_ratio: float) -> tuple[float, float]:
    """Masses of primary and secondary from their sum and the ratio secondary/primary.

    Raises ValueError when the ratio is not above 0.
    """
    if not mass_ratio > 0.0:
        raise ValueError(f"a mass ratio is above 0, not {mass_ratio:g}")
    primary = mass_total / (1.0 + mass_ratio)
    return primary, mass_total - primary
