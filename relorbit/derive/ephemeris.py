"""Positions at other times with their errors, and the turning points of the apparent motion."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy.optimize import brentq

from relorbit.measures.pair import RecordedOrbit
from relorbit.orbit.elements import Elements, complex_position, polar, positions
from relorbit.orbit.kepler import FloatArray, mean_anomaly
from relorbit.orbit.partials import polar_derivatives
from relorbit.orbit.regular import (
    Uncertainty,
    campbell_covariance,
    position_and_jacobian,
    regular_from_elements,
)
from relorbit.solve.solution import Solution

SCHEMA = "relorbit/ephemeris/1"
SAMPLES = 720  # places on the orbit, even in eccentric anomaly, between which extremes are sought

AnyOrbit = Elements | RecordedOrbit | Solution


@dataclass(frozen=True)
class Ephemeris:
    """Predicted positions, arrays of shape (n,).

    Attributes
    ----------
    epoch : Julian years.
    theta, rho : degrees in [0, 360), equinox J2000, and arcsec.
    theta_sigma, rho_sigma : one standard deviation; NaN where the orbit brings no errors.
    """

    epoch: FloatArray
    theta: FloatArray
    rho: FloatArray
    theta_sigma: FloatArray
    rho_sigma: FloatArray

    def rows(self) -> Iterator[dict[str, float | None]]:
        columns = ("epoch", "theta", "rho", "theta_sigma", "rho_sigma")
        for values in zip(*(getattr(self, name).tolist() for name in columns), strict=True):
            yield {
                name: value if np.isfinite(value) else None
                for name, value in zip(columns, values, strict=True)
            }

    def to_dict(self) -> dict[str, Any]:
        """The JSON of ``relorbit ephemeris --json``, schema relorbit/ephemeris/1."""
        return {"schema": SCHEMA, "rows": list(self.rows())}


@dataclass(frozen=True)
class TurningPoint:
    """A moment of the orbit: its epoch (Julian year), the error of it, and the position then."""

    kind: str
    epoch: float
    epoch_sigma: float | None
    theta: float
    rho: float

    def to_dict(self) -> dict[str, Any]:
        return {name: getattr(self, name) for name in self.__dataclass_fields__}


def elements_and_uncertainty(orbit: AnyOrbit) -> tuple[Elements, Uncertainty | None]:
    """What an orbit of any kind says of itself.

    Raises TypeError for anything that is not an orbit.
    """
    if isinstance(orbit, Elements):
        return orbit, None
    if isinstance(orbit, Solution):
        return orbit.elements, orbit.uncertainty
    if isinstance(orbit, RecordedOrbit):
        if orbit.covariance is None or orbit.reference_epoch is None:
            return orbit.elements, None
        return orbit.elements, Uncertainty(orbit.reference_epoch, np.asarray(orbit.covariance))
    raise TypeError(
        f"an orbit is Elements, a RecordedOrbit or a Solution, not {type(orbit).__name__}"
    )


def julian_years(epochs: Any) -> FloatArray:
    """Epochs as Julian years: numbers, a Quantity of time, or astropy Time; any shape."""
    if hasattr(epochs, "jyear"):
        epochs = epochs.tt.jyear
    elif hasattr(epochs, "to_value"):
        epochs = epochs.to_value("yr")
    epochs = np.asarray(epochs, dtype=float)
    if not np.all(np.isfinite(epochs)):
        raise ValueError("an epoch must be a finite number of Julian years")
    return epochs


def ephemeris(solution_or_elements: AnyOrbit, epochs: ArrayLike) -> Ephemeris:
    """Positions at given epochs, with errors where the orbit brings a covariance.

    Parameters
    ----------
    solution_or_elements : Solution, RecordedOrbit or Elements
    epochs : array_like, shape (n,) or scalar
        Julian years (TT), a Quantity of time, or astropy Time.

    Returns
    -------
    Ephemeris
        Errors are those of the covariance carried to first order.
    """
    elements, uncertainty = elements_and_uncertainty(solution_or_elements)
    epochs = np.atleast_1d(julian_years(epochs))
    theta, rho = positions(elements, epochs)
    if uncertainty is None:
        missing = np.full(epochs.shape, np.nan)
        return Ephemeris(epochs, theta, rho, missing, missing.copy())
    u = regular_from_elements(elements, uncertainty.reference_epoch)
    z, dz = position_and_jacobian(u, uncertainty.reference_epoch, epochs)
    theta_sigma, rho_sigma = (
        _root(np.einsum("jn,jk,kn->n", part, uncertainty.covariance, part))
        for part in polar_derivatives(z, dz)
    )
    # an angle known worse than this is not known at all
    theta_sigma = np.minimum(np.degrees(theta_sigma), 180.0)
    return Ephemeris(epochs, theta, rho, theta_sigma, rho_sigma)


def turning_points(orbit: AnyOrbit, after: float) -> tuple[TurningPoint, ...]:
    """The next periastron, and the closest and widest apparent separation of the revolution.

    Parameters
    ----------
    orbit : Solution, RecordedOrbit or Elements
    after : float
        Julian year; the revolution that begins then is looked at.

    Returns
    -------
    tuple of TurningPoint
        kinds "periastron" (not of a circle), "closest", "widest" (not of an orbit whose
        separation never changes: a circle seen face-on).
    """
    elements, uncertainty = elements_and_uncertainty(orbit)
    points = []
    if elements.e > 0.0:
        revolutions = np.ceil((after - elements.T) / elements.P)
        periastron = elements.T + revolutions * elements.P
        sigma = _periastron_sigma(elements.near(periastron), uncertainty)
        points.append(_point("periastron", elements, periastron, sigma))
    points.extend(
        _point(kind, elements, epoch, _extreme_sigma(elements, uncertainty, epoch))
        for kind, epoch in _extremes(elements, after)
    )
    return tuple(points)


def _point(kind: str, elements: Elements, epoch: float, sigma: float | None) -> TurningPoint:
    theta, rho = polar(complex_position(elements, np.array([epoch])))
    return TurningPoint(kind, float(epoch), sigma, float(theta[0]), float(rho[0]))


def _extremes(elements: Elements, after: float) -> list[tuple[str, float]]:
    """Epochs of the least and the largest separation in the revolution from `after` on."""
    step = 1e-6 * elements.P * (1.0 - elements.e) ** 1.5

    def slope(epoch: float) -> float:
        before, behind = np.abs(complex_position(elements, np.array([epoch - step, epoch + step])))
        return float(behind - before)

    # even steps in eccentric anomaly are fine where the companion is fast
    grid = mean_anomaly(np.linspace(0.0, 4.0 * np.pi, 2 * SAMPLES + 1), elements.e)
    first = elements.T + np.floor((after - elements.T) / elements.P) * elements.P
    epochs = first + grid / (2.0 * np.pi) * elements.P
    epochs = np.concatenate(([after], epochs[(epochs > after) & (epochs < after + elements.P)]))
    epochs = np.append(epochs, after + elements.P)
    rho = np.abs(complex_position(elements, epochs))
    if np.ptp(rho) < 1e-9 * elements.a:
        return []
    found = []
    for kind, sign in (("closest", 1.0), ("widest", -1.0)):
        # the revolution is a ring: its first and last epoch are one place
        inner = int(np.argmin(sign * rho[:-1]))
        left = epochs[inner - 1] if inner else epochs[-2] - elements.P
        right = epochs[inner + 1]
        best = brentq(slope, left, right) if slope(left) * slope(right) < 0 else epochs[inner]
        found.append((kind, float(best if best >= after else best + elements.P)))
    return found


def _periastron_sigma(elements: Elements, uncertainty: Uncertainty | None) -> float | None:
    if uncertainty is None:
        return None
    sigma = float(_root(campbell_covariance(elements, uncertainty)[1, 1]))
    return sigma if np.isfinite(sigma) else None


def _extreme_sigma(
    elements: Elements, uncertainty: Uncertainty | None, epoch: float
) -> float | None:
    """Error of the epoch at which d rho/dt = 0, by the implicit function theorem."""
    if uncertainty is None:
        return None
    u = regular_from_elements(elements, uncertainty.reference_epoch)
    step = 1e-4 * elements.P * (1.0 - elements.e) ** 1.5
    epochs = epoch + step * np.array([-1.0, 0.0, 1.0])
    z, dz = position_and_jacobian(u, uncertainty.reference_epoch, epochs)
    _, by_u = polar_derivatives(z, dz)
    rho = np.abs(z)
    curvature = (rho[0] - 2.0 * rho[1] + rho[2]) / step**2
    if curvature == 0.0:
        return None
    gradient = (by_u[:, 2] - by_u[:, 0]) / (2.0 * step) / curvature
    sigma = float(_root(gradient @ uncertainty.covariance @ gradient))
    return sigma if np.isfinite(sigma) else None


def _root(variance: ArrayLike) -> FloatArray:
    """The root of a variance; NaN where rounding left one below 0, of what is hardly known."""
    return np.sqrt(np.where(np.asarray(variance) >= 0.0, variance, np.nan))
