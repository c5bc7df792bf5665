"""The bars of vetting on few histories with fixed seeds; tests/benchmarks has the full numbers."""

from __future__ import annotations

import time
from dataclasses import replace

import numpy as np
import pytest
from quadrant_histories import flipped_history, is_found
from slip_histories import LARGE, VALUES, long_history, place_slips, slip_trial, tally

import relorbit
from relorbit.measures.vetting import applied, undone
from relorbit.solve.quadrants import joint_quadrants
from relorbit.solve.vetted import vet

SLIP_SEEDS = range(1000, 1012)
QUADRANT_SEEDS = range(1000, 1004)


@pytest.fixture(scope="module")
def trials():
    return [slip_trial(seed) for seed in SLIP_SEEDS]


def test_slips_are_found_and_named_rightly(trials):
    named = [good for placed, found, _ in trials for _, good in tally(placed, found)[0]]
    assert len(named) >= 15
    assert np.mean(named) >= 0.9


def test_clean_measures_raise_hardly_any_finding(trials):
    false = sum(len(tally(placed, found)[2]) for placed, found, _ in trials)
    clean = sum(count for _, _, count in trials)
    assert clean > 600
    assert false < clean / 200


def test_nights_and_means_are_found(trials):
    named = [good for placed, found, _ in trials for _, good in tally(placed, found)[1]]
    assert len(named) >= 4
    assert np.mean(named) >= 0.8


@pytest.mark.parametrize("seed", QUADRANT_SEEDS)
def test_quadrants_flipped_at_random(seed):
    truth, pair, flipped = flipped_history(np.random.default_rng(seed))
    found = joint_quadrants(flipped)
    assert any(is_found(one.elements, truth, pair) for one in found)
    assert found[0].worse == 0.0 and not found[0].turned


def half_flipped():
    truth, pair, _ = flipped_history(np.random.default_rng(1002))
    m = pair.measures
    flip = np.arange(len(m)) % 2 == 0
    theta = np.where(flip, (m.theta + 180.0) % 360.0 % 360.0, m.theta)
    return truth, pair, pair.with_measures(replace(m, theta=theta)), np.flatnonzero(flip)


def test_two_assignments_about_as_good_are_both_reported():
    _, pair, flipped, rows = half_flipped()
    best, other, *_ = joint_quadrants(flipped)
    assert (best.turned, other.turned, other.worse) == (False, True, 0.0)
    assert sorted([*best.flips, *other.flips]) == list(range(len(pair.measures)))
    wrong = min(len(set(one.flips) ^ set(rows.tolist())) for one in (best, other))
    assert wrong <= 0.05 * len(pair.measures)
    turned = (other.elements.omega - best.elements.omega) % 360.0
    assert turned == pytest.approx(180.0)
    assert other.to_dict()["turned"] is True
    # where the quadrants are right, only one is
    assert [one.turned for one in joint_quadrants(pair)][:1] == [False]
    assert not any(one.turned for one in joint_quadrants(pair))


def test_vet_says_that_quadrants_are_in_doubt_throughout():
    truth, pair, flipped, _ = half_flipped()
    found = vet(flipped)
    swapped = [one for one in found if one.kind == "quadrant"]
    assert len(swapped) > 0.4 * len(pair.measures)
    assert "in doubt throughout" in swapped[0].text
    assert "all of them turned would be as good" in swapped[0].text
    right = applied(flipped, found)
    assert is_found(relorbit.solve(right).elements, truth, pair)
    assert undone(right) == (flipped, ())


def test_too_few_for_quadrants():
    few = relorbit.Pair.from_arrays([2000.0, 2001.0], [1.0, 2.0], [1.0, 1.0])
    with pytest.raises(relorbit.Undetermined, match="too few positions to tell quadrants"):
        joint_quadrants(few)


def test_a_thousand_measures_take_fewer_than_twenty_solves():
    rng = np.random.default_rng(5)
    truth, clean = long_history(rng, 1000)
    pair, placed = place_slips(truth, clean, rng, 5, VALUES)
    spent = []
    for function, given in ((relorbit.solve, clean), (vet, pair)):
        start = time.process_time()
        result = function(given)
        spent.append(time.process_time() - start)
    assert spent[1] < 20.0 * spent[0]
    rows = {one.row: one.kind for one in result}
    assert all(rows[one.row] == one.kind for one in placed if one.moved > LARGE)
