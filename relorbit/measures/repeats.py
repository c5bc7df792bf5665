"""Measures entered twice, and means that stand beside their own nights."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from decimal import Decimal

import numpy as np
from numpy.typing import NDArray

from relorbit.measures.table import Measures
from relorbit.measures.vetting import Finding, set_aside

NIGHT = 0.0028  # years: a little more than a day
SAME = 1e-6  # years, degrees, arcsec
SEASON = 0.6  # years within which the nights of one mean lie
MOST_NIGHTS = 12
DECIMALS = 6  # no more than these are looked at
SURE, LIKELY = 0.98, 0.9  # confidence, common practice without a published source


def repeated(measures: Measures) -> list[Finding]:
    """Findings of kind "same-night" and "mean-of-nights": the later row, or the mean, is set aside.

    Two rows of one observer and technique are one night entered twice when their epochs lie within
    a day, or agree to the decimals given, and theta and rho agree to the decimals given of the
    coarser. A mean stands beside its nights when two or more other rows of its observer, close in
    time, have its epoch, theta and rho for a mean, within rounding.
    """
    values = _as_received(measures)
    places = [np.array([_decimals(v) for v in column]) for column in values]
    groups: dict[tuple[str, str], list[int]] = {}
    for row in np.flatnonzero(measures.use).tolist():
        key = str(measures.observer[row]).casefold(), str(measures.technique[row])
        groups.setdefault(key, []).append(row)
    found: list[Finding] = []
    for rows in groups.values():
        order = np.array(sorted(rows, key=lambda row: (values[0][row], row)))
        twice = _twice(measures, order, values, places)
        found += twice
        gone = {one.row for one in twice}
        rest = np.array([row for row in order if row not in gone], dtype=int)
        found += _means(measures, rest, values, places)
    return sorted(found, key=lambda one: one.row)


def _as_received(m: Measures) -> tuple[NDArray[np.float64], ...]:
    theta = np.where(np.isnan(m.theta_obs) | m.flip, m.theta_effective, m.theta_obs)
    return m.epoch, theta, m.rho


def _decimals(value: float) -> int:
    """How many decimals a value is given to, noughts at its end not counted."""
    if not np.isfinite(value):
        return DECIMALS
    exponent = Decimal(repr(float(value))).normalize().as_tuple().exponent
    return min(DECIMALS, max(0, -int(exponent)))


def _half(decimals: int) -> float:
    return 0.5001 * 10.0 ** -float(decimals) + 1e-9


def _twice(
    m: Measures, order: NDArray, values: tuple[NDArray, ...], places: list[NDArray]
) -> list[Finding]:
    epoch = values[0]
    found, gone = [], set()
    for at, first in enumerate(order.tolist()):
        if first in gone:
            continue
        for second in order[at + 1 :].tolist():
            apart = epoch[second] - epoch[first]
            coarser = min(places[0][first], places[0][second])
            if apart > max(NIGHT, _half(coarser) if coarser > 0 else 0.0):
                break
            exact = apart <= SAME
            if second in gone or not _alike(first, second, values, places, exact):
                continue
            early, late = sorted((first, second))
            gone.add(late)
            text = f"the same night as measure {early + 1}, entered twice"
            change = set_aside(m, late, f"same night as measure {early + 1}")
            sure = SURE if exact else LIKELY
            found.append(Finding(late, "same-night", text, None, None, sure, change))
            if late == first:
                break
    return found


def _alike(
    first: int, second: int, values: tuple[NDArray, ...], places: list[NDArray], exact: bool
) -> bool:
    """True where theta and rho of two rows are the same but for rounding.

    Two coarse values may well be equal by chance: unless all is exactly the same, two decimals are
    asked for.
    """
    fine = 0
    for column, period in ((1, 360.0), (2, 0.0)):
        a, b = values[column][first], values[column][second]
        if np.isfinite(a) != np.isfinite(b):
            return False
        if not np.isfinite(a):
            continue
        decimals = min(places[column][first], places[column][second])
        gap = abs(a - b)
        if period:
            gap = abs((gap + 180.0) % period - 180.0)
        if gap > _half(decimals):
            return False
        fine += decimals
        exact = exact and gap <= SAME
    return exact or fine >= 2


def _means(
    m: Measures, order: NDArray, values: tuple[NDArray, ...], places: list[NDArray]
) -> list[Finding]:
    """`order` holds the rows of one observer and technique in order of time."""
    found, taken = [], np.zeros(len(m), dtype=bool)
    epochs = values[0][order]
    starts, ends = (np.searchsorted(epochs, epochs + side) for side in (-SEASON, SEASON))
    of_one_night = ~(m.nights[order] > 1.0)
    for row, start, end in zip(order.tolist(), starts, ends, strict=True):
        told = m.nights[row]
        if taken[row] or (np.isfinite(told) and told < 2) or not m.has_theta[row]:
            continue
        near = order[start:end][of_one_night[start:end]]
        near = near[~taken[near] & (near != row)]
        sizes = range(2, MOST_NIGHTS + 1) if not np.isfinite(told) else [int(told)]
        runs = _runs_that_may_be(row, near, sizes, values, places)
        nights = next((run for run in runs if _is_mean(row, run, values, places)), None)
        if nights is None:
            continue
        taken[[row, *nights]] = True
        which = ", ".join(str(night + 1) for night in sorted(nights.tolist()))
        text = f"the mean of the nights that stand beside it, measures {which}"
        change = set_aside(m, row, f"mean of measures {which}")
        sure = SURE if np.isfinite(told) else LIKELY
        found.append(Finding(row, "mean-of-nights", text, None, None, sure, change))
    return found


def _runs_that_may_be(
    row: int,
    near: NDArray,
    sizes: Iterable[int],
    values: tuple[NDArray, ...],
    places: list[NDArray],
) -> Iterator[NDArray]:
    """Sets of rows that follow one another and have the row for a mean, but for fine rounding."""
    sums, allowed = [], []
    for column in range(3):
        own, others = values[column][row], values[column][near]
        if not (np.isfinite(own) and np.isfinite(others).all()):
            continue
        gap = others - own
        if column == 1:
            gap = (gap + 180.0) % 360.0 - 180.0
        sums.append(np.concatenate([[0.0], np.cumsum(gap)]))
        coarsest = int(places[column][near].min(initial=DECIMALS))
        allowed.append(_half(places[column][row]) + _half(coarsest))
    for size in sizes:
        if size > near.size:
            return
        fits = np.ones(near.size - size + 1, dtype=bool)
        for total, most in zip(sums, allowed, strict=True):
            fits &= np.abs(total[size:] - total[:-size]) <= size * most + SAME
        for at in np.flatnonzero(fits):
            yield near[at : at + size]


def _is_mean(
    row: int, nights: NDArray, values: tuple[NDArray, ...], places: list[NDArray]
) -> bool:
    for column in range(3):
        own = values[column][row]
        others = values[column][nights]
        if not np.isfinite(own) and not np.isfinite(others).any():
            continue
        if column == 1:
            others = own + (others - own + 180.0) % 360.0 - 180.0
        # the mean is rounded, and so were the nights that it was made of
        allowed = _half(places[column][row]) + _half(int(places[column][nights].min()))
        if not abs(others.mean() - own) <= allowed:
            return False
    spread = np.ptp(values[0][nights])
    return bool(spread > 0.0 and min(int(places[1][row]), int(places[2][row])) >= 1)
