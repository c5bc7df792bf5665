"""A list cut into cells: delimited by a character or by white space, with or without quotes."""

from __future__ import annotations

import csv
import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from relorbit.measures.headers import looks_like_header, means_note

COMMENTS = ("#", "%", "!", ";")
MISSING = frozenset(
    {"", "-", "--", "---", ".", "..", "...", "\u2026", "\u2013", "\u2014", "n/a", "na", "none",
     "null"}
)  # fmt: skip

Fail = Callable[[int, str], Exception]

_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_NOT_FINITE = frozenset({"nan", "inf", "infinity"})
_MARKS = re.compile("\\s*(?:\u00b0|\u00ba|\"|''|\u2033)$")
_RULE = re.compile(r"[-=+|_\s]*[-=_]{3}[-=+|_\s]*")
_UNQUOTED = re.compile(r'"[^"]*"')
_WORD_OR_QUOTED = re.compile(r'"[^"]*"(?=\s|$)|\S+')


@dataclass(frozen=True)
class Grid:
    """The cells of a list.

    Attributes
    ----------
    names : list of str
        The headings.
    rows : list of list of str
        The cells of each row, as many as there are headings, without white space around them.
    lines : list of int
        The line each row starts on, from 1.
    skipped : list of (int, str)
        Lines passed over, and why; blank lines and comments are not counted.
    """

    names: list[str]
    rows: list[list[str]]
    lines: list[int]
    skipped: list[tuple[int, str]] = field(default_factory=list)

    def column(self, index: int) -> list[str]:
        """The cells under one heading."""
        return [row[index] for row in self.rows]


def physical_lines(text: str) -> list[str]:
    """The lines of a text, whatever system ended them."""
    return re.split(r"\r\n|\r|\n", text)


def cut_delimited(
    lines: Sequence[str],
    fail: Fail,
    *,
    skip: int = 0,
    comments: Sequence[str] = COMMENTS,
    delimiter: str | None = "",
    names: Sequence[str] | None = None,
) -> Grid:
    """The cells of a list with a delimiter.

    Parameters
    ----------
    lines : sequence of str
        The lines of the file.
    fail : callable
        Given the number of a line and what is wrong there, makes the exception to raise.
    skip : int
        Lines at the top to pass over.
    comments : sequence of str
        What a comment line starts with; a comment sign that is the delimiter does not count.
    delimiter : str or None
        The character between cells; None for white space; "" to find it from the header line.
    names : sequence of str, optional
        The headings, when the list has no header line.
    """
    content = [
        (number, line)
        for number, line in enumerate(lines, 1)
        if number > skip and line.strip() and not _RULE.fullmatch(line)
    ]
    plain = [(n, line) for n, line in content if not _is_comment(line, comments)]
    if not plain:
        raise fail(0, "no header line and no measures; the file holds only blanks or comments")
    delimiter = _delimiter(plain[0][1]) if delimiter == "" else delimiter
    if delimiter == ";":
        first, comments = plain[0][0], [mark for mark in comments if mark != ";"]
        plain = [p for p in content if p[0] >= first and not _is_comment(p[1], comments)]
    if names is None:
        names, plain = _header(plain, content, delimiter, comments, fail)
    return _grid(list(names), _records(plain, delimiter, fail), delimiter, fail)


def _is_comment(line: str, comments: Sequence[str]) -> bool:
    return line.lstrip().lstrip('"').startswith(tuple(comments))


def _delimiter(line: str) -> str | None:
    bare = _UNQUOTED.sub("", line)
    return next((mark for mark in "\t;|," if mark in bare), None)


def _header(
    plain: list[tuple[int, str]],
    content: list[tuple[int, str]],
    delimiter: str | None,
    comments: Sequence[str],
    fail: Fail,
) -> tuple[list[str], list[tuple[int, str]]]:
    """The headings and the lines that are left; the header may stand in a comment."""
    number, first = plain[0]
    if delimiter is None:
        counts = [len(_split(line, None, n, fail)) for n, line in plain[1:2]]
        names = _names_in_blanks(first, counts[0] if counts else 0)
    else:
        names = [cell.strip() for cell in _split(first, delimiter, number, fail)]
    if not re.match(r"[+-]?[0-9]", names[0]):
        return names, plain[1:]
    for _, line in reversed([c for c in content if c[0] < number]):
        words = line.lstrip(' "').lstrip("".join(comments)).strip()
        inside = _names_in_blanks(words, len(names))
        if _delimiter(words) is not None:
            inside = [cell.strip() for cell in words.split(_delimiter(words))]
        if looks_like_header(inside):
            return inside, plain
    raise fail(
        number,
        "no header line; put one above the measures that names the columns, such as "
        "epoch,theta,rho",
    )


def _names_in_blanks(line: str, count: int) -> list[str]:
    """Headings set apart by blanks, of which some may be of several words."""
    glued = re.sub(r"\s+(?=[\[(])", "\0", line.strip())
    names = [word.replace("\0", " ") for word in glued.split()]
    apart = re.split(r"\s{2,}|\t", line.strip())
    fits = len(apart) == count or (len(apart) < count and means_note(apart[-1]))
    return apart if len(names) != count and fits and looks_like_header(apart) else names


