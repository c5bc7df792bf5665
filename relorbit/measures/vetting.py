"""Findings of slips in measures: what they change, how that is applied, and how it is undone.

A finding holds the exact change of each column, before and after. Applied, the change is also kept
in the column `vetted` of its row, so that it can be undone from the file alone.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from relorbit.errors import InputError
from relorbit.measures.pair import Pair
from relorbit.measures.table import NUMBERS, Measures

SCHEMA = "relorbit/findings/1"
# the columns that a change may touch; what is kept as received goes with its value
CHANGED = ("epoch", "theta", "rho", "theta_obs", "rho_obs", "epoch_obs", "flip", "use", "reason")
RECEIVED = {"theta_obs": "theta", "rho_obs": "rho", "epoch_obs": "epoch"}
LARGEST_TURN = 20.0  # degrees: a reduction turns theta by less, a correction by hand by more

Change = Mapping[str, tuple[Any, Any]]


@dataclass(frozen=True)
class Finding:
    """Something wrong with one measure, and what would put it right.

    Attributes
    ----------
    row : int
        Index of the measure.
    kind : str
        "quadrant", "mirror", "quarter", "rho-factor", "year", "interchange", "day-month",
        "same-night", "mean-of-nights", "equinox", or "unexplained".
    text : str
    sigma_before, sigma_after : float or None
        How far the measure lies from where the others put it, in standard deviations of measure
        and prediction together, as it stands and with the change; None where that is not asked.
    confidence : float
        Probability, 0 to 1, that it is this slip and no other.
    change : mapping of str to (before, after)
        Each column that changes; None for a missing number.
    """

    row: int
    kind: str
    text: str
    sigma_before: float | None
    sigma_after: float | None
    confidence: float
    change: Change

    def to_dict(self) -> dict[str, Any]:
        plain = {field.name: getattr(self, field.name) for field in fields(self)}
        plain["change"] = {
            column: {"before": before, "after": after}
            for column, (before, after) in self.change.items()
        }
        return plain


def turn_of_reduction(measures: Measures) -> NDArray[np.float64]:
    """Degrees that the reduction added to theta, shape (n,); 0 where none is known."""
    turn = (measures.theta - measures.theta_obs + 180.0) % 360.0 - 180.0
    return np.where(np.abs(turn) < LARGEST_TURN, turn, 0.0)


def corrected(
    measures: Measures, row: int, epoch: float, theta: float, rho: float, reason: str
) -> dict[str, tuple[Any, Any]]:
    """The change that gives a measure another epoch, theta (flip applied) and rho.

    A theta on the other side of the primary is a flip; every other value that changes is kept as
    received.
    """
    one = {name: _plain(getattr(measures, name)[row]) for name in CHANGED}
    change: dict[str, tuple[Any, Any]] = {}
    written = one["theta"]
    if written is not None and np.isfinite(theta):
        wanted = (theta + 180.0 * one["flip"]) % 360.0
        if abs(abs(wanted - written) - 180.0) < 1e-9:
            change["flip"] = (one["flip"], not one["flip"])
        elif abs((wanted - written + 180.0) % 360.0 - 180.0) > 1e-9:
            change["theta"] = (written, float(round(wanted, 9) % 360.0))
            if one["theta_obs"] is None:
                change["theta_obs"] = (None, written)
    if one["rho"] is not None and np.isfinite(rho) and rho != one["rho"]:
        change["rho"] = (one["rho"], float(rho))
        if one["rho_obs"] is None:
            change["rho_obs"] = (None, one["rho"])
    if epoch != one["epoch"]:
        change["epoch"] = (one["epoch"], float(epoch))
        if not one["epoch_obs"]:
            change["epoch_obs"] = ("", repr(one["epoch"]))
    change["reason"] = (one["reason"], _joined(one["reason"], reason))
    return change


def set_aside(measures: Measures, row: int, reason: str) -> dict[str, tuple[Any, Any]]:
    """The change that sets a measure aside."""
    before = str(measures.reason[row])
    return {"use": (bool(measures.use[row]), False), "reason": (before, _joined(before, reason))}


def applied(pair: Pair, findings: Iterable[Finding]) -> Pair:
    """The pair with what was found put right; the observed values are kept.

    A finding that is applied already changes nothing.

    Raises
    ------
    InputError
        For a row that the pair does not have, or one that has changed since it was vetted.
    """
    columns = _columns(pair.measures)
    for finding in findings:
        row = finding.row
        if not 0 <= row < len(pair.measures):
            raise InputError(f"there is no measure {row + 1}; the pair has {len(pair.measures)}")
        now = {name: _plain(columns[name][row]) for name in finding.change}
        if all(now[name] == after for name, (_, after) in finding.change.items()):
            continue
        for name, (before, _) in finding.change.items():
            if now[name] != before:
                raise InputError(
                    f"measure {row + 1} has changed since it was vetted ({name} is "
                    f"{_shown(now[name])}, it was {_shown(before)}); vet the pair again"
                )
        record = {name: tuple(pair_) for name, pair_ in _record(columns["vetted"][row]).items()}
        for name, (before, after) in finding.change.items():
            columns[name][row] = np.nan if after is None else after
            record[name] = (record.get(name, (before,))[0], after)
        record = {name: both for name, both in record.items() if both[0] != both[1]}
        columns["vetted"][row] = json.dumps(record, ensure_ascii=False) if record else ""
    return _with_columns(pair, columns)


def undone(pair: Pair, rows: Iterable[int] | None = None) -> tuple[Pair, tuple[str, ...]]:
    """The pair without what vetting changed, and in words what could not be undone.

    What was edited since by hand stays as it is, with what was received of it.

    Parameters
    ----------
    pair : Pair
    rows : iterable of int, optional
        Only these measures. Raises InputError for one that the pair does not have.
    """
    count = len(pair.measures)
    chosen = range(count) if rows is None else sorted(set(rows))
    columns = _columns(pair.measures)
    refused = []
    for row in chosen:
        if not 0 <= row < count:
            raise InputError(f"there is no measure {row + 1}; the pair has {count}")
        text = columns["vetted"][row]
        if not text:
            continue
        record = _record(text)
        if not record:
            refused.append(f"measure {row + 1}: what vetting wrote there cannot be read")
            continue
        kept = set()
        for name, (_, after) in record.items():
            now = _plain(columns[name][row])
            if now != after:
                kept.add(name)
                refused.append(
                    f"measure {row + 1}: {name} is {_shown(now)}, not the {_shown(after)} that "
                    "vetting wrote; it was edited since and stays"
                )
        for name, (before, _) in record.items():
            if name not in kept and RECEIVED.get(name) not in kept:
                columns[name][row] = np.nan if before is None else before
        columns["vetted"][row] = ""
    return _with_columns(pair, columns), tuple(refused)


def is_corrected(measures: Measures, row: int) -> bool:
    """Whether vetting has given a measure another epoch, theta or rho."""
    text = measures.vetted[row]
    return bool(text) and not {"epoch", "theta", "rho"}.isdisjoint(_record(text))


def epochs_before(measures: Measures) -> NDArray[np.float64]:
    """Julian years before vetting changed them, shape (n,)."""
    epoch = measures.epoch.copy()
    for row in np.flatnonzero(measures.vetted != ""):
        before, after = _record(measures.vetted[row]).get("epoch", (None, None))
        if before is not None and after == epoch[row]:
            epoch[row] = before
    return epoch


def _record(text: str) -> dict[str, list]:
    """What a cell of `vetted` says; empty where it says nothing that makes sense."""
    try:
        record = json.loads(text) if text else {}
    except ValueError:
        return {}
    if not isinstance(record, dict):
        return {}
    for name, both in record.items():
        if name not in CHANGED or not isinstance(both, list) or len(both) != 2:
            return {}
        if not all(_is_cell(name, value) for value in both):
            return {}
    return record


def _is_cell(name: str, value: Any) -> bool:
    if name in NUMBERS:
        return value is None or (isinstance(value, int | float) and not isinstance(value, bool))
    return isinstance(value, bool if name in ("flip", "use") else str)


def _columns(measures: Measures) -> dict[str, list]:
    return {name: getattr(measures, name).tolist() for name in (*CHANGED, "vetted")}


def _with_columns(pair: Pair, columns: Mapping[str, list]) -> Pair:
    now = _columns(pair.measures)
    if all(_same(columns[name], now[name]) for name in columns):
        return pair
    changed = {
        name: np.array(values, dtype=str if name in ("reason", "epoch_obs", "vetted") else None)
        for name, values in columns.items()
    }
    return pair.with_measures(replace(pair.measures, **changed))


def _same(one: list, other: list) -> bool:
    return all(a == b or (a != a and b != b) for a, b in zip(one, other, strict=True))


def _plain(value: Any) -> Any:
    value = value.item() if isinstance(value, np.generic) else value
    return None if isinstance(value, float) and not np.isfinite(value) else value


def _shown(value: Any) -> str:
    if value is None or value == "":
        return "empty"
    return format(value, ".10g") if isinstance(value, float) else repr(value)


def _joined(before: str, reason: str) -> str:
    return f"{before}; {reason}" if before else reason
