"""Rows copied from a spreadsheet, a mail or our own table, on their way in and out."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterable, Sequence
from dataclasses import fields

from relorbit.errors import InputError
from relorbit.measures.cells import COMMENTS, physical_lines
from relorbit.measures.editing import cell_text
from relorbit.measures.headers import looks_like_header
from relorbit.measures.intake import Intake
from relorbit.measures.layout import Layout, LayoutColumn
from relorbit.measures.reader import ListReader
from relorbit.measures.table import Measures

PASTED = "pasted text"
# what the cells of a row mean when no header line says it
USUAL_ORDER = ("epoch", "theta", "rho", "theta_err", "rho_err")
# without these a row that is pasted back would be taken for another measure
ALWAYS_COPIED = ("theta_obs", "equinox")

_NUMBER = re.compile(r"[+-]?[0-9]+(?:[.,][0-9]+)?|[0-9]+-[0-9]+-[0-9]+|-+")


def read_pasted(text: str, columns: Sequence[str] = (), equinox: str | None = None) -> Intake:
    """The measures in a pasted text.

    Parameters
    ----------
    text : str
        Rows, with a header line or without. Rows without one are epoch, theta, rho and perhaps
        theta_err, rho_err; longer tab-separated ones are in the order of `columns`. Marks of a
        quoted mail are passed over.
    columns : sequence of str
        Columns of `Measures` in the order in which the table shows them.
    equinox : str, optional
        Of rows that do not say; by default of date, from space J2000.

    Raises
    ------
    InputError
        For the first thing that cannot be read, naming the line of the text.
    """
    lines = _without_mail_marks(physical_lines(text))
    first = next((n for n, line in enumerate(lines, 1) if _is_content(line)), None)
    if first is None:
        raise InputError("nothing to take in; copy rows with epoch, theta and rho", path=PASTED)
    layout = None if _has_header(lines, first) else _layout(lines, first, columns)
    reader = ListReader(PASTED, layout, equinox, None, None)
    try:
        rows = reader.read(lines, False)
    except InputError as error:
        if error.line is not None:
            raise
        raise InputError(error.what, path=PASTED, line=first, column=error.column) from None
    return Intake(rows.measures, rows.lines, rows.skipped, (), rows.columns, PASTED)


def table_text(measures: Measures, rows: Iterable[int], columns: Sequence[str] = ()) -> str:
    """Measures as tab-separated text with a header line, which `read_pasted` takes back.

    Parameters
    ----------
    measures : Measures
    rows : iterable of int
    columns : sequence of str
        Columns of `Measures`, by default those that hold anything. The equinox always follows,
        and theta as received where it was changed.
    """
    rows = list(rows)
    names = [field.name for field in fields(Measures)]
    wanted = columns or [name for name in names if name not in ALWAYS_COPIED]
    texts = {name: [cell_text(measures, row, name) for row in rows] for name in names
             if name in wanted or name in ALWAYS_COPIED}  # fmt: skip
    shown = [name for name in wanted if columns or any(texts[name])]
    shown += [name for name in ALWAYS_COPIED if name not in shown and any(texts[name])]
    text = io.StringIO()
    writer = csv.writer(text, delimiter="\t", lineterminator="\n")
    writer.writerow(shown)
    writer.writerows(zip(*(texts[name] for name in shown), strict=True))
    return text.getvalue()


def _without_mail_marks(lines: list[str]) -> list[str]:
    if all(line.startswith(">") for line in lines if line.strip()):
        return [re.sub(r"^(?:>\s?)+", "", line) for line in lines]
    return lines


def _is_content(line: str) -> bool:
    return bool(line.strip()) and not line.lstrip().startswith(COMMENTS)


def _has_header(lines: Sequence[str], first: int) -> bool:
    """True when the first row does not begin with a number, or a comment above names columns."""
    if not re.match(r'\s*[|"]?\s*[+-]?[0-9]', lines[first - 1]):
        return True
    above = [line.lstrip(' "').lstrip("".join(COMMENTS)) for line in lines[: first - 1]]
    return any(looks_like_header(re.split(r"[\t;|,\s]+", line.strip())) for line in above)


def _layout(lines: Sequence[str], first: int, columns: Sequence[str]) -> Layout:
    """How rows without a header line are set out, by the first of them."""
    delimiter = _delimiter(lines[first - 1])
    width = _count(lines[first - 1], delimiter)
    order = USUAL_ORDER
    if delimiter == "\t" and (width > len(USUAL_ORDER) or width == len(columns)):
        order = tuple(columns)
    if width > len(order):
        raise InputError(
            f"{width} values in a row and no header line; put one above that names the columns, "
            f"or leave {', '.join(USUAL_ORDER)}",
            path=PASTED,
            line=first,
        )
    for number, line in enumerate(lines[first:], first + 1):
        count = _count(line, delimiter)
        if _is_content(line) and (count > width or (delimiter is None and count < width)):
            raise InputError(
                f"{count} {'value' if count == 1 else 'values'} where the first row has {width}; "
                "write - where one is missing, or put a header line above the rows",
                path=PASTED,
                line=number,
            )
    placed = tuple(LayoutColumn(name, place=k + 1) for k, name in enumerate(order[:width]))
    return Layout(PASTED, "delimited", placed, delimiter=delimiter, header=False)


def _count(line: str, delimiter: str | None) -> int:
    edges = " |" if delimiter == "|" else " "
    return len(line.strip(edges).split(delimiter))


def _delimiter(row: str) -> str | None:
    """What stands between the cells of a row; None for blanks."""
    for mark in "\t;|":
        if mark in row:
            return mark
    words = row.split()
    if len(words) > 1 and all(map(_NUMBER.fullmatch, words)):  # any comma is a decimal one
        return None
    return "," if "," in row else None
