"""Fixtures of the invented pair that most tests of pictures and texts look at."""

from collections.abc import Callable

import pytest
from invented_pairs import INVENTED, simulate, solution_of

from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements
from relorbit.solve.solution import Alternative, Notice, Solution


@pytest.fixture
def measures() -> Measures:
    return simulate(INVENTED)


@pytest.fixture
def pair(measures: Measures) -> Pair:
    return Pair("Invented 1", measures, ra_deg=187.3, dec_deg=-12.4, parallax_mas=31.2,
                parallax_err_mas=0.4, magnitude_primary=6.1, magnitude_secondary=7.4)  # fmt: skip


@pytest.fixture
def solution(pair: Pair) -> Solution:
    other = Elements(124.8, 1951.3, 0.71, 1.31, 60.0, 51.0, 122.0)
    notice = Notice("few-plates", "a sentence that an observer should read, " * 4 + "and act on.")
    return solution_of(INVENTED, pair, error_scale=1.3,
                       alternatives=(Alternative(other, 131.4),), warnings=(notice,))  # fmt: skip


@pytest.fixture
def simulated() -> Callable[..., Measures]:
    return simulate
