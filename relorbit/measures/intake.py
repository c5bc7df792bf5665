"""Reading other people's lists of measures: CSV, TSV, semicolons, blanks, or a layout."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from os import PathLike, fspath

import numpy as np

from relorbit.measures import cells
from relorbit.measures.files import read_text
from relorbit.measures.layout import Layout, read_layout
from relorbit.measures.pair import Pair
from relorbit.measures.reader import ListReader
from relorbit.measures.table import Measures
from relorbit.measures.vetting import epochs_before

SAME_EPOCH_YR = 0.0005
IN_PAIR_FILE = "in pair file"


@dataclass(frozen=True)
class Intake:
    """What a list holds.

    Attributes
    ----------
    measures : Measures
        Every row read, doubled ones too.
    lines : array of int, shape (n,)
        The line of each row in the file, from 1.
    skipped : tuple of (int, str)
        Lines passed over, and why.
    doubled : tuple of (int, int)
        Lines of rows that repeat an earlier one, and the line of that one.
    columns : dict of str to str
        What each heading was understood as; "" for those not read.
    path : str
        The file.
    """

    measures: Measures
    lines: np.ndarray
    skipped: tuple[tuple[int, str], ...]
    doubled: tuple[tuple[int, int | str], ...]
    columns: Mapping[str, str]
    path: str


@dataclass(frozen=True)
class Merged:
    """What became of a list that was taken into a pair.

    Attributes
    ----------
    read, appended : int
        How many rows the list has, and how many of them were new.
    skipped : tuple of (int, str)
        Lines passed over, and why.
    doubled : tuple of (int, int or str)
        Lines not appended, and the line they repeat or "in pair file".
    """

    read: int
    appended: int
    skipped: tuple[tuple[int, str], ...]
    doubled: tuple[tuple[int, int | str], ...]


def read_list(
    path: str | PathLike[str],
    layout: str | PathLike[str] | Layout | None = None,
    *,
    equinox: str | None = None,
    technique: str | None = None,
    observer: str | None = None,
    allow_any_epoch: bool = False,
) -> Intake:
    """Read a list of measures as it arrived.

    Parameters
    ----------
    path : path
        The list: text in UTF-8 with a header line, or with a layout.
    layout : path or Layout, optional
        How the list is set out; see `relorbit.measures.layout`.
    equinox, technique, observer : str, optional
        What holds for the rows that do not say. Without `equinox` they are of date, except
        those from space, which are at J2000.
    allow_any_epoch : bool
        Also take epochs before 1600 or after 2200.

    Returns
    -------
    Intake
        Epochs in Julian years (TT), theta in degrees, rho in arcseconds, as received otherwise.

    Raises
    ------
    InputError
        For the first thing that cannot be read, naming file, line and column.
    """
    if layout is not None and not isinstance(layout, Layout):
        layout = read_layout(layout)
    lines = cells.physical_lines(read_text(path, layout.encoding if layout else None))
    reader = ListReader(fspath(path), layout, equinox, technique, observer)
    rows = reader.read(lines, allow_any_epoch)
    doubled = _doubled(rows.measures, rows.lines)
    return Intake(rows.measures, rows.lines, rows.skipped, doubled, rows.columns, reader.path)


def merge(pair: Pair, intake: Intake) -> tuple[Pair, Merged]:
    """The pair with the new rows of a list; rows it has already are reported, not appended.

    A row is doubled when an earlier one has the same observer, theta, rho (as received, to
    0.0001 deg and 0.00001 arcsec) and epoch (within 0.0005 yr).
    """
    doubled = _doubled(intake.measures, intake.lines, pair.measures)
    repeats = {line for line, _ in doubled}
    new = np.array([line not in repeats for line in intake.lines.tolist()], dtype=bool)
    report = Merged(len(new), int(new.sum()), intake.skipped, doubled)
    return pair.with_measures(pair.measures.append(intake.measures.select(new))), report


def _doubled(
    measures: Measures, lines: np.ndarray, known: Measures | None = None
) -> tuple[tuple[int, int | str], ...]:
    seen: dict[tuple, list[tuple[float, int | str]]] = {}
    if known is not None:
        for key, epoch in _keys(known):
            seen.setdefault(key, []).append((epoch, IN_PAIR_FILE))
    doubled = []
    for (key, epoch), line in zip(_keys(measures), lines.tolist(), strict=True):
        others = seen.setdefault(key, [])
        same = [other for when, other in others if abs(when - epoch) <= SAME_EPOCH_YR]
        if same:
            doubled.append((line, same[0]))
        else:
            others.append((epoch, line))
    return tuple(doubled)


def _keys(measures: Measures) -> list[tuple[tuple, float]]:
    received = np.where(np.isnan(measures.theta_obs), measures.theta, measures.theta_obs)
    theta = np.where(np.isnan(received), -1.0, np.round(received, 4)).tolist()
    received = np.where(np.isnan(measures.rho_obs), measures.rho, measures.rho_obs)
    rho = np.where(np.isnan(received), -1.0, np.round(received, 5)).tolist()
    keys = zip(theta, rho, measures.observer.tolist(), strict=True)
    return list(zip(keys, epochs_before(measures).tolist(), strict=True))
