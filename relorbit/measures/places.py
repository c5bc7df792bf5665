"""Catalogue positions as an observer gives them: words such as ``ra=230.8 dec=30.3``, or a file.

A file is a table with a header line, one row for each star: CSV, TSV, semicolons, blanks or ECSV.
The words are the same in both: ra, dec, epoch, ra_err, dec_err, correlation, pm_ra, pm_dec,
pm_ra_err, pm_dec_err, pm_correlation, name. Right ascension is in degrees or hours (15 23 12.3),
errors in mas and motions in mas/yr, unless a unit follows: in the heading (``ra_err [arcsec]``),
or after the number (``ra_err=0.02 arcsec``).
"""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path

from relorbit.errors import InputError
from relorbit.measures import cells, ecsv
from relorbit.measures.between import Place
from relorbit.measures.files import read_text

WORDS = {
    "ra": "ra_deg", "dec": "dec_deg", "epoch": "epoch", "ra_err": "ra_err_mas",
    "dec_err": "dec_err_mas", "correlation": "correlation", "pm_ra": "pm_ra_mas_yr",
    "pm_dec": "pm_dec_mas_yr", "pm_ra_err": "pm_ra_err_mas_yr", "pm_dec_err": "pm_dec_err_mas_yr",
    "pm_correlation": "pm_correlation", "name": "name",
}  # fmt: skip
_MEANINGS = {
    **dict.fromkeys(("ra", "raj", "alpha", "rightascension"), "ra"),
    **dict.fromkeys(("dec", "de", "decj", "dej", "delta", "declination"), "dec"),
    **dict.fromkeys(("epoch", "refepoch", "referenceepoch", "year"), "epoch"),
    **dict.fromkeys(("correlation", "corr", "radeccorr", "radeccorrelation"), "correlation"),
    **dict.fromkeys(("pmra", "mualpha", "pmalpha", "properra"), "pm_ra"),
    **dict.fromkeys(("pmdec", "pmde", "mudelta", "pmdelta"), "pm_dec"),
    **dict.fromkeys(("pmcorrelation", "pmcorr", "pmrapmdeccorr"), "pm_correlation"),
    **dict.fromkeys(("name", "star", "designation", "id"), "name"),
}
_ERRORS = {"e", "err", "error", "errors", "sigma", "sig", "sd", "std", "unc", "uncertainty"}
_YEARLY = {"yr", "year", "a", "y", "per"}
_SIZES = {
    **dict.fromkeys(("mas", "milliarcsec"), 1.0),
    **dict.fromkeys(("uas", "microarcsec"), 1e-3),
    **dict.fromkeys(("arcsec", "arcseconds", "arcsecond", "as"), 1e3),
    **dict.fromkeys(("deg", "degree", "degrees"), 3.6e6),
}
_HOURS = ("h", "hr", "hour", "hours", "hourangle")
_PAIR = re.compile(r"([A-Za-z_]\w*)\s*=\s*(.*?)\s*(?:[,;]\s*)?(?=(?:\b[A-Za-z_]\w*\s*=)|$)", re.S)
_NUMBER_UNIT = re.compile(r"(\S+)\s+([A-Za-z][A-Za-z/ ]*)|([-+0-9.,]+)([A-Za-z][A-Za-z/ ]*)")
Fail = Callable[[str, str], InputError]


def read_places(text: str) -> list[Place]:
    """One place from words, or those of a file.

    Parameters
    ----------
    text : str
        Such as ``ra=15 23 12.31, dec=+30 17 16.2, epoch=2016.0``, or the name of a file.

    Raises
    ------
    InputError
        For what cannot be read; names word, or file, line and column.
    """
    if "=" in text and not Path(text).exists():
        return [_from_words(text)]
    return _from_file(text)


def _from_words(text: str) -> Place:
    found = {}
    rest = _PAIR.sub("", text).strip(" ,;")
    if rest:
        raise InputError(f"{rest!r} is not WORD=VALUE, such as ra=230.8")

    def fail(word: str, what: str) -> InputError:
        return InputError(f"{word}: {what}")

    for word, value in _PAIR.findall(text):
        name = _meaning(word, "", fail)[0]
        if not name:
            raise InputError(f"{word!r} is not a word of a place; use {', '.join(WORDS)}")
        if name in found:
            raise InputError(f"{word} is given twice")
        found[name] = _value(name, value, "", lambda what, word=word: fail(word, what))
    return _place(found)


