"""The separate parts of a posterior: the orbits between which there is nothing."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.kepler import FloatArray
from relorbit.solve.mixture import Mixture

VALLEY = 0.03  # density between two parts, of the lower of their peaks, that divides them
LEAST = 5e-3  # probability of a part that is one of its own
WIDE = 8.0  # times the median volume: such a component only holds the others together
PLACES = 24  # looked at between two centres


def modes_of(mixture: Mixture, y: FloatArray, weight: FloatArray) -> NDArray[np.intp]:
    """Number of the separate part that each sample belongs to, shape (m,), 0 the likeliest.

    Components of the mixture belong together where the density does not fall below `VALLEY` of
    the lower peak on the way between them; a sample belongs where its component does.
    """
    volume = np.prod(np.diagonal(mixture.root, 0, 1, 2), axis=1)
    # the wide components belong to all parts and join none
    used = np.flatnonzero((mixture.share > LEAST) & (volume <= WIDE * np.median(volume)))
    group = _groups(mixture, mixture.centre[used])
    parts = mixture.parts(y)[0][used]
    label = group[np.argmax(parts, axis=0)]
    names, label = np.unique(label, return_inverse=True)
    odds = np.bincount(label, weight, minlength=names.size)
    odds = np.where(odds < LEAST, 0.0, odds)
    order = np.argsort(-odds, kind="stable")
    rank = np.empty_like(order)
    rank[order] = np.arange(order.size)
    rank = np.where(odds > 0.0, rank, 0)
    return rank[label]


def _groups(mixture: Mixture, centre: FloatArray) -> NDArray[np.intp]:
    """Number of the part of each centre, the ways of highest density joined first.

    A centre in a valley joins one side only: its own peak counts for nothing once it belongs to a
    higher one.
    """
    group = np.arange(centre.shape[0])
    peak = mixture.log_density(centre)
    first, second = np.triu_indices(centre.shape[0], 1)
    saddle = np.array([_saddle(mixture, centre[a], centre[b])
                       for a, b in zip(first, second, strict=True)])  # fmt: skip
    for k in np.argsort(-saddle, kind="stable"):
        one, other = group[first[k]], group[second[k]]
        if one != other and saddle[k] > min(peak[one], peak[other]) + np.log(VALLEY):
            group[group == other] = one
            peak[one] = max(peak[one], peak[other])
    return group


def _saddle(mixture: Mixture, first: FloatArray, second: FloatArray) -> float:
    """ln of the least density on the straight way between two places."""
    gap = second - first
    gap[2] -= np.rint(gap[2])
    way = first + np.linspace(0.0, 1.0, PLACES)[:, None] * gap
    return float(mixture.log_density(way).min())
