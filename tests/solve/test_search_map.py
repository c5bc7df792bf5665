"""The search's map against a linear fit at every T, one by one."""

from __future__ import annotations

import numpy as np
import pytest
from simulate import history, observed

from relorbit.orbit.elements import Elements
from relorbit.solve.linear import SkyData, fit_constants, sky_data
from relorbit.solve.observations import observe
from relorbit.solve.search import (
    BINS,
    ECCENTRICITIES,
    LONGEST,
    POINTS,
    SearchMap,
    period_grid,
    search,
)

PAIR = Elements(40.0, 1995.0, 0.45, 1.0, 50.0, 70.0, 200.0)


def invented(count: int = 60, first: float = 1940.0, seed: int = 3) -> SkyData:
    rng = np.random.default_rng(seed)
    epoch = np.sort(rng.uniform(first, 2020.0, count))
    return sky_data(observe(observed(PAIR, epoch, 0.03, rng).measures))


def brute_force(data: SkyData, P: float, e: float, steps: int = 1024) -> tuple[float, float]:
    """The least chi2 over T, and the T, from `steps` linear fits."""
    T = 1980.0 + P * np.arange(steps) / steps
    fit = fit_constants(data, np.full(steps, P), np.full(steps, e), T)
    best = int(np.argmin(fit.chi2))
    return float(fit.chi2[best]), float(T[best])


@pytest.mark.parametrize("e", ECCENTRICITIES)
@pytest.mark.parametrize("P", [23.0, 40.0, 66.0, 160.0])
def test_map_is_the_best_linear_fit_over_T(P: float, e: float) -> None:
    data = invented()
    found = search(data, np.array([P]), (e,))
    chi2, _ = brute_force(data, P, e)
    # linear sharing over the bins blurs the phase by half a bin: chi2 of a fit that explains
    # most of the measures is off by a few thousandths of what the measures hold
    assert found.chi2[0, 0] == pytest.approx(chi2, rel=0.15, abs=0.004 * data.constant)


@pytest.mark.parametrize("e", ECCENTRICITIES)
def test_T_of_the_map_is_as_good_as_the_best_of_many(e: float) -> None:
    data = invented()
    found = search(data, np.array([PAIR.P]), (e,))
    at_found = fit_constants(data, [PAIR.P], [e], found.T[0]).chi2[0]
    chi2, _ = brute_force(data, PAIR.P, e)
    assert chi2 - 1e-6 <= at_found <= chi2 + 0.01 * data.constant


def test_the_map_is_lowest_where_the_orbit_is() -> None:
    data = invented()
    periods = period_grid(80.0, 60)
    found = search(data, periods)
    P, e, T = found.basins(1)
    assert P[0] == pytest.approx(PAIR.P, rel=0.04)
    assert abs(e[0] - PAIR.e) < 0.15
    turns = (T[0] - PAIR.T) / PAIR.P
    assert abs(turns - np.rint(turns)) < 0.05


@pytest.mark.parametrize("seed", range(5))
def test_binned_and_unbinned_measures_give_one_map(seed: int) -> None:
    elements, _ = history(np.random.default_rng([5, seed]))
    rng = np.random.default_rng(seed)
    span = 2.0 * elements.P
    epoch = np.sort(rng.uniform(2000.0 - span, 2000.0, POINTS))
    few = sky_data(observe(observed(elements, epoch, 0.1 * elements.a, rng).measures))
    # one measure more, of next to no weight, is one too many to be taken one by one
    parts = (few.epoch, few.z, few.w_xx, few.w_xy, few.w_yy)
    extra = [np.append(part, part[-1] * (1e-9 if k > 1 else 1.0)) for k, part in enumerate(parts)]
    periods = elements.P * np.array([0.5, 1.0, 1.7])
    one, other = search(few, periods), search(SkyData(*extra), periods)
    assert other.chi2 == pytest.approx(one.chi2, abs=0.004 * few.constant)
    # and the passages it names are as good
    P, e = np.meshgrid(periods, one.e, indexing="ij")
    named = fit_constants(few, P.ravel(), e.ravel(), other.T.ravel()).chi2
    assert np.all(named < one.chi2.ravel() + 0.01 * few.constant)


def test_single_precision_does_no_harm_where_it_is_used() -> None:
    data = invented(count=150, first=1700.0)
    within = search(data, np.array([PAIR.P]))  # single precision: far below the span
    together = search(data, np.array([1000.0, PAIR.P]))  # the long one asks for double
    assert within.chi2 == pytest.approx(together.chi2[1:], abs=2e-4 * data.constant)


def test_periods_are_spaced_by_frequency_within_the_span_and_by_ratio_beyond() -> None:
    span = 50.0
    periods = period_grid(span, 60)
    assert np.all(np.diff(periods) < 0.0)
    assert periods[0] == pytest.approx(LONGEST * span)
    assert periods[-1] == pytest.approx(4.0 * span / 60.0)
    within = periods[periods <= span * (1.0 + 1e-12)]
    assert np.diff(span / within).max() <= 0.0801
    beyond = periods[periods >= span * (1.0 - 1e-12)]
    assert np.abs(np.diff(np.log(beyond))).max() <= 0.1201


@pytest.mark.parametrize("given", [(3.0, 20.0), (30.0, 400.0), (100.0, 400.0), (50.0, 50.0)])
def test_a_period_range_is_covered_from_end_to_end(given: tuple[float, float]) -> None:
    periods = period_grid(50.0, 60, given)
    assert periods.min() == pytest.approx(given[0])
    assert periods.max() == pytest.approx(given[1])


def test_basins_are_the_local_minima_best_first() -> None:
    chi2 = np.array([[9.0, 8.0, 9.0], [7.0, 9.0, 5.0], [9.0, 9.0, 9.0], [1.0, 9.0, 6.0]])
    P, e = np.array([8.0, 4.0, 2.0, 1.0]), np.array([0.1, 0.4, 0.8])
    found = SearchMap(P, e, chi2, np.arange(12.0).reshape(4, 3)).basins(10)
    assert found[0].tolist() == [1.0, 4.0, 1.0, 4.0]
    assert found[1].tolist() == [0.1, 0.8, 0.8, 0.1]
    assert found[2].tolist() == [9.0, 5.0, 11.0, 3.0]
    assert len(SearchMap(P, e, chi2, chi2).basins(2)[0]) == 2


def test_the_resolution_of_T_follows_the_eccentricity() -> None:
    data = invented()
    for e, bins in ((0.05, 64), (0.77, 128), (0.975, BINS)):
        found = search(data, np.array([40.0]), (e,))
        phase = (found.T[0, 0] - 0.5 * (data.epoch[0] + data.epoch[-1])) / 40.0 * bins
        assert phase == pytest.approx(np.rint(phase), abs=1e-6)


@pytest.mark.parametrize("tiny", [1e-9, 1e-25, 1e-40])
def test_one_error_near_zero_overflows_nothing(tiny: float) -> None:
    """Found by the desk's random user: squares of such weights are beyond single precision."""
    data = invented(count=60, first=1930.0)
    w_xx, w_yy = data.w_xx.copy(), data.w_yy.copy()
    w_xx[30] = w_yy[30] = 1.0 / tiny**2
    w_xy = data.w_xy.copy()
    w_xy[30] = 0.0
    one = SkyData(data.epoch, data.z, w_xx, w_xy, w_yy)
    found = search(one, 0.05 * PAIR.P * np.array([1.0, 1.3]))  # short: in single precision
    assert np.isfinite(found.chi2).all()
    assert np.isfinite(found.T).all()
