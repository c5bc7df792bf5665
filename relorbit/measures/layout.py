"""Layouts: how a list is set out that does not say so itself, written in TOML.

A list in fixed columns::

    form = "fixed"
    skip = 4                        # lines to pass over at the top
    comment = ["#"]                 # what a comment line starts with; # ; % ! unless said
    decimal = ","                   # "," or "."; either is taken unless said
    missing = ["...", "99.99"]      # what stands for a missing value, beside the usual dashes
    encoding = "latin-1"            # UTF-8 unless said

    [columns.epoch]
    start = 1                       # first and last character, from 1, both included
    end = 9
    kind = "besselian"              # auto, julian, besselian, jd, mjd or date
    offset = 1800                   # the number stands for number * factor + offset

    [columns.theta]
    width = 7                       # instead of start and end: from the end of the column before

    [columns.rho]
    start = 20
    end = 26
    unit = "mas"
    missing = ["0"]                 # of this column alone

    [constants]                     # the same for every row
    technique = "eyepiece"
    observer = "A. Muster"
    equinox = "date"

    [techniques]                    # the list's words for ours
    Mi = "eyepiece"

    [observers]                     # the list's words for full names
    AM = "A. Muster"

The columns are those of the measures (`relorbit.measures.table.Measures`), and year, month, day
where a date stands in three columns. Dates in another order have a pattern::

    [columns.epoch]
    kind = "date"
    pattern = "DD/MM/YYYY"          # YYYY, MM or Mon, DD, hh, mm, ss

A delimited list may have a layout too. Its columns are named by the list's own heading, or by
their place where there is no header line; without ``[columns]`` the header words are read as
without a layout::

    form = "delimited"
    delimiter = "semicolon"         # comma, semicolon, tab, bar, space; found unless said
    header = true                   # false: no header line

    [columns.theta]
    header = "Winkel"

    [columns.rho]
    place = 3                       # the third cell
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from os import PathLike, fspath
from typing import Any

from relorbit.errors import InputError
from relorbit.measures import dates, headers
from relorbit.measures.cells import COMMENTS
from relorbit.measures.files import read_text
from relorbit.measures.table import FLAGS, NUMBERS, TECHNIQUES, TEXTS

DELIMITERS = {"comma": ",", "semicolon": ";", "tab": "\t", "bar": "|", "space": None}
COLUMNS = (*NUMBERS, *TEXTS, *FLAGS, "year", "month", "day")

_TOP = {
    "form": str, "skip": int, "comment": list, "decimal": str, "missing": list, "encoding": str,
    "delimiter": str, "header": bool, "columns": dict, "constants": dict, "techniques": dict,
    "observers": dict,
}  # fmt: skip
_OF_A_COLUMN = {
    "start": int, "end": int, "width": int, "header": str, "place": int, "unit": str, "kind": str,
    "pattern": str, "missing": list, "factor": float, "offset": float,
}  # fmt: skip
_KIND_WORDS = {
    str: "a text in quotation marks", int: "a whole number", list: "a list of texts",
    bool: "true or false", dict: "a table", float: "a number",
}  # fmt: skip


@dataclass(frozen=True)
class LayoutColumn:
    """One column of a layout; the attributes are the keys of the TOML table.

    `start` and `end` are filled in where only a width was given; `place` counts from 1.
    """

    column: str
    start: int = 0
    end: int = 0
    header: str = ""
    place: int = 0
    unit: str = ""
    kind: str = "auto"
    pattern: re.Pattern[str] | None = None
    missing: frozenset[str] = frozenset()
    factor: float = 1.0
    offset: float = 0.0


@dataclass(frozen=True)
class Layout:
    """How a list is set out; the attributes are the keys of the TOML file."""

    path: str
    form: str
    columns: tuple[LayoutColumn, ...] = ()
    skip: int = 0
    comment: tuple[str, ...] = COMMENTS
    decimal: str | None = None
    missing: frozenset[str] = frozenset()
    encoding: str | None = None
    delimiter: str | None = ""
    header: bool = True
    constants: Mapping[str, Any] = field(default_factory=dict)
    techniques: Mapping[str, str] = field(default_factory=dict)
    observers: Mapping[str, str] = field(default_factory=dict)


def read_layout(path: str | PathLike[str]) -> Layout:
    """Read and check a layout; the module's docstring says what it may hold.

    Raises
    ------
    InputError
        When it cannot be read, or a key is unknown, missing or has a value that cannot be.
    """
    try:
        given = tomllib.loads(read_text(path))
    except tomllib.TOMLDecodeError as error:
        what = f"not a TOML file: {' '.join(str(error).split())}"
        raise InputError(what, path=path) from None
    return _Checker(fspath(path)).layout(given)


class _Checker:
    """Checks a layout key by key, and names the file and the key of what is wrong."""

    def __init__(self, path: str) -> None:
        self.path = path

    def refuse(self, key: str, what: str) -> InputError:
        return InputError(f"key {key}: {what}", path=self.path)

    def layout(self, given: dict[str, Any]) -> Layout:
        self.kinds(given, _TOP, "")
        form = self.choice(given, "form", ("fixed", "delimited"), "")
        if form is None:
            raise self.refuse("form", 'missing; write form = "fixed" or form = "delimited"')
        ready: dict[str, Any] = {k: given[k] for k in ("encoding", "header") if k in given}
        ready["skip"] = self.at_least(given, "skip", 0, "")
        if "comment" in given:
            ready["comment"] = tuple(self.texts(given, "comment", ""))
        ready["missing"] = frozenset(self.texts(given, "missing", ""))
        ready["decimal"] = self.choice(given, "decimal", (",", "."), "")
        if "delimiter" in given:
            name = self.choice(given, "delimiter", tuple(DELIMITERS), "")
            ready["delimiter"] = DELIMITERS[name]
        self.mappings(given)
        ready |= {k: given[k] for k in ("constants", "techniques", "observers") if k in given}
        columns = self.columns(given.get("columns", {}), form, given.get("header", True))
        return Layout(self.path, form, columns, **ready)

    def mappings(self, given: dict[str, Any]) -> None:
        for name in given.get("constants", {}):
            if name not in COLUMNS or name in ("epoch", "theta", "rho", "year", "month", "day"):
                known = ", ".join(c for c in COLUMNS[3:-3])
                raise self.refuse(f"constants.{name}", f"not a column; known are {known}")
        words = {f"techniques.{k}": v for k, v in given.get("techniques", {}).items()}
        words["constants.technique"] = given.get("constants", {}).get("technique", "unknown")
        for key, word in words.items():
            if word not in TECHNIQUES:
                what = f"{word!r} is not a technique; use one of {', '.join(TECHNIQUES)}"
                raise self.refuse(key, what)
        for key, word in given.get("observers", {}).items():
            if not isinstance(word, str):
                raise self.refuse(f"observers.{key}", f"must be {_KIND_WORDS[str]}")

    def columns(
        self, given: dict[str, Any], form: str, header: bool
    ) -> tuple[LayoutColumn, ...]:
        if not given and (form == "fixed" or not header):
            raise self.refuse("columns", "missing; name the columns, such as [columns.theta]")
        ready, end = [], 0
        for name, keys in given.items():
            if name not in COLUMNS:
                what = f"not a column; known are {', '.join(COLUMNS)}"
                raise self.refuse(f"columns.{name}", what)
            if not isinstance(keys, dict):
                raise self.refuse(f"columns.{name}", f"must be {_KIND_WORDS[dict]}")
            ready.append(self.column(name, keys, form, header, end))
            end = ready[-1].end
        names = {column.column for column in ready}
        if ready and "epoch" not in names and not {"year", "month", "day"} <= names:
            raise self.refuse("columns.epoch", "missing; every measure needs an epoch")
        if ready and not {"theta", "rho"} & names:
            raise self.refuse("columns.theta", "missing; name theta, rho or both")
        return tuple(ready)

    def column(
        self, name: str, keys: dict[str, Any], form: str, header: bool, end: int
    ) -> LayoutColumn:
        prefix = f"columns.{name}."
        self.kinds(keys, _OF_A_COLUMN, prefix)
        ready: dict[str, Any] = {k: float(keys[k]) for k in ("factor", "offset") if k in keys}
        ready["missing"] = frozenset(self.texts(keys, "missing", prefix))
        ready["kind"] = self.choice(keys, "kind", dates.KINDS, prefix) or "auto"
        if "pattern" in keys:
            try:
                ready["pattern"] = dates.date_pattern(keys["pattern"])
            except ValueError as error:
                raise self.refuse(f"{prefix}pattern", f"{keys['pattern']!r} {error}") from None
        ready["unit"] = self.unit(name, keys, prefix)
        if form == "fixed":
            ready["start"], ready["end"] = self.span(keys, prefix, end)
        elif header:
            if "header" not in keys:
                raise self.refuse(f"{prefix}header", "missing; give the heading in the list")
            ready["header"] = keys["header"]
        else:
            ready["place"] = self.at_least(keys, "place", 1, prefix)
            if not ready["place"]:
                raise self.refuse(f"{prefix}place", "missing; say which cell it is, from 1")
        return LayoutColumn(name, **ready)

    def unit(self, name: str, keys: dict[str, Any], prefix: str) -> str:
        if "unit" not in keys:
            return ""
        unit, known = headers.unit_of(keys["unit"]), headers.UNITS.get(name, {})
        if name == "epoch" or unit not in known:
            cure = f"use one of {', '.join(known)}" if name != "epoch" and known else (
                "use kind" if name == "epoch" else "leave it out: the column has no unit")
            raise self.refuse(f"{prefix}unit", f"{keys['unit']!r} is not a unit here; {cure}")
        return unit

    def span(self, keys: dict[str, Any], prefix: str, end: int) -> tuple[int, int]:
        start = self.at_least(keys, "start", 1, prefix) or end + 1
        width = self.at_least(keys, "width", 1, prefix)
        last = self.at_least(keys, "end", start, prefix)
        if bool(width) == bool(last):
            raise self.refuse(f"{prefix}end", "give either end or width")
        return start, last or start + width - 1

    def kinds(self, given: dict[str, Any], known: dict[str, type], prefix: str) -> None:
        for key, value in given.items():
            if key not in known:
                raise self.refuse(f"{prefix}{key}", f"not known here; known are {', '.join(known)}")
            wanted = (int, float) if known[key] is float else known[key]
            if not isinstance(value, wanted) or (isinstance(value, bool) and wanted is not bool):
                raise self.refuse(f"{prefix}{key}", f"must be {_KIND_WORDS[known[key]]}")

    def choice(
        self, given: dict[str, Any], key: str, allowed: tuple[str, ...], prefix: str
    ) -> str | None:
        if key in given and given[key] not in allowed:
            what = f"{given[key]!r} is not one of {', '.join(allowed)}"
            raise self.refuse(f"{prefix}{key}", what)
        return given.get(key)

    def at_least(self, given: dict[str, Any], key: str, least: int, prefix: str) -> int:
        if key in given and given[key] < least:
            raise self.refuse(f"{prefix}{key}", f"{given[key]} is below {least}")
        return given.get(key, 0)

    def texts(self, given: dict[str, Any], key: str, prefix: str) -> list[str]:
        values = given.get(key, [])
        if not all(isinstance(value, str) and value for value in values):
            raise self.refuse(f"{prefix}{key}", f"must be {_KIND_WORDS[list]}, none of them empty")
        return values
