"""New measures against the orbit on record: agreement, slips named, orbits corrected."""

import json
from dataclasses import replace

import numpy as np
import pytest
from noisy_histories import WELL_KNOWN, judge_trial

from relorbit import judge
from relorbit.derive.ephemeris import ephemeris
from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair, RecordedOrbit
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements, complex_position, polar
from relorbit.solve.solver import solve

TRUTH = Elements(42.0, 1989.0, 0.46, 0.88, 57.0, 64.0, 212.0)
ERROR = 0.01
SLIPS = {
    "quadrant": lambda t, th, r: (t, (th + 180.0) % 360.0, r),
    "mirror": lambda t, th, r: (t, -th % 360.0, r),
    "quarter": lambda t, th, r: (t, (th + 90.0) % 360.0, r),
    "rho-factor": lambda t, th, r: (t, th, 2.0 * r),
    "rho-factor 10": lambda t, th, r: (t, th, r / 10.0),
    "rho-factor 60": lambda t, th, r: (t, th, 60.0 * r),
    "rho-factor mas": lambda t, th, r: (t, th, 1000.0 * r),
    "year": lambda t, th, r: (t + 1.0, th, r),
    "year 10": lambda t, th, r: (t - 10.0, th, r),
    "year 100": lambda t, th, r: (t + 100.0, th, r),
    "interchange": lambda t, th, r: (t, r, th),
}


def place(epoch, elements=TRUTH):
    theta, rho = polar(complex_position(elements, np.array([epoch])))
    return float(theta[0]), float(rho[0])


def rows(epochs, elements=TRUTH, error=ERROR, seed=None):
    rng = np.random.default_rng(seed)
    out = []
    for epoch in epochs:
        theta, rho = place(epoch, elements)
        sigma = np.degrees(error / rho)
        if seed is not None:
            theta, rho = theta + sigma * rng.normal(), rho + error * rng.normal()
        out.append([epoch, theta % 360.0, rho, sigma, error])
    return out


@pytest.fixture(scope="module")
def pair():
    epochs = np.sort(np.random.default_rng(1).uniform(1955.0, 2010.0, 60))
    columns = np.array(rows(epochs, seed=7)).T
    return Pair.from_arrays(*columns, parallax=40.0, name="Invented 5")


@pytest.fixture(scope="module")
def recorded(pair):
    return pair.with_orbit(solve(pair).to_record("last year's"))


def test_measures_of_the_orbit_agree(recorded):
    found = judge(recorded, rows([2011.3, 2012.4, 2013.5], seed=3))
    assert found.verdict == "agrees"
    assert found.text.startswith("the new measures agree with the orbit")
    assert (found.orbit, found.errors_from) == ("last year's", "record")
    assert found.values == 6 and found.probability > 0.01
    for one in found.measures:
        assert 0.0 < one.rho_predicted_sigma < ERROR
        assert one.rho_in_sigma == pytest.approx(
            one.d_rho / np.hypot(one.rho_err, one.rho_predicted_sigma)
        )
        assert 0.0 < one.influence.distance < 2.0
        assert one.slip is None and one.already == ""
    assert [change.name for change in found.changes] == [
        "P", "T", "e", "a", "i", "node", "omega", "mass",
    ]  # fmt: skip
    period = found.changes[0]
    assert period.new_sigma < period.old_sigma
    assert abs(period.change) < 3.0 * period.old_sigma
    assert found.ephemeris_old.epoch.tolist() == list(range(2014, 2024))
    assert found.ephemeris_new.epoch.tolist() == list(range(2014, 2024))
    assert [one.name for one in found.orbits] == ["last year's", "refitted"]
    json.dumps(found.to_dict(), allow_nan=False)


@pytest.mark.parametrize("which", SLIPS)
def test_a_slip_is_named_and_kept_out_of_the_refit(recorded, which):
    epoch, theta, rho = SLIPS[which](2012.4, *place(2012.4))
    good = rows([2011.3, 2013.5], seed=5)
    sigma = np.degrees(ERROR / place(2012.4)[1])
    found = judge(recorded, [good[0], [epoch, theta, rho, sigma, ERROR], good[1]])
    assert found.verdict == "measure-looks-wrong"
    assert [one.odd for one in found.measures] == [False, True, False]
    slip = found.measures[1].slip
    assert slip.kind == which.split()[0]
    assert (slip.epoch, slip.theta, slip.rho) == pytest.approx((2012.4, *place(2012.4)), abs=1e-6)
    assert slip.text in found.text and "others agree" in found.text
    assert abs(found.changes[0].change) < 3.0 * found.changes[0].old_sigma
    assert "the refit leaves out the measure that looks wrong" in found.notes
    # what it would do, were it used
    assert found.measures[1].influence is None or found.measures[1].influence.distance > 1.0


