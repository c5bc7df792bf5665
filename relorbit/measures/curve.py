"""A smooth curve through measures in time that a few slips cannot bend.

Each place is told by a straight line in x and y through its nearest neighbours in time, by
repeated medians (Siegel 1982, Biometrika 69, 242, from memory), which half of them may spoil.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

NEIGHBOURS = 8
FAR = 5.0  # scales from the curve beyond which a measure is off it


def curve_through(
    epoch: FloatArray,
    z: NDArray[np.complex128],
    at: FloatArray,
    apart: NDArray[np.intp] | None = None,
    neighbours: int = NEIGHBOURS,
) -> tuple[NDArray[np.complex128], FloatArray]:
    """Places on the curve, shape (m,), and the scatter of the measures about each, arcsec.

    Parameters
    ----------
    epoch, z : ndarray, shape (n,), n of three or more
        Julian years and x + i y, arcsec.
    at : ndarray, shape (m,)
        Julian years.
    apart : ndarray of int, shape (m,), optional
        A measure that each place must not know of; negative for none.
    neighbours : int
        How many measures tell a place.
    """
    near = _nearest(epoch, at, apart, min(neighbours, epoch.size - (apart is not None)))
    t, w = epoch[near] - at[:, None], z[near]
    dt = t[:, :, None] - t[:, None, :]
    same = np.abs(dt) < 1e-6
    with np.errstate(invalid="ignore"):
        slope = (w[:, :, None] - w[:, None, :]) / np.where(same, np.nan, dt)
    slope = _median_of_medians(slope)
    slope = np.where(np.isfinite(slope), slope, 0.0)
    rest = w - slope[:, None] * t
    place = np.median(rest.real, axis=1) + 1j * np.median(rest.imag, axis=1)
    off = np.abs(rest - place[:, None])
    return place, np.median(off, axis=1) / 1.1774  # the median of a circular Gaussian


def _nearest(
    epoch: FloatArray, at: FloatArray, apart: NDArray[np.intp] | None, count: int
) -> NDArray[np.intp]:
    """The `count` measures nearest in time to each place, shape (m, count).

    In order of time they stand side by side: only a window around each place is looked at.
    """
    order = np.argsort(epoch, kind="stable")
    sides = np.arange(-(count + 1), count + 1)
    slots = np.searchsorted(epoch[order], at)[:, None] + sides
    inside = (slots >= 0) & (slots < epoch.size)
    rows = order[np.clip(slots, 0, epoch.size - 1)]
    gap = np.where(inside, np.abs(epoch[rows] - at[:, None]), np.inf)
    if apart is not None:
        gap[rows == apart[:, None]] = np.inf
    near = np.argsort(gap, axis=1, kind="stable")[:, :count]
    return np.take_along_axis(rows, near, axis=1)


def _median_of_medians(slope: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Of slopes, shape (m, k, k) with NaN where there is none, shape (m,)."""
    parts = []
    for part in (slope.real, slope.imag):
        empty = ~np.isfinite(part).any(axis=2)
        inner = np.nanmedian(np.where(empty[..., None], 0.0, part), axis=2)
        # measures all of one epoch tell no slope: it is 0
        inner = np.where(empty & ~empty.all(axis=1, keepdims=True), np.nan, inner)
        parts.append(np.nanmedian(inner, axis=1))
    return parts[0] + 1j * parts[1]


def off_curve(epoch: FloatArray, z: NDArray[np.complex128]) -> NDArray[np.bool_]:
    """True for measures that their neighbours do not bear out, shape (n,)."""
    place, _ = curve_through(epoch, z, epoch, np.arange(epoch.size))
    off = np.abs(z - place)
    usual = np.median(off)
    return off > FAR * max(float(usual), 1e-12)
