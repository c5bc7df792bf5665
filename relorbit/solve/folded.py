"""The search for orbits that does not ask on which side of the primary a measure lies.

z^2 = rho^2 exp(2 i theta) is the same for both quadrants. With z = a X + b Y, a and b complex, it
is a^2 X^2 + 2 a b X Y + b^2 Y^2: linear in three complex constants at given (P, e, T). So the
correlations of `relorbit.solve.search` serve here too, with powers of X and Y one higher.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_anomaly, unit_ellipse
from relorbit.solve.search import (
    BINS,
    BLOCK,
    ECCENTRICITIES,
    RESOLUTION,
    SearchMap,
    correlations,
    phase_bins,
)

RIDGE = 1e-9


def folded_search(
    epoch: FloatArray, z: NDArray[np.complex128], weight: FloatArray, periods: FloatArray
) -> SearchMap:
    """chi2 in z^2 of the best orbit at every period and eccentricity.

    Parameters
    ----------
    epoch : ndarray, shape (n,), Julian years, rising
    z : complex ndarray, shape (n,), arcsec, either quadrant
    weight : ndarray, shape (n,), of z^2
    periods : ndarray, shape (p,), Julian years
    """
    reference = 0.5 * (epoch[0] + epoch[-1])
    size = float(np.sqrt(np.average(np.abs(z) ** 2, weights=weight))) or 1.0
    square = (z / size) ** 2
    weight = weight / weight.sum()
    values = np.stack([weight, weight * square.real, weight * square.imag])
    constant = float(np.sum(weight * np.abs(square) ** 2))
    gain = np.empty((periods.size, len(ECCENTRICITIES)))
    phase = np.empty_like(gain)
    for start in range(0, periods.size, BLOCK):
        rows = slice(start, start + BLOCK)
        fields = phase_bins((epoch - reference) / periods[rows, None], values)
        spectra = np.fft.rfft(fields, axis=-1)
        for column, e in enumerate(ECCENTRICITIES):
            kernels = _kernels(e)
            every = _gain(spectra[..., : kernels.shape[-1]], kernels)
            best = np.argmax(every, axis=-1)
            gain[rows, column] = np.take_along_axis(every, best[:, None], axis=-1)[:, 0]
            phase[rows, column] = best / every.shape[-1]
    T = reference + phase * periods[:, None]
    return SearchMap(periods, np.array(ECCENTRICITIES), constant - gain, T)


@lru_cache(maxsize=64)
def _kernels(e: float) -> NDArray[np.complex128]:
    """Conjugate spectra of X^4, X^3 Y, X^2 Y^2, X Y^3, Y^4 and X^2, X Y, Y^2."""
    X, Y = unit_ellipse(eccentric_anomaly(TWO_PI * np.arange(BINS) / BINS, e), e)
    a, b, c = X * X, X * Y, Y * Y
    spectra = np.conj(np.fft.rfft(np.stack([a * a, a * b, b * b, b * c, c * c, a, b, c]), axis=-1))
    bins = next(bins for highest, bins in RESOLUTION if e <= highest)
    return spectra[:, : bins // 2 + 1] * (bins / BINS)


def _gain(spectra: NDArray, kernels: NDArray) -> NDArray:
    """By how much the best three constants lower chi2, shape (p, bins), by the adjugate matrix."""
    n11, n12, n22, n23, n33 = correlations(spectra[:1], kernels[:5])
    n13 = n22
    right = correlations(spectra[1:], kernels[5:])
    n11, mid, n33 = n11 * (1.0 + RIDGE), n22 * (1.0 + RIDGE), n33 * (1.0 + RIDGE)
    c11, c12, c13 = mid * n33 - n23 * n23, n13 * n23 - n12 * n33, n12 * n23 - n13 * mid
    c22, c23, c33 = n11 * n33 - n13 * n13, n12 * n13 - n11 * n23, n11 * mid - n12 * n12
    determinant = n11 * c11 + n12 * c12 + n13 * c13
    total = np.zeros_like(n11)
    for r1, r2, r3 in (right[:3], right[3:]):
        total += r1 * (c11 * r1 + 2.0 * (c12 * r2 + c13 * r3))
        total += r2 * (c22 * r2 + 2.0 * c23 * r3) + c33 * r3 * r3
    sound = determinant > RIDGE * n11 * mid * n33
    return np.divide(total, determinant, out=np.zeros_like(total), where=sound)


def unfolded(
    epoch: FloatArray,
    z: NDArray[np.complex128],
    weight: FloatArray,
    P: FloatArray,
    e: FloatArray,
    T: FloatArray,
) -> NDArray[np.complex128]:
    """The measures on the side of the primary that each of m orbits asks for, shape (m, n)."""
    out = np.empty((P.size, z.size), dtype=complex)
    root = np.sqrt(weight)
    for slot in range(P.size):
        mean = TWO_PI * np.remainder((epoch - T[slot]) / P[slot], 1.0)
        X, Y = unit_ellipse(eccentric_anomaly(mean, e[slot]), e[slot])
        basis = np.stack([X * X, X * Y, Y * Y], axis=1)
        square, cross, other = np.linalg.lstsq(
            basis * root[:, None], z * z * root, rcond=None
        )[0]
        a, b = np.sqrt(square), np.sqrt(other)
        if (np.conj(a * b) * cross).real < 0.0:
            b = -b
        place = a * X + b * Y
        out[slot] = np.where((np.conj(place) * z).real < 0.0, -z, z)
    return out