def test_a_wrong_measure_that_no_slip_explains(recorded):
    bad = rows([2012.4])[0]
    bad[1] += 12.0 * bad[3]
    found = judge(recorded, [*rows([2011.3, 2013.5], seed=5), bad])
    assert found.verdict == "measure-looks-wrong"
    assert "no common slip explains it" in found.text
    assert found.measures[2].odd and found.measures[2].slip is None


def test_an_orbit_that_its_own_measures_have_left(pair):
    """On record: an orbit with a wrong T and small errors. The measures refitted know better."""
    solution = solve(pair)
    record = solution.to_record("old")
    wrong = replace(record, elements=replace(record.elements, T=record.elements.T + 0.6))
    found = judge(pair.with_orbit(wrong), rows([2011.3, 2012.4], seed=2))
    assert found.verdict == "orbit-needs-correction"
    assert "the measures on record, refitted, predict the new ones" in found.text
    period = {change.name: change for change in found.changes}
    assert period["T"].change == pytest.approx(-0.6, abs=5.0 * period["T"].new_sigma)
    old, new = found.orbits
    assert old.new > 3.0 * new.new


def test_concordant_measures_correct_an_orbit_of_a_short_arc():
    """An orbit of a third of a revolution, on record with errors ten times too small."""
    epochs = np.linspace(1975.0, 1991.0, 30)
    columns = np.array(rows(epochs, seed=11, error=0.02)).T
    pair = Pair.from_arrays(*columns)
    solution = solve(pair)
    moved = replace(solution.elements, P=solution.elements.P * 1.02)
    record = replace(solution.to_record("short"), elements=moved)
    sigma = {name: 0.1 * value for name, value in record.sigma.items()}
    tight = replace(record, covariance=record.covariance * 0.01, sigma=sigma)
    found = judge(pair.with_orbit(tight), rows([2003.0, 2004.0, 2005.0], seed=12))
    assert found.verdict == "orbit-needs-correction"


def test_a_short_arc_is_not_called_wrong_where_its_own_errors_allow_it():
    """The same with its true errors: what its bent valley of orbits allows is no surprise."""
    epochs = np.linspace(1975.0, 1991.0, 30)
    pair = Pair.from_arrays(*np.array(rows(epochs, seed=11, error=0.02)).T)
    pair = pair.with_orbit(solve(pair).to_record("short"))
    assert judge(pair, rows([2003.0, 2004.0, 2005.0], seed=12)).verdict == "agrees"


@pytest.mark.parametrize("seed", [6, 18])
def test_a_refit_corrects_errors_of_first_order(seed):
    """Histories whose pair comes close to the primary: errors there are anything but small."""
    theta, rho, probability, _, linear, *by_first_order = judge_trial(seed, "as-given")
    assert linear < 1e-6
    assert probability > 0.05
    assert max(abs(theta), abs(rho)) < min(2.4, max(map(abs, by_first_order)))


def test_errors_by_profiles_are_those_of_first_order_where_the_orbit_is_well_known(recorded):
    found = judge(recorded, rows([2011.3, 2012.4, 2013.5], seed=5))
    plain = ephemeris(recorded.orbit(), [one.epoch for one in found.measures])
    for k, one in enumerate(found.measures):
        # where a measure lies on the spot, the profile says little: 10 %
        assert one.theta_predicted_sigma == pytest.approx(plain.theta_sigma[k], rel=0.1)
        assert one.rho_predicted_sigma == pytest.approx(plain.rho_sigma[k], rel=0.1)


def test_errors_by_profiles_of_a_short_arc_are_those_of_either_side():
    """Years later, a short arc allows angles farther on rather than farther back."""
    epochs = np.linspace(1975.0, 1991.0, 30)
    short = Pair.from_arrays(*np.array(rows(epochs, seed=11, error=0.02)).T)
    short = short.with_orbit(solve(short).to_record("short"))
    epoch, off = 2005.0, 25.0
    theta = ephemeris(short.orbit(), [epoch]).theta[0]
    backwards, onwards = (
        judge(short, [[epoch, (theta + side * off) % 360.0, np.nan, 0.1, np.nan]]).measures[0]
        for side in (-1.0, 1.0)
    )
    for one in (backwards, onwards):
        assert abs(one.d_theta) == pytest.approx(off)
        assert one.theta_in_sigma == pytest.approx(
            one.d_theta / np.hypot(one.theta_err, one.theta_predicted_sigma)
        )
    assert backwards.theta_predicted_sigma < 0.9 * onwards.theta_predicted_sigma
    # the same by a solution in which the angle is all but held
    held = short.with_measures(short.measures.append(Measures.from_columns(
        {"epoch": [epoch], "theta": [(theta + off) % 360.0], "rho": [None], "theta_err": [0.1]}
    )))  # fmt: skip
    rise = (solve(held).chi2 - solve(short).chi2) / solve(short).error_scale ** 2
    assert onwards.theta_in_sigma == pytest.approx(np.sqrt(rise), rel=0.02)


