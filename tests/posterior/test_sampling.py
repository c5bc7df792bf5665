"""Samples of well-known orbits, of degenerate ones and of hardly any measures."""

from __future__ import annotations

import numpy as np
import pytest
from invented import ORBIT
from simulate import observed

import relorbit
from relorbit.derive.posterior import folded_angles
from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements
from relorbit.solve.prior import Prior
from relorbit.solve.sample import sample
from relorbit.solve.solver import solve
from relorbit.solve.weights import quantiles

NAMES = ("P", "T", "e", "a", "i", "node", "omega")


def test_a_well_covered_orbit_has_the_errors_of_the_fit(covered, posterior):
    fit = solve(covered)
    assert posterior.effective_size >= 3000
    assert posterior.pareto_k < 0.5
    node, omega = folded_angles(posterior)
    for name in NAMES:
        values = {"node": node, "omega": omega}.get(name, getattr(posterior, name))
        low, middle, high = quantiles(values, posterior.weight, (0.16, 0.5, 0.84))
        sigma = fit.sigma_formal[name]
        assert middle == pytest.approx(getattr(fit.elements, name), abs=0.25 * sigma), name
        assert 0.5 * (high - low) == pytest.approx(sigma, rel=0.08), name


def test_the_same_seed_gives_the_same_samples_and_another_does_not(covered):
    one, two, other = (sample(covered, 400, seed) for seed in (3, 3, 4))
    for name in (*NAMES, "weight"):
        assert np.array_equal(getattr(one, name), getattr(two, name))
    assert one.P[0] != other.P[0]


def test_table_has_the_columns_and_units(posterior):
    table = posterior.to_table()
    assert table.colnames[:9] == [*NAMES, "mass", "weight"]
    assert str(table["a"].unit) == "arcsec"
    assert table["weight"].sum() == pytest.approx(1.0)
    assert table["mass"][0] == pytest.approx(posterior.mass[0])
    assert len(table) == len(posterior) >= posterior.effective_size


def test_relorbit_names_what_it_promises(covered):
    result = relorbit.sample(covered, size=300, seed=0, prior=None)
    assert isinstance(result, relorbit.Posterior)
    assert result.effective_size >= 300


def orbit(**changed: float) -> Elements:
    return Elements(**(ORBIT.to_dict() | changed))


@pytest.mark.parametrize(
    ("elements", "name", "value", "within"),
    [
        (orbit(i=0.0), "i", 0.0, 15.0),
        (orbit(i=180.0), "i", 180.0, 15.0),
        (orbit(i=90.0), "i", 90.0, 2.0),
        (orbit(e=0.0), "e", 0.0, 0.03),
        (orbit(e=0.97), "e", 0.97, 0.03),
        (orbit(e=0.0, i=0.0), "P", 50.0, 0.6),
    ],
)
def test_degenerate_orbits_are_sampled_soundly(elements, name, value, within):
    rng = np.random.default_rng(8)
    epoch = np.sort(rng.uniform(1970.0, 2020.0, 40))
    p = sample(observed(elements, epoch, 0.02, rng), 1000, seed=2)
    assert p.pareto_k < 0.7
    assert p.effective_size >= 1000
    assert np.abs(quantiles(getattr(p, name), p.weight, 0.5) - value) < within


def test_aliases_of_the_period_come_out_as_modes_with_their_probability():
    """Two groups of measures, each short: whole revolutions between them cannot be counted."""
    rng = np.random.default_rng(4)
    epoch = np.concatenate([np.linspace(1930.0, 1934.0, 7), np.linspace(2010.0, 2017.0, 9)])
    truth = orbit(P=21.0)
    p = sample(observed(truth, epoch, 0.02, rng), 2000, seed=1)
    shares = np.bincount(p.mode, p.weight)
    assert shares.size > 1
    assert shares.sum() == pytest.approx(1.0)
    assert np.all(np.diff(shares) <= 1e-12)
    # the period of the truth is among them, and modes do not overlap in the period
    parts = [p.mode == k for k in range(shares.size)]
    ends = np.array([quantiles(p.P[k], p.weight[k], (0.02, 0.5, 0.98)) for k in parts])
    assert min(np.abs(ends[:, 1] - 21.0)) < 0.5
    ends = ends[np.argsort(ends[:, 1])]
    assert np.all(ends[1:, 0] > ends[:-1, 2])


def test_three_measures_are_sampled_and_the_prior_is_said_to_speak():
    rng = np.random.default_rng(6)
    pair = observed(ORBIT, np.array([1985.0, 1993.0, 2001.0]), 0.02, rng)
    p = sample(pair, 500, seed=1)
    assert p.effective_size >= 500
    assert "prior-speaks" in [one.code for one in p.warnings]
    assert len(np.unique(p.mode)) > 1


