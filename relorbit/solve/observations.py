"""What a fit needs of the measures: plain arrays in radians and arcsec, every error filled in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from relorbit.errors import Undetermined
from relorbit.measures.table import Measures
from relorbit.orbit.kepler import FloatArray

# Errors of one measure across and along the direction of the pair (arcsec), for rows that bring
# none: common practice, no published source. A mean of several nights gains their square root.
DEFAULT_ERRORS = {
    "eyepiece": (0.05, 0.08),
    "plate": (0.02, 0.02),
    "camera": (0.03, 0.03),
    "interferometer": (0.004, 0.004),
    "space": (0.003, 0.003),
    "unknown": (0.05, 0.08),
}
MOST_NIGHTS = 9.0  # more nights than this no longer help: common practice, no published source


@dataclass(frozen=True)
class Observations:
    """The measures used by a fit, in order of time. All arrays have shape (n,).

    Attributes
    ----------
    epoch : Julian years.
    theta, rho : radians and arcsec; 0 where missing.
    per_theta, per_rho : 1/sigma, in 1/radian and 1/arcsec; 0 where the value is missing.
    rows : index of each row in the pair's measures.
    assumed : True where an error is a default of `DEFAULT_ERRORS`.
    """

    epoch: FloatArray
    theta: FloatArray
    rho: FloatArray
    per_theta: FloatArray
    per_rho: FloatArray
    rows: NDArray[np.intp]
    assumed: NDArray[np.bool_]

    def __len__(self) -> int:
        return self.epoch.size

    @property
    def numbers(self) -> int:
        """How many values are fitted: one for each theta and each rho."""
        return int(np.count_nonzero(self.per_theta) + np.count_nonzero(self.per_rho))

    @property
    def span(self) -> float:
        """Years from the first to the last epoch."""
        return float(self.epoch[-1] - self.epoch[0]) if len(self) else 0.0

    @property
    def mean_epoch(self) -> float:
        """Weighted mean epoch, Julian year."""
        weight = self.sky_weight
        return float(np.average(self.epoch, weights=weight if weight.sum() > 0 else None))

    @property
    def sky_rho(self) -> FloatArray:
        """Separation of every row (arcsec), drawn through time where a row has none."""
        return _drawn_through(self.epoch, self.rho, self.per_rho > 0.0)

    @property
    def sky_weight(self) -> FloatArray:
        """Weight of a row with both values, 1/(sigma across sigma along); other rows 0."""
        across = self.per_theta / np.maximum(self.rho, 1e-9)
        return np.where((self.per_theta > 0) & (self.per_rho > 0), across * self.per_rho, 0.0)

    def select(self, which: NDArray) -> Observations:
        """The rows named by a mask or an index array."""
        return Observations(*(getattr(self, name)[which] for name in self.__dataclass_fields__))


def default_errors(measures: Measures, rho: FloatArray) -> tuple[FloatArray, FloatArray]:
    """sigma_theta (degrees) and sigma_rho (arcsec) of every row where it brings none itself.

    The technique's error, less by the root of the number of nights, and by the root of the row's
    weight relative to the median weight of the list. `rho` is the separation (arcsec) at which
    an error across the direction of the pair becomes an angle.
    """
    across = np.array([DEFAULT_ERRORS[name][0] for name in measures.technique], dtype=float)
    along = np.array([DEFAULT_ERRORS[name][1] for name in measures.technique], dtype=float)
    nights = np.where(np.isfinite(measures.nights), measures.nights, 1.0)
    gain = np.sqrt(np.clip(nights, 1.0, MOST_NIGHTS))
    weighted = np.isfinite(measures.weight) & (measures.weight > 0.0)
    if weighted.any():
        relative = measures.weight / np.median(measures.weight[weighted])
        gain = gain * np.sqrt(np.where(weighted, relative, 1.0))
    # the arc tangent keeps the angle's error below a right angle for the closest pairs
    return np.degrees(np.arctan2(across / gain, rho)), along / gain


def complete_errors(measures: Measures) -> tuple[FloatArray, FloatArray, NDArray[np.bool_]]:
    """sigma_theta (degrees) and sigma_rho (arcsec) of every row, and which hold a default.

    NaN where the value itself is missing.
    """
    has_theta, has_rho = measures.has_theta, measures.has_rho
    order = np.argsort(measures.epoch, kind="stable")
    rho = np.empty(len(measures))
    rho[order] = _drawn_through(measures.epoch[order], measures.rho[order], has_rho[order])
    theta_default, rho_default = default_errors(measures, rho)
    theta_err = np.where(np.isfinite(measures.theta_err), measures.theta_err, theta_default)
    rho_err = np.where(np.isfinite(measures.rho_err), measures.rho_err, rho_default)
    assumed = (has_theta & ~np.isfinite(measures.theta_err)) | (
        has_rho & ~np.isfinite(measures.rho_err)
    )
    return np.where(has_theta, theta_err, np.nan), np.where(has_rho, rho_err, np.nan), assumed


def _drawn_through(epoch: FloatArray, rho: FloatArray, known: NDArray[np.bool_]) -> FloatArray:
    """Separations with the gaps filled through time; 1 arcsec where none is known."""
    if not known.any():
        return np.ones(epoch.size)
    return np.where(known, rho, np.interp(epoch, epoch[known], rho[known]))


def observe(measures: Measures, epoch_range: tuple[float, float] | None = None) -> Observations:
    """The rows to fit, with errors for all.

    Parameters
    ----------
    measures : Measures
        Rows not in use are left out, and so are rows of weight zero.
    epoch_range : (float, float), optional
        Julian years; rows outside are left out.

    Raises
    ------
    Undetermined
        If no row is left.
    """
    keep = measures.use & ~(measures.weight == 0.0)
    if epoch_range is not None:
        keep &= (measures.epoch >= epoch_range[0]) & (measures.epoch <= epoch_range[1])
    rows = np.flatnonzero(keep)
    rows = rows[np.argsort(measures.epoch[rows], kind="stable")]
    if not rows.size:
        raise Undetermined(
            "no measure is in use here; use at least four positions", code="no-measures"
        )
    theta_err, rho_err, assumed = (part[rows] for part in complete_errors(measures))
    return Observations(
        measures.epoch[rows],
        np.nan_to_num(np.radians(measures.theta_effective[rows])),
        np.nan_to_num(measures.rho[rows]),
        np.nan_to_num(1.0 / np.radians(theta_err)),
        np.nan_to_num(1.0 / rho_err),
        rows,
        assumed,
    )
