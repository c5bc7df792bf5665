"""Lists of epochs for an ephemeris, from ranges in years, months or days."""

from __future__ import annotations

import re

import numpy as np

from relorbit.errors import InputError
from relorbit.measures.dates import julian_years
from relorbit.orbit.kepler import FloatArray

MOST_ROWS = 100_000
DEFAULT_STEPS = 10
DAYS_A_YEAR = 365.25
MONTHS_A_YEAR = 12.0
_STEP = re.compile(r"\s*([0-9]*\.?[0-9]+)\s*([a-zA-Z]*)\s*")
_UNITS = {
    **dict.fromkeys(("", "y", "yr", "year", "years"), 1.0),
    **dict.fromkeys(("mo", "mon", "month", "months"), 1.0 / MONTHS_A_YEAR),
    **dict.fromkeys(("d", "day", "days"), 1.0 / DAYS_A_YEAR),
}


def epoch_from_text(text: str) -> float:
    """Julian year from ``2027.5``, ``B1950.0`` or a date such as ``2027-07-02``.

    Raises InputError for anything else.
    """
    if not text.strip():
        raise InputError("epoch is empty; write a year such as 1998.345, or a date")
    return float(julian_years([text], "auto", lambda _, what: InputError(f"epoch {what}"))[0])


def step_in_years(text: str) -> float:
    """Years from ``1``, ``0.5 years``, ``6 months`` or ``30 days``.

    A month is a twelfth of a Julian year. Raises InputError for anything else.
    """
    found = _STEP.fullmatch(text)
    unit = found and _UNITS.get(found.group(2).lower())
    if not unit or not float(found.group(1)) > 0.0:
        raise InputError(
            f"step {text!r} is not a length of time above 0; write 1 year, 6 months or 30 days"
        )
    return float(found.group(1)) * unit


def epoch_grid(first: float, last: float, step: float) -> FloatArray:
    """Epochs from `first` to `last` (included where a step falls on it), Julian years.

    Raises InputError for an empty range or one of more than 100,000 epochs.
    """
    if last < first:
        raise InputError(f"the last epoch {last:g} is before the first {first:g}; swap them")
    count = np.floor((last - first) / step * (1.0 + 1e-12) + 1e-9) + 1
    if count > MOST_ROWS:
        raise InputError(f"{count:.0f} epochs are more than {MOST_ROWS}; take a longer step")
    return first + step * np.arange(int(count))


def chosen_epochs(
    at: str | None, first: str | None, last: str | None, step: str, today: float
) -> FloatArray:
    """Epochs as an observer asks for them, Julian years.

    Parameters
    ----------
    at : str or None
        Epochs with commas between; then nothing else is looked at.
    first, last : str or None
        Ends of a range; by default `today`, and ten steps later.
    step : str
        See `step_in_years`.
    today : float
        Julian year.
    """
    if at is not None:
        return np.array([epoch_from_text(text.strip()) for text in at.split(",")])
    begin = today if first is None else epoch_from_text(first)
    years = step_in_years(step)
    end = begin + DEFAULT_STEPS * years if last is None else epoch_from_text(last)
    return epoch_grid(begin, end, years)


def coming_years(today: float, count: int) -> FloatArray:
    """The beginnings of the next `count` years after `today`, Julian years."""
    return np.floor(today) + 1.0 + np.arange(count)


def band_epochs(measured: FloatArray, count: int = 240) -> FloatArray:
    """Even epochs (Julian years) over the measured ones and half their span, or 10 years, on."""
    first, last = float(np.min(measured)), float(np.max(measured))
    return np.linspace(first, last + max(0.5 * (last - first), 10.0), count)
