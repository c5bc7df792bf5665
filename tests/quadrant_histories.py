"""Invented histories whose quadrants are flipped at random."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from simulate import chi2_from_the_truth, history

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements
from relorbit.orbit.regular import regular_from_elements
from relorbit.solve.observations import observe
from relorbit.solve.refine import polar_problem, refine

FEWEST, LEAST_REVOLUTIONS = 40, 0.5
SAME_CHI2 = 1.0


def flipped_history(rng: np.random.Generator) -> tuple[Elements, Pair, Pair]:
    """Truth, the true measures, and the same with up to half of the quadrants flipped."""
    while True:
        truth, pair = history(rng)
        m = pair.measures
        if len(m) >= FEWEST and np.ptp(m.epoch) > LEAST_REVOLUTIONS * truth.P:
            break
    flip = rng.random(len(m)) < rng.uniform(0.0, 0.5)
    theta = np.where(flip, (m.theta + 180.0) % 360.0 % 360.0, m.theta)
    return truth, pair, pair.with_measures(replace(m, theta=theta))


def is_found(elements: Elements, truth: Elements, pair: Pair) -> bool:
    """True where the elements, as they stand or turned, lead to an orbit that fits the true
    quadrants as well as the truth does."""
    o = observe(pair.measures)
    t0 = o.mean_epoch
    problem = polar_problem(o, t0)
    wanted = chi2_from_the_truth(truth, o, t0)
    chi2 = [
        refine(problem, regular_from_elements(one, t0), most_iterations=500).chi2[0]
        for one in (elements, replace(elements, omega=elements.omega + 180.0))
    ]
    return bool(min(chi2) < wanted + SAME_CHI2)
