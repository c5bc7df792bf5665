"""Every basin of (P, e, T), without a guess.

For one period, the weights and the weighted places of the measures are shared out over bins of
phase. The normal equations of the linear problem (see `linear`) for all T at once are then
circular correlations of those bins with X^2, XY, Y^2, X and Y of a given e: a few FFTs give chi2
over all T, at a cost that does not depend on the number of measures.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_anomaly, unit_ellipse
from relorbit.solve.linear import SkyData

BINS = 256
FREQUENCY_STEP = 0.08  # in units of one over the time span
LONG_STEP = 0.12  # step in ln P beyond the span
LONGEST = 100.0  # longest period searched, in time spans
ECCENTRICITIES = (0.05, 0.28, 0.48, 0.64, 0.77, 0.87, 0.935, 0.975)
# bins of T that are tried for eccentricities up to the first number
RESOLUTION = ((0.55, 64), (0.85, 128), (1.0, BINS))
BLOCK = 64  # periods at a time: bounds the memory
ALWAYS_DOUBLE = 0.7  # periods above this many time spans are searched in double precision
POINTS = 2000  # more measures than this are first added up in this many bins of time
EPOCHS_EACH = 4.0  # distinct epochs a revolution needs to be searched for
MOST_REVOLUTIONS = 40.0  # shortest period searched, as revolutions within the span


@dataclass(frozen=True)
class SearchMap:
    """chi2 over the grid of periods and eccentricities, the best T taken at each point.

    Attributes
    ----------
    P : ndarray, shape (p,), Julian years, falling.
    e : ndarray, shape (k,)
    chi2 : ndarray, shape (p, k)
    T : ndarray, shape (p, k), Julian year of the best periastron passage.
    """

    P: FloatArray
    e: FloatArray
    chi2: FloatArray
    T: FloatArray

    def basins(self, most: int) -> tuple[FloatArray, FloatArray, FloatArray]:
        """P, e, T of the local minima of the map, best first, at most `most`."""
        padded = np.pad(self.chi2, 1, constant_values=np.inf)
        lowest = np.ones(self.chi2.shape, dtype=bool)
        rows, columns = self.chi2.shape
        for down in range(3):
            for across in range(3):
                lowest &= self.chi2 <= padded[down : down + rows, across : across + columns]
        p, k = np.nonzero(lowest)
        order = np.argsort(self.chi2[p, k], kind="stable")[:most]
        p, k = p[order], k[order]
        return self.P[p], self.e[k], self.T[p, k]


def period_grid(
    span: float, distinct: int, period_range: tuple[float, float] | None = None
) -> FloatArray:
    """Periods to look at, Julian years, from the longest to the shortest.

    Parameters
    ----------
    span : float
        Years from the first to the last measure.
    distinct : int
        Number of distinct epochs: with few for each revolution there is no telling one period
        from another, so the shortest period has four of them, with 5 to `MOST_REVOLUTIONS`
        revolutions within the span.
    period_range : (float, float), optional
        Shortest and longest period instead.
    """
    shortest = span / min(max(5.0, distinct / EPOCHS_EACH), MOST_REVOLUTIONS)
    longest = LONGEST * span
    if period_range is not None:
        shortest, longest = period_range
    beyond = np.empty(0)
    if longest > span:
        start = max(shortest, span)
        count = max(2, int(np.ceil(np.log(longest / start) / LONG_STEP)) + 1)
        beyond = np.geomspace(longest, start, count)[: -1 if shortest < span else None]
    highest, lowest = 1.0 / shortest, 1.0 / min(longest, span)
    within = np.empty(0)
    if highest > lowest:
        count = int(np.ceil((highest - lowest) * span / FREQUENCY_STEP)) + 1
        within = 1.0 / np.linspace(lowest, highest, max(2, count))
    return np.concatenate([beyond, within]) if shortest < longest else np.array([longest])


def search(
    data: SkyData,
    periods: FloatArray,
    eccentricities: tuple[float, ...] = ECCENTRICITIES,
    on_progress: Callable[[float], None] | None = None,
) -> SearchMap:
    """chi2 of the best orbit at every period and eccentricity of a grid.

    Parameters
    ----------
    data : SkyData
        Measures of one pair, shape (n,).
    periods : ndarray, shape (p,)
        Julian years.
    eccentricities : tuple of float, length k
        Each 0 <= e < 1.
    on_progress : callable, optional
        Called with the share done, 0 to 1; what it raises ends the search.
    """
    reference = 0.5 * (data.epoch[0] + data.epoch[-1])
    span = max(data.epoch[-1] - data.epoch[0], np.finfo(float).tiny)
    epoch, values = _normal_points(data)
    # single precision overflows on the weights of errors near zero, so both get units of their own
    weight_unit = float(np.abs(values[:3]).max()) or 1.0
    size_unit = float(np.abs(values[3:]).max()) / weight_unit or 1.0
    values = values / np.array([weight_unit] * 3 + [weight_unit * size_unit] * 2)[:, None]
    gain = np.empty((periods.size, len(eccentricities)))
    phase = np.empty_like(gain)
    for start in range(0, periods.size, BLOCK):
        if on_progress is not None:
            on_progress(start / periods.size)
        rows = slice(start, start + BLOCK)
        # short arcs leave the normal equations too close to singular for single precision
        kind = np.float64 if periods[rows].max() > ALWAYS_DOUBLE * span else np.float32
        fields = phase_bins((epoch - reference) / periods[rows, None], values)
        spectra = np.fft.rfft(fields.astype(kind), axis=-1)
        for column, e in enumerate(eccentricities):
            kernels = _kernels(e).astype(spectra.dtype)
            # with a few measures all may fall on one phase: that T then gains nothing
            with np.errstate(over="ignore", invalid="ignore"):
                every = _gain(spectra[..., : kernels.shape[-1]], kernels)
                sound = np.isfinite(every.sum())
            if not sound:
                np.nan_to_num(every, copy=False, nan=0.0, posinf=0.0, neginf=0.0)
            best = np.argmax(every, axis=-1)
            gain[rows, column] = every[np.arange(best.size), best]
            phase[rows, column] = best / every.shape[-1]
    T = reference + phase * periods[:, None]
    chi2 = data.constant - weight_unit * size_unit**2 * gain
    return SearchMap(periods, np.array(eccentricities), chi2, T)


def _normal_points(data: SkyData) -> tuple[FloatArray, FloatArray]:
    """Epochs, shape (m,), and w_xx, w_xy, w_yy and W z, shape (5, m).

    Beyond `POINTS` measures those that follow one another closely are added up, so that the cost
    of the search stays what it is.
    """
    wx = data.w_xx * data.z.real + data.w_xy * data.z.imag
    wy = data.w_xy * data.z.real + data.w_yy * data.z.imag
    values = np.stack([data.w_xx, data.w_xy, data.w_yy, wx, wy])
    if data.epoch.size <= POINTS:
        return data.epoch, values
    place = (data.epoch - data.epoch[0]) / (data.epoch[-1] - data.epoch[0]) * (POINTS - 1)
    which = np.unique(place.astype(np.intp), return_inverse=True)[1]
    weight = data.w_xx + data.w_yy
    total = np.bincount(which, weight)
    epoch = np.bincount(which, weight * data.epoch) / np.where(total > 0.0, total, 1.0)
    summed = np.stack([np.bincount(which, value) for value in values])
    return epoch[total > 0.0], summed[:, total > 0.0]


def phase_bins(turns: FloatArray, values: FloatArray) -> FloatArray:
    """Share values, shape (f, n), out over bins of phase of turns, shape (p, n): (f, p, BINS)."""
    place = np.remainder(turns, 1.0) * BINS
    left = np.minimum(place.astype(np.intp), BINS - 1)
    share = place - left
    base = BINS * np.arange(left.shape[0])[:, None]
    both = np.concatenate([(base + left).ravel(), (base + (left + 1) % BINS).ravel()])
    shares = np.concatenate([1.0 - share, share])
    fields = np.empty((values.shape[0], left.shape[0], BINS))
    for slot, value in enumerate(values):
        counts = np.bincount(both, (shares * value).ravel(), minlength=left.shape[0] * BINS)
        fields[slot] = counts.reshape(-1, BINS)
    return fields


@lru_cache(maxsize=64)
def _kernels(e: float) -> NDArray[np.complex128]:
    """Conjugate spectra of X^2, XY, Y^2, X and Y over mean anomaly, shape (5, harmonics + 1).

    The rounder the orbit, the fewer harmonics it has and the fewer T have to be tried.
    """
    X, Y = unit_ellipse(eccentric_anomaly(TWO_PI * np.arange(BINS) / BINS, e), e)
    spectra = np.conj(np.fft.rfft(np.stack([X * X, X * Y, Y * Y, X, Y]), axis=-1))
    bins = next(bins for highest, bins in RESOLUTION if e <= highest)
    return spectra[:, : bins // 2 + 1] * (bins / BINS)


def correlations(spectra: NDArray, kernels: NDArray) -> NDArray:
    """Every spectrum, (f, p, h), with every kernel, (k, h), back in T: (f k, p, bins)."""
    products = spectra[:, None] * kernels[:, None]
    return np.fft.irfft(products, axis=-1).reshape(-1, spectra.shape[1], 2 * kernels.shape[1] - 2)


def _gain(spectra: NDArray, kernels: NDArray) -> NDArray:
    """By how much the best A, B, F, G at each T lower chi2, shape (p, BINS).

    The gain is b' N^-1 b with the normal matrix N of (A, F, B, G) in 2-by-2 blocks A, B, B', C
    and b in the halves p and q.
    """
    a11, a12, a22, b11, b12, b22, c11, c12, c22 = correlations(spectra[:3], kernels[:3])
    p1, p2, q1, q2 = correlations(spectra[3:], kernels[3:])
    # in place wherever an array is not needed again: new memory costs as much as the arithmetic
    ridge = 8.0 * np.finfo(a11.dtype).eps
    scale = a11 * a22
    scale *= 1.0 + ridge
    least = scale * ridge
    scale -= a12 * a12
    # where A is singular to rounding nothing is gained
    scale = np.divide(1.0, scale, out=np.zeros_like(scale), where=scale > least)
    i11, i12, i22 = (
        a22 * scale,
        a12 * scale,
        a11 * scale,
    )  # the inverse of A, i12 with its sign lost
    k11, k12 = i11 * b11, i11 * b12  # K = A^-1 B
    k11 -= i12 * b12
    k12 -= i12 * b22
    k21, k22 = i22 * b12, i22 * b22
    k21 -= i12 * b11
    k22 -= i12 * b12
    # the Schur complement C - B' K, and what is left of the right side
    s11, s12, s22 = c11, c12, c22
    s11 *= 1.0 + ridge
    s11 -= b11 * k11
    s11 -= b12 * k21
    s22 *= 1.0 + ridge
    s22 -= b12 * k12
    s22 -= b22 * k22
    s12 -= b11 * k12
    s12 -= b12 * k22
    k11 *= p1
    k21 *= p2
    k12 *= p1
    k22 *= p2
    q1 -= k11
    q1 -= k21
    q2 -= k12
    q2 -= k22
    return _quadratic(i11, i12, i22, p1, p2) + _solved_quadratic(s11, s12, s22, q1, q2, ridge)


def _quadratic(i11: NDArray, i12: NDArray, i22: NDArray, p1: NDArray, p2: NDArray) -> NDArray:
    """i11 p1^2 - 2 i12 p1 p2 + i22 p2^2; i11, i12 and i22 are overwritten."""
    i11 *= p1
    i12 *= p2
    i12 *= 2.0
    i11 -= i12
    i11 *= p1
    i22 *= p2
    i22 *= p2
    i11 += i22
    return i11


def _solved_quadratic(
    s11: NDArray, s12: NDArray, s22: NDArray, r1: NDArray, r2: NDArray, ridge: float
) -> NDArray:
    """r' S^-1 r, and 0 where S is singular to rounding; the arguments are overwritten."""
    both = s11 * s22
    determinant = both - s12 * s12
    both *= ridge
    sound = determinant > both
    rest = _quadratic(s22, s12, s11, r1, r2)
    return np.divide(rest, determinant, out=np.zeros_like(rest), where=sound)
