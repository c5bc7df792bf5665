"""What is asked at a glance: orbits compared, phase, the most doubtful measures."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from relorbit.derive.glance import (
    compared,
    largest_in_sigma,
    most_doubtful,
    phase,
    range_of_dates,
)
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, positions
from relorbit.solve.residuals import residuals

INVENTED = Elements(47.3, 1987.4, 0.37, 1.24, 57.0, 62.0, 143.0)


@pytest.fixture
def pair() -> Pair:
    """Twelve invented measures, exact but for row 4 (3 sigma in rho) and row 7 (5 in theta)."""
    epoch = np.linspace(1960.0, 2015.0, 12)
    theta, rho = positions(INVENTED, epoch)
    rho[4] += 0.03
    theta[7] = np.mod(theta[7] + 2.5, 360.0)
    return Pair.from_arrays(epoch, theta, rho, np.full(12, 0.5), np.full(12, 0.01))


def test_the_most_doubtful_come_first_and_those_set_aside_not_at_all(pair: Pair) -> None:
    of = residuals(INVENTED, pair.measures)
    size = largest_in_sigma(of)
    assert size[[4, 7]] == pytest.approx([3.0, 5.0])
    assert np.delete(size, [4, 7]) == pytest.approx(0.0, abs=1e-9)
    assert most_doubtful(of)[:2].tolist() == [7, 4]
    use = np.ones(12, dtype=bool)
    use[7] = False
    rows = most_doubtful(residuals(INVENTED, replace(pair.measures, use=use)))
    assert rows[0] == 4 and 7 not in rows and len(rows) == 11


def test_a_value_not_measured_is_not_doubtful(pair: Pair) -> None:
    rho = np.array(pair.measures.rho)
    rho[4] = np.nan
    size = largest_in_sigma(residuals(INVENTED, replace(pair.measures, rho=rho)))
    assert size[4] == pytest.approx(0.0, abs=1e-9)


def test_orbits_are_compared_with_the_lowest(pair: Pair) -> None:
    worse = replace(INVENTED, a=1.3)
    true, other = compared(pair, {"true": INVENTED, "worse": worse})
    assert true.chi2 == pytest.approx(9.0 + 25.0)
    assert (true.name, true.rise, other.name) == ("true", 0.0, "worse")
    assert other.rise == pytest.approx(other.chi2 - true.chi2) and other.rise > 10.0
    assert compared(pair, {}) == ()


def test_phase_begins_at_periastron() -> None:
    epochs = INVENTED.T + INVENTED.P * np.array([0.0, 0.25, -0.25, 3.5])
    assert phase(INVENTED, epochs) == pytest.approx([0.0, 0.25, 0.75, 0.5])


def test_dates_reach_a_period_ahead_but_not_for_ever(pair: Pair) -> None:
    first, last = range_of_dates(pair.measures, INVENTED, 2026.0)
    assert first < 1960.0 and last == pytest.approx(2026.0 + 47.3)
    assert range_of_dates(pair.measures, replace(INVENTED, P=5000.0), 2026.0)[1] == 2226.0
    empty = pair.measures.select([])
    assert range_of_dates(empty, None, 2026.0) == (2025.0, 2036.0)
