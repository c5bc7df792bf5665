"""What is believed of an orbit before the measures speak."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from relorbit.errors import InputError
from relorbit.measures.pair import Pair
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.third_law import MASS_FACTOR
from relorbit.solve.observations import Observations
from relorbit.solve.search import period_grid

ECCENTRICITIES, CONSTANTS = ("uniform", "thermal"), ("isotropic", "flat")
LEAST_AXIS, MOST_AXIS = 1e-3, 1e3  # of the median and of the largest separation
WORDS = "default, thermal, flat-constants, mass=VALUE:ERROR"


@dataclass(frozen=True)
class Prior:
    """The prior of an orbit: uniform in ln P and in the phase at mid-epoch, and what is said here.

    Attributes
    ----------
    eccentricity : "uniform" or "thermal"
        f(e) = 1, or f(e) = 2 e (Jeans 1919, MNRAS 79, 408, from memory).
    constants : "isotropic" or "flat"
        Isotropic in orientation and uniform in ln a, which on the Thiele-Innes constants is a
        weight 1/(a^4 sin^2 i); or uniform in the constants themselves (Lucy 2014).
    mass : (float, float) or None
        A total mass in solar masses and its standard deviation, which then takes the place of the
        uniform ln a; the pair must have a parallax.
    period_range : (float, float) or None
        Julian years; by default what the search looks at.
    axis_range : (float, float) or None
        Semimajor axes in arcsec; by default from a thousandth of the median separation to a
        thousand times the largest.
    """

    eccentricity: str = "uniform"
    constants: str = "isotropic"
    mass: tuple[float, float] | None = None
    period_range: tuple[float, float] | None = None
    axis_range: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        for name, allowed in (("eccentricity", ECCENTRICITIES), ("constants", CONSTANTS)):
            if getattr(self, name) not in allowed:
                raise InputError(
                    f"the prior of {name} is {' or '.join(allowed)}, not {getattr(self, name)!r}"
                )
        for name in ("period_range", "axis_range", "mass"):
            pair = getattr(self, name)
            if pair is None:
                continue
            first, second = (float(value) for value in pair)
            rising = second > first or name == "mass"
            if not (0.0 < first < math.inf and 0.0 < second < math.inf and rising):
                raise InputError(f"the prior's {name.replace('_', ' ')} {first:g}, {second:g}"
                                 " must be two numbers above 0"
                                 + ("" if name == "mass" else ", the smaller first"))  # fmt: skip
            object.__setattr__(self, name, (first, second))
        if self.mass is not None and self.constants == "flat":
            raise InputError("a mass and flat constants contradict each other: take one of the two")

    @classmethod
    def of(cls, given: Prior | str | None) -> Prior:
        """A prior from words with commas: thermal, flat-constants, mass=2.1:0.2; or as it is.

        Raises InputError for anything else.
        """
        if isinstance(given, Prior):
            return given
        prior = cls()
        for word in filter(None, (part.strip() for part in (given or "").split(","))):
            if word == "thermal":
                prior = replace(prior, eccentricity="thermal")
            elif word == "flat-constants":
                prior = replace(prior, constants="flat")
            elif word.startswith("mass="):
                prior = replace(prior, mass=_mass(word.removeprefix("mass=")))
            elif word != "default":
                raise InputError(f"{word!r} is not a prior; the words are {WORDS}")
        return prior

    def completed(self, pair: Pair, observations: Observations) -> Prior:
        """The same with its ranges spelled out for given measures.

        Raises InputError for a mass without a parallax.
        """
        if self.mass is not None and not (pair.parallax_mas and pair.parallax_mas > 0.0):
            raise InputError("a prior mass needs the parallax of the pair, above 0 mas")
        periods, axes = self.period_range, self.axis_range
        if periods is None:
            distinct = np.unique(np.round(observations.epoch, 3)).size
            grid = period_grid(observations.span, distinct)
            periods = float(grid[-1]), float(grid[0])
        if axes is None:
            rho = observations.sky_rho
            axes = LEAST_AXIS * float(np.median(rho)), MOST_AXIS * float(rho.max())
        return replace(self, period_range=periods, axis_range=axes)

    def log_density_of_shape(self, e: FloatArray) -> FloatArray:
        """ln of the density in (ln P, e, phase), within the ranges."""
        low, high = np.log(self.period_range)
        flat = -np.log(high - low)
        if self.eccentricity == "thermal":
            return flat + np.log(2.0 * np.maximum(e, 1e-300))
        return np.full_like(e, flat)

    def log_density_of_projection(
        self, large: NDArray[np.complex128], small: NDArray[np.complex128]
    ) -> FloatArray:
        """ln of the density in (Re alpha, Im alpha, Re beta, Im beta), but for that in ln a.

        Symmetric in alpha and beta, for p = |alpha| and q = |beta|: a = p + q, a^2 sin^2 i = 4 p q
        and d alpha d beta = p q dp dq d(angles) show that an isotropic prior of a density f in
        ln a is f/(4 pi^2 (p + q)^2 p q).
        """
        low, high = self.axis_range
        p, q = np.abs(large), np.abs(small)
        a = p + q
        with np.errstate(divide="ignore"):
            density = -np.log(4.0 * np.pi**2 * a * a * p * q)
        if self.constants == "flat":
            density = np.full_like(a, -np.log(np.pi**2 * (high**4 - low**4) / 6.0))
        return np.where((a >= low) & (a <= high), density, -np.inf)

    def log_density_of_axis(
        self, a: FloatArray, P: FloatArray, parallax_mas: FloatArray | None
    ) -> FloatArray | float:
        """ln of the density in ln a at given P; 0 where the constants are flat."""
        if self.constants == "flat":
            return 0.0
        if self.mass is None:
            return -float(np.log(np.log(self.axis_range[1] / self.axis_range[0])))
        value, sigma = self.mass
        mass = MASS_FACTOR * (1000.0 * a / parallax_mas) ** 3 / P**2
        # d M = 3 M d ln a
        gap = (mass - value) / sigma
        # what of the Gaussian lies above 0
        above = 0.5 * math.erfc(-value / (math.sqrt(2.0) * sigma))
        return np.log(3.0 * mass / (np.sqrt(2.0 * np.pi) * sigma * above)) - 0.5 * gap * gap

    def to_dict(self) -> dict[str, Any]:
        pairs = ("mass", "period_range", "axis_range")
        return {name: list(value) if name in pairs and value else value
                for name, value in vars(self).items()}  # fmt: skip

    def __str__(self) -> str:
        axis = "uniform in ln a"
        if self.mass is not None:
            axis = f"total mass {self.mass[0]:g} +/- {self.mass[1]:g}"
        shape = "e thermal" if self.eccentricity == "thermal" else "uniform in e"
        if self.constants == "flat":
            return f"uniform in ln P, phase and the Thiele-Innes constants, {shape}"
        return f"uniform in ln P and phase, {shape}, isotropic, {axis}"


def _mass(text: str) -> tuple[float, float]:
    value, colon, error = text.partition(":")
    try:
        if not colon:
            raise ValueError
        return float(value), float(error)
    except ValueError:
        raise InputError(
            f"a prior mass is written mass=VALUE:ERROR in solar masses, such as mass=2.1:0.2, "
            f"not {text!r}"
        ) from None
