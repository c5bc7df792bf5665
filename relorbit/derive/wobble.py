"""Residuals on the sky, and sines and lines fitted to them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq
from scipy.special import chdtrc

from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import TWO_PI, FloatArray
from relorbit.orbit.regular import position_and_jacobian, regular_from_elements
from relorbit.orbit.third_law import MASS_FACTOR
from relorbit.solve.residuals import Residuals


@dataclass(frozen=True)
class Scatter:
    """Residuals north and east, arcsec, with their errors; arrays of shape (n,).

    Attributes
    ----------
    epoch : Julian years.
    north, east, north_sigma, east_sigma : arcsec.
    across, along : the residuals in their errors.
    across_err, along_err : arcsec.
    theta : direction of the pair, radians.
    """

    epoch: FloatArray
    north: FloatArray
    east: FloatArray
    north_sigma: FloatArray
    east_sigma: FloatArray
    across: FloatArray
    along: FloatArray
    across_err: FloatArray
    along_err: FloatArray
    theta: FloatArray

    def dealt(self, order: np.ndarray) -> tuple[FloatArray, FloatArray]:
        """North and east over their errors, each (k, n), of residuals in another order (k, n)."""
        across = self.across[order] * self.across_err
        along = self.along[order] * self.along_err
        north, east = _turned(across, along, self.theta)
        return north / self.north_sigma, east / self.east_sigma


def scatter_of(r: Residuals) -> Scatter:
    """Residuals on the sky of the rows used that have both values."""
    good = r.used & np.isfinite(r.arc) & np.isfinite(r.d_rho)
    epoch, arc, d_rho = r.epoch[good], r.arc[good], r.d_rho[good]
    across_err = r.rho_computed[good] * np.radians(r.theta_err[good])
    along_err, theta = r.rho_err[good], np.radians(r.theta_computed[good])
    north, east = _turned(arc, d_rho, theta)
    cosine, sine = np.cos(theta), np.sin(theta)
    return Scatter(
        epoch, north, east,
        np.hypot(along_err * cosine, across_err * sine),
        np.hypot(along_err * sine, across_err * cosine),
        arc / across_err, d_rho / along_err, across_err, along_err, theta,
    )  # fmt: skip


def _turned(
    across: FloatArray, along: FloatArray, theta: FloatArray
) -> tuple[FloatArray, FloatArray]:
    cosine, sine = np.cos(theta), np.sin(theta)
    return along * cosine - across * sine, along * sine + across * cosine


def design(s: Scatter, frequency: FloatArray) -> tuple[FloatArray, FloatArray]:
    """For north and east: orthonormal columns of a sine beside the mean, shape (f, 2, n)."""
    phase = TWO_PI * frequency[:, None] * (s.epoch - s.epoch[0])
    waves = np.stack([np.cos(phase), np.sin(phase)], axis=1)
    found = []
    for sigma in (s.north_sigma, s.east_sigma):
        one = 1.0 / sigma
        mean = one / np.linalg.norm(one)
        columns = waves * one
        columns = columns - (columns @ mean)[..., None] * mean
        first, second = columns[:, 0], columns[:, 1]
        first = first / np.maximum(np.linalg.norm(first, axis=1, keepdims=True), 1e-12)
        second = second - np.einsum("fn,fn->f", first, second)[:, None] * first
        size = np.linalg.norm(second, axis=1, keepdims=True)
        # at a frequency where sine and cosine are one (an alias of zero) only one is left
        alike = size < 1e-6 * np.linalg.norm(columns[:, 1], axis=1, keepdims=True)
        second = np.where(alike, 0.0, second / np.maximum(size, 1e-12))
        found.append(np.stack([first, second], axis=1))
    return found[0], found[1]


def chi2_of(s: Scatter) -> float:
    """chi2 of the residuals across and along."""
    return float(np.sum(s.across**2) + np.sum(s.along**2))


def gain_of(
    columns: tuple[FloatArray, FloatArray], north: FloatArray, east: FloatArray
) -> FloatArray:
    """Fall of chi2, shape (f, k), by a sine north and east, of k sets of residuals (k, n)."""
    total = np.zeros((columns[0].shape[0], north.shape[0]))
    for basis, values in zip(columns, (north, east), strict=True):
        flat = basis.reshape(-1, basis.shape[-1]) @ values.T
        total += (flat * flat).reshape(basis.shape[0], 2, -1).sum(axis=1)
    return total


def ellipse(s: Scatter, period: float, spread: float) -> tuple[float, float]:
    """Semimajor axis (arcsec) of the ellipse of a wobble of that period, and its error."""
    phase = TWO_PI / period * (s.epoch - s.epoch[0])
    basis = np.stack([np.ones_like(phase), np.cos(phase), np.sin(phase)], axis=1)
    parts, variance = [], 0.0
    for value, sigma in ((s.north, s.north_sigma), (s.east, s.east_sigma)):
        scaled = basis / sigma[:, None]
        parts.append(np.linalg.lstsq(scaled, value / sigma, rcond=None)[0][1:])
        inverse = np.linalg.pinv(scaled.T @ scaled)
        variance = max(variance, 0.5 * float(inverse[1, 1] + inverse[2, 2]))
    # the singular values of (cos, sin) -> (north, east) are the half axes
    return float(np.linalg.norm(np.array(parts), 2)), float(np.sqrt(variance * spread))


def drift(
    s: Scatter, spread: float, elements: Elements
) -> tuple[float, float, float, float, float]:
    """Slopes north and east with errors (mas a year), and the probability of both by chance.

    A drift that a change of the orbit would take up does not count: the slopes are those fitted
    together with all elements, to first order.
    """
    t0 = float(np.mean(s.epoch))
    z, dz = position_and_jacobian(regular_from_elements(elements, t0), t0, s.epoch)
    turn = np.exp(-1j * np.angle(z))
    slopes = (s.epoch - t0) * np.array([[1.0], [1.0j]])
    columns = np.concatenate([dz, slopes]) * turn
    # of a step on the sky, the part along the pair and the part across it
    whole = np.concatenate([columns.imag / s.across_err, columns.real / s.along_err], axis=1).T
    size = np.linalg.norm(whole, axis=0)
    Q, R = np.linalg.qr(whole / size)
    inner = R[-2:, -2:]
    part = Q[:, -2:].T @ np.concatenate([s.across, s.along])
    inverse = np.linalg.pinv(inner, rcond=1e-9)
    slope = inverse @ part / size[-2:]
    sigma = np.sqrt(spread * np.diag(inverse @ inverse.T)) / size[-2:]
    found = np.stack([slope, sigma], axis=1).ravel() * 1000.0
    return (*(float(x) for x in found), float(chdtrc(2, part @ part / spread)))


def minimum_mass(axis_au: float, period: float, host: float) -> float:
    """Mass (solar) of a dark body that moves a star of mass `host` by `axis_au` (au).

    m / (host + m)^(2/3) = axis / period^(2/3), from Kepler's third law; a face-on circle and no
    light of its own make it the least.
    """
    needed = axis_au / period ** (2.0 / 3.0) * MASS_FACTOR ** (1.0 / 3.0)

    def excess(m: float) -> float:
        return m / (host + m) ** (2.0 / 3.0) - needed

    high = host
    while excess(high) < 0.0:
        high *= 2.0
    return float(brentq(excess, 0.0, high))
