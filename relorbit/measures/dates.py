"""Epochs as lists write them, turned into Julian years.

Astropy's time scales do the conversion, and are imported only where a column needs them. Times of
day are Universal Time in practice; they are taken as Terrestrial Time, an error below 80 seconds
(2.5e-6 yr) from 1600 on, hundreds of times below what the date of a measure is given to.
Heliocentric Julian Dates are taken as Julian Dates (at most 8.4 minutes, 1.6e-5 yr).
"""

from __future__ import annotations

import calendar
import re
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

KINDS = ("auto", "julian", "besselian", "jd", "mjd", "date")

Fail = Callable[[int, str], Exception]

_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)")
_PREFIXED = re.compile(r"([BJ])\s?([0-9]{4}(?:\.[0-9]*)?)", re.IGNORECASE)
_COMPACT = re.compile(r"(1[6-9]|2[01])[0-9]{2}[01][0-9][0-3][0-9](\.[0-9]*)?")
_DAY = r"(?P<day>[0-9]{1,2}(?:\.[0-9]*)?)"
_YEAR = r"(?P<year>[0-9]{4})"
_MONTH = r"(?P<month>[0-9]{1,2})"
_WORD = r"(?P<word>[A-Za-z]{3,9})\.?"
_CLOCK = (
    r"(?:(?:\s+|T)(?P<hour>[0-9]{1,2}):(?P<minute>[0-9]{2})(?::(?P<second>[0-9]{2}(?:\.[0-9]*)?))?"
    r"\s*(?:Z|UTC?|TT)?)?"
)
_FORMS = tuple(
    re.compile(form + _CLOCK, re.IGNORECASE)
    for form in (
        rf"{_YEAR}(?P<gap>[-/.\s])\s*{_MONTH}(?P=gap)\s*{_DAY}",
        rf"{_YEAR}[-\s]\s*{_WORD}[-\s]\s*{_DAY}",
        rf"{_DAY}\.?[-\s]\s*{_WORD}[-\s]\s*{_YEAR}",
        rf"{_WORD}\s+{_DAY},?\s+{_YEAR}",
        rf"(?P<day>[0-9]{{1,2}})\.\s*{_MONTH}\.\s*{_YEAR}",
    )
)
_EITHER_ORDER = re.compile(
    rf"(?P<one>[0-9]{{1,2}})(?P<gap>[-/])(?P<two>[0-9]{{1,2}})(?P=gap){_YEAR}{_CLOCK}"
)
_MONTH_NAMES = {
    name.lower(): number
    for names in (
        ("", "January", "February", "March", "April", "May", "June", "July", "August",
         "September", "October", "November", "December"),
        ("", "Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"),
        ("", "", "", "", "", "", "", "", "", "Sept"),
    )
    for number, name in enumerate(names)
    if name
}  # fmt: skip
_PATTERN_PARTS = {
    "YYYY": _YEAR, "MM": _MONTH, "Mon": _WORD, "DD": _DAY, "hh": r"(?P<hour>[0-9]{1,2})",
    "mm": r"(?P<minute>[0-9]{2})", "ss": r"(?P<second>[0-9]{2}(?:\.[0-9]*)?)",
}  # fmt: skip
_RIGHT = "write a year such as 1998.345, or a date such as 1998-05-06.4"

Calendar = tuple[int, int, float]