def _records(
    plain: list[tuple[int, str]], delimiter: str | None, fail: Fail
) -> Iterator[tuple[int, list[str]]]:
    """Line number and cells of each record; a quoted cell may run over several lines."""
    waiting, start = "", 0
    for number, line in plain:
        text = f"{waiting}\n{line}" if waiting else line
        start = start if waiting else number
        if '"' not in text:
            yield number, _split(text, delimiter, number, fail)
            continue
        if delimiter is not None and _quote_is_open(text, delimiter):
            waiting = text
            continue
        waiting = ""
        yield start, _split(text, delimiter, start, fail)
    if waiting:
        raise fail(start, "a quotation mark is opened and never closed; close it or take it out")


def _quote_is_open(text: str, delimiter: str) -> bool:
    try:
        list(csv.reader(text.split("\n"), delimiter=delimiter, strict=True))
    except csv.Error as error:
        return "unexpected end" in str(error)
    return False


def _split(text: str, delimiter: str | None, number: int, fail: Fail) -> list[str]:
    if delimiter is None:
        return [word.strip('"') if word[0] == '"' else word for word in
                _WORD_OR_QUOTED.findall(text)]  # fmt: skip
    if delimiter == "|":
        text = text.strip().strip("|")
    if '"' not in text:
        return text.split(delimiter)
    lines = [f"{line}\n" for line in text.split("\n")]
    try:
        return next(csv.reader(lines, delimiter=delimiter, strict=True))
    except csv.Error:
        what = "a quotation mark in the middle of a cell; write it twice, or take it out"
        raise fail(number, what) from None


def _grid(
    names: list[str],
    records: Iterator[tuple[int, list[str]]],
    delimiter: str | None,
    fail: Fail,
) -> Grid:
    grid = Grid(names, [], [])
    width = len(names)
    for number, cells in records:
        cells = [cell.strip() for cell in cells]
        while len(cells) > width and not cells[-1]:
            cells.pop()
        if delimiter is None and means_note(names[-1]):
            cells = [*cells[: width - 1], " ".join(cells[width - 1 :])]
        if len(cells) > width or (len(cells) < width and delimiter is None):
            raise fail(number, _miscount(len(cells), width, delimiter))
        if cells == names:
            grid.skipped.append((number, "the header line again"))
        elif any(cells):
            grid.rows.append(cells + [""] * (width - len(cells)))
            grid.lines.append(number)
    return grid


def _miscount(count: int, width: int, delimiter: str | None) -> str:
    cure = {
        ",": "if these are decimal commas, separate the columns with semicolons",
        None: "write - where a value is missing",
    }.get(delimiter, "leave no delimiter inside a cell, or put the cell in quotation marks")
    cells = "cell" if count == 1 else "cells"
    return f"{count} {cells} where the header names {width} columns; {cure}"


def cut_fixed(
    lines: Sequence[str],
    spans: Sequence[tuple[str, int, int]],
    *,
    skip: int = 0,
    comments: Sequence[str] = COMMENTS,
) -> Grid:
    """The cells of a list in fixed columns: (name, first, last) for each, from 1, inclusive."""
    grid = Grid([name for name, _, _ in spans], [], [])
    for number, line in enumerate(lines, 1):
        if number <= skip or not line.strip() or _RULE.fullmatch(line):
            continue
        if _is_comment(line, comments) and comments:
            continue
        text = line.expandtabs(8)
        cells = [text[first - 1 : last].strip() for _, first, last in spans]
        if any(cells):
            grid.rows.append(cells)
            grid.lines.append(number)
        else:
            grid.skipped.append((number, "nothing in the columns of the layout"))
    return grid


def numbers(
    texts: Sequence[str],
    fail: Fail,
    *,
    scale: tuple[float, float] = (1.0, 1.0),
    offset: float = 0.0,
    missing: frozenset[str] = MISSING,
    decimal: str | None = None,
) -> NDArray[np.float64]:
    """The numbers in a column of cells, NaN where missing, shape (n,).

    A decimal comma counts as a point, unless `decimal` says which of the two is meant; a mark for
    degrees or arcseconds behind the number is passed over.
    """
    values = np.full(len(texts), np.nan)
    for index, text in enumerate(texts):
        if _NUMBER.fullmatch(text) and decimal != "," and text not in missing:
            values[index] = float(text)
        elif text not in missing and text.lower() not in missing:
            values[index] = _number(index, text, fail, decimal)
    return values if scale == (1.0, 1.0) and not offset else values * scale[0] / scale[1] + offset


def _number(index: int, text: str, fail: Fail, decimal: str | None) -> float:
    word = _MARKS.sub("", text).replace("\u2212", "-")
    if word.lower().lstrip("+-") in _NOT_FINITE:
        raise fail(index, f"{text!r} is not a number; leave the cell empty where nothing is known")
    if "," in word and "." in word:
        raise fail(index, f"{text!r} has a comma and a point; write it without thousands marks")
    if decimal and {",": ".", ".": ","}[decimal] in word and "e" not in word.lower():
        raise fail(index, f"{text!r} has no decimal {decimal!r} as the layout says; correct either")
    word = word.replace(",", ".")
    if not _NUMBER.fullmatch(word):
        raise fail(index, f"{text!r} is not a number; write one such as 1.23")
    return float(word)
