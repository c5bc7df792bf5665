"""The result of a fit: elements, covariance, residuals, alternatives, warnings."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from relorbit.measures.pair import RecordedOrbit
from relorbit.orbit.elements import NAMES, Elements, thiele_innes_from_campbell
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import Uncertainty, campbell_covariance
from relorbit.orbit.third_law import TotalMass, axis_cubed_over_period_squared
from relorbit.solve.residuals import Residuals
from relorbit.solve.weighing import NoiseGroup

SCHEMA = "relorbit/solution/1"


@dataclass(frozen=True)
class Alternative:
    """Another orbit that is a minimum of chi2 too."""

    elements: Elements
    chi2: float

    def to_dict(self) -> dict[str, Any]:
        return {"elements": self.elements.to_dict(), "chi2": self.chi2}


@dataclass(frozen=True)
class Notice:
    """Something the observer should know: a fixed code and a sentence."""

    code: str
    text: str

    def to_dict(self) -> dict[str, str]:
        return {"code": self.code, "text": self.text}


@dataclass(frozen=True)
class Solution:
    """The orbit that fits best, and what is known of it.

    Attributes
    ----------
    pair : str
        Name of the pair.
    elements : Elements
    uncertainty : Uncertainty
        Covariance in the regular coordinates, scaled by `error_scale` squared.
    chi2, dof : float, int
    error_scale : float
        The factor that the formal errors (from the errors of the measures alone) are multiplied
        by: the root of reduced chi2 where that exceeds 1, else 1.
    held : mapping of element name to value
    measures, used : int
        Rows in the pair, and rows fitted.
    residuals : Residuals
        One row for every measure of the pair, used or not.
    alternatives : tuple of Alternative, in rising order of chi2
    warnings : tuple of Notice
    mass_total : TotalMass or None
        None without a parallax.
    span : float
        Years covered by the measures fitted.
    noise : tuple of NoiseGroup
        What each group of measures is worth; empty where the errors were taken as given. Then
        chi2 is weighted (its mean is dof), and residuals hold the errors found.
    """

    pair: str
    elements: Elements
    uncertainty: Uncertainty
    chi2: float
    dof: int
    error_scale: float
    held: Mapping[str, float]
    measures: int
    used: int
    residuals: Residuals
    alternatives: tuple[Alternative, ...] = ()
    warnings: tuple[Notice, ...] = ()
    mass_total: TotalMass | None = None
    span: float = 0.0
    parallax_mas: float | None = None
    parallax_err_mas: float | None = None
    noise: tuple[NoiseGroup, ...] = ()
    _covariance: FloatArray = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        matrix = campbell_covariance(self.elements, self.uncertainty)
        for name in self.held:
            matrix[NAMES.index(name)] = matrix[:, NAMES.index(name)] = 0.0
        object.__setattr__(self, "_covariance", matrix)

    @property
    def covariance(self) -> FloatArray:
        """Covariance of (P, T, e, a, i, node, omega), shape (7, 7), scaled; degrees for angles.

        Zero for held elements, NaN for elements that do not exist (the node of a face-on orbit).
        """
        return self._covariance

    @property
    def sigma(self) -> dict[str, float | None]:
        """One standard deviation of each element, scaled; None where held or without meaning."""
        return self._sigma(1.0)

    @property
    def sigma_formal(self) -> dict[str, float | None]:
        """The same from the errors of the measures alone."""
        return self._sigma(1.0 / self.error_scale)

    @property
    def reduced_chi2(self) -> float:
        return self.chi2 / self.dof

    @property
    def axis_cubed_over_period_squared(self) -> tuple[float, float | None]:
        """a^3/P^2 (arcsec^3/yr^2) and its standard deviation."""
        return axis_cubed_over_period_squared(self.elements, self.uncertainty)

    def _sigma(self, scale: float) -> dict[str, float | None]:
        out: dict[str, float | None] = {}
        for slot, name in enumerate(NAMES):
            variance = self._covariance[slot, slot]
            # rounding leaves the variance of what is hardly determined below 0
            value = float(np.sqrt(variance)) * scale if variance >= 0.0 else np.nan
            # an angle unknown by more than half a turn is not known at all, nor such a T
            most = {"T": 0.5 * self.elements.P, "node": 90.0, "omega": 180.0, "i": 90.0}
            known = np.isfinite(value) and value <= most.get(name, np.inf)
            out[name] = value if known and name not in self.held else None
        return out

    def to_record(
        self, name: str, *, recorded: str = "", source: str = "", note: str = ""
    ) -> RecordedOrbit:
        """This orbit as one to keep with the pair, its errors included."""
        return RecordedOrbit(
            name,
            self.elements,
            self.sigma,
            self.uncertainty.reference_epoch,
            self.uncertainty.covariance,
            self.chi2,
            self.dof,
            recorded,
            source,
            note,
        )

    def to_dict(self) -> dict[str, Any]:
        """The JSON of ``relorbit solve --json``, schema relorbit/solution/1.

        `sigma` and `covariance` are the scaled ones, `sigma_formal` stands beside them.
        """
        value, error = self.axis_cubed_over_period_squared
        return {
            "schema": SCHEMA,
            "pair": self.pair,
            "measures": self.measures,
            "used": self.used,
            "chi2": self.chi2,
            "dof": self.dof,
            "reduced_chi2": self.reduced_chi2,
            "error_scale": self.error_scale,
            "elements": self.elements.to_dict(),
            "sigma": self.sigma,
            "sigma_formal": self.sigma_formal,
            "held": dict(self.held),
            "thiele_innes": thiele_innes_from_campbell(self.elements).to_dict(),
            "covariance": {"order": list(NAMES), "matrix": plain_matrix(self.covariance)},
            "axis_cubed_over_period_squared": {"value": value, "sigma": error},
            "mass_total": None if self.mass_total is None else self.mass_total.to_dict(),
            "alternatives": [one.to_dict() for one in self.alternatives],
            "warnings": [one.to_dict() for one in self.warnings],
            "noise": [one.to_dict() for one in self.noise],
        }


def plain_matrix(matrix: FloatArray) -> list[list[float | None]]:
    """A matrix as lists, None for NaN, ready for JSON."""
    return [[float(x) if np.isfinite(x) else None for x in row] for row in matrix]
