"""Epochs as lists write them, against astropy."""

import datetime

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from relorbit.measures.dates import date_pattern, julian_years

DAYS = st.dates(datetime.date(1600, 1, 1), datetime.date(2199, 12, 31))
NAMES = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"]
A_SECOND_YR = 1 / (365.25 * 86400)


def years(texts, kind="auto", **ways):
    return julian_years(texts, kind, lambda i, what: LookupError(f"{i}: {what}"), **ways)


@settings(deadline=None, max_examples=40)
@given(DAYS, st.integers(0, 999))
def test_every_way_to_write_a_date_is_the_same_day(day, thousandths):
    from astropy import units as u
    from astropy.time import Time

    truth = (Time(day.isoformat(), scale="tt") + thousandths / 1000 * u.day).jyear
    frac = f".{thousandths:03d}"
    y, m, d = day.year, day.month, day.day
    clock = datetime.datetime(1, 1, 1) + datetime.timedelta(seconds=86.4 * thousandths)
    name = NAMES[m - 1]
    texts = [
        f"{y}-{m:02d}-{d:02d}{frac}", f"{y}-{m}-{d},{thousandths:03d}", f"{y}/{m}/{d}{frac}",
        f"{y} {m:02d} {d:02d}{frac}", f"{y}.{m:02d}.{d:02d}{frac}", f"{y}{m:02d}{d:02d}{frac}",
        f"{y} {name} {d}{frac}", f"{d}{frac} {name} {y}", f"{name} {d}{frac}, {y}",
        f"{y}-{name.upper()}-{d:02d}{frac}",
        f"{y}-{m:02d}-{d:02d}T{clock:%H:%M:%S.%f}", f"{y}-{m:02d}-{d:02d} {clock:%H:%M:%S.%f} UT",
        f"{d}.{m}.{y} {clock:%H:%M:%S.%f}", f"{d:02d}. {m:02d}. {y} {clock:%H:%M:%S.%f}",
    ]  # fmt: skip
    assert np.abs(years(texts) - truth).max() < A_SECOND_YR / 10


@settings(deadline=None, max_examples=40)
@given(st.floats(1600.0, 2199.0))
def test_other_ways_to_count_time_come_back(year):
    from astropy.time import Time

    time = Time(year, format="jyear", scale="tt")
    for kind, value in (("jd", time.jd), ("mjd", time.mjd), ("besselian", time.byear)):
        assert years([repr(float(value))], kind)[0] == pytest.approx(year, abs=1e-9)
    assert years([repr(year)])[0] == year
    assert years([repr(year)], "julian")[0] == year


def test_known_epochs():
    # B1950.0 = JD 2433282.42345905 (Lieske 1979, A&A 73, 282).
    assert years(["B1950.0"])[0] == pytest.approx(2000 + (2433282.42345905 - 2451545) / 365.25)
    assert years(["1950"], "besselian") == years(["B1950"])
    assert years(["J1991.25", "j1991.25", "1991.25", "1991,25"]).tolist() == [1991.25] * 4
    assert years(["2451545.0"], "jd")[0] == 2000.0
    assert years(["51544.5"], "mjd")[0] == 2000.0
    assert years(["2000-01-01.5", "01.01.2000 12:00", "20000101.5"]).tolist() == [2000.0] * 3
    assert np.isnan(years(["", "2000"])).tolist() == [True, False]


def test_factor_and_offset_of_a_layout():
    assert years(["28.5"], "julian", offset=1800.0)[0] == 1828.5
    assert years(["1545"], "jd", factor=1.0, offset=2450000.0)[0] == 2000.0


def test_day_and_month_are_told_apart_only_where_they_can_be():
    same = years(["2019-03-25"])
    assert years(["25/03/2019", "03/25/2019", "25-03-2019"]).tolist() == [same[0]] * 3
    assert years(["05/05/2019"])[0] == years(["2019-05-05"])[0]
    with pytest.raises(LookupError) as caught:
        years(["2000.5", "12/03/2019"])
    assert caught.value.args[0] == (
        "1: '12/03/2019' may be day and month or month and day; write 2019-03-12, or name the "
        "pattern in a layout"
    )
    truth = years(["2019-03-12"])[0]
    assert years(["12/03/2019"], "date", pattern=date_pattern("DD/MM/YYYY"))[0] == truth
    assert years(["03/12/2019"], "date", pattern=date_pattern("MM/DD/YYYY"))[0] == truth
    assert years(["20190312"], "date", pattern=date_pattern("YYYYMMDD"))[0] == truth
    assert years(["12 Mar 2019"], "date", pattern=date_pattern("DD Mon YYYY"))[0] == truth
    assert years(["2019_12.25_3"], "date", pattern=date_pattern("YYYY_DD_MM"))[0] == (
        pytest.approx(truth + 0.25 / 365.25, abs=1e-10)
    )


@pytest.mark.parametrize("pattern", ["DD/MM", "YYYY-MM-MM", "YYYY", "", "YYYY MM Mon DD",
                                     "DD MM YYYY hh hh"])  # fmt: skip
def test_patterns_that_name_no_day(pattern):
    with pytest.raises(ValueError, match=r"needs YYYY, DD and one of MM|the time of day twice"):
        date_pattern(pattern)


@pytest.mark.parametrize(
    ("text", "kind", "what"),
    [
        ("2451545.0", "auto", "looks like a Julian Date; head the column JD"),
        ("58000.5", "auto", "looks like a Modified Julian Date; head the column MJD"),
        ("2019-02-29", "auto", "is not a date, that month has no day 29; write a year such as"),
        ("2019-13-01", "auto", "is not a date; write a year such as 1998.345, or a date such as"),
        ("2019-04-31.5", "auto", "is not a date, that month has no day 31"),
        ("2019-01-00", "auto", "is not a date, that month has no day 0"),
        ("2019 Foo 12", "auto", "is not a date; write"),
        ("2019-03-12T25:00", "auto", "has a time of day that is not on the clock"),
        ("last winter", "auto", "is not an epoch; write a year such as 1998.345"),
        ("12.03.19", "auto", "is not an epoch"),
        ("nan", "auto", "is not an epoch"),
        ("2019-03-12", "jd", "is not a number; write the Julian Date"),
        ("x", "mjd", "is not a number; write the Modified Julian Date"),
    ],
)
def test_what_is_no_epoch(text, kind, what):
    with pytest.raises(LookupError) as caught:
        years([text], kind)
    assert caught.value.args[0].startswith(f"0: {text!r} {what}")