def test_rows_of_one_value_count():
    """Angles alone beside a few whole measures: their information narrows the posterior."""
    rng = np.random.default_rng(9)
    epoch = np.sort(rng.uniform(1970.0, 2020.0, 40))
    whole = observed(ORBIT, epoch, 0.03, rng)
    m = whole.measures
    bare = np.arange(40) % 3 > 0
    few = Pair.from_arrays(epoch[~bare], m.theta[~bare], m.rho[~bare], m.theta_err[~bare],
                           m.rho_err[~bare])  # fmt: skip
    angles = Pair.from_arrays(epoch, m.theta, np.where(bare, np.nan, m.rho), m.theta_err,
                              np.where(bare, np.nan, m.rho_err))  # fmt: skip
    widths = []
    for pair in (few, angles, whole):
        p = sample(pair, 1000, seed=1)
        low, high = quantiles(p.P, p.weight, (0.16, 0.84))
        widths.append(high - low)
    assert widths[0] > 1.1 * widths[1] > 1.1 * widths[2]


def test_all_measures_at_one_epoch_are_refused_with_the_reason():
    pair = Pair.from_arrays([2000.0] * 4, [10.0] * 4, [1.0] * 4, [1.0] * 4, [0.1] * 4)
    with pytest.raises(Undetermined, match="all at one epoch"):
        sample(pair)


@pytest.mark.parametrize("size", [0, -5, 10**9, 10.5, True])
def test_a_size_that_cannot_be_is_refused(covered, size):
    with pytest.raises(InputError, match="size"):
        sample(covered, size)


@pytest.mark.parametrize(
    ("words", "said"),
    [("narrow", "not a prior"), ("mass=2", "VALUE:ERROR"), ("mass=-1:0.1", "above 0"),
     ("mass=2:0.1,flat-constants", "contradict")],
)  # fmt: skip
def test_a_prior_that_cannot_be_is_refused(covered, words, said):
    with pytest.raises(InputError, match=said):
        sample(covered, 100, prior=words)


def test_a_prior_mass_needs_a_parallax():
    rng = np.random.default_rng(5)
    pair = observed(ORBIT, np.linspace(1970.0, 2020.0, 20), 0.02, rng)
    with pytest.raises(InputError, match="parallax"):
        sample(pair, 100, prior="mass=2:0.1")


def test_a_prior_mass_that_contradicts_the_measures_is_said_with_numbers(covered, posterior):
    middle = quantiles(posterior.mass, posterior.weight, 0.5)
    p = sample(covered, 500, prior=f"mass={1.4 * middle:.4f}:{0.005 * middle:.4f}")
    (notice,) = [one for one in p.warnings if one.code == "prior-contradicts"]
    assert f"{middle:.2f}"[:3] in notice.text
    assert "standard deviations" in notice.text
    agreeing = sample(covered, 500, prior=f"mass={middle:.4f}:0.05")
    assert "prior-contradicts" not in [one.code for one in agreeing.warnings]


def test_weights_that_degenerate_are_refused_not_returned(covered):
    """A range of periods that holds no orbit that fits."""
    with pytest.raises(Undetermined, match="degenerate") as caught:
        sample(covered, 500, prior=Prior(period_range=(5.0, 6.0)))
    assert caught.value.known["effective_size"] < 200


def test_priors_change_a_short_arc_the_way_they_should():
    rng = np.random.default_rng(15)
    pair = observed(orbit(P=200.0, a=2.0), np.linspace(1985.0, 2020.0, 25), 0.02, rng)
    medians = {}
    for words in ("default", "thermal", "flat-constants"):
        p = sample(pair, 1000, seed=1, prior=words)
        medians[words] = quantiles(p.e, p.weight, 0.5), quantiles(p.a, p.weight, 0.5)
    assert medians["thermal"][0] > medians["default"][0] + 0.02
    # uniform constants favour large orbits by a^4 against the default
    assert medians["flat-constants"][1] > 1.2 * medians["default"][1]


def test_progress_rises_to_one_and_what_it_raises_ends_the_work(covered):
    shares = []
    sample(covered, 300, on_progress=shares.append)
    assert shares[-1] == 1.0
    assert all(0.0 <= share <= 1.0 for share in shares)

    def stop(share: float) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        sample(covered, 300, on_progress=stop)


def test_scaled_errors_widen_the_intervals_by_the_root_of_reduced_chi2(covered):
    m = covered.measures
    proud = Pair.from_arrays(m.epoch, m.theta, m.rho, m.theta_err / 3.0, m.rho_err / 3.0)
    given, wider = (sample(proud, 1000, scale_errors=scale) for scale in (False, True))
    width = [np.diff(quantiles(p.P, p.weight, (0.16, 0.84)))[0] for p in (given, wider)]
    assert wider.error_scale == pytest.approx(3.0, rel=0.25)
    assert width[1] / width[0] == pytest.approx(wider.error_scale, rel=0.12)
    assert "poor-fit" in [one.code for one in given.warnings]


def test_ranges_of_the_prior_hold():
    rng = np.random.default_rng(15)
    pair = observed(orbit(P=200.0, a=2.0), np.linspace(1985.0, 2020.0, 25), 0.02, rng)
    p = sample(pair, 500, prior=Prior(period_range=(150.0, 300.0), axis_range=(1.0, 2.2)))
    assert p.P.min() >= 150.0 and p.P.max() <= 300.0
    assert p.a.min() >= 1.0 and p.a.max() <= 2.2
