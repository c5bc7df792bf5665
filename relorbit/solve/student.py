"""Student's t as the likelihood of one value: its weights, and what they cost.

A residual r has a t distribution with `FREEDOM` degrees of freedom and scale k sigma (Lange,
Little & Taylor 1989, J. Am. Stat. Assoc. 84, 881, from memory). k is such that for Gaussian
errors the most likely sigma is their standard deviation: sigma means what it always means, and
the tails are only there for the slips.

One value in a hundred may also be a slip that lies anywhere: a level below the t distribution
(a mixture as of Box & Tiao 1968, Biometrika 55, 119, from memory). It changes nothing within some
eight sigma; far beyond, where the t distribution alone would leave a slip a residual pull on the
orbit and a share in its group's error, the value counts for nothing.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from math import gamma, pi, sqrt

import numpy as np

from relorbit.orbit.kepler import FloatArray

# Share of slips, and how many sigma wide the stretch is over which they lie: common practice, no
# published source
SLIPS, STRETCH = 0.01, 1000.0
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
        return (self.freedom + 1.0) / (self.core + z * z) * self.sound(z)

    @property
    def _level(self) -> float:
        """Density of slips over that of a value without residual."""
        half = 0.5 * (self.freedom + 1.0)
        peak = gamma(half) / gamma(0.5 * self.freedom) / sqrt(pi * self.core)
        return SLIPS / (1.0 - SLIPS) / STRETCH / peak

    def sound(self, z: FloatArray) -> FloatArray:
        """Probability that a value is no slip."""
        tail = (1.0 + z * z / self.core) ** (-0.5 * (self.freedom + 1.0))
        return tail / (tail + self._level)

    @property
    def full_weight(self) -> float:
        """The weight of a value without residual."""
        return (self.freedom + 1.0) / self.core

    def deviance(self, z: FloatArray) -> FloatArray:
        """Minus twice the logarithm of the likelihood, but for the scale; 0 at z = 0."""
        tail = (1.0 + z * z / self.core) ** (-0.5 * (self.freedom + 1.0))
        return -2.0 * np.log((tail + self._level) / (1.0 + self._level))


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
