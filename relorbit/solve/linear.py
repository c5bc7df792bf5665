"""Thiele-Innes constants at given P, e, T: one weighted linear system of four unknowns."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_anomaly, unit_ellipse
from relorbit.solve.observations import Observations


@dataclass(frozen=True)
class SkyData:
    """The measures as places on the sky with a 2-by-2 weight matrix each; shape (n,) arrays.

    Attributes
    ----------
    z : x + i y, arcsec, as measured.
    w_xx, w_xy, w_yy : the weight matrices, 1/arcsec^2.
    constant : sum of z' W z, the chi2 of an orbit of size zero.
    """

    epoch: FloatArray
    z: NDArray[np.complex128]
    w_xx: FloatArray
    w_xy: FloatArray
    w_yy: FloatArray

    @property
    def constant(self) -> float:
        x, y = self.z.real, self.z.imag
        return float(np.sum(self.w_xx * x * x + 2.0 * self.w_xy * x * y + self.w_yy * y * y))


def sky_data(observations: Observations) -> SkyData:
    """The Gaussian in x and y that comes nearest to errors of theta and rho.

    Along the direction of the pair the error is sigma_rho, across it rho sigma_theta. A row
    without rho only binds across; a row without theta binds nothing here.
    """
    o = observations
    has_theta = o.per_theta > 0.0
    rho = o.sky_rho
    # a pair closer than its own error has no direction: its error across is that error
    rho_floor = np.where(o.per_rho > 0.0, 1.0 / np.where(o.per_rho > 0.0, o.per_rho, 1.0), 1e-9)
    across = np.where(has_theta, o.per_theta / np.maximum(rho, rho_floor), 0.0) ** 2
    along = np.where(has_theta, o.per_rho, 0.0) ** 2
    cosine, sine = np.cos(o.theta), np.sin(o.theta)
    return SkyData(
        o.epoch,
        np.where(has_theta, rho, 0.0) * (cosine + 1j * sine),
        along * cosine**2 + across * sine**2,
        (along - across) * cosine * sine,
        along * sine**2 + across * cosine**2,
    )


@dataclass(frozen=True)
class LinearFit:
    """Constants and chi2 at each (P, e, T) asked for.

    Attributes
    ----------
    constants : ndarray, shape (m, 4): A, B, F, G, arcsec.
    normal : ndarray, shape (m, 4, 4): the normal matrices, whose inverse is the covariance.
    chi2 : ndarray, shape (m,)
    """

    constants: FloatArray
    normal: FloatArray
    chi2: FloatArray


def fit_constants(data: SkyData, P: ArrayLike, e: ArrayLike, T: ArrayLike) -> LinearFit:
    """The best A, B, F, G at each of m given (P, e, T) (Thiele 1883; Innes 1926).

    Parameters
    ----------
    data : SkyData
    P, e, T : array_like, shape (m,)
        Julian years, eccentricity, Julian year.

    Returns
    -------
    LinearFit
        Where the measures leave a combination of constants free (a vanishing arc), the smallest
        constants are given.
    """
    P, e, T = (np.atleast_1d(np.asarray(value, dtype=float))[:, None] for value in (P, e, T))
    mean = TWO_PI * np.remainder((data.epoch - T) / P, 1.0)
    X, Y = unit_ellipse(eccentric_anomaly(mean, e), e)
    products = np.stack([X * X, X * Y, Y * Y])
    normal = np.empty((X.shape[0], 4, 4))
    # A and F make x, B and G make y
    for weight, first, second in (
        (data.w_xx, (0, 2), (0, 2)), (data.w_xy, (0, 2), (1, 3)), (data.w_yy, (1, 3), (1, 3)),
    ):  # fmt: skip
        square, mixed, other = products @ weight
        for slot, value in ((0, square), (1, mixed), (2, mixed), (3, other)):
            row, column = first[slot // 2], second[slot % 2]
            normal[:, row, column] = normal[:, column, row] = value
    wx = data.w_xx * data.z.real + data.w_xy * data.z.imag
    wy = data.w_xy * data.z.real + data.w_yy * data.z.imag
    right = np.stack([X @ wx, X @ wy, Y @ wx, Y @ wy], axis=-1)
    constants = solve_scaled(normal, right)
    chi2 = data.constant - np.einsum("mj,mj->m", right, constants)
    return LinearFit(constants, normal, np.maximum(chi2, 0.0))


def solve_scaled(normal: FloatArray, right: FloatArray) -> FloatArray:
    """Solve symmetric positive systems, shape (..., k, k) and (..., k), after scaling.

    A relative ridge of a few rounding errors keeps a singular system from blowing up.
    """
    diagonal = np.einsum("...jj->...j", normal)
    scale = 1.0 / np.sqrt(np.where(diagonal > 0.0, diagonal, 1.0))
    scaled = normal * scale[..., :, None] * scale[..., None, :]
    size = normal.shape[-1]
    scaled = scaled + 1e-14 * np.eye(size) + np.eye(size) * (diagonal <= 0.0)[..., None]
    return scale * np.linalg.solve(scaled, (scale * right)[..., None])[..., 0]