def _from_file(path: str) -> list[Place]:
    lines = cells.physical_lines(read_text(path))

    def fail_line(line: int, what: str) -> InputError:
        return InputError(what, path=path, line=line or None)

    units = {}
    if ecsv.is_ecsv(lines):
        header = ecsv.read_header(lines, path)
        units = header.units
        delimiter = header.delimiter if header.delimiter != " " else None
        grid = cells.cut_delimited(lines, fail_line, comments=("#",), delimiter=delimiter)
    else:
        grid = cells.cut_delimited(lines, fail_line)
    if not grid.rows:
        raise InputError("a header but no places; add a line for each star", path=path)

    def fail_heading(name: str, what: str) -> InputError:
        return InputError(what, path=path, column=name)

    headings = [_meaning(name, units.get(name, ""), fail_heading) for name in grid.names]
    known = [name for name, _ in headings if name]
    doubled = sorted({name for name in known if known.count(name) > 1})
    if doubled:
        raise InputError(f"two columns mean {doubled[0]}; keep one of them", path=path)
    if not {"ra", "dec"} <= set(known):
        raise InputError(
            f"no columns for ra and dec; the columns are {', '.join(grid.names)}", path=path
        )
    places = []
    for row, line in zip(grid.rows, grid.lines, strict=True):
        found = {}
        for (name, unit), heading, cell in zip(headings, grid.names, row, strict=True):
            if not name or cell.lower() in cells.MISSING:
                continue

            def fail(what: str, line: int = line, heading: str = heading) -> InputError:
                return InputError(what, path=path, line=line, column=heading)

            found[name] = _value(name, cell, unit, fail)
        try:
            places.append(_place(found))
        except InputError as error:
            raise InputError(error.what, path=path, line=line) from None
    return places


def _meaning(heading: str, unit: str, fail: Fail) -> tuple[str, str]:
    """The word of `WORDS` that a heading means ("" for none), and its unit ("" for the usual)."""
    bracket = re.fullmatch(r"(.*?)[\[(]([^\])]*)[\])]\s*", heading)
    tokens = re.findall(r"[a-z]+", (bracket[1] if bracket else heading).lower())
    unit = unit or (bracket[2].strip() if bracket else "")
    tail: list[str] = []
    while len(tokens) > 1 and tokens[-1] in (*_SIZES, *_YEARLY, *_HOURS):
        tail.insert(0, tokens.pop())
    is_error = any(token in _ERRORS for token in tokens)
    kept = [token for token in tokens if token not in _ERRORS and token not in ("cosdec", "cos")]
    name = _MEANINGS.get("".join(kept), "")
    if is_error:
        name = f"{name}_err" if f"{name}_err" in WORDS else ""
    unit = unit or " ".join(tail)
    if name and unit:
        _scale(name, unit, lambda what: fail(heading, what))
    return name, unit


def _value(name: str, text: str, unit: str, fail: Callable[[str], InputError]) -> float | str:
    """A value in the unit of its attribute; places and epochs stay text where they are one."""
    text = text.strip().strip('"')
    if name in ("name", "epoch"):
        return text
    if name in ("ra", "dec") and re.search(r"[0-9][hd\u00b0:\s]\s*[0-9]", text):
        return text
    found = _NUMBER_UNIT.fullmatch(text)
    if found and not re.fullmatch(r"[-+0-9.,]+[eE]", text):
        text, unit = found[1] or found[3], found[2] or found[4]
    number = float(cells.numbers([text], lambda _, what: fail(what))[0])
    if number != number:
        raise fail("is empty; leave the word out where nothing is known")
    return number * _scale(name, unit, fail)


def _scale(name: str, unit: str, fail: Callable[[str], InputError]) -> float:
    """What a number in a unit is to be multiplied by."""
    words = re.findall(r"[a-z]+", unit.lower())
    yearly = [word for word in words if word in _YEARLY]
    size = "".join(word for word in words if word not in _YEARLY)
    if not words or name in ("name", "epoch", "correlation", "pm_correlation"):
        return 1.0
    if name in ("ra", "dec"):
        if name == "ra" and size in _HOURS:
            return 15.0
        if _SIZES.get(size) == 3.6e6:
            return 1.0
        raise fail(f"unit {unit!r} is not one of degrees{' or hours' if name == 'ra' else ''}")
    if size not in _SIZES or (yearly and not name.startswith("pm")):
        a_year = "/yr" if name.startswith("pm") else ""
        raise fail(f"unit {unit!r} is not one of mas, arcsec, uas, deg{a_year}")
    return _SIZES[size]


def _place(found: dict[str, float | str]) -> Place:
    missing = [name for name in ("ra", "dec") if name not in found]
    if missing:
        raise InputError(f"no {missing[0]}; a place needs ra and dec")
    return Place(**{WORDS[name]: value for name, value in found.items()})
