"""Observed minus computed, for every measure of a pair."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements, positions
from relorbit.orbit.kepler import FloatArray
from relorbit.solve.observations import complete_errors


@dataclass(frozen=True)
class Residuals:
    """O-C of the measures against an orbit; every array has shape (n,), NaN where not measured.

    Attributes
    ----------
    epoch : Julian years.
    theta, rho : observed (a flip applied), degrees and arcsec.
    theta_computed, rho_computed : the orbit's place at each epoch.
    d_theta, d_rho : observed minus computed, degrees in [-180, 180) and arcsec.
    arc : rho_computed times d_theta, arcsec: the residual across the direction of the pair.
    theta_err, rho_err : the errors the fit uses, degrees and arcsec, defaults filled in.
    technique, observer : of each measure.
    used : False for a row not fitted.
    """

    epoch: FloatArray
    theta: FloatArray
    rho: FloatArray
    theta_computed: FloatArray
    rho_computed: FloatArray
    d_theta: FloatArray
    d_rho: FloatArray
    arc: FloatArray
    theta_err: FloatArray
    rho_err: FloatArray
    technique: NDArray[np.str_]
    observer: NDArray[np.str_]
    used: NDArray[np.bool_]

    def __len__(self) -> int:
        return self.epoch.size

    @property
    def arc_err(self) -> FloatArray:
        """The error of `arc`, arcsec."""
        return self.rho_computed * np.radians(self.theta_err)

    @property
    def theta_in_sigma(self) -> FloatArray:
        return self.d_theta / self.theta_err

    @property
    def rho_in_sigma(self) -> FloatArray:
        return self.d_rho / self.rho_err

    @property
    def chi2(self) -> float:
        """Sum of squares of the standardised residuals of the rows used."""
        both = np.concatenate([self.theta_in_sigma[self.used], self.rho_in_sigma[self.used]])
        return float(np.nansum(both**2))

    def by_technique(self) -> list[TechniqueResiduals]:
        """A summary for each technique that has measures in use."""
        names = np.unique(self.technique[self.used])
        return [_summary(self, str(name)) for name in names]

    def to_dict(self) -> dict[str, Any]:
        rows = []
        for k in range(len(self)):
            row: dict[str, Any] = {}
            for name in (
                "epoch", "theta", "rho", "theta_computed", "rho_computed",
                "d_theta", "d_rho", "arc", "theta_err", "rho_err",
            ):  # fmt: skip
                value = float(getattr(self, name)[k])
                row[name] = value if np.isfinite(value) else None
            row["technique"], row["observer"] = str(self.technique[k]), str(self.observer[k])
            row["used"] = bool(self.used[k])
            rows.append(row)
        return {"schema": "relorbit/residuals/1", "rows": rows}


@dataclass(frozen=True)
class TechniqueResiduals:
    """What the residuals of one technique say; None where nothing was measured.

    Attributes
    ----------
    technique : str
    measures : int, rows used
    rms_across, rms_along : root mean square residual, arcsec
    chi2 : float
    numbers : int, values fitted
    """

    technique: str
    measures: int
    rms_across: float | None
    rms_along: float | None
    chi2: float
    numbers: int


def _summary(residuals: Residuals, technique: str) -> TechniqueResiduals:
    which = residuals.used & (residuals.technique == technique)

    def rms(values: FloatArray) -> float | None:
        values = values[which & np.isfinite(values)]
        return float(np.sqrt(np.mean(values**2))) if values.size else None

    both = np.concatenate([residuals.theta_in_sigma[which], residuals.rho_in_sigma[which]])
    return TechniqueResiduals(
        technique, int(which.sum()), rms(residuals.arc), rms(residuals.d_rho),
        float(np.nansum(both**2)), int(np.isfinite(both).sum()),
    )  # fmt: skip


def residuals(
    elements: Elements, measures: Measures, used: NDArray[np.bool_] | None = None
) -> Residuals:
    """O-C of every measure against an orbit.

    Parameters
    ----------
    elements : Elements
    measures : Measures, n rows
    used : bool array, shape (n,), optional
        Rows that count as used; by default those in use.
    """
    theta_computed, rho_computed = positions(elements, measures.epoch)
    theta = measures.theta_effective
    d_theta = np.remainder(theta - theta_computed + 180.0, 360.0) - 180.0
    theta_err, rho_err, _ = complete_errors(measures)
    return Residuals(
        measures.epoch, theta, measures.rho, theta_computed, rho_computed,
        d_theta, measures.rho - rho_computed, rho_computed * np.radians(d_theta),
        theta_err, rho_err, measures.technique, measures.observer,
        measures.use.copy() if used is None else used,
    )  # fmt: skip
