"""Quick versions of the benchmarks: the full ones are run by hand."""

from __future__ import annotations

import time

import kind_odds
import lucy_mass
import numpy as np
import posterior_calibration as calibration
import pytest
from emcee_reference import WALKERS, cases, chain
from posterior_against_emcee import compare

from relorbit.solve.kind import kind
from relorbit.solve.prior import Prior
from relorbit.solve.sample import sample

# emcee 3.1 itself warns of its own random state on numpy 2
pytestmark = pytest.mark.filterwarnings("default")


@pytest.mark.parametrize(("name", "steps"), [("covered", 2500), ("arc 20 %", 4000)])
def test_percentiles_agree_with_emcee(name, steps):
    found = np.array(list(compare(cases()[name], steps).values()))
    # 25 correlated differences over their Monte Carlo errors
    assert np.abs(found).max() < 4.0
    assert np.sqrt(np.mean(found**2)) < 1.9


def test_faster_than_vectorised_emcee_by_far():
    pair = cases()["covered"]
    sample(pair, 1000)
    begun = time.perf_counter()
    posterior = sample(pair, 10_000)
    rate = posterior.effective_size / (time.perf_counter() - begun)
    begun = time.perf_counter()
    sampler = chain(posterior, 1200, vectorize=True)
    spent = time.perf_counter() - begun
    tau = float(np.max(sampler.get_autocorr_time(tol=0)))
    assert rate > 20.0 * WALKERS * 1200 / tau / spent


def test_calibrated_on_pairs_from_the_prior():
    found = calibration.run(36, seed=5, size=300)
    fixed, cut = found.fixed, found.cut
    for slot in range(len(calibration.QUANTITIES)):
        assert calibration.p_of_uniform(fixed[:, slot], bins=6) > 0.001
    # 288 ranks of 36 pairs: four standard deviations, were they independent by twos
    assert calibration.coverage(cut.ravel(), 0.68) == pytest.approx(0.68, abs=0.155)
    assert calibration.coverage(cut.ravel(), 0.95) == pytest.approx(0.95, abs=0.073)


def test_mass_without_bias_from_half_an_orbit():
    values, lost = lucy_mass.row(0.5, 0.05, "flat-constants", 12)
    assert lost == 0
    error = values[:, 0].std(ddof=1) / np.sqrt(len(values))
    assert values[:, 0].mean() == pytest.approx(1.0, abs=4.0 * error)
    assert error < 0.13


def test_mean_of_the_mass_agrees_with_a_plain_sum():
    """Flat constants and a range of periods, 60 per cent covered: no part of the sampler in it."""
    prior = Prior(constants="flat", period_range=(50.0, 300.0))
    pair = lucy_mass.campaign(0.6, 0.02, np.random.default_rng(1))
    by_samples, _ = lucy_mass.mean_of_mass(pair, prior, 1)
    by_sum = lucy_mass.triple_sum(pair, 0.02, prior, (240, 80, 160))
    assert by_samples == pytest.approx(by_sum, abs=0.01)


def test_kinds_are_told_apart():
    rng = np.random.default_rng(3)
    prior, speeds = kind_odds.PRIOR, kind_odds.SPEEDS
    for number in range(5):
        pair, _ = kind_odds.drawn(rng, binary=False)
        assert kind(pair, number, prior, speed_range=speeds).odds_orbit < 100.0
    curved = 0
    while curved < 5:
        pair, fall = kind_odds.drawn(rng, binary=True)
        if fall > kind_odds.CURVED:
            curved += 1
            assert kind(pair, curved, prior, speed_range=speeds).odds_orbit > 0.01
