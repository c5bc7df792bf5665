"""The error decides the figures; dates and tables."""

import math
from datetime import timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from relorbit.show import numbers


@pytest.mark.parametrize(
    ("value", "sigma", "expected"),
    [
        (41.62345, 0.0123, ("41.623", "0.012")),
        (41.62345, 1.26, ("41.6", "1.3")),
        (41.62345, 0.0996, ("41.62", "0.10")),  # rounds up into the next power of ten
        (0.27634, 0.000999, ("0.2763", "0.0010")),
        (1534.2, 123.4, ("1530", "120")),
        (41.62345, 41.0, ("42", "41")),
        (-0.0004, 0.11, ("0.00", "0.11")),  # no minus before zero
        (41.62345, None, ("41.62", "-")),
        (41.62345, float("nan"), ("41.62", "-")),
        (41.62345, 0.0, ("41.62", "0")),
    ],
)
def test_two_figures_of_the_error_decide_where_a_value_ends(value, sigma, expected):
    assert numbers.with_error(value, sigma, without=2) == expected


@given(st.floats(1e-6, 1e5))
def test_an_error_has_two_figures_and_is_within_five_per_cent(sigma):
    text = numbers.error_text(sigma)
    assert float(text) == pytest.approx(sigma, rel=0.0501)
    assert len(text.replace(".", "").strip("0")) <= 2


def test_an_error_too_small_for_the_decimals_is_not_printed_as_zero():
    assert numbers.error_text(3.21e-12) == "3.2e-12"


@pytest.mark.parametrize(
    ("value", "decimals", "text"),
    [(359.996, 2, "0.00"), (359.994, 2, "359.99"), (0.0, 1, "0.0"), (None, 1, "-")],
)
def test_an_angle_never_reads_360(value, decimals, text):
    assert numbers.angle(value, decimals) == text


@pytest.mark.parametrize(
    ("value", "figures", "text"),
    [(124.83, 4, "124.8"), (0.0123456, 3, "0.0123"), (999.96, 4, "1000"), (12345.0, 2, "12000")],
)
def test_significant_figures(value, figures, text):
    assert numbers.significant(value, figures) == text


@pytest.mark.parametrize(
    ("julian_year", "date"),
    # JD 2451545.0 is 2000 January 1.5 by definition; a Julian year is 365.25 days
    [(2000.0, "2000-01-01"), (2024.0, "2024-01-01"), (1900.0, "1899-12-31"), (99999.0, "-")],
)
def test_calendar_date(julian_year, date):
    assert numbers.calendar_date(julian_year) == date


def test_dates_agree_with_astropy():
    time = pytest.importorskip("astropy.time").Time
    for year in (1623.4571, 1899.99, 2031.26, 2150.7501):
        # numpy days count in microseconds, astropy in nanoseconds
        gap = numbers.instant(year) - time(year, format="jyear", scale="tt").to_datetime()
        assert abs(gap) < timedelta(milliseconds=1)


def test_dates_close_together_have_tenths_of_a_day():
    assert numbers.dates_of([2000.0, 2000.0 + 0.7 / 365.25]) == ["2000-01-01.5", "2000-01-02.2"]
    assert numbers.dates_of([2000.0, 2001.0]) == ["2000-01-01", "2000-12-31"]


@pytest.mark.parametrize(
    ("sigma", "date"),
    [(None, "2031 Apr 8"), (0.005, "2031 Apr 8"), (0.1, "2031 Apr"), (1.0, "2031"),
     (20.0, "about 2031")],
)  # fmt: skip
def test_a_date_is_no_finer_than_its_error(sigma, date):
    assert numbers.rough_date(2031.265, sigma) == date


def test_points_stand_in_one_line():
    padded = numbers.on_the_point(["1.25", "100", "-0.5", "held"])
    assert padded == ["1.25", "100   ", "-0.5 ", "held   "]
    text = numbers.table(["a", "b"], [["x", "1.25"], ["yy", "100"]], "l.", ["", "yr"])
    lines = text.split("\n")
    assert lines[0] == "a        b" and lines[2] == "-" * len(lines[0])
    assert [line.find(".") for line in lines[3:4]] == [7] and lines[4] == "yy  100"


def test_a_number_that_is_missing_is_a_dash():
    assert numbers.fixed(math.nan, 2) == numbers.fixed(None, 2) == "-"
    assert numbers.fixed(0.25, 1, sign=True) == "+0.2" and numbers.fixed(0.0, 1, sign=True) == "0.0"
