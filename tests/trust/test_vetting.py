"""Slips: each kind found, named and put right; what is changed can be taken back."""

from __future__ import annotations

import json
import tracemalloc
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from simulate import observed

import relorbit
from relorbit.errors import InputError
from relorbit.measures.curve import curve_through, off_curve
from relorbit.measures.dates import julian_years, other_dates
from relorbit.measures.pair import Pair
from relorbit.measures.reduction import precession_of_date
from relorbit.measures.repeats import repeated
from relorbit.measures.slips import KINDS, trials
from relorbit.measures.vetting import Finding, applied, corrected, epochs_before, set_aside, undone
from relorbit.orbit.elements import Elements
from relorbit.solve.vetted import vet

TRUTH = Elements(60.0, 1990.0, 0.4, 1.2, 40.0, 50.0, 80.0)
COUNT = 60
ROW = 25


def clean(seed=1, count=COUNT, error=0.01, **who):
    rng = np.random.default_rng(seed)
    epoch = np.sort(rng.uniform(1950.0, 2020.0, count))
    return observed(TRUTH, epoch, error, rng, name="Invented 1", technique="camera", **who)


CLEAN = clean()


def with_values(pair, row=ROW, **values):
    columns = {name: getattr(pair.measures, name).copy() for name in values}
    for name, value in values.items():
        columns[name] = columns[name].astype(object if isinstance(value, str) else None)
        columns[name][row] = value
    columns = {k: v.astype(str) if v.dtype == object else v for k, v in columns.items()}
    return pair.with_measures(replace(pair.measures, **columns))


def value(name, pair=CLEAN, row=ROW):
    return float(getattr(pair.measures, name)[row])


T, R, E = value("theta"), value("rho"), value("epoch")
SLIPS = {
    "quadrant": {"theta": (T + 180.0) % 360.0},
    "mirror": {"theta": 360.0 - T},
    "quarter more": {"theta": (T + 90.0) % 360.0},
    "quarter less": {"theta": (T - 90.0) % 360.0},
    "rho-factor 2": {"rho": R * 2.0},
    "rho-factor 1/2": {"rho": R / 2.0},
    "rho-factor 10": {"rho": R * 10.0},
    "rho-factor 60": {"rho": R / 60.0},
    "rho-factor mas": {"rho": R * 1000.0},
    "year 1": {"epoch": E + 1.0},
    "year -1": {"epoch": E - 1.0},
    "year 10": {"epoch": E + 10.0},
    "year -10": {"epoch": E - 10.0},
    "year 100": {"epoch": E + 100.0},
    "year -100": {"epoch": E - 100.0},
    "interchange": {"theta": R, "rho": T},
}


def agrees(measures, row=ROW):
    gap = (measures.theta_effective[row] - T + 180.0) % 360.0 - 180.0
    assert gap == pytest.approx(0.0, abs=1e-6)
    assert measures.rho[row] == pytest.approx(R) and measures.epoch[row] == pytest.approx(E)


def test_clean_measures_have_no_slip():
    assert vet(CLEAN) == []
    assert vet(CLEAN, TRUTH) == []


@pytest.mark.parametrize("orbit", [None, TRUTH], ids=["without an orbit", "with one"])
@pytest.mark.parametrize("name", SLIPS)
def test_every_slip_is_named_and_put_right(name, orbit):
    pair = with_values(CLEAN, **SLIPS[name])
    (found,) = vet(pair, orbit)
    assert (found.row, found.kind) == (ROW, name.split()[0])
    assert found.sigma_before > 8.0 > 3.5 > found.sigma_after
    assert 0.9 < found.confidence <= 1.0
    right = applied(pair, [found])
    agrees(right.measures)
    m = right.measures
    # what was observed is still there
    received = (m.theta_obs, m.rho_obs)
    for column, values in zip(("theta", "rho"), received, strict=True):
        if column in SLIPS[name] and not m.flip[ROW]:
            assert values[ROW] == SLIPS[name][column]
    if "epoch" in SLIPS[name]:
        assert m.epoch_obs[ROW] == repr(SLIPS[name]["epoch"])
    assert m.flip[ROW] == (name == "quadrant")
    assert found.text in m.reason[ROW]
    assert vet(right, orbit) == []
    assert applied(right, [found]) is right, "applied twice changes nothing"
    assert undone(right) == (pair, ())


