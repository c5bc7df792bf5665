"""The slips that measures suffer: a table, every one of them tried on every measure.

A trial is a measure with a slip undone. The prices say how much more common one slip is than
another; they are common practice, without a published source.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]

# how much more likely than chance a slip must make a measure: chi2 falls by this much at least
LEAST_GAIN = 15.0
LIKELY = 0.01  # probability of chance that a measure must reach with the slip undone
YEARS = (1.0, -1.0, 10.0, -10.0, 100.0, -100.0)
FACTORS = (2.0, 10.0, 60.0, 1000.0)


@dataclass(frozen=True)
class Kind:
    """One kind of slip.

    Attributes
    ----------
    name : str, such as "quadrant", "mirror", "rho-factor", "year".
    text : str
    price : float
        Minus twice the logarithm of how often it happens to a measure.
    """

    name: str
    text: str
    price: float


def _kinds() -> tuple[Kind, ...]:
    factors = [
        Kind("rho-factor", f"rho is {factor:g} times too {way}{unit}", 11.0)
        for factor in FACTORS
        for way, unit in (
            ("large", ", or given in mas" if factor == 1000.0 else ""), ("small", ""),
        )
    ]  # fmt: skip
    years = [
        Kind(
            "year",
            f"the epoch is {abs(shift):g} year{'' if abs(shift) == 1.0 else 's'} too "
            f"{'late' if shift > 0.0 else 'early'}",
            10.0 if abs(shift) < 100.0 else 11.0,
        )
        for shift in YEARS
    ]
    return (
        Kind("none", "nothing is wrong", 0.0),
        Kind("quadrant", "the quadrant is swapped", 7.0),
        Kind("mirror", "theta runs the wrong way (360 - theta)", 10.0),
        Kind("quarter", "theta is off by 90 degrees", 11.0),
        Kind("quarter", "theta is off by 90 degrees", 11.0),
        *factors,
        *years,
        Kind("interchange", "theta and rho are interchanged", 11.0),
        Kind("day-month", "day and month of the date are swapped", 9.0),
    )


KINDS = _kinds()
NONE, QUADRANT = 0, 1
SWAPPED = next(slot for slot, kind in enumerate(KINDS) if kind.name == "interchange")
DATE = len(KINDS) - 1


@dataclass(frozen=True)
class Trials:
    """n measures with each of k slips undone; NaN where a slip cannot have happened.

    Attributes
    ----------
    epoch, theta, rho : ndarray, shape (k, n)
        Julian years, degrees in [0, 360), arcsec. A missing value stays missing.
    possible : bool ndarray, shape (k, n)
    """

    epoch: FloatArray
    theta: FloatArray
    rho: FloatArray
    possible: NDArray[np.bool_]

    def select(self, rows: NDArray) -> Trials:
        """The trials of some of the measures."""
        return Trials(*(getattr(self, name)[:, rows] for name in self.__dataclass_fields__))


def trials(
    epoch: ArrayLike,
    theta: ArrayLike,
    rho: ArrayLike,
    turn: ArrayLike = 0.0,
    other_date: ArrayLike = np.nan,
) -> Trials:
    """Every slip of `KINDS` undone in every measure.

    Parameters
    ----------
    epoch, theta, rho : array_like, shape (n,)
        Julian years, degrees, arcsec; NaN where missing.
    turn : array_like, degrees
        What a reduction added to theta: slips of writing happened before it.
    other_date : array_like, shape (n,)
        The epoch with day and month exchanged; NaN where the date as received shows none.
    """
    epoch, theta, rho, turn, other = (
        np.array(part)
        for part in np.broadcast_arrays(
            *(np.atleast_1d(np.asarray(v, dtype=float)) for v in (
                epoch, theta, rho, turn, other_date))
        )
    )  # fmt: skip
    shape = (len(KINDS), epoch.size)
    e, t, r = (np.broadcast_to(part, shape).copy() for part in (epoch, theta, rho))
    has_theta, has_rho = np.isfinite(theta), np.isfinite(rho)
    possible = np.zeros(shape, dtype=bool)
    possible[NONE] = True
    as_written = theta - turn
    for slot, changed in enumerate(
        (theta + 180.0, turn - as_written, theta + 90.0, theta - 90.0), QUADRANT
    ):
        t[slot], possible[slot] = changed, has_theta
    slot = QUADRANT + 4
    for factor in FACTORS:
        for changed in (rho / factor, rho * factor):
            r[slot], possible[slot] = changed, has_rho & (rho > 0.0)
            slot += 1
    for shift in YEARS:
        e[slot], possible[slot] = epoch - shift, True
        slot += 1
    t[SWAPPED], r[SWAPPED] = rho + turn, np.mod(as_written, 360.0)
    possible[SWAPPED] = has_theta & has_rho
    possible[DATE] = np.isfinite(other)
    e[DATE] = np.where(possible[DATE], other, epoch)
    t = np.mod(t, 360.0)
    t[t == 360.0] = 0.0
    return Trials(e, t, r, possible)


@dataclass(frozen=True)
class Slip:
    """A slip that would explain a measure, and the measure with it undone.

    Attributes
    ----------
    kind : str, such as "quadrant", "mirror", "rho-factor", "year".
    text : str
    epoch, theta, rho : float
        As they would then be; NaN where missing.
    probability : float
        Of so large a deviation by chance, with the slip undone.
    """

    kind: str
    text: str
    epoch: float
    theta: float
    rho: float
    probability: float

    def to_dict(self) -> dict[str, Any]:
        return {
            name: None if isinstance(value, float) and not np.isfinite(value) else value
            for name, value in vars(self).items()
        }


def explain(
    epoch: float,
    theta: float,
    rho: float,
    deviation: Callable[[float, float, float], tuple[float, float]],
) -> Slip | None:
    """The slip that explains a measure best, or None where none does.

    Parameters
    ----------
    epoch, theta, rho : float
        Julian year, degrees, arcsec; NaN where missing.
    deviation : callable
        chi2 and its probability for an epoch, theta and rho.
    """
    before, _ = deviation(epoch, theta, rho)
    tried = trials(epoch, theta, rho)
    best: tuple[float, Slip] | None = None
    for slot in np.flatnonzero(tried.possible[:, 0])[1:]:
        changed = tuple(
            float(part[slot, 0]) for part in (tried.epoch, tried.theta, tried.rho)
        )
        chi2, probability = deviation(*changed)
        if probability < LIKELY or before - chi2 < LEAST_GAIN:
            continue
        if best is None or chi2 < best[0]:
            kind = KINDS[slot]
            best = chi2, Slip(kind.name, kind.text, *changed, probability)
    return None if best is None else best[1]
