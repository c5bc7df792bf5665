"""What follows at once from one set of elements: residuals, chi2, mass. Quick enough for a drag."""

from __future__ import annotations

from dataclasses import dataclass, replace

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements
from relorbit.orbit.third_law import mass_from_axis
from relorbit.solve.residuals import Residuals, residuals

# one step of a key or button, coarse and fine; P and a as a share of their value
COARSE = {"P": 0.01, "T": 0.01, "e": 0.01, "a": 0.01, "i": 1.0, "node": 1.0, "omega": 1.0}
FINE = 0.1
HIGHEST_E = 0.999


@dataclass(frozen=True)
class Consequences:
    """Residuals of every measure, chi2 of those used, numbers fitted, and the mass.

    `mass` is in solar masses, None without a parallax.
    """

    residuals: Residuals
    chi2: float
    numbers: int
    mass: float | None


def consequences(pair: Pair, elements: Elements) -> Consequences:
    """Residuals, chi2 and total mass of an orbit that may not be the best."""
    found = residuals(elements, pair.measures)
    m = pair.measures
    numbers = int((m.has_theta & m.use).sum() + (m.has_rho & m.use).sum())
    mass = None
    if pair.parallax_mas is not None and pair.parallax_mas > 0.0:
        mass = mass_from_axis(elements.P, elements.a, pair.parallax_mas)
    return Consequences(found, found.chi2, numbers, mass)


def nudged(elements: Elements, name: str, steps: float, fine: bool = False) -> Elements:
    """Elements with one of them moved by some steps, kept within its range.

    Parameters
    ----------
    elements : Elements
    name : str
        P and a move by a share of their value, T by a share of the period, e by 0.01, angles by
        one degree; a tenth of that when `fine`.
    steps : float
        How many, to either side.
    """
    size = COARSE[name] * (FINE if fine else 1.0) * steps
    value = getattr(elements, name)
    if name in ("P", "a"):
        value = value * (1.0 + COARSE[name] * (FINE if fine else 1.0)) ** steps
    elif name == "T":
        value += size * elements.P
    else:
        value += size
    if name == "e":
        value = min(max(value, 0.0), HIGHEST_E)
    elif name == "i":
        value = min(max(value, 0.0), 180.0)
    return replace(elements, **{name: value})