def test_a_date_with_day_and_month_swapped():
    fail = lambda _, what: ValueError(what)  # noqa: E731
    short = Elements(4.0, 1990.0, 0.4, 1.2, 40.0, 50.0, 80.0)
    rng = np.random.default_rng(3)
    dates = [f"{2000 + k // 6}-{(2 * k) % 12 + 1:02d}-{k % 25 + 3:02d}" for k in range(40)]
    epoch = julian_years(dates, "auto", fail)
    pair = observed(short, epoch, 0.01, rng, epoch_obs=dates, technique="camera")
    assert vet(pair) == []
    row = dates.index("2000-09-07")
    wrong = "2000-07-09"
    (other,) = julian_years([wrong], "auto", fail)
    pair = with_values(pair, row, epoch=other, epoch_obs=wrong)
    (found,) = vet(pair)
    assert (found.row, found.kind) == (row, "day-month")
    assert found.change["epoch"] == (other, pytest.approx(epoch[row], abs=1e-9))
    assert applied(pair, [found]).measures.epoch_obs[row] == wrong


def test_other_dates():
    texts = ["2001-03-12", "12.03.2001", "2001-05-05", "2001-03-25", "B1950.0", "",
             "5 March 2001", "2001-03-12.5"]  # fmt: skip
    epoch = julian_years(texts, "auto", lambda _, what: ValueError(what))
    other = other_dates(epoch, texts)
    assert np.isfinite(other).tolist() == [True, True] + [False] * 5 + [True]
    days = (other - epoch)[[0, 1, 7]] * 365.25
    assert days == pytest.approx([266.0, 266.0, 266.0])  # 12 March to 3 December
    assert np.isnan(other_dates(epoch[:1] + 1.0, texts[:1])).all(), "a text of another epoch"


def with_rows(pair, **columns):
    more = Pair.from_arrays(allow_any_epoch=True, **columns).measures
    return pair.with_measures(pair.measures.append(more))


def test_a_night_entered_twice():
    m = CLEAN.measures
    pair = with_rows(CLEAN, epoch=[E], theta=[round(T, 1)], rho=[round(R, 2)], technique="camera")
    assert vet(pair)[0].kind == "same-night"
    (found,) = vet(pair)
    assert found.row == len(m) and f"measure {ROW + 1}" in found.text
    right = applied(pair, [found])
    assert not right.measures.use[-1] and vet(right) == []
    # another observer, or another technique, is another measure
    for other in ({"observer": "B"}, {"technique": "plate"}):
        who = {"technique": "camera"} | other
        assert vet(with_rows(CLEAN, epoch=[E], theta=[round(T, 1)], rho=[round(R, 2)], **who)) == []
    # and so is a value that differs in the decimals given
    assert vet(
        with_rows(CLEAN, epoch=[E], theta=[round(T, 1) + 0.2], rho=[round(R, 2)],
                  technique="camera")
    ) == []  # fmt: skip


def test_a_mean_beside_its_own_nights():
    rng = np.random.default_rng(5)
    epoch = np.array([E - 0.02, E, E + 0.03])
    nights = observed(TRUTH, epoch, 0.01, rng, technique="camera", observer="N").measures
    theta, rho = np.round(nights.theta, 1), np.round(nights.rho, 2)
    pair = with_rows(
        CLEAN, epoch=[*epoch, round(epoch.mean(), 2)], theta=[*theta, round(theta.mean(), 1)],
        rho=[*rho, round(rho.mean(), 2)], technique="camera", observer="N",
        nights=[1.0, 1.0, 1.0, 3.0],
    )  # fmt: skip
    (found,) = vet(pair)
    assert (found.row, found.kind) == (COUNT + 3, "mean-of-nights")
    assert found.change["use"] == (True, False)
    assert "61, 62, 63" in found.text
    two = with_values(pair, COUNT + 3, nights=2.0)
    assert vet(two) == [], "the mean of three nights is not one of two"


