"""The pair on the desk, its orbit and its history, without a window."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from desks import ORBIT, OTHER_ORBIT, pair

from relorbit.desk.model import FILE, PAIR, SELECTION, VIEW, DeskModel
from relorbit.desk.model import ORBIT as ORBIT_CHANGED
from relorbit.errors import InputError
from relorbit.measures.pair import RecordedOrbit
from relorbit.solve.solver import solve


@pytest.fixture
def model() -> DeskModel:
    return DeskModel(pair(), Path("invented_1.ecsv"))


def told(model: DeskModel) -> list[frozenset[str]]:
    heard: list[frozenset[str]] = []
    model.subscribe(heard.append)
    return heard


@pytest.fixture(scope="module")
def solution():
    from relorbit.measures.pair import Pair
    from relorbit.orbit.elements import complex_position, polar

    epoch = np.linspace(1940.0, 2010.0, 30)
    theta, rho = polar(complex_position(ORBIT, epoch))
    rho = rho + 0.01 * np.sin(7.0 * epoch)  # made-up errors, so that chi2 is not zero
    measured = Pair.from_arrays(epoch, theta, rho, np.full(30, 0.4), np.full(30, 0.01))
    return measured, solve(measured)


EDITS = [
    lambda m: m.edit_cell(2, "rho", "1.75"),
    lambda m: m.edit_cell(0, "note", "clouds"),
    lambda m: m.set_use([1, 3], False, "poor seeing"),
    lambda m: m.flip([0, 5]),
    lambda m: m.set_elements(ORBIT),
    lambda m: m.set_elements(replace(ORBIT, P=63.0), "nudge P"),
    lambda m: m.set_held("e", True),
    lambda m: m.keep("first", "by hand", "2026-05-01", "relorbit"),
    lambda m: m.add_measure("2021-03-04", "123.4", "0.98", observer="Lark"),
    lambda m: m.set_use([1], True),
    lambda m: m.remove([2]),
    lambda m: m.set_identity(name="Invented 2", parallax_mas=20.0),
    lambda m: m.set_elements(OTHER_ORBIT),
    lambda m: m.use_recorded("first"),
    lambda m: m.drop_recorded("first"),
    lambda m: m.set_held("e", False),
]


def test_undoing_all_returns_the_very_first_pair_and_redo_the_last(model):
    first = model.state
    states = []
    for edit in EDITS:
        edit(model)
        states.append(model.state)
    assert len({id(state) for state in states}) == len(EDITS)
    for state in reversed([first, *states[:-1]]):
        model.undo()
        assert model.state is state
    assert model.pair is first.pair and model.undo_label is None and not model.unsaved
    model.undo()
    assert model.state is first
    for state in states:
        model.redo()
        assert model.state is state
    assert model.redo_label is None
    model.redo()
    assert model.state is states[-1]


def test_a_thousand_steps_can_be_undone(model):
    first = model.pair
    for k in range(1000):
        model.edit_cell(k % 6, "rho", f"{1 + k / 1000}")
    assert model.pair.measures.rho[3] == 1.999
    for _ in range(1000):
        model.undo()
    assert model.pair is first


def test_a_new_step_drops_what_was_undone(model):
    model.flip([0])
    model.edit_cell(1, "rho", "2.5")
    model.undo()
    assert (model.undo_label, model.redo_label) == ("flip the quadrant", "edit rho")
    model.set_use([2], False, "elongated")
    assert (model.undo_label, model.redo_label) == ("set measures aside", None)
    model.undo()
    model.undo()
    assert not model.pair.measures.flip.any() and model.undo_label is None


def test_nudges_in_a_row_are_one_step(model):
    model.set_elements(ORBIT)
    for k in range(1, 40):
        model.set_elements(replace(ORBIT, P=ORBIT.P + 0.1 * k), "nudge P")
    for k in range(1, 9):
        model.set_elements(replace(ORBIT, e=ORBIT.e + 0.01 * k), "nudge e")
    assert model.nudging
    model.undo()
    assert model.elements == replace(ORBIT, P=ORBIT.P + 3.9)
    model.undo()
    assert model.elements == ORBIT and not model.nudging
    model.undo()
    assert model.elements is None


def test_typed_values_are_each_a_step(model):
    for P in (60.0, 61.0, 62.0):
        model.set_elements(replace(ORBIT, P=P))
    model.undo()
    assert model.elements.P == 61.0


def test_a_refused_value_changes_nothing(model):
    before, heard = model.state, told(model)
    with pytest.raises(InputError, match=r"row 3, column theta: 400 is outside \[0, 360\)"):
        model.edit_cell(2, "theta", "400")
    with pytest.raises(InputError, match="column rho: 'wide' is not a number"):
        model.add_measure("2020.5", "10", "wide")
    with pytest.raises(InputError, match="declination 91 is outside -90 to 90 degrees"):
        model.set_identity(dec_deg=91.0)
    with pytest.raises(InputError, match="there is no orbit to keep; solve first"):
        model.keep("first", "", "2026-05-01", "")
    with pytest.raises(InputError, match="there is no such alternative; solve first"):
        model.choose(1)
    assert model.state is before and model.undo_label is None and not heard


def test_what_changes_nothing_is_no_step(model):
    model.edit_cell(0, "rho", repr(float(model.pair.measures.rho[0])))
    model.set_use([0, 1], True)
    model.set_use([], False, "no rows")
    model.flip([])
    model.remove([])
    model.take_in(model.pair)
    assert model.undo_label is None and not model.unsaved


def test_unsaved_follows_the_pair_and_not_the_orbit(model):
    model.set_elements(ORBIT)
    assert not model.unsaved
    model.keep("first", "", "2026-05-01", "")
    assert model.unsaved
    model.saved(Path("other.ecsv"))
    assert not model.unsaved and model.path == Path("other.ecsv")
    model.undo()
    assert model.unsaved
    model.redo()
    assert not model.unsaved


def test_observed_values_are_kept(model):
    theta, epoch = model.pair.measures.theta[1], model.pair.measures.epoch[1]
    model.edit_cell(1, "theta", "12,5")
    model.edit_cell(1, "theta", "13.5")
    model.edit_cell(1, "epoch", "1950-01-01")
    m = model.pair.measures
    assert (m.theta[1], m.theta_obs[1], m.epoch_obs[1]) == (13.5, theta, repr(float(epoch)))


def test_views_are_told_what_kind_of_thing_changed(model):
    heard = told(model)
    model.edit_cell(0, "rho", "2.5")
    model.select([1, 2])
    model.select([2, 1])
    model.set_elements(ORBIT)
    model.look(orientation="eyepiece", epoch=2030.0)
    model.saved(Path("invented_1.ecsv"))
    assert heard == [
        {PAIR, ORBIT_CHANGED, FILE}, {SELECTION}, {ORBIT_CHANGED}, {VIEW}, {FILE}
    ]  # fmt: skip
    assert model.orientation == "eyepiece" and model.epoch == 2030.0
    with pytest.raises(TypeError, match="the view has no 'colour'"):
        model.look(colour="red")


def test_a_view_may_leave_while_it_is_told(model):
    heard, leave = [], []

    def once(kinds: frozenset[str]) -> None:
        heard.append("once")
        leave[0]()

    leave.append(model.subscribe(once))
    model.subscribe(lambda kinds: heard.append("always"))
    model.flip([0])
    model.flip([0])
    assert heard == ["once", "always", "always"]


def test_the_selection_never_points_at_a_measure_that_is_gone(model):
    model.add_measure("2021.5", "10", "1")
    model.select([0, 6])
    model.undo()
    assert model.selection == {0} and len(model.pair.measures) == 6
    model.select([2, 4])
    model.remove([2])
    assert model.selection == frozenset()


def test_consequences_follow_every_change(model):
    assert model.consequences is None
    model.set_elements(ORBIT)
    first = model.consequences
    assert model.consequences is first and first.numbers == 12 and first.mass is None
    model.set_use([0], False, "cloud")
    second = model.consequences
    assert second.numbers == 10 and second.chi2 < first.chi2
    model.set_identity(parallax_mas=95.0)
    # Kepler's third law in au, years and solar masses; the constant is 1 to 1e-5
    assert model.consequences.mass == pytest.approx((1.85 / 0.095) ** 3 / 62.4**2, rel=1e-4)
    model.undo()
    model.undo()
    assert model.consequences.chi2 == first.chi2


def test_a_solution_and_its_alternatives(model, solution):
    measured, found = solution
    model.open(measured, None)
    model.adopt(found, searched=True)
    assert model.orbit is found and model.undo_label == "solve"
    # P of noiseless angles and 0.01 arcsec in rho, over more than a revolution
    assert pytest.approx(ORBIT.P, abs=0.5) == model.elements.P
    for k, other in enumerate(found.alternatives, 1):
        model.choose(k)
        assert model.elements == other.elements and model.state.chosen == k
    with pytest.raises(InputError, match="there is no such alternative"):
        model.choose(len(found.alternatives) + 1)
    model.choose(0)
    assert model.orbit is found
    model.keep(" best ", " a note ", "2026-05-01", "relorbit")
    record = model.pair.orbit("best")
    assert (record.note, record.elements, record.sigma) == ("a note", found.elements, found.sigma)
    model.set_elements(replace(found.elements, P=70.0), "nudge P")
    assert model.orbit == replace(found.elements, P=70.0)
    model.keep("by hand", "", "2026-05-01", "relorbit")
    assert model.pair.orbit("by hand").sigma is None
    assert [one.name for one in model.pair.orbits] == ["best", "by hand"]
    with pytest.raises(InputError, match="an orbit on record needs a name"):
        model.keep("  ", "", "2026-05-01", "")


def test_an_edit_of_the_measures_parts_the_fit_from_the_pair(model, solution):
    measured, found = solution
    model.open(measured, None)
    model.adopt(found, searched=True)
    model.set_use([0], False, "doubtful")
    assert model.state.solution is None and model.elements == found.elements
    model.undo()
    assert model.state.solution is found


def test_held_elements_are_held_where_they_are_now(model):
    model.set_held("e", True)
    assert model.held_values() == {}
    model.set_elements(ORBIT)
    model.set_held("e", True)
    model.set_held("P", True)
    model.set_elements(replace(ORBIT, P=70.0), "nudge P")
    assert model.held_values() == {"P": 70.0, "e": 0.42}
    model.set_held("P", False)
    assert model.held_values() == {"e": 0.42}


def test_opening_takes_the_last_orbit_on_record_and_begins_a_new_history(model):
    model.flip([0])
    model.select([1])
    recorded = (
        pair().with_orbit(RecordedOrbit("a", OTHER_ORBIT)).with_orbit(RecordedOrbit("b", ORBIT))
    )
    model.open(recorded, None)
    assert model.elements == ORBIT and model.undo_label is None and not model.selection
    assert model.path is None and not model.unsaved
    assert model.orbit is recorded.orbits[1]


def test_restored_work_is_unsaved_over_the_files_own(model):
    saved, rescued = pair(), pair(4)
    model.restore(rescued, Path("x.ecsv"), saved)
    assert model.pair is rescued and model.unsaved
    model.undo()
    assert model.pair is saved and not model.unsaved


def test_rows_that_are_gone_leave_the_selection(model):
    """Found by the random user, seed 3: fewer rows came back from the disk than were selected."""
    count = len(model.pair.measures)
    model.select([0, count - 1])
    heard = told(model)
    model.take_in(model.pair.with_measures(model.pair.measures.select(np.arange(count - 1))))
    assert model.selection == {0}
    assert any(SELECTION in kinds for kinds in heard)
    model.set_use(model.selection, False)
    model.select([0, count - 1, -1])
    assert model.selection == {0}
