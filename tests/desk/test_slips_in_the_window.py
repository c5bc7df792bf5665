"""Slips in the window: looked for, listed, put right, taken back."""

from __future__ import annotations

import numpy as np
import pytest
from desk.windows import invented_pair, opened, press, settle

from relorbit.desk.model import DeskModel
from relorbit.desk.slips_page import NONE, NOT_YET, OUTDATED
from relorbit.desk.window import Desk
from relorbit.desk.words import state_of
from relorbit.measures.pair import Pair
from relorbit.solve.vetted import vet

FLIPPED, DOUBLED = 11, 30


def with_slips() -> Pair:
    """An invented pair with a swapped quadrant and a diameter for a separation."""
    clean = invented_pair(40)
    m = clean.measures
    theta, rho = m.theta.copy(), m.rho.copy()
    theta[FLIPPED] = (theta[FLIPPED] + 180.0) % 360.0
    rho[DOUBLED] *= 2.0
    return Pair.from_arrays(
        m.epoch, theta, rho, m.theta_err, m.rho_err, technique=m.technique, observer=m.observer,
        name="Invented 10",
    )  # fmt: skip


PAIR = with_slips()


@pytest.fixture(scope="module")
def findings() -> list:
    found = vet(PAIR)
    assert [one.row for one in found] == [FLIPPED, DOUBLED]
    return found


def test_what_is_put_right_is_a_step_and_the_list_follows(findings: list) -> None:
    model = DeskModel(PAIR)
    assert model.findings is None and not model.findings_outdated
    assert model.keep_findings(findings, PAIR)
    model.mend(findings[:1])
    m = model.pair.measures
    assert m.flip[FLIPPED] and m.theta[FLIPPED] == PAIR.measures.theta[FLIPPED]
    assert model.findings == tuple(findings[1:])
    model.mend(model.findings)
    m = model.pair.measures
    assert m.rho[DOUBLED] == pytest.approx(0.5 * PAIR.measures.rho[DOUBLED])
    assert m.rho_obs[DOUBLED] == PAIR.measures.rho[DOUBLED]
    assert state_of(model.pair, DOUBLED) == "corrected"
    assert state_of(model.pair, FLIPPED) == "flipped"
    assert model.findings == ()
    model.undo()
    assert model.findings == tuple(findings[1:])
    model.undo()
    assert model.findings == tuple(findings) and model.pair is PAIR
    model.edit_cell(3, "note", "seen again")
    assert model.findings is None and model.findings_outdated
    assert not model.keep_findings(findings, PAIR)


def test_what_was_put_right_is_taken_back_but_for_later_edits(findings: list) -> None:
    model = DeskModel(PAIR)
    model.keep_findings(findings, PAIR)
    model.mend(findings)
    model.edit_cell(DOUBLED, "rho", "1.5")
    (refused,) = model.unmend()
    assert f"measure {DOUBLED + 1}" in refused
    m = model.pair.measures
    assert not m.flip[FLIPPED] and m.rho[DOUBLED] == 1.5
    assert not (m.vetted != "").any()


def test_the_list_of_slips(desk: Desk, findings: list) -> None:
    opened(desk, PAIR, None)
    desk.follows.show_slips()
    page = desk.follows.slips
    assert page.said["text"] == NOT_YET
    assert not desk.commands.do("mend") and not desk.commands.do("unmend")
    press(desk, "F8")
    settle(desk, 60.0, lambda: not desk.worker.busy)
    settle(desk, 0.3)
    lines = page.tree.get_children()
    assert [page.tree.set(line, "text") for line in lines] == [one.text for one in findings]
    before = float(page.tree.set(lines[0], "before"))
    assert before > 10 > 4 > float(page.tree.set(lines[0], "after"))
    page.tree.selection_set(lines[1])
    settle(desk, 0.2)
    assert desk.model.selection == {DOUBLED}
    assert "2 times too large" in page.said["text"] and "->" in page.said["text"]
    press(desk, "m")
    settle(desk, 0.5)
    assert desk.model.pair.measures.rho[DOUBLED] == pytest.approx(
        0.5 * PAIR.measures.rho[DOUBLED]
    )
    assert len(page.tree.get_children()) == 1
    press(desk, "Control-m")
    settle(desk, 0.5)
    assert desk.model.pair.measures.flip[FLIPPED]
    assert page.said["text"] == NONE
    assert desk.commands.do("unmend")
    settle(desk, 0.5)
    m = desk.model.pair.measures
    for name in ("epoch", "theta", "rho", "flip", "use", "reason", "vetted"):
        np.testing.assert_array_equal(getattr(m, name), getattr(PAIR.measures, name))
    assert page.said["text"] == OUTDATED
    press(desk, "Control-z")
    press(desk, "Control-z")
    press(desk, "Control-z")
    assert desk.model.pair is PAIR


def test_a_look_for_slips_can_be_stopped(desk: Desk) -> None:
    opened(desk, PAIR, None)
    desk.commands.do("vet")
    assert desk.worker.busy
    desk.commands.do("stop")
    settle(desk, 30.0, lambda: not desk.worker.busy)
    assert desk.model.findings is None