def test_measures_that_contradict_everything_are_not_explained(recorded):
    new = rows([2011.3, 2011.6, 2012.4, 2012.9], seed=3)
    for row, shift in zip(new, (15.0, -15.0, 18.0, -18.0), strict=True):
        row[1] = (row[1] + shift * row[3]) % 360.0
    assert judge(recorded, new).verdict == "unclear"


def test_an_epoch_that_is_already_there_is_said(recorded):
    m = recorded.measures
    old = [m.epoch[3], m.theta[3], m.rho[3], m.theta_err[3], m.rho_err[3]]
    other = [m.epoch[4], m.theta[4], m.rho[4] + 0.001, m.theta_err[4], m.rho_err[4]]
    found = judge(recorded, [old, other, *rows([2012.4], seed=1)])
    assert found.measures[0].already == "already in the list, measure 4: not used again"
    assert found.measures[0].influence is None
    assert found.measures[1].already == "the list has another of this epoch: measure 5"
    assert found.measures[2].already == ""
    assert found.solution.used == len(m) + 2


def test_orbits_without_errors_or_none_on_record(pair):
    bare = RecordedOrbit("by hand", TRUTH)
    found = judge(pair.with_orbit(bare), rows([2012.4], seed=1))
    assert found.errors_from == "refit" and found.measures[0].rho_predicted_sigma > 0.0
    assert "those of a refit of the measures on record" in found.notes[0]
    fresh = judge(pair, rows([2012.4], seed=1))
    assert fresh.orbit == "fresh solution" and fresh.verdict == "agrees"
    few = Pair.from_arrays([2000.0, 2001.0], [10.0, 11.0], [1.0, 1.0])
    found = judge(few.with_orbit(bare), rows([2012.4], seed=1))
    assert found.errors_from == "none" and found.measures[0].rho_predicted_sigma is None
    with pytest.raises(Undetermined):
        judge(few, rows([2012.4]))


def test_several_orbits_are_compared_and_one_is_named(recorded):
    two = recorded.with_orbit(RecordedOrbit("worse", replace(TRUTH, a=0.9)))
    found = judge(two, rows([2012.4, 2013.0], seed=1), "last year's")
    assert found.orbit == "last year's"
    assert [one.name for one in found.orbits] == ["last year's", "worse", "refitted"]
    assert found.orbits[1].all > found.orbits[0].all
    with pytest.raises(InputError, match="has no orbit 'best' on record; it has"):
        judge(two, rows([2012.4]), "best")


def test_errors_from_residuals_are_those_of_the_group():
    epochs = np.sort(np.random.default_rng(1).uniform(1955.0, 2010.0, 60))
    columns = np.array(rows(epochs, seed=7, error=0.03)).T
    columns[3] /= 3.0
    pair = Pair.from_arrays(*columns[:4], columns[4] / 3.0, technique="camera", observer="A")
    pair = pair.with_orbit(solve(pair, errors="from-residuals").to_record("it"))
    new = Pair.from_arrays(*np.array(rows([2012.4], seed=1)).T, technique="camera", observer="A")
    other = Pair.from_arrays(*np.array(rows([2012.4], seed=1)).T, technique="camera", observer="B")
    for one in (new, other):
        found = judge(pair, one, errors="from-residuals")
        assert found.measures[0].rho_err == pytest.approx(3.0 * ERROR, rel=0.3)
    assert judge(pair, new).measures[0].rho_err == ERROR


def test_values_missing_or_bad(recorded):
    theta, rho = place(2012.4)
    found = judge(recorded, [[2012.4, theta, np.nan], [2012.4, None, rho]])
    assert [one.values for one in found.measures] == [1, 1]
    assert found.measures[0].rho is None and found.measures[1].d_theta is None
    assert judge(recorded, [2012.4, theta, rho]).values == 2
    with pytest.raises(InputError, match="no new measure"):
        judge(recorded, {"epoch": [], "theta": [], "rho": []})
    with pytest.raises(InputError, match="row 1: 2 values where epoch, theta, rho"):
        judge(recorded, [[2012.4, theta]])
    with pytest.raises(InputError, match="column theta: 400 is outside"):
        judge(recorded, [[2012.4, 400.0, 1.0]])


def test_predicted_errors_ten_years_ahead():
    """The bar of the benchmark judge_errors, on forty histories with well known periods."""
    pulls, seed = [], 0
    while len(pulls) < 80:
        seed += 1
        one = judge_trial(seed, "as-given")
        if one is not None and one[3] < WELL_KNOWN:
            pulls += one[:2]
    assert np.mean(np.square(pulls)) == pytest.approx(1.0, abs=4.0 * np.sqrt(2.0 / 80))
