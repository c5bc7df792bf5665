"""What weights of importance are worth: effective size, the tail of Pareto, quantiles."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from relorbit.orbit.kepler import FloatArray

FEWEST_FOR_TAIL = 25


def normalised(log_weight: FloatArray) -> FloatArray:
    """Weights of sum 1; all zero where none is above 0."""
    top = np.max(log_weight, initial=-np.inf)
    if not np.isfinite(top):
        return np.zeros_like(log_weight)
    weight = np.exp(log_weight - top)
    return weight / weight.sum()


def effective_size(weight: FloatArray) -> float:
    """(sum w)^2 / sum w^2 (Kish 1965, from memory)."""
    square = float(weight @ weight)
    return float(weight.sum()) ** 2 / square if square > 0.0 else 0.0


def pareto_k(weight: FloatArray) -> float:
    """The shape k of the generalised Pareto distribution of the largest weights.

    Below 0.5 the weights have a variance, above 0.7 averages over them are not to be trusted
    (Vehtari, Simpson, Gelman, Yao & Gabry 2024, JMLR 25, 72). The fit is that of Zhang & Stephens
    (2009, Technometrics 51, 316). NaN for too few weights, minus infinity for equal ones.
    """
    count = int(np.ceil(min(0.2 * weight.size, 3.0 * np.sqrt(weight.size))))
    if count < 5 or np.count_nonzero(weight) < FEWEST_FOR_TAIL:
        return np.nan
    top = np.sort(np.partition(weight, weight.size - count - 1)[weight.size - count - 1 :])
    excess = top[1:] - top[0]
    if not excess[-1] > 1e-9 * top[-1]:
        return -np.inf
    excess = np.maximum(excess, 1e-12 * excess[-1])
    size = excess.size
    grid = 30 + int(np.sqrt(size))
    theta = 1.0 / excess[-1] + (1.0 - np.sqrt(grid / (np.arange(grid) + 0.5))) / (
        3.0 * excess[int(size / 4 + 0.5) - 1]
    )
    shape = np.log1p(-theta[:, None] * excess).mean(axis=1)
    fit = size * (np.log(-theta / shape) - shape - 1.0)
    odds = np.exp(fit - fit.max())
    best = float(theta @ odds / odds.sum())
    k = float(np.log1p(-best * excess).mean())
    # leaning on 0.5 with the weight of ten points, as the authors do
    return (size * k + 10.0 * 0.5) / (size + 10.0)


def quantiles(values: FloatArray, weight: FloatArray, shares: ArrayLike) -> FloatArray:
    """Values below which given shares of the weight lie; NaN values are left out."""
    known = np.isfinite(values)
    if not known.any() or not weight[known].sum() > 0.0:
        return np.full(np.shape(shares), np.nan)
    values, weight = values[known], weight[known]
    order = np.argsort(values, kind="stable")
    below = np.cumsum(weight[order])
    below = (below - 0.5 * weight[order]) / below[-1]
    return np.interp(shares, below, values[order])


def circular_mean(angle: FloatArray, weight: FloatArray, turn: float = 360.0) -> float:
    """Mean direction of angles on a circle of circumference `turn`, in [0, turn)."""
    unit = 2.0 * np.pi / turn
    mean = weight @ np.exp(1j * unit * np.where(np.isfinite(angle), angle, 0.0))
    return float(np.angle(mean) / unit % turn)


def around(angle: FloatArray, centre: float, turn: float = 360.0) -> FloatArray:
    """Angles moved by whole turns to within half a turn of `centre`."""
    return angle - turn * np.rint((angle - centre) / turn)


def resampled(weight: FloatArray, size: int, rng: np.random.Generator) -> np.ndarray:
    """Indices, shape (size,), drawn in proportion to weight (systematic, then shuffled)."""
    edges = np.cumsum(weight)
    places = (np.arange(size) + rng.random()) / size * edges[-1]
    which = np.searchsorted(edges, places, side="right")
    return rng.permutation(np.minimum(which, weight.size - 1))
