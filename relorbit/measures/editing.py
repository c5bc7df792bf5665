"""Changes to the measures of a pair, one at a time, each giving a new pair.

The observed values stay: a correction of theta keeps the angle as received in `theta_obs`, an
epoch the text as received in `epoch_obs`; setting aside and flipping are columns of their own.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import fields, replace

import numpy as np

from relorbit.errors import InputError
from relorbit.measures import cells
from relorbit.measures.dates import julian_years
from relorbit.measures.pair import Pair
from relorbit.measures.table import FLAGS, NUMBERS, Measures

EDITABLE = (
    "epoch", "theta", "rho", "theta_err", "rho_err", "weight", "technique", "observer",
    "aperture_m", "nights", "reason", "note",
)  # fmt: skip


def cell_text(measures: Measures, row: int, column: str) -> str:
    """A cell as it is typed: empty where missing, numbers in the fewest digits that say them."""
    value = getattr(measures, column)[row]
    if column in NUMBERS:
        return "" if np.isnan(value) else repr(float(value)).removesuffix(".0")
    if column in FLAGS:
        return "yes" if value else "no"
    return str(value)


def with_cell(pair: Pair, row: int, column: str, text: str) -> Pair:
    """The pair with one cell changed, by the checks of a file.

    Parameters
    ----------
    pair : Pair
    row : int
        Index of the measure.
    column : str
        One of `EDITABLE`.
    text : str
        As an observer types it: a decimal comma will do, empty is missing, a date is an epoch.

    Raises
    ------
    InputError
        When the value cannot be; the pair is then unchanged.
    """
    if column not in EDITABLE:
        raise InputError(f"{column} is not a column to edit")
    text = text.strip()
    if text == cell_text(pair.measures, row, column):
        return pair
    columns = _columns(pair.measures.select([row]))
    _keep_as_received(columns, column, text)
    columns[column] = [_value(column, text)]
    try:
        # an epoch that was allowed when the list was read does not forbid an edit elsewhere
        changed = Measures.from_columns(columns, allow_any_epoch=column != "epoch")
    except InputError as error:
        raise InputError(error.what, row=row + 1, column=error.column) from None
    return _with_rows(pair, [row], changed)


def with_use(pair: Pair, rows: Iterable[int], use: bool, reason: str = "") -> Pair:
    """The pair with some measures used or set aside; `reason` says why they are set aside."""
    rows = sorted(rows)
    part = pair.measures.select(rows)
    words = np.full(len(rows), "" if use else " ".join(reason.split()))
    return _with_rows(pair, rows, replace(part, use=np.full(len(rows), use), reason=words))


def with_flip(pair: Pair, rows: Iterable[int]) -> Pair:
    """The pair with some measures turned to the other side of the primary, or back."""
    rows = sorted(rows)
    part = pair.measures.select(rows)
    return _with_rows(pair, rows, replace(part, flip=~part.flip))


def with_measure(pair: Pair, epoch: str, theta: str, rho: str, **others: str) -> Pair:
    """The pair with one measure more, each value as it is typed.

    Raises InputError when a value cannot be.
    """
    given = {"epoch": epoch, "theta": theta, "rho": rho, **others}
    columns = {name: [_value(name, text.strip())] for name, text in given.items()}
    try:
        measure = Measures.from_columns(columns)
    except InputError as error:
        raise InputError(error.what, column=error.column) from None
    return pair.with_measures(pair.measures.append(measure))


def without(pair: Pair, rows: Iterable[int]) -> Pair:
    """The pair without some measures: for rows added by mistake; setting aside is the rule."""
    keep = np.ones(len(pair.measures), dtype=bool)
    keep[list(rows)] = False
    return pair.with_measures(pair.measures.select(keep))


def _columns(measures: Measures) -> dict[str, list]:
    return {field.name: list(getattr(measures, field.name)) for field in fields(Measures)}


def _keep_as_received(columns: dict[str, list], column: str, text: str) -> None:
    if column == "theta" and np.isnan(columns["theta_obs"][0]):
        columns["theta_obs"] = list(columns["theta"])
    if column == "epoch" and not columns["epoch_obs"][0]:
        columns["epoch_obs"] = [repr(float(columns["epoch"][0]))]


def _value(column: str, text: str) -> float | str | None:
    if not text:
        return None

    def fail(_: int, what: str) -> InputError:
        return InputError(what, column=column)

    if column == "epoch":
        return float(julian_years([text], "auto", fail)[0])
    return float(cells.numbers([text], fail)[0]) if column in NUMBERS else text


def _with_rows(pair: Pair, rows: list[int], part: Measures) -> Pair:
    """The pair with the rows `rows` replaced by those of `part`; the same one if all are equal.

    Columns that do not change are shared with the old measures: a long history of edits of many
    measures would otherwise fill the memory.
    """
    columns = {}
    for field in fields(Measures):
        old, new = getattr(pair.measures, field.name), getattr(part, field.name)
        if np.array_equal(old[rows], new, equal_nan=field.name in NUMBERS):
            columns[field.name] = old
            continue
        column = np.array(old, dtype=np.result_type(old, new))
        column[rows] = new
        column.setflags(write=False)
        columns[field.name] = column
    if all(column is getattr(pair.measures, name) for name, column in columns.items()):
        return pair
    return pair.with_measures(Measures(**columns))
