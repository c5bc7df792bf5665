"""Student's t as the likelihood of one value: its weights, and what they cost.

A residual r has a t distribution with `FREEDOM` degrees of freedom and scale k sigma (Lange,
Little & Taylor 1989, J. Am. Stat. Assoc. 84, 881, from memory). k is such that for Gaussian
errors the most likely sigma is their standard deviation: sigma means what it always means, and
the tails are only there for the slips.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np

from relorbit.orbit.kepler import FloatArray

FREEDOM = 5.0  # degrees of freedom of Student's t: the heavy tail that lets a slip go


@dataclass(frozen=True)
class Student:
    """Constants of the likelihood.

    Attributes
    ----------
    freedom : float
    core : float
        freedom k^2.
    mean_weight : float
        Mean weight of a Gaussian value.
    variance : float
        Variance of an estimate under Gaussian errors over that of least squares: psi^2 / psi'^2.
    """

    freedom: float
    core: float
    mean_weight: float
    variance: float

    def weight(self, z: FloatArray) -> FloatArray:
        """What a value counts for, from its residual in sigma; z^2 weight(z) averages to 1."""
        return (self.freedom + 1.0) / (self.core + z * z)

    @property
    def full_weight(self) -> float:
        """The weight of a value without residual."""
        return (self.freedom + 1.0) / self.core

    def deviance(self, z: FloatArray) -> FloatArray:
        """Minus twice the logarithm of the likelihood, but for the scale; 0 at z = 0."""
        return (self.freedom + 1.0) * np.log1p(z * z / self.core)


@cache
def student(freedom: float = FREEDOM) -> Student:
    """The constants for so many degrees of freedom."""
    z = np.linspace(-12.0, 12.0, 20001)
    density = np.exp(-0.5 * z * z)
    density /= density.sum()
    low, high = 1e-3, freedom + 1.0
    for _ in range(60):
        core = 0.5 * (low + high)
        mean = (density * (freedom + 1.0) * z * z / (core + z * z)).sum()
        low, high = (core, high) if mean > 1.0 else (low, core)
    weight = (freedom + 1.0) / (core + z * z)
    slope = (freedom + 1.0) * (core - z * z) / (core + z * z) ** 2
    variance = (density * (weight * z) ** 2).sum() / (density * slope).sum() ** 2
    return Student(freedom, core, float((density * weight).sum()), float(variance))
