"""What an observer at a desk asks at a glance while looking at one orbit after another."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from relorbit.derive.consequences import consequences
from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import FloatArray
from relorbit.solve.residuals import Residuals

MARGIN = 0.1  # of the span of the measures, on each side of a range of dates
MOST_AHEAD = 200.0  # years


@dataclass(frozen=True)
class Compared:
    """An orbit beside others: chi2 of the measures in use, and how far it is above the lowest."""

    name: str
    elements: Elements
    chi2: float
    rise: float


def compared(pair: Pair, orbits: Mapping[str, Elements]) -> tuple[Compared, ...]:
    """chi2 of several orbits against the same measures, in the order given."""
    chi2 = [consequences(pair, one).chi2 for one in orbits.values()]
    lowest = min(chi2, default=0.0)
    return tuple(
        Compared(name, elements, value, value - lowest)
        for (name, elements), value in zip(orbits.items(), chi2, strict=True)
    )


def phase(elements: Elements, epochs: FloatArray) -> FloatArray:
    """Share of the period since periastron, in [0, 1), at epochs (Julian years)."""
    return np.mod((epochs - elements.T) / elements.P, 1.0)


def largest_in_sigma(residuals: Residuals) -> FloatArray:
    """The larger of |O-C| in theta and in rho, in standard deviations, shape (n,).

    0 where neither was measured.
    """
    both = np.stack([residuals.theta_in_sigma, residuals.rho_in_sigma])
    return np.nanmax(np.abs(np.nan_to_num(both)), axis=0)


def most_doubtful(residuals: Residuals) -> NDArray[np.intp]:
    """Rows in use, the one farthest off in standard deviations first."""
    size = largest_in_sigma(residuals)
    order = np.argsort(-size, kind="stable")
    return order[residuals.used[order]]


def range_of_dates(
    measures: Measures, elements: Elements | None, today: float
) -> tuple[float, float]:
    """Julian years worth looking at: from a little before the first measure to a period ahead."""
    epochs = measures.epoch
    first, last = (float(epochs.min()), float(epochs.max())) if len(epochs) else (today, today)
    ahead = 10.0 if elements is None else min(max(elements.P, 10.0), MOST_AHEAD)
    return first - MARGIN * (last - first) - 1.0, max(last, today) + ahead
