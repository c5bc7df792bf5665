"""Which slip would explain a measure that does not fit: a short table, tried one by one."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

# how much more likely than chance a slip must make a measure: chi2 falls by this much at least
LEAST_GAIN = 15.0
LIKELY = 0.01  # probability of chance that a measure must reach with the slip undone
YEARS = (1.0, -1.0, 10.0, -10.0, 100.0, -100.0)
FACTORS = (2.0, 10.0, 60.0, 1000.0)


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
    best: tuple[float, Slip] | None = None
    for kind, text, changed in _candidates(epoch, theta, rho):
        chi2, probability = deviation(*changed)
        if probability < LIKELY or before - chi2 < LEAST_GAIN:
            continue
        if best is None or chi2 < best[0]:
            best = chi2, Slip(kind, text, *changed, probability)
    return None if best is None else best[1]


def _candidates(
    epoch: float, theta: float, rho: float
) -> Iterator[tuple[str, str, tuple[float, float, float]]]:
    if np.isfinite(theta):
        yield "quadrant", "the quadrant is swapped", (epoch, (theta + 180.0) % 360.0, rho)
        yield "mirror", "theta runs the wrong way (360 - theta)", (epoch, -theta % 360.0, rho)
        for turn in (90.0, 270.0):
            yield "quarter", "theta is off by 90 degrees", (epoch, (theta + turn) % 360.0, rho)
    if np.isfinite(rho):
        for factor in FACTORS:
            unit = ", or given in mas" if factor == 1000.0 else ""
            yield (
                "rho-factor", f"rho is {factor:g} times too large{unit}",
                (epoch, theta, rho / factor),
            )  # fmt: skip
            yield "rho-factor", f"rho is {factor:g} times too small", (epoch, theta, rho * factor)
    for years in YEARS:
        late = "late" if years > 0.0 else "early"
        word = "year" if abs(years) == 1.0 else "years"
        yield "year", f"the epoch is {abs(years):g} {word} too {late}", (epoch - years, theta, rho)
    if np.isfinite(theta) and np.isfinite(rho):
        yield "interchange", "theta and rho are interchanged", (epoch, rho % 360.0, theta)