def test_a_group_left_at_the_equinox_of_date():
    pair = clean(7, 90, 0.003, ra=80.0, dec=80.0)
    m = pair.measures
    group = np.arange(len(m)) % 3 == 0
    observer = np.where(group, "Left", "Right")
    m = replace(m, observer=observer)
    assert vet(pair.with_measures(m)) == []
    theta = np.where(group, m.theta - precession_of_date(pair, m.epoch), m.theta) % 360.0
    left = pair.with_measures(replace(m, theta=theta))
    found = vet(left)
    assert {one.kind for one in found} == {"equinox"}
    assert [one.row for one in found] == np.flatnonzero(group).tolist()
    right = applied(left, found).measures
    assert right.theta == pytest.approx(pair.measures.theta, abs=1e-6)
    assert right.theta_obs[group] == pytest.approx(theta[group])
    assert vet(left.with_measures(right)) == []
    # one that says what it is counted from is reduced, not found
    named = replace(left.measures, equinox=np.where(group, "date", "J2000"))
    assert not any(one.kind == "equinox" for one in vet(left.with_measures(named)))


def test_what_no_slip_explains_is_said_to_be_so():
    pair = with_values(CLEAN, theta=(T + 27.0) % 360.0, rho=R * 1.3)
    (found,) = vet(pair)
    assert (found.row, found.kind, found.sigma_after) == (ROW, "unexplained", None)
    assert found.confidence <= 0.5
    assert found.change["use"] == (True, False)


def test_errors_that_are_too_small_raise_nothing():
    m = CLEAN.measures
    small = replace(m, theta_err=m.theta_err / 10.0, rho_err=m.rho_err / 10.0)
    assert vet(CLEAN.with_measures(small)) == []
    unknown = replace(m, theta_err=np.full(COUNT, np.nan), rho_err=np.full(COUNT, np.nan))
    assert vet(CLEAN.with_measures(unknown)) == []
    pair = with_values(CLEAN.with_measures(unknown), rho=2.0 * R)
    assert [one.kind for one in vet(pair)] == ["rho-factor"]


def test_few_measures_are_held_against_a_curve():
    few = CLEAN.with_measures(CLEAN.measures.select(np.arange(ROW - 3, ROW + 4)))
    assert vet(few) == []
    (found,) = vet(with_values(few, 3, theta=(T + 180.0) % 360.0))
    assert (found.row, found.kind) == (3, "quadrant")


def test_the_curve_is_not_bent_by_slips():
    epoch = np.linspace(1990.0, 2010.0, 21)
    z = (0.5 + 0.02 * (epoch - 2000.0)) + 1j * (1.0 - 0.03 * (epoch - 2000.0))
    spoilt = z.copy()
    spoilt[[4, 9, 17]] *= [-1.0, 60.0, 2.0]
    place, scatter = curve_through(epoch, spoilt, epoch)
    assert np.abs(place - z).max() < 1e-9 and scatter.max() < 1e-9
    noisy = spoilt + 0.001 * np.random.default_rng(1).normal(size=21)
    assert np.flatnonzero(off_curve(epoch, noisy)).tolist() == [4, 9, 17]
    same = curve_through(np.full(5, 2000.0), np.arange(5) + 0j, np.array([2000.0]))
    assert same[0] == pytest.approx(2.0), "all of one epoch: their median"


# ---- bad input


YEARLY = np.linspace(1980.0, 2010.0, 30)


def of(columns):
    return Pair.from_arrays(**{"epoch": [], "theta": [], "rho": []} | columns)


@pytest.mark.parametrize(
    "columns",
    [
        {},
        {"epoch": [2000.0], "theta": [10.0], "rho": [1.0]},
        {"epoch": [2000.0, 2001.0, 2002.0], "theta": [10.0, 190.0, 12.0], "rho": [1.0, 1.0, 60.0]},
        {"epoch": [2000.0] * 30, "theta": np.linspace(10.0, 10.5, 30), "rho": [1.0] * 30},
        {"epoch": YEARLY, "theta": [np.nan] * 30, "rho": [1.0] * 30},
        {"epoch": YEARLY, "theta": np.linspace(9.0, 20.0, 30), "rho": None},
        {"epoch": YEARLY, "theta": np.linspace(9.0, 20.0, 30), "rho": [0.0] * 30},
        {"epoch": YEARLY, "theta": [5.0] * 30, "rho": [1.0] * 30},
        {"epoch": YEARLY, "theta": [5.0] * 30, "rho": [1.0] * 30, "use": [False] * 30},
    ],
    ids=["none", "one", "three", "one epoch", "no theta", "no rho", "rho 0", "at rest", "not used"],
)  # fmt: skip
def test_too_little_to_vet_by_finds_nothing(columns):
    assert vet(of(columns)) == []


