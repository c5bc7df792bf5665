"""One change to the measures at a time, by the checks of a file."""

from __future__ import annotations

import numpy as np
import pytest
from desks import pair

from relorbit.errors import InputError
from relorbit.measures import editing
from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures


@pytest.mark.parametrize(
    ("column", "typed", "value"),
    [
        ("theta", "12.25", 12.25),
        ("theta", " 12,25 ", 12.25),
        ("theta", "12.25°", 12.25),
        ("rho", '0.98"', 0.98),
        ("theta_err", "", np.nan),
        ("rho", "-", np.nan),
        ("epoch", "B1950.0", 1949.9997904),
        ("epoch", "2000-01-01", 1999.99863),
        ("technique", "space", "space"),
        ("note", "  two   blanks ", "two blanks"),
        ("observer", "", ""),
    ],
)
def test_a_typed_value(column, typed, value):
    """Epochs: B1950.0 is JD 2433282.42346, J1999.99863 the start of 2000 January 1."""
    changed = editing.with_cell(pair(), 3, column, typed)
    got = getattr(changed.measures, column)
    if isinstance(value, str):
        assert got[3] == value
    else:
        np.testing.assert_allclose(got[3], value, rtol=0, atol=1e-5)
    rest = np.arange(6) != 3
    assert (got[rest] == getattr(pair().measures, column)[rest]).all()


@pytest.mark.parametrize(
    ("column", "typed", "words"),
    [
        ("theta", "360", "row 4, column theta: 360 is outside [0, 360)"),
        ("rho", "-1", "row 4, column rho: -1 is negative"),
        ("rho", "1_0", "column rho: '1_0' is not a number"),
        ("rho", "nan", "column rho: 'nan' is not a number"),
        ("rho", "1,234.5", "column rho: '1,234.5' has a comma and a point"),
        ("epoch", "", "row 4: no epoch; every measure needs one"),
        ("epoch", "1500", "row 4, column epoch: 1500 is before 1600"),
        ("epoch", "soon", "column epoch: 'soon'"),
        ("technique", "telepathy", "row 4, column technique: 'telepathy' is not a technique"),
        ("nights", "0", "row 4, column nights: 0 is not above 0"),
        ("note", "bell \x07", "row 4, column note: 'bell \\x07' holds a control character"),
        ("use", "no", "use is not a column to edit"),
    ],
)
def test_a_value_that_cannot_be(column, typed, words):
    with pytest.raises(InputError) as caught:
        editing.with_cell(pair(), 3, column, typed)
    assert str(caught.value).startswith(words)


def test_one_of_theta_and_rho_must_stay():
    angle_only = editing.with_cell(pair(), 3, "rho", "")
    with pytest.raises(InputError, match="row 4: neither theta nor rho"):
        editing.with_cell(angle_only, 3, "theta", "")


def test_an_early_epoch_does_not_forbid_other_edits():
    early = Pair.from_arrays([1501.5], [10.0], [1.0], allow_any_epoch=True)
    assert editing.with_cell(early, 0, "rho", "2").measures.rho[0] == 2.0


def test_cell_text_is_what_can_be_typed_again():
    measures = Measures.from_columns(
        {"epoch": [2000.0, 1999.123456], "theta": [0.1, np.nan], "rho": [np.nan, 1e-5],
         "use": [True, False], "note": ["", "a, b"]}
    )  # fmt: skip
    given = Pair("Invented 3", measures)
    for column in editing.EDITABLE:
        for row in (0, 1):
            text = editing.cell_text(measures, row, column)
            assert editing.with_cell(given, row, column, text) is given
    shown = [editing.cell_text(measures, 0, name) for name in ("epoch", "theta", "rho", "use")]
    assert shown == ["2000", "0.1", "", "yes"]


def test_use_and_flip_are_columns_of_their_own():
    first = pair()
    aside = editing.with_use(first, [4, 1], False, " poor   seeing ")
    assert aside.measures.use.tolist() == [True, False, True, True, False, True]
    assert aside.measures.reason.tolist() == ["", "poor seeing", "", "", "poor seeing", ""]
    assert editing.with_use(aside, [1, 4], True) == first
    turned = editing.with_flip(first, [0])
    assert (turned.measures.theta == first.measures.theta).all()
    assert turned.measures.theta_effective[0] == (first.measures.theta[0] + 180) % 360
    assert editing.with_flip(turned, [0]) == first


def test_a_measure_more_and_a_measure_less():
    more = editing.with_measure(pair(), "2021,5", "10", "", note="by hand")
    assert len(more.measures) == 7 and more.measures.epoch[6] == 2021.5
    assert np.isnan(more.measures.rho[6]) and more.measures.note[6] == "by hand"
    assert editing.without(more, [6]) == pair()
    with pytest.raises(InputError) as caught:
        editing.with_measure(pair(), "2021.5", "", "")
    assert str(caught.value) == "neither theta nor rho; a measure needs at least one of them"


def test_columns_that_do_not_change_are_shared():
    """Edits of 20,000 measures would otherwise cost megabytes a step."""
    first = pair()
    edited = editing.with_cell(first, 0, "rho", "2.5")
    assert edited.measures.epoch is first.measures.epoch
    assert edited.measures.note is first.measures.note
    assert edited.measures.rho is not first.measures.rho
    assert not edited.measures.rho.flags.writeable
    assert first.measures.rho[0] != 2.5


def test_an_array_that_others_can_change_is_copied():
    theirs = np.array([1.0, 2.0])
    closed = theirs.view()
    closed.setflags(write=False)
    measures = Measures.from_columns({"epoch": [2000.0, 2001.0], "theta": [1.0, 2.0]})
    from dataclasses import replace

    changed = replace(measures, rho=closed)
    theirs[0] = 9.0
    assert changed.rho.tolist() == [1.0, 2.0]
