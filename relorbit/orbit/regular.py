"""Coordinates of an orbit that stay regular where the Campbell elements do not.

At e = 0 there is no periastron, and at i = 0 or 180 no node. The seven numbers

    u = (ln P, k, h, Re alpha, Im alpha, Re beta, Im beta)

have no such places. Angles in the orbit are counted from where the mean companion stands at a
reference epoch, so that the mean longitude is lambda = 2 pi (t - t0)/P, k + i h = e exp(i varpi)
with varpi the longitude of periastron counted in the same way, and z = alpha w + beta conj(w)
(see `elements`), w being the place on the unit orbit turned by varpi. k and h are the usual
equinoctial pair (Broucke & Cefola 1972, Celestial Mechanics 5, 303, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from relorbit.orbit.elements import (
    NAMES,
    Elements,
    geometry_from_projection,
    projection,
)
from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_anomaly

SIZE = 7


@dataclass(frozen=True)
class Uncertainty:
    """What a fit says of an orbit's errors, in the regular coordinates.

    Attributes
    ----------
    reference_epoch : float
        t0, Julian year.
    covariance : ndarray, shape (7, 7)
        Covariance of u = (ln P, k, h, Re alpha, Im alpha, Re beta, Im beta) at t0.
    """

    reference_epoch: float
    covariance: FloatArray


def regular_from_elements(elements: Elements, reference_epoch: float) -> FloatArray:
    """u, shape (7,), of an orbit for a reference epoch (Julian year)."""
    mean = TWO_PI * (reference_epoch - elements.T) / elements.P
    eccentric = elements.e * np.exp(-1j * mean)
    alpha, beta = projection(elements)
    alpha, beta = alpha * np.exp(1j * mean), beta * np.exp(-1j * mean)
    inner = np.log(elements.P), eccentric.real, eccentric.imag
    return np.array([*inner, alpha.real, alpha.imag, beta.real, beta.imag])


def elements_from_regular(u: ArrayLike, reference_epoch: float) -> Elements:
    """Campbell elements of u, T being the passage nearest the reference epoch.

    At e = 0 periastron is put at the node: omega = 0 and T is the passage of the node (of the
    position angle 0 when the orbit is also face-on, where node = 0).
    """
    u = np.asarray(u, dtype=float)
    P, eccentric = np.exp(u[0]), u[1] + 1j * u[2]
    alpha, beta = u[3] + 1j * u[4], u[5] + 1j * u[6]
    e = abs(eccentric)
    varpi = np.angle(eccentric)
    if e == 0.0:
        # turn the axes until the constants name the node itself
        varpi = -np.radians(geometry_from_projection(alpha, beta)[3])
    turned = alpha * np.exp(1j * varpi), beta * np.exp(-1j * varpi)
    a, i, node, omega = (float(value) for value in geometry_from_projection(*turned))
    if e == 0.0:
        omega = 0.0
    T = reference_epoch + varpi * P / TWO_PI
    return Elements(P, T, e, a, i, node, omega).near(reference_epoch)


def unit_orbit(
    longitude: FloatArray, k: ArrayLike, h: ArrayLike, derivatives: bool = True
) -> tuple[NDArray[np.complex128], ...]:
    """Place w on the unit orbit and its derivatives by lambda, k and h.

    Parameters
    ----------
    longitude : ndarray
        Mean longitude lambda, radians.
    k, h : array_like
        e cos varpi and e sin varpi, broadcast against `longitude`; e < 1.
    derivatives : bool
        False returns w alone, in a tuple of one.

    Returns
    -------
    w, dw/dlambda, dw/dk, dw/dh : complex ndarrays

    Notes
    -----
    With U = exp(i (E + varpi)), g = k + i h, eta = sqrt(1 - e^2) and b = 1/(1 + eta):
    w = (1 + eta)/2 U + b/2 g^2 conj(U) - g, which follows from X = cos E - e, Y = eta sin E
    since (1 - eta)/e^2 = b. Nothing divides by e.
    """
    g = np.asarray(k) + 1j * np.asarray(h)
    e = np.abs(g)
    varpi = np.angle(g)
    # a single e is solved for faster than an array of one
    E = eccentric_anomaly(longitude - varpi, e.item() if e.size == 1 else e)
    angle = E + varpi
    U = np.empty(angle.shape, dtype=complex)
    np.cos(angle, out=U.real)
    np.sin(angle, out=U.imag)
    eta = np.sqrt((1.0 - e) * (1.0 + e))
    b = 1.0 / (1.0 + eta)
    turn = (b * g) * np.conj(U)
    first, second = (0.5 * (1.0 + eta)) * U, (0.5 * g) * turn
    w = first + second
    w -= g
    if not derivatives:
        return (w,)
    # 1 - e cos E; it only scales derivatives, so that cancellation near e = 1 does not matter
    slope = 1.0 - (np.conj(g) * U).real
    by_longitude = first - second
    by_longitude *= 1j / slope
    # d eta = -(k dk + h dh)/eta and d b = b^2 (k dk + h dh)/eta
    shape = (b * g) * turn
    shape -= U
    shape *= 0.5 / eta
    turn -= 1.0
    by_k = shape * g.real
    by_k += turn
    by_k += U.imag * by_longitude
    shape *= g.imag
    turn *= 1j
    shape += turn
    shape -= U.real * by_longitude
    return w, by_longitude, by_k, shape


def position_and_jacobian(
    u: FloatArray, reference_epoch: float, epochs: FloatArray
) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """z = x + i y and its derivatives by the regular coordinates.

    Parameters
    ----------
    u : ndarray, shape (..., 7)
        One orbit or many.
    reference_epoch : float
        Julian year.
    epochs : ndarray, shape (n,)
        Julian years.

    Returns
    -------
    z : complex ndarray, shape (..., n), arcsec
    jacobian : complex ndarray, shape (..., 7, n)
    """
    longitude, k, h, alpha, beta = _parts(u, reference_epoch, epochs)
    w, by_longitude, by_k, by_h = unit_orbit(longitude, k, h)
    conj_w = np.conj(w)
    jacobian = np.empty((*w.shape[:-1], SIZE, w.shape[-1]), dtype=complex)
    np.multiply(by_longitude, longitude, out=jacobian[..., 0, :])
    jacobian[..., 1, :], jacobian[..., 2, :], jacobian[..., 3, :] = by_k, by_h, w
    # the model's z comes out of the same product as its derivatives, in the place of w
    inner = jacobian[..., :4, :]
    mirrored = np.conj(inner)
    inner *= alpha[..., None]
    mirrored *= beta[..., None]
    inner += mirrored
    z = inner[..., 3, :].copy()
    np.negative(inner[..., 0, :], out=inner[..., 0, :])
    jacobian[..., 3, :], jacobian[..., 5, :] = w, conj_w
    np.multiply(jacobian[..., 3::2, :], 1j, out=jacobian[..., 4::2, :])
    return z, jacobian


def regular_position(
    u: FloatArray, reference_epoch: float, epochs: FloatArray
) -> NDArray[np.complex128]:
    """z = x + i y (arcsec), shape (..., n), of orbits u, shape (..., 7)."""
    longitude, k, h, alpha, beta = _parts(u, reference_epoch, epochs)
    (w,) = unit_orbit(longitude, k, h, derivatives=False)
    return alpha * w + beta * np.conj(w)


def _parts(u: FloatArray, reference_epoch: float, epochs: FloatArray) -> tuple[NDArray, ...]:
    """Mean longitude, shape (..., n), and k, h, alpha and beta, shape (..., 1), of orbits u."""
    u = np.asarray(u, dtype=float)
    longitude = (TWO_PI * np.exp(-u[..., :1])) * (epochs - reference_epoch)
    alpha, beta = u[..., 3:4] + 1j * u[..., 4:5], u[..., 5:6] + 1j * u[..., 6:7]
    return longitude, u[..., 1:2], u[..., 2:3], alpha, beta


def campbell_jacobian(u: FloatArray, reference_epoch: float) -> FloatArray:
    """Derivatives of (P, T, e, a, i, node, omega) by u, shape (7, 7); angles in degrees.

    Rows of elements that do not exist there (omega and T at e = 0; node, omega and i at i = 0
    or 180) are NaN. T is the passage nearest the reference epoch.
    """
    elements = elements_from_regular(u, reference_epoch)
    out = np.zeros((SIZE, SIZE))
    k, h = u[1], u[2]
    alpha, beta = u[3] + 1j * u[4], u[5] + 1j * u[6]
    e, p, q = elements.e, abs(alpha), abs(beta)
    out[0, 0] = elements.P
    varpi = np.zeros(SIZE)
    if e > 0.0:
        out[2, 1:3] = k / e, h / e
        varpi[1:3] = -h / e**2, k / e**2
    else:
        varpi[:] = np.nan
        out[2] = np.nan
    out[1] = varpi * elements.P / TWO_PI
    out[1, 0] += elements.T - reference_epoch
    unit_p = np.array([u[3], u[4]]) / p if p > 0 else np.zeros(2)
    unit_q = np.array([u[5], u[6]]) / q if q > 0 else np.zeros(2)
    out[3, 3:5], out[3, 5:7] = unit_p, unit_q
    if elements.i in (0.0, 180.0):
        out[4:] = np.nan
        return out
    # tan(i/2) = sqrt(q/p), so di = (dq/q - dp/p) sin(i)/2
    scale = 0.5 * np.sin(np.radians(elements.i))
    out[4, 3:5], out[4, 5:7] = -scale * unit_p / p, scale * unit_q / q
    angle_p, angle_q = np.zeros(SIZE), np.zeros(SIZE)
    angle_p[3:5] = -unit_p[1] / p, unit_p[0] / p
    angle_q[5:7] = -unit_q[1] / q, unit_q[0] / q
    out[5] = 0.5 * (angle_p + angle_q)
    out[6] = 0.5 * (angle_p - angle_q) + varpi
    out[4:] = np.degrees(out[4:])
    return out


def axis_and_period_gradient(u: FloatArray) -> FloatArray:
    """Gradient of ln(a^3 / P^2) by u, shape (7,): what the total mass depends on."""
    p, q = np.hypot(u[3], u[4]), np.hypot(u[5], u[6])
    gradient = np.zeros(SIZE)
    gradient[0] = -2.0
    gradient[3:5] = 3.0 / (p + q) * u[3:5] / (p if p > 0 else 1.0)
    gradient[5:7] = 3.0 / (p + q) * u[5:7] / (q if q > 0 else 1.0)
    return gradient


def campbell_covariance(elements: Elements, uncertainty: Uncertainty) -> FloatArray:
    """Covariance of the Campbell elements in the order of `NAMES`, shape (7, 7)."""
    u = regular_from_elements(elements, uncertainty.reference_epoch)
    jacobian = campbell_jacobian(u, uncertainty.reference_epoch)
    # T may be asked for at another passage than the one nearest the reference epoch
    shift = elements.T - elements.near(uncertainty.reference_epoch).T
    if shift:
        jacobian[NAMES.index("T"), 0] += shift
    return jacobian @ uncertainty.covariance @ jacobian.T