def test_rows_that_have_one_value_only():
    m = CLEAN.measures
    theta, rho = m.theta.copy(), m.rho.copy()
    theta[::7], rho[1::7] = np.nan, np.nan
    pair = CLEAN.with_measures(replace(m, theta=theta, rho=rho))
    assert vet(pair) == []
    no_rho, no_theta = 22, 21
    pair = with_values(pair, no_rho, theta=(theta[no_rho] + 180.0) % 360.0)
    pair = with_values(pair, no_theta, rho=10.0 * rho[no_theta])
    assert {one.row: one.kind for one in vet(pair)} == {no_rho: "quadrant", no_theta: "rho-factor"}


def test_a_finding_of_another_list_is_refused():
    found = vet(with_values(CLEAN, rho=2.0 * R))
    with pytest.raises(InputError, match=r"measure 26 has changed since it was vetted \(rho is"):
        applied(with_values(CLEAN, rho=3.0 * R), found)
    with pytest.raises(InputError, match="there is no measure 26; the pair has 5"):
        applied(CLEAN.with_measures(CLEAN.measures.select(np.arange(5))), found)
    with pytest.raises(InputError, match="there is no measure 61; the pair has 60"):
        undone(CLEAN, [60])


# ---- applied and undone


def test_what_was_edited_since_stays_and_the_rest_is_undone():
    pair = with_values(with_values(CLEAN, rho=2.0 * R), 40, epoch=value("epoch", row=40) + 10.0)
    right = applied(pair, vet(pair))
    edited = with_values(right, rho=R + 0.01)
    back, refused = undone(edited)
    assert len(refused) == 1
    assert "measure 26: rho is" in refused[0] and "edited since and stays" in refused[0]
    m = back.measures
    assert (m.rho[ROW], m.rho_obs[ROW]) == (R + 0.01, 2.0 * R), "what was received is kept too"
    assert m.epoch[40] == pair.measures.epoch[40] and m.epoch_obs[40] == ""
    assert set(m.reason) == {""} and set(m.vetted) == {""}
    assert undone(back) == (back, ())


def test_a_record_that_cannot_be_read_is_said_and_left():
    for text in ("rubbish", "[1]", '{"colour": [1, 2]}', '{"rho": ["a", 2]}', '{"rho": [1]}'):
        broken = with_values(CLEAN, vetted=text)
        back, refused = undone(broken)
        assert back is broken
        assert refused == ("measure 26: what vetting wrote there cannot be read",)


def test_a_second_change_of_a_row_is_undone_with_the_first():
    pair = with_values(CLEAN, rho=2.0 * R, theta=(T + 180.0) % 360.0)
    once = applied(pair, [Finding(ROW, "rho-factor", "x", 9.0, 0.1, 1.0, corrected(
        pair.measures, ROW, E, (T + 180.0) % 360.0, R, "rho"))])  # fmt: skip
    twice = applied(once, [Finding(ROW, "quadrant", "x", 9.0, 0.1, 1.0, corrected(
        once.measures, ROW, E, T, R, "side"))])  # fmt: skip
    assert twice.measures.flip[ROW] and twice.measures.reason[ROW] == "rho; side"
    agrees(twice.measures)
    assert undone(twice) == (pair, ())
    assert undone(twice, [ROW - 1]) == (twice, ())


FINITE = {"allow_nan": False, "allow_infinity": False}
CHANGES = st.lists(
    st.tuples(
        st.integers(0, 11),
        st.sampled_from(["value", "aside"]),
        st.floats(1700.0, 2100.0, **FINITE),
        st.floats(0.0, 360.0, exclude_max=True, **FINITE),
        st.floats(0.0, 1e4, **FINITE),
    ),
    max_size=12,
    unique_by=lambda change: change[0],
)


