"""New measures made ready to be judged: checked, compared with the list, given their errors."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from relorbit.errors import InputError
from relorbit.measures.intake import SAME_EPOCH_YR
from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures
from relorbit.orbit.kepler import FloatArray
from relorbit.solve.groups import group_names
from relorbit.solve.observations import complete_errors
from relorbit.solve.solution import Solution

COLUMNS = ("epoch", "theta", "rho", "theta_err", "rho_err")
SAME_THETA, SAME_RHO = 1e-4, 1e-5  # degrees and arcsec


@dataclass(frozen=True)
class NewMeasures:
    """New measures and the list with them.

    Attributes
    ----------
    measures : Measures
        Those in use, every error filled in.
    joined : Pair
        The pair with the new measures that it does not hold yet, their errors as given.
    rows : list of int or None
        The row of each new measure in `joined`; None where the list holds it already.
    already : list of str
        What the list holds of the same epoch, in words; else empty.
    notes : tuple of str
    """

    measures: Measures
    joined: Pair
    rows: list[int | None]
    already: list[str]
    notes: tuple[str, ...]

    def without(self, wrong: Sequence[int]) -> NewMeasures:
        """The same with some of the new measures set aside in the list."""
        use = self.joined.measures.use.copy()
        use[[self.rows[k] for k in wrong if self.rows[k] is not None]] = False
        joined = self.joined.with_measures(replace(self.joined.measures, use=use))
        count = "the measure that looks wrong" if len(wrong) == 1 else (
            f"the {len(wrong)} measures that look wrong"
        )  # fmt: skip
        return replace(self, joined=joined, notes=(*self.notes, f"the refit leaves out {count}"))


def take_in(pair: Pair, new: Any, before: Solution | None) -> NewMeasures:
    """Check new measures and fill in their errors.

    Parameters
    ----------
    pair : Pair
    new : Pair, Measures, mapping of columns, or rows of numbers
    before : Solution or None
        Whose noise, where it has any, tells what the groups of the new measures are worth.

    Raises
    ------
    InputError
        For no measure at all, or one with a value that cannot be.
    """
    given = as_measures(new)
    notes = []
    if not given.use.all():
        notes.append(f"{int((~given.use).sum())} new measures are not in use, and not judged")
    given = given.select(given.use)
    if not len(given):
        raise InputError("no new measure to judge; give at least one")
    left = int(np.count_nonzero(given.equinox != "J2000"))
    if left:
        notes.append(f"theta of {left} new measures is not at equinox J2000: give the position of "
                     "the pair so that it can be brought there")  # fmt: skip
    already, repeats = _already(pair.measures, given)
    appended = given.select(~repeats)
    count = len(pair.measures)
    order = count + np.cumsum(~repeats) - 1
    rows = [None if repeats[k] else int(order[k]) for k in range(len(given))]
    joined = pair.with_measures(pair.measures.append(appended))
    return NewMeasures(
        _with_errors(pair.measures, given, before), joined, rows, already, tuple(notes)
    )


def as_measures(new: Any) -> Measures:
    """Measures from whatever `judge` takes."""
    if isinstance(new, Pair):
        return new.measures
    if isinstance(new, Measures):
        return new
    if isinstance(new, Mapping):
        return Measures.from_columns(new)
    rows = [list(row) for row in new] if _is_rows(new) else [list(new)]
    for number, row in enumerate(rows, 1):
        if not 3 <= len(row) <= len(COLUMNS):
            raise InputError(
                f"{len(row)} values where epoch, theta, rho and perhaps their errors belong; give "
                f"3 to {len(COLUMNS)}, a missing one as nan",
                row=number,
            )
    filled = [row + [None] * (len(COLUMNS) - len(row)) for row in rows]
    columns = {name: [row[k] for row in filled] for k, name in enumerate(COLUMNS)}
    return Measures.from_columns(columns)


def _is_rows(new: Sequence[Any]) -> bool:
    return len(new) == 0 or np.ndim(new[0]) == 1


def _already(known: Measures, new: Measures) -> tuple[list[str], np.ndarray]:
    """What the list holds of each new epoch, and which measures it holds as they are."""
    said, repeats = [], np.zeros(len(new), dtype=bool)
    for k in range(len(new)):
        same = np.flatnonzero(np.abs(known.epoch - new.epoch[k]) <= SAME_EPOCH_YR)
        equal = [row for row in same if _equal(known, row, new, k)]
        if equal:
            repeats[k] = True
            said.append(f"already in the list, measure {equal[0] + 1}: not used again")
        elif same.size:
            rows = ", ".join(str(row + 1) for row in same[:4])
            said.append(f"the list has another of this epoch: measure {rows}")
        else:
            said.append("")
    return said, repeats


def _equal(known: Measures, row: int, new: Measures, k: int) -> bool:
    def near(a: float, b: float, limit: float) -> bool:
        return abs(a - b) <= limit or (np.isnan(a) and np.isnan(b))

    return near(known.theta[row], new.theta[k], SAME_THETA) and near(
        known.rho[row], new.rho[k], SAME_RHO
    )


def _with_errors(known: Measures, new: Measures, before: Solution | None) -> Measures:
    joined = known.append(new)
    theta_err, rho_err, _ = (part[len(known) :] for part in complete_errors(joined))
    if before is not None and before.noise:
        across, along = _factors(joined, new, before)
        theta_err, rho_err = theta_err * across, rho_err * along
    return replace(new, theta_err=theta_err, rho_err=rho_err)


def _factors(joined: Measures, new: Measures, before: Solution) -> tuple[FloatArray, FloatArray]:
    """Factors of the errors across and along: those of the group, else of its technique, else 1."""
    names, parents = (part[len(joined) - len(new) :] for part in group_names(joined))
    known = {group.name: group for group in before.noise}
    out = np.ones((2, len(new)))
    for k, (name, parent) in enumerate(zip(names.tolist(), parents.tolist(), strict=True)):
        kin = [known[name]] if name in known else [
            group for group in before.noise if group.name.partition(",")[0] == parent
        ]  # fmt: skip
        for slot, part in enumerate(("across_factor", "along_factor")):
            logs = [np.log(value) for group in kin if (value := getattr(group, part)) is not None]
            if logs:
                out[slot, k] = np.exp(np.mean(logs))
    return out[0], out[1]