def julian_years(
    texts: Sequence[str],
    kind: str,
    fail: Fail,
    *,
    pattern: re.Pattern[str] | None = None,
    factor: float = 1.0,
    offset: float = 0.0,
) -> NDArray[np.float64]:
    """Julian epochs (TT, years) from the cells of one column.

    Parameters
    ----------
    texts : sequence of str, length n
        The cells; an empty one is a missing epoch. A decimal comma counts as a point.
    kind : str
        One of `KINDS`: what a plain number means. In "auto" a number is a Julian year, a date is
        recognised, and a prefix B or J names the year it stands before. In "julian" and
        "besselian" dates and prefixes are recognised too.
    fail : callable
        Given the index of a cell and what is wrong with it, makes the exception to raise.
    pattern : compiled pattern, optional
        How a date is written, from `date_pattern`; for kind "date".
    factor, offset : float
        A plain number stands for ``number * factor + offset``.

    Returns
    -------
    array, shape (n,)
        NaN where the cell is empty.
    """
    years = np.full(len(texts), np.nan)
    groups: dict[str, list[tuple[int, float | Calendar]]] = {}
    for index, text in enumerate(texts):
        if not text:
            continue
        try:
            found, value = _read(text.strip().replace(",", "."), text, kind, pattern)
        except ValueError as error:
            raise fail(index, f"{text!r} {error}") from None
        if not isinstance(value, tuple):
            value = value * factor + offset
        if found == "julian":
            years[index] = value
        else:
            groups.setdefault(found, []).append((index, value))
    for found, members in groups.items():
        years[[index for index, _ in members]] = _converted(found, [v for _, v in members])
    return years


def other_dates(epoch: NDArray[np.float64], texts: Sequence[str]) -> NDArray[np.float64]:
    """Julian years with day and month exchanged; NaN where a date shows none or no other.

    Parameters
    ----------
    epoch : array, shape (n,)
        Julian years that the dates were read as; a text that says another epoch counts for none.
    texts : sequence of str, length n
        Dates as received, such as ``2001-03-12`` or ``12.03.2001``.
    """
    years = np.full(len(texts), np.nan)
    rows, dates = [], []
    for row, text in enumerate(texts):
        word = str(text).strip()
        for form in (*_FORMS, _EITHER_ORDER):
            match = form.fullmatch(word) if word else None
            parts = match.groupdict() if match else {}
            if not parts or parts.get("word"):
                continue
            month, day = parts.get("month", parts.get("one")), parts.get("day", parts.get("two"))
            whole, dot, rest = day.partition(".")
            if int(whole) <= 12 and int(month) <= 12 and int(whole) != int(month):
                rows.append(row)
                dates.append([
                    _calendar({**parts, "month": str(int(m)), "day": f"{int(d)}{dot}{rest}"})
                    for m, d in ((month, whole), (whole, month))
                ])  # fmt: skip
            break
    if rows:
        one, other = (_converted("calendar", [pair[k] for pair in dates]) for k in (0, 1))
        first, second = np.abs(one - epoch[rows]), np.abs(other - epoch[rows])
        there = np.where(first < second, other, one)
        years[rows] = np.where(np.minimum(first, second) < 1e-5, there, np.nan)
    return years


def date_pattern(pattern: str) -> re.Pattern[str]:
    """A compiled pattern from one such as ``DD.MM.YYYY`` or ``Mon DD YYYY hh:mm``.

    YYYY is the year, MM the month as a number, Mon as a name, DD the day (decimals allowed), hh,
    mm, ss the time of day; anything else stands for itself.

    Raises
    ------
    ValueError
        When year, month or day is not in it, or twice.
    """
    parts = re.split("(YYYY|MM|Mon|DD|hh|mm|ss)", pattern)
    month = parts.count("MM") + parts.count("Mon")
    if parts.count("YYYY") != 1 or month != 1 or parts.count("DD") != 1:
        raise ValueError("needs YYYY, DD and one of MM and Mon, each once, such as DD.MM.YYYY")
    if any(parts.count(part) > 1 for part in ("hh", "mm", "ss")):
        raise ValueError("has a part of the time of day twice")
    if not re.search(r"[^A-Za-z]", "".join(parts[2::2])):  # no separators: fixed numbers of digits
        fixed = {"MM": "(?P<month>[0-9]{2})", "DD": r"(?P<day>[0-9]{2}(?:\.[0-9]*)?)"}
    else:
        fixed = {}
    body = "".join(
        fixed.get(p, _PATTERN_PARTS.get(p)) or re.escape(p).replace(r"\ ", r"\s+") for p in parts
    )
    return re.compile(body, re.IGNORECASE)


