"""Pairs that the tests of the posterior share: invented elements, invented measures."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).parents[1]))
sys.path.insert(0, str(Path(__file__).parents[1] / "benchmarks"))

from invented import ORBIT
from simulate import observed

from relorbit.measures.pair import Pair
from relorbit.solve.posterior import Posterior
from relorbit.solve.sample import sample


@pytest.fixture(scope="session")
def covered() -> Pair:
    """One revolution, 40 measures."""
    rng = np.random.default_rng(5)
    epoch = np.sort(rng.uniform(1970.0, 2020.0, 40))
    return observed(ORBIT, epoch, 0.02, rng, parallax=40.0, parallax_err=0.4, name="Invented 5")


@pytest.fixture(scope="session")
def posterior(covered: Pair) -> Posterior:
    return sample(covered, 3000, seed=1)
