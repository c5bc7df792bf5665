"""Epochs as an observer asks for them: words, ranges, refusals."""

import numpy as np
import pytest
from astropy.time import Time

from relorbit.derive.epochs import (
    MOST_ROWS,
    chosen_epochs,
    epoch_from_text,
    epoch_grid,
    step_in_years,
)
from relorbit.errors import InputError


@pytest.mark.parametrize(
    ("text", "epoch"),
    [
        ("2027.5", 2027.5),
        ("2027", 2027.0),
        ("2027,5", 2027.5),
        ("J2000.0", 2000.0),
        ("B1950.0", 1949.9997904),
        ("2000-01-01.5", 2000.0),
        ("2027-07-02", Time("2027-07-02", scale="tt").jyear),
    ],
)
def test_epochs_in_words(text, epoch):
    assert epoch_from_text(text) == pytest.approx(epoch, abs=1e-7)


def test_an_epoch_that_is_none():
    message = (
        r"^epoch 'tomorrow' is not an epoch; "
        r"write a year such as 1998\.345, or a date such as 1998-05-06\.4$"
    )
    with pytest.raises(InputError, match=message):
        epoch_from_text("tomorrow")


@pytest.mark.parametrize("text", ["", "   ", "nan"])
def test_no_epoch_at_all_is_refused(text):
    with pytest.raises(InputError, match=r"^epoch "):
        epoch_from_text(text)


@pytest.mark.parametrize(
    ("text", "years"),
    [
        ("1", 1.0), ("0.5 years", 0.5), (".25 yr", 0.25), ("2y", 2.0), ("1 year", 1.0),
        ("6 months", 0.5), ("1 mo", 1.0 / 12.0), ("3mon", 0.25), ("30 days", 30.0 / 365.25),
        ("1d", 1.0 / 365.25), ("  10 DAY ", 10.0 / 365.25),
    ],
)  # fmt: skip
def test_steps(text, years):
    assert step_in_years(text) == pytest.approx(years, rel=1e-15)


@pytest.mark.parametrize("text", ["0", "0 days", "-1", "1 week", "year", "", "1e2", "1 2", "nan"])
def test_steps_that_are_none(text):
    with pytest.raises(InputError) as caught:
        step_in_years(text)
    assert str(caught.value) == (
        f"step {text!r} is not a length of time above 0; write 1 year, 6 months or 30 days"
    )


@pytest.mark.parametrize(
    ("first", "last", "step", "expected"),
    [
        (2020.0, 2023.0, 1.0, [2020, 2021, 2022, 2023]),
        (2020.0, 2022.9, 1.0, [2020, 2021, 2022]),
        (2020.0, 2020.0, 1.0, [2020]),
        (2020.0, 2020.5, 1.0, [2020]),
    ],
)
def test_grid(first, last, step, expected):
    assert epoch_grid(first, last, step).tolist() == expected


@pytest.mark.parametrize("step", [0.1, 1.0 / 12.0, 0.3, 1.0 / 7.0])
def test_the_last_epoch_is_in_where_a_step_falls_on_it(step):
    """Also where a decimal step is not exact in binary."""
    for count in (1, 3, 12, 997):
        grid = epoch_grid(2000.0, 2000.0 + count * step, step)
        assert grid.size == count + 1
        assert grid[-1] == pytest.approx(2000.0 + count * step, abs=1e-9)


def test_an_empty_range():
    message = r"^the last epoch 2020 is before the first 2030; swap them$"
    with pytest.raises(InputError, match=message):
        epoch_grid(2030.0, 2020.0, 1.0)


def test_too_many_rows():
    assert epoch_grid(0.0, MOST_ROWS - 1.0, 1.0).size == MOST_ROWS
    message = r"^100001 epochs are more than 100000; take a longer step$"
    with pytest.raises(InputError, match=message):
        epoch_grid(0.0, float(MOST_ROWS), 1.0)


def test_chosen_epochs():
    today = 2026.25
    assert chosen_epochs("2027.5, 2030", None, None, "1", today).tolist() == [2027.5, 2030.0]
    # epochs named one by one win over a range
    assert chosen_epochs("2027.5", "2000", "2010", "1", today).tolist() == [2027.5]
    assert chosen_epochs(None, "2020", "2022", "1 year", today).tolist() == [2020, 2021, 2022]
    months = chosen_epochs(None, None, None, "6 months", today)
    np.testing.assert_allclose(months, today + 0.5 * np.arange(11))
    assert chosen_epochs(None, None, "2028.25", "1", today).tolist() == [2026.25, 2027.25, 2028.25]
    assert chosen_epochs(None, "2020", None, "2", today).tolist() == list(range(2020, 2041, 2))


def test_chosen_epochs_that_cannot_be():
    message = r"^the last epoch 2020 is before the first 2026\.25; swap them$"
    with pytest.raises(InputError, match=message):
        chosen_epochs(None, None, "2020", "1", 2026.25)
    with pytest.raises(InputError, match=r"^epoch "):
        chosen_epochs("2027,,2030", None, None, "1", 2026.25)
    with pytest.raises(InputError, match=r"^epoch 'soon' is not an epoch"):
        chosen_epochs("2027, soon", None, None, "1", 2026.25)
