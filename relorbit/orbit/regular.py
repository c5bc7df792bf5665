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

import math
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


# The functions of time that a position and its derivatives are made of: 1, c and s, the cosine
# and sine of the eccentric longitude F; cs/q, ss/q and cc/q with q = 1 - e cos E; and c/q and s/q
# times the mean longitude.
ONE, COS, SIN, COS_SIN, SIN_SIN, COS_COS, LONG_COS, LONG_SIN = range(8)
PLACE = SIZE  # the row of z below those of its derivatives


def jacobian_and_place(
    u: FloatArray, reference_epoch: float, epochs: FloatArray
) -> NDArray[np.complex128]:
    """Derivatives of z = x + i y by the regular coordinates, and z itself.

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
    complex ndarray, shape (..., 8, n)
        arcsec; z is the last row.

    Notes
    -----
    With F = E + varpi, c = cos F, s = sin F, g = k + i h, eta = sqrt(1 - e^2) and
    b = 1/(1 + eta): w = w0 + wc c + ws s, where w0 = -g, wc = (1 + eta)/2 + b g^2/2 and
    ws = i ((1 + eta)/2 - b g^2/2). This follows from X = cos E - e, Y = eta sin E, since
    (1 - eta)/e^2 = b; nothing divides by e. From F - k s + h c = lambda come dF/dlambda = 1/q,
    dF/dk = s/q and dF/dh = -c/q, q = 1 - k c - h s. So everything is one product of a small
    matrix, which depends on the orbit alone, with eight functions of time.
    """
    u = np.asarray(u, dtype=float)
    if u.size == SIZE:
        # numpy is quicker with the plain numbers of one orbit than with arrays of one
        parts = u.reshape(-1).tolist()
        matrix, columns = _coefficients(*parts[1:]), parts[:3]
    else:
        parts = list(np.moveaxis(u, -1, 0))
        matrix = np.moveaxis(_coefficients(*parts[1:]), (0, 1), (-2, -1))
        columns = [part[..., None] for part in parts[:3]]
    functions = _functions(*columns, epochs - reference_epoch)
    return (matrix @ functions).reshape(*u.shape[:-1], SIZE + 1, epochs.size)


def _functions(log_P: ArrayLike, k: ArrayLike, h: ArrayLike, time: FloatArray) -> FloatArray:
    """The eight functions of time, shape (..., 8, n)."""
    exp = math.exp if isinstance(log_P, float) else np.exp
    longitude = (TWO_PI * exp(-log_P)) * time
    F = eccentric_longitude(longitude, k, h)
    out = np.empty((*longitude.shape[:-1], 8, longitude.shape[-1]))
    out[..., ONE, :] = 1.0
    c, s, over = out[..., COS, :], out[..., SIN, :], out[..., LONG_COS:, :]
    np.cos(F, out=c)
    np.sin(F, out=s)
    # q only scales derivatives, so that cancellation near e = 1 does not matter
    q = c * -k
    q -= h * s
    q += 1.0
    np.divide(out[..., COS : SIN + 1, :], q[..., None, :], out=over)
    np.multiply(over, s[..., None, :], out=out[..., COS_SIN : SIN_SIN + 1, :])
    np.multiply(over[..., 0, :], c, out=out[..., COS_COS, :])
    over *= longitude[..., None, :]
    return out


def _coefficients(k, h, alpha_re, alpha_im, beta_re, beta_im) -> NDArray[np.complex128]:
    """Coefficients of the derivatives and of z in the functions of time, shape (8, 8, ...)."""
    alpha, beta = alpha_re + 1j * alpha_im, beta_re + 1j * beta_im
    g = k + 1j * h
    w0, wc, ws, eta, b = _unit_orbit(g)

    def on_sky(value):  # z of a value of w
        return alpha * value + beta * value.conjugate()

    out = np.zeros((SIZE + 1, 8, *np.shape(k)), dtype=complex)
    out[PLACE, COS] = by_c = on_sky(wc)
    out[PLACE, SIN] = by_s = on_sky(ws)
    out[PLACE, ONE] = on_sky(w0)
    out[0, LONG_COS], out[0, LONG_SIN] = -by_s, by_c
    out[1, COS_SIN], out[1, SIN_SIN] = by_s, -by_c
    out[2, COS_COS], out[2, COS_SIN] = -by_s, by_c
    # at fixed F: d eta = -(k dk + h dh)/eta and d b = b^2 (k dk + h dh)/eta
    turn, slope = b * g, 0.5 / eta
    for row, part, unit in ((1, k, 1.0), (2, h, 1j)):
        fall = slope * part
        mirrored = (fall * turn + unit) * turn
        out[row, ONE] = -(alpha * unit + beta * unit.conjugate())
        out[row, COS] = on_sky(mirrored - fall)
        out[row, SIN] = on_sky(-1j * (mirrored + fall))
    for column, value in ((ONE, w0), (COS, wc), (SIN, ws)):
        mirrored = value.conjugate()
        out[3, column], out[4, column] = value, 1j * value
        out[5, column], out[6, column] = mirrored, 1j * mirrored
    return out


def _unit_orbit(g):
    """w0, wc and ws (see `jacobian_and_place`), eta and b of g = k + i h, one or an array."""
    e = abs(g)
    eta = ((1.0 - e) * (1.0 + e)) ** 0.5
    b = 1.0 / (1.0 + eta)
    half, mirrored = 0.5 * (1.0 + eta), 0.5 * b * g * g
    return -g, half + mirrored, 1j * (half - mirrored), eta, b


def eccentric_longitude(longitude: FloatArray, k: ArrayLike, h: ArrayLike) -> FloatArray:
    """F = E + varpi (radians) from the mean longitude; k and h are broadcast against it."""
    if isinstance(k, float):
        varpi, e = math.atan2(h, k), math.hypot(k, h)
    else:
        varpi, e = np.arctan2(h, k), np.hypot(k, h)
        # a single e is solved for faster than an array of one
        e = e.item() if e.size == 1 else e
    F = eccentric_anomaly(longitude - varpi, e)
    F += varpi
    return F


def position_and_jacobian(
    u: FloatArray, reference_epoch: float, epochs: FloatArray
) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """z, shape (..., n), and its derivatives, shape (..., 7, n), of `jacobian_and_place`."""
    both = jacobian_and_place(u, reference_epoch, epochs)
    return both[..., PLACE, :], both[..., :PLACE, :]


def regular_position(
    u: FloatArray, reference_epoch: float, epochs: FloatArray
) -> NDArray[np.complex128]:
    """z = x + i y (arcsec), shape (..., n), of orbits u, shape (..., 7)."""
    log_P, k, h, *constants = np.moveaxis(np.asarray(u, dtype=float), -1, 0)[..., None]
    longitude = (TWO_PI * np.exp(-log_P)) * (epochs - reference_epoch)
    F = eccentric_longitude(longitude, k, h)
    w0, wc, ws, _, _ = _unit_orbit(k + 1j * h)
    w = w0 + wc * np.cos(F) + ws * np.sin(F)
    alpha, beta = constants[0] + 1j * constants[1], constants[2] + 1j * constants[3]
    return alpha * w + beta * np.conj(w)


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
