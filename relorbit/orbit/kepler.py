"""Kepler's equation, the anomalies and the unit ellipse.

Every anomaly is in radians, zero at periastron, growing with time.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]

TWO_PI = 2.0 * np.pi
# 2 pi in three parts, the first two of 30 bits: a whole number of turns is removed without loss
TWO_PI_HIGH = 6.283185303211212
TWO_PI_MIDDLE = 3.9683743166540886e-09
TWO_PI_LOW = 2.068073192717642e-18
BLOCK = 16384  # elements a block: the working arrays stay in the processor's cache
SERIES_BELOW = 0.3  # 1 - e cos E under which E - sin E is summed as a series
# one e has a table of M over E, fine enough for its interpolated E to need one Halley step only
TABLE_E = np.linspace(0.0, np.pi, 1025)
TABLE_SINE = np.sin(TABLE_E)
E_RANGE = "the eccentricity must lie in 0 <= e < 1"
M_FINITE = "the mean anomaly must be finite"
# the constants of Markley's alpha, eq. 20
ALPHA_FIXED = 3.0 * np.pi**2 / (np.pi**2 - 6.0)
ALPHA_SLOPE = 1.6 * np.pi / (np.pi**2 - 6.0)


def eccentric_anomaly(mean_anomaly: ArrayLike, e: ArrayLike) -> FloatArray:
    """Solve Kepler's equation E - e sin E = M.

    Parameters
    ----------
    mean_anomaly : array_like
        M, radians, any finite value; broadcast against `e`.
    e : array_like
        Eccentricity, 0 <= e < 1.

    Returns
    -------
    ndarray
        E, radians, in the same revolution as M (E - M is periodic), of the broadcast shape.
        The error is below 4 units in the last place or 1e-15 rad for e up to 0.9999.

    Raises
    ------
    ValueError
        If an eccentricity is outside [0, 1) or a mean anomaly is not finite.

    Notes
    -----
    Starting value: the cubic of Markley F. L., 1995, Celestial Mechanics 63, 101, eqs. 5 and
    15-20, improved once, both in single precision; or, for few M at one e, interpolation in a
    table. Then one Halley step in double precision. Where 1 - e cos E is small, near periastron
    at e > 0.7, a path of its own sums E - sin E as a series, without cancellation. The number of
    operations is fixed, and every one runs over a whole block.
    """
    mean, ecc = np.asarray(mean_anomaly, dtype=np.float64), np.asarray(e, dtype=np.float64)
    if ecc.ndim == 0 and mean.ndim > 0 and 0 < mean.size <= BLOCK:
        return _at_one_e(mean, ecc.item())
    shape = np.broadcast_shapes(mean.shape, ecc.shape)
    mean, ecc = (
        (part if part.shape == shape else np.broadcast_to(part, shape)).reshape(-1)
        for part in (mean, ecc)
    )
    if not (ecc.size == 0 or (ecc.min() >= 0.0 and ecc.max() < 1.0)):
        raise ValueError(E_RANGE)
    size = min(BLOCK, mean.size)
    result, small = np.empty(mean.size), np.empty(mean.size, dtype=bool)
    double, single = np.empty((5, size)), np.empty((10, size), dtype=np.float32)
    for start in range(0, mean.size, BLOCK):
        part = slice(start, start + BLOCK)
        width = min(BLOCK, mean.size - start)
        rooms = double[:, :width], single[:, :width]
        _solve_block(mean[part], ecc[part], result[part], small[part], *rooms)
    if small.any():
        which = np.flatnonzero(small)
        full = mean[which]
        reduced = _reduced(full)
        inner = np.copysign(_near_periastron(np.abs(reduced), ecc[which]), reduced)
        result[which] = inner + (full - reduced)
    return result.reshape(shape)


def _at_one_e(mean: FloatArray, e: float) -> FloatArray:
    """E at one e, from a table of M over E and one Halley step."""
    if not 0.0 <= e < 1.0:
        raise ValueError(E_RANGE)
    m = np.abs(mean)
    largest = m.max()
    if not largest < np.inf:
        raise ValueError(M_FINITE)
    reduced = mean
    if largest > np.pi:
        reduced = _reduced(mean)
        m = np.abs(reduced)
    anomaly = np.interp(m, TABLE_E - e * TABLE_SINE, TABLE_E)
    sine, slope = np.sin(anomaly), np.cos(anomaly)
    slope *= -e
    slope += 1.0
    sine *= e
    # where the slope is small, E - e sin E cancels, and `_near_periastron` takes over
    step = anomaly - sine
    step -= m
    step /= slope
    sine /= slope
    sine *= step
    sine *= -0.5
    sine += 1.0
    step /= sine
    anomaly -= step
    if slope.min() < SERIES_BELOW:
        which = slope < SERIES_BELOW
        anomaly[which] = _near_periastron(m[which], e)
    np.copysign(anomaly, reduced, out=anomaly)
    if reduced is not mean:
        anomaly += mean - reduced
    return anomaly


def _reduced(mean: FloatArray) -> FloatArray:
    """M less a whole number of turns, within [-pi, pi]."""
    turns = mean * (1.0 / TWO_PI)
    np.rint(turns, out=turns)
    part = turns * TWO_PI_HIGH
    reduced = mean - part
    reduced -= np.multiply(turns, TWO_PI_MIDDLE, out=part)
    turns *= TWO_PI_LOW
    reduced -= turns
    return reduced


def _solve_block(
    mean: FloatArray,
    e: FloatArray,
    anomaly: FloatArray,
    small: NDArray[np.bool_],
    double: FloatArray,
    single: NDArray[np.float32],
) -> None:
    """Fill `anomaly`, and mark in `small` what `_near_periastron` has to do instead.

    Every step works in place, which halves the time: `double` and `single` are working rows.
    """
    m, gap, sine, slope, step = double
    np.abs(mean, out=m)
    largest = m.max()
    if not np.isfinite(largest):
        raise ValueError(M_FINITE)
    reduced = mean if largest <= np.pi else _reduced(mean)
    np.abs(reduced, out=m)
    np.subtract(1.0, e, out=gap)
    anomaly[...] = _starter(m, e, gap, single)
    # tan(E/2) gives both sin E and the slope 1 - e cos E = (1 - e) + 2 e sin^2(E/2)
    np.multiply(anomaly, 0.5, out=sine)
    np.tan(sine, out=sine)
    np.multiply(sine, sine, out=slope)
    np.add(slope, 1.0, out=step)
    sine /= step
    sine *= 2.0
    slope /= step
    slope *= 2.0
    slope *= e
    slope += gap
    np.less(slope, SERIES_BELOW, out=small)
    np.subtract(anomaly, sine, out=step)
    step *= e
    gap *= anomaly
    step += gap
    step -= m
    step /= slope
    sine *= e
    sine /= slope
    sine *= step
    sine *= -0.5
    sine += 1.0
    step /= sine
    anomaly -= step
    np.copysign(anomaly, reduced, out=anomaly)
    if reduced is not mean:
        anomaly += np.subtract(mean, reduced, out=m)


def _starter(
    mean: FloatArray, ecc: FloatArray, one_minus_e: FloatArray, single: NDArray[np.float32]
) -> NDArray[np.float32]:
    """E to about 1e-6 in single precision; the result stands in a row of `single`.

    Markley's names: alpha and d of eqs. 5 and 20, then q, r and w of the cubic.
    """
    m, e, gap, alpha, d, r, q2, u, w, v = single
    m[...], e[...], gap[...] = mean, ecc, one_minus_e
    np.subtract(np.float32(np.pi), m, out=alpha)
    alpha /= np.add(e, 1, out=u)
    alpha *= np.float32(ALPHA_SLOPE)
    alpha += np.float32(ALPHA_FIXED)
    np.multiply(alpha, e, out=d)
    d += np.multiply(gap, 3, out=u)
    alpha *= d
    np.subtract(d, gap, out=r)
    r *= alpha
    r *= 3
    r += np.multiply(m, m, out=u)
    r *= m
    q = np.multiply(alpha, gap, out=alpha)
    q *= 2
    q -= u
    np.multiply(q, q, out=q2)
    np.multiply(q2, q, out=w)
    w += np.multiply(r, r, out=u)
    np.sqrt(w, out=w)
    w += r
    np.cbrt(w, out=w)
    np.multiply(w, w, out=w)
    np.add(w, q, out=u)
    u *= w
    u += q2
    r *= w
    r *= 2
    r /= u
    r += m
    r /= d
    return _halley_single(m, e, gap, r, alpha, q2, u, v)


def _halley_single(
    m: NDArray, e: NDArray, gap: NDArray, anomaly: NDArray,
    sine: NDArray, slope: NDArray, step: NDArray, term: NDArray,
) -> NDArray[np.float32]:  # fmt: skip
    """One Halley step on `anomaly`; the last four rows are overwritten."""
    np.sin(anomaly, out=sine)
    np.cos(anomaly, out=slope)
    slope *= e
    np.subtract(1, slope, out=slope)
    np.subtract(anomaly, sine, out=step)
    step *= e
    step += np.multiply(gap, anomaly, out=term)
    step -= m
    step /= slope
    sine *= e
    sine /= slope
    sine *= step
    sine *= np.float32(-0.5)
    sine += 1
    step /= sine
    anomaly -= step
    return anomaly


def _near_periastron(m: FloatArray, e: FloatArray | float) -> FloatArray:
    """E for small E and e > 0.7, to full relative precision."""
    gap = 1.0 - e
    # the cubic (1 - e) E + e E^3 / 6 = m, by Cardano's formula in a form that does not cancel
    p = 2.0 * gap / e
    h = 3.0 * m / e
    root = np.cbrt(h + np.sqrt(h * h + p * p * p))
    anomaly = 2.0 * h / (root * root + p + (p / root) ** 2)
    for _ in range(2):
        square = anomaly * anomaly
        excess = gap * anomaly + e * (square * anomaly * _sine_tail(square)) - m
        half = np.sin(0.5 * anomaly)
        slope = gap + 2.0 * e * half * half
        step = excess / slope
        curve = 2.0 * e * half * np.sqrt(1.0 - half * half)
        anomaly = anomaly - step / (1.0 - 0.5 * step * curve / slope)
    return anomaly


def _sine_tail(square: FloatArray) -> FloatArray:
    """(E - sin E) / E^3 from E^2, for E below 0.8."""
    tail = 1.0 - square / 272.0
    for k in (15, 13, 11, 9, 7, 5):
        tail = 1.0 - square * tail / (k * (k - 1))
    return tail / 6.0


def unit_ellipse(anomaly: ArrayLike, e: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Place on the orbit of unit semimajor axis, in its own plane, X towards periastron.

    Parameters
    ----------
    anomaly : array_like
        Eccentric anomaly E, radians.
    e : array_like
        Eccentricity, 0 <= e < 1.

    Returns
    -------
    X, Y : ndarray
        X = cos E - e and Y = sqrt(1 - e^2) sin E (van de Kamp, Principles of Astrometry, 1967,
        ch. 11, from memory), X in a form that keeps its precision near periastron.
    """
    anomaly, e = np.asarray(anomaly, dtype=float), np.asarray(e, dtype=float)
    half = np.sin(0.5 * anomaly)
    return (1.0 - e) - 2.0 * half * half, np.sqrt((1.0 - e) * (1.0 + e)) * np.sin(anomaly)


