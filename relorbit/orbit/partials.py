"""Exact partial derivatives of theta and rho by the elements."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from relorbit.orbit.elements import Elements, ThieleInnes, polar, thiele_innes_from_campbell
from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_anomaly, unit_ellipse


def polar_derivatives(
    z: NDArray[np.complex128], dz: NDArray[np.complex128]
) -> tuple[FloatArray, FloatArray]:
    """d theta (radians) and d rho from z, shape (..., n), and dz, shape (..., m, n).

    theta has no derivative at rho = 0; a separation below 1e-12 of the unit counts as that.
    """
    rho = np.maximum(np.abs(z), 1e-12)
    along = dz * (np.conj(z) / rho)[..., None, :]
    return along.imag / rho[..., None, :], along.real


def partials_by_constants(
    P: float, e: float, T: float, constants: ThieleInnes, epochs: ArrayLike
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """theta, rho and their derivatives by (P, e, T, A, B, F, G).

    Parameters
    ----------
    P, e, T : float
        Julian years and eccentricity.
    constants : ThieleInnes
        arcsec.
    epochs : array_like, shape (n,)
        Julian years.

    Returns
    -------
    theta, rho : ndarray, shape (n,)
        Degrees and arcsec.
    d_theta, d_rho : ndarray, shape (n, 7)
        Degrees and arcsec for each year, unit of e and arcsec, in the order named above.
    """
    z, dz = _complex_partials(P, e, T, constants, np.asarray(epochs, dtype=float))
    d_theta, d_rho = polar_derivatives(z, dz)
    return *polar(z), np.degrees(d_theta).T, d_rho.T


def partials(
    elements: Elements, epochs: ArrayLike
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """theta, rho and their derivatives by the Campbell elements.

    Returns theta (degrees) and rho (arcsec), shape (n,), then d_theta and d_rho, shape (n, 7),
    in the order (P, T, e, a, i, node, omega), for each year, arcsec or degree of an element.
    """
    constants = thiele_innes_from_campbell(elements)
    z, inner = _complex_partials(
        elements.P, elements.e, elements.T, constants, np.asarray(epochs, dtype=float)
    )
    dz = np.empty_like(inner)
    dz[0], dz[1], dz[2] = inner[0], inner[2], inner[1]
    i, node, omega = np.radians([elements.i, elements.node, elements.omega])
    X, Y = inner[3].real, inner[5].real
    # in the plane: along the node and across it before tilting
    along = elements.a * (X * np.cos(omega) - Y * np.sin(omega))
    across = elements.a * (X * np.sin(omega) + Y * np.cos(omega))
    turn, degree = np.exp(1j * node), np.pi / 180.0
    dz[3] = z / elements.a
    dz[4] = -1j * np.sin(i) * across * turn * degree
    dz[5] = 1j * z * degree
    dz[6] = (-across + 1j * np.cos(i) * along) * turn * degree
    d_theta, d_rho = polar_derivatives(z, dz)
    return *polar(z), np.degrees(d_theta).T, d_rho.T


def _complex_partials(
    P: float, e: float, T: float, constants: ThieleInnes, epochs: FloatArray
) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """z and dz by (P, e, T, A, B, F, G); the columns of A and F hold X and Y."""
    turns = (epochs - T) / P
    E = eccentric_anomaly(TWO_PI * np.remainder(turns, 1.0), e)
    X, Y = unit_ellipse(E, e)
    sine, cosine, eta = np.sin(E), np.cos(E), np.sqrt((1.0 - e) * (1.0 + e))
    slope = (1.0 - e) + 2.0 * e * np.sin(0.5 * E) ** 2
    by_mean = _project(constants, -sine / slope, eta * cosine / slope)
    by_e = _project(constants, -1.0 - sine**2 / slope, sine * (eta * cosine / slope - e / eta))
    dz = np.empty((7, epochs.size), dtype=complex)
    dz[0] = by_mean * (-TWO_PI * turns / P)
    dz[1] = by_e
    dz[2] = by_mean * (-TWO_PI / P)
    dz[3], dz[4], dz[5], dz[6] = X, 1j * X, Y, 1j * Y
    return _project(constants, X, Y), dz


def _project(constants: ThieleInnes, X: FloatArray, Y: FloatArray) -> NDArray[np.complex128]:
    c = constants
    return (c.A * X + c.F * Y) + 1j * (c.B * X + c.G * Y)
