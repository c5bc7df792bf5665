"""Measure histories drawn from elements: invented measures for tests and benchmarks.

The element sets are published ones, varied (see `published_like`); everything else is made up by
a seeded generator.
"""

from __future__ import annotations

import csv
from functools import cache
from pathlib import Path

import numpy as np

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, complex_position, polar
from relorbit.orbit.regular import regular_from_elements
from relorbit.solve.observations import Observations
from relorbit.solve.refine import polar_problem, refine

LAST = 2020.0  # Julian year of the last measure of every history
SMALLEST_ERROR, LARGEST_ERROR = 0.002, 0.15  # arcsec
FEWEST, MOST = 18, 160
LEAST_REVOLUTIONS, MOST_REVOLUTIONS = 0.3, 4.0
# an error above this share of the semimajor axis: such a pair is not measured, but guessed at
COARSEST = 0.4


@cache
def published() -> tuple[Elements, ...]:
    """The element sets of published_elements.csv, whose source stands in the file."""
    text = Path(__file__).with_name("published_elements.csv").read_text(encoding="utf-8")
    lines = [line for line in text.splitlines() if not line.startswith("#")]
    return tuple(
        Elements(*(float(row[name]) for name in (
            "P_yr", "T_yr", "e", "a_arcsec", "i_deg", "node_deg", "omega_deg")))
        for row in csv.DictReader(lines)
    )  # fmt: skip


def published_like(rng: np.random.Generator) -> Elements:
    """A published set as it stands or, as often, with P, e and a varied and any orientation."""
    sets = published()
    one = sets[rng.integers(len(sets))]
    if rng.random() < 0.5:
        return one
    return Elements(
        float(np.clip(one.P * np.exp(rng.normal(0.0, 0.2)), 1.0, 1000.0)),
        float(one.T + rng.uniform(-0.5, 0.5) * one.P),
        float(np.clip(one.e + rng.normal(0.0, 0.03), 0.0, 0.97)),
        float(one.a * np.exp(rng.normal(0.0, 0.2))),
        float(np.degrees(np.arccos(rng.uniform(-1.0, 1.0)))),
        float(rng.uniform(0.0, 360.0)),
        float(rng.uniform(0.0, 360.0)),
    )


def history_epochs(elements: Elements, rng: np.random.Generator) -> np.ndarray:
    """Julian years, shape (n,), rising: 18 to 160 over 0.3 to 4 revolutions up to `LAST`.

    Some histories are spread evenly, some grow denser towards the present, and some have a gap.
    """
    count = int(rng.integers(FEWEST, MOST, endpoint=True))
    revolutions = np.exp(rng.uniform(np.log(LEAST_REVOLUTIONS), np.log(MOST_REVOLUTIONS)))
    share = rng.random(count) ** rng.choice([1.0, 0.6])
    if rng.random() < 0.3:
        start, width = rng.uniform(0.1, 0.6), rng.uniform(0.1, 0.3)
        share = np.where((share > start) & (share < start + width), share - start, share)
    share -= share.min()
    return np.sort(LAST + revolutions * elements.P * (share / share.max() - 1.0))


def history_errors(elements: Elements, count: int, rng: np.random.Generator) -> np.ndarray:
    """Errors in x and y, arcsec, shape (count,): one to four observers, the better ones later."""
    largest = max(SMALLEST_ERROR, min(LARGEST_ERROR, COARSEST * elements.a))
    groups = int(rng.integers(1, 5))
    of_group = np.exp(rng.uniform(np.log(SMALLEST_ERROR), np.log(largest), groups))
    of_group = np.sort(of_group)[::-1]
    # each observer is at work around a time of his own
    place = np.arange(count) / count * groups + rng.normal(0.0, 0.4, count)
    return of_group[np.clip(place.astype(int), 0, groups - 1)]


def observed(
    elements: Elements,
    epoch: np.ndarray,
    error: np.ndarray | float,
    rng: np.random.Generator,
    **who: object,
) -> Pair:
    """A pair whose measures have a Gaussian error in x and y, and state it."""
    error = np.broadcast_to(error, epoch.shape)
    noise = rng.normal(size=epoch.size) + 1j * rng.normal(size=epoch.size)
    theta, rho = polar(complex_position(elements, epoch) + error * noise)
    theta_err = np.degrees(np.arctan2(error, rho))
    who.setdefault("allow_any_epoch", True)
    return Pair.from_arrays(epoch, theta, rho, theta_err, error, **who)


def history(rng: np.random.Generator) -> tuple[Elements, Pair]:
    """True elements and a simulated history of measures."""
    elements = published_like(rng)
    epoch = history_epochs(elements, rng)
    return elements, observed(elements, epoch, history_errors(elements, epoch.size, rng), rng)


def chi2_from_the_truth(elements: Elements, observations: Observations, t0: float) -> float:
    """chi2 that a refinement started at the true elements comes to."""
    start = regular_from_elements(elements, t0)
    problem = polar_problem(observations, t0)
    return float(refine(problem, start, most_iterations=500).chi2[0])