def true_anomaly(anomaly: ArrayLike, e: ArrayLike) -> FloatArray:
    """True anomaly (radians, same revolution) from the eccentric anomaly E (radians)."""
    anomaly, e = np.asarray(anomaly, dtype=float), np.asarray(e, dtype=float)
    x, y = unit_ellipse(anomaly, e)
    inner = np.arctan2(y, x)
    return inner + TWO_PI * np.rint((anomaly - inner) / TWO_PI)


def mean_anomaly(anomaly: ArrayLike, e: ArrayLike) -> FloatArray:
    """Mean anomaly M = E - e sin E (radians) from the eccentric anomaly E (radians)."""
    anomaly, e = np.asarray(anomaly, dtype=float), np.asarray(e, dtype=float)
    return anomaly - e * np.sin(anomaly)


def eccentric_from_true(anomaly: ArrayLike, e: ArrayLike) -> FloatArray:
    """Eccentric anomaly (radians, same revolution) from the true anomaly (radians)."""
    anomaly, e = np.asarray(anomaly, dtype=float), np.asarray(e, dtype=float)
    inner = np.arctan2(np.sqrt((1.0 - e) * (1.0 + e)) * np.sin(anomaly), e + np.cos(anomaly))
    return inner + TWO_PI * np.rint((anomaly - inner) / TWO_PI)