@settings(deadline=None, max_examples=80)
@given(CHANGES, st.sets(st.integers(0, 11)), st.sets(st.integers(0, 11)))
def test_changes_round_trip(changes, flipped, without):
    """Through the record of each row, whatever was there before: by hypothesis."""
    m = CLEAN.measures.select(np.arange(12))
    flip, rho = m.flip.copy(), m.rho.copy()
    flip[list(flipped)], rho[list(without)] = True, np.nan
    pair = CLEAN.with_measures(replace(m, flip=flip, rho=rho))
    findings = []
    for row, what, epoch, theta, size in changes:
        change = (
            set_aside(pair.measures, row, "why") if what == "aside"
            else corrected(pair.measures, row, epoch, theta, size, "why")
        )  # fmt: skip
        findings.append(Finding(row, "x", "x", None, None, 1.0, change))
    right = applied(pair, findings)
    for row, what, epoch, theta, size in changes:
        if what == "value":
            assert right.measures.epoch[row] == epoch
            gap = (right.measures.theta_effective[row] - theta + 180.0) % 360.0 - 180.0
            assert abs(gap) < 1e-8
            assert np.isnan(rho[row]) or right.measures.rho[row] == size
            assert json.loads(right.measures.vetted[row])
    assert np.array_equal(epochs_before(right.measures), pair.measures.epoch)
    assert applied(right, findings) is right
    assert undone(right) == (pair, ())


@settings(deadline=None, max_examples=100)
@given(
    st.floats(1700.0, 2100.0), st.floats(0.0, 359.0), st.floats(0.01, 100.0), st.floats(-1.0, 1.0)
)
def test_trials_undo_slips(epoch, theta, rho, turn):
    """A trial of a slip, tried again by its opposite, is the measure again."""
    once = trials(epoch, theta, rho, turn)
    opposite = {
        "the quadrant is swapped": 0, "theta runs the wrong way (360 - theta)": 0,
        "theta is off by 90 degrees": None,
    }  # fmt: skip
    for k, kind in enumerate(KINDS):
        if not once.possible[k, 0] or kind.name in ("none", "interchange"):
            continue
        if kind.text in opposite and opposite[kind.text] == 0:
            back = k
        else:
            back = k + 1 if (k - 3) % 2 == 0 else k - 1
        again = trials(once.epoch[k], once.theta[k], once.rho[k], turn)
        assert again.epoch[back, 0] == pytest.approx(epoch)
        assert again.rho[back, 0] == pytest.approx(rho)
        gap = (again.theta[back, 0] - theta + 180.0) % 360.0 - 180.0
        assert gap == pytest.approx(0.0, abs=1e-9)


def test_findings_as_json():
    (found,) = relorbit.vet(with_values(CLEAN, rho=2.0 * R))
    told = json.loads(json.dumps(found.to_dict()))
    assert told["change"]["rho"] == {"before": 2.0 * R, "after": R}
    assert told["change"]["rho_obs"] == {"before": None, "after": 2.0 * R}
    assert told["row"] == ROW and told["kind"] == "rho-factor"
    assert isinstance(found, relorbit.Finding)


def test_work_tells_how_far_it_is_and_ends_when_asked():
    class Enough(Exception):
        pass

    shares = []

    def report(share):
        shares.append(share)
        if share > 0.3:
            raise Enough

    with pytest.raises(Enough):
        vet(CLEAN, on_progress=report)
    assert len(shares) > 10
    assert shares == sorted(shares)


def test_many_measures_are_vetted_within_bounded_memory():
    """A mean beside its nights, and neighbours on a curve, without a table of all by all."""
    pair = clean(seed=4, count=1500)
    tracemalloc.start()
    assert repeated(pair.measures) == []
    z = pair.measures.rho * np.exp(1j * np.radians(pair.measures.theta))
    off_curve(pair.measures.epoch, z)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert peak < 12e6  # 1,500 by 1,500 numbers are 18 MB
