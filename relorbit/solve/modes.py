"""The separate parts of a posterior: the orbits between which there is nothing."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.kepler import FloatArray
from relorbit.solve.mixture import Mixture

VALLEY = 0.03  # density between two parts, of the lower of their peaks, that divides them
LEAST = 1e-3  # probability of a part that is one of its own
WIDE = 8.0  # times the median volume: such a component only holds the others together
PLACES = 24  # looked at between two centres


def modes_of(mixture: Mixture, y: FloatArray, weight: FloatArray) -> NDArray[np.intp]:
    """Number of the separate part that each sample belongs to, shape (m,), 0 the likeliest.

    Components of the mixture belong together where the density does not fall below `VALLEY` of
    the lower of the two on the way between them; a sample belongs where its component does.
    """
    volume = np.prod(np.diagonal(mixture.root, 0, 1, 2), axis=1)
    # the wide components belong to all parts and join none
    used = np.flatnonzero((mixture.share > LEAST) & (volume <= WIDE * np.median(volume)))
    centre = mixture.centre[used]
    group = np.arange(used.size)
    for first in range(used.size):
        for second in range(first):
            if group[first] != group[second] and _joined(mixture, centre[first], centre[second]):
                group[group == group[first]] = group[second]
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


def _joined(mixture: Mixture, first: FloatArray, second: FloatArray) -> bool:
    gap = second - first
    gap[2] -= np.rint(gap[2])
    way = first + np.linspace(0.0, 1.0, PLACES)[:, None] * gap
    density = mixture.log_density(way)
    return bool(density.min() > min(density[0], density[-1]) + np.log(VALLEY))