def _read(
    text: str, shown: str, kind: str, pattern: re.Pattern[str] | None
) -> tuple[str, float | Calendar]:
    """What kind of epoch a cell holds, and its number or date."""
    if pattern is not None:
        match = pattern.fullmatch(text) or pattern.fullmatch(shown.strip())
        if match is None:
            raise ValueError("does not have the pattern of dates that the layout gives")
        return "calendar", _calendar(match.groupdict())
    if _NUMBER.fullmatch(text):
        return _number(text, kind)
    if kind in ("jd", "mjd"):
        raise ValueError(f"is not a number; write the {'Modified ' * (kind == 'mjd')}Julian Date")
    prefixed = _PREFIXED.fullmatch(text)
    if prefixed:
        return {"B": "besselian", "J": "julian"}[prefixed[1].upper()], float(prefixed[2])
    for form in _FORMS:
        match = form.fullmatch(text) or form.fullmatch(shown.strip())
        if match:
            return "calendar", _calendar(match.groupdict())
    match = _EITHER_ORDER.fullmatch(text)
    if match:
        return "calendar", _calendar(_day_and_month(match.groupdict()))
    raise ValueError(f"is not an epoch; {_RIGHT}")


def _number(text: str, kind: str) -> tuple[str, float | Calendar]:
    value = float(text)
    if kind in ("auto", "date") and _COMPACT.fullmatch(text):
        parts = {"year": text[:4], "month": text[4:6], "day": text[6:]}
        return "calendar", _calendar(parts)
    if kind in ("auto", "date"):
        if 2.2e6 < value < 2.6e6:
            raise ValueError("looks like a Julian Date; head the column JD")
        if 1.5e4 < value < 1e5:
            raise ValueError("looks like a Modified Julian Date; head the column MJD")
        return "julian", value
    return kind, value


def _day_and_month(parts: dict[str, str]) -> dict[str, str]:
    one, two = int(parts["one"]), int(parts["two"])
    if one <= 12 and two <= 12 and one != two:
        raise ValueError(
            "may be day and month or month and day; write 2019-03-12, or name the pattern in a "
            "layout"
        )
    day, month = (one, two) if two <= 12 else (two, one)
    return {**parts, "day": str(day), "month": str(month)}


def _calendar(parts: dict[str, str | None]) -> Calendar:
    """Year, month and day with its fraction; ValueError for a day that is not in the calendar."""
    year, day = int(parts["year"]), float(parts["day"])
    word = parts.get("word")
    month = _MONTH_NAMES.get(word.lower(), 0) if word else int(parts["month"])
    if not 1 <= month <= 12 or year < 1:
        raise ValueError(f"is not a date; {_RIGHT}")
    if not 1 <= day < calendar.monthrange(year, month)[1] + 1:
        raise ValueError(f"is not a date, that month has no day {int(day)}; {_RIGHT}")
    clock = [float(parts.get(name) or 0.0) for name in ("hour", "minute", "second")]
    if clock[0] >= 24 or clock[1] >= 60 or clock[2] >= 61:
        raise ValueError("has a time of day that is not on the clock; write it as 05:10:30")
    return year, month, day + clock[0] / 24 + clock[1] / 1440 + clock[2] / 86400


def _converted(kind: str, values: list) -> NDArray[np.float64]:
    """Julian years from epochs of one other kind, by astropy."""
    from astropy.time import Time

    if kind == "calendar":
        days = np.array([day for _, _, day in values])
        first = {
            "year": np.array([year for year, _, _ in values]),
            "month": np.array([month for _, month, _ in values]),
            "day": np.ones(len(values), int),
        }
        start = Time(first, format="ymdhms", scale="tt")
        return Time(start.jd1, start.jd2 + (days - 1), format="jd", scale="tt").jyear
    form = {"besselian": "byear", "jd": "jd", "mjd": "mjd"}[kind]
    return Time(np.array(values), format=form, scale="tt").jyear
