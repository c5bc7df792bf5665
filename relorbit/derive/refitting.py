"""What an orbit becomes when new measures are added, and what each of them does to it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures
from relorbit.orbit.elements import NAMES, Elements
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import regular_from_elements
from relorbit.solve.residuals import residuals
from relorbit.solve.solution import Solution
from relorbit.solve.solver import refine_from, solve
from relorbit.solve.student import student

RECENT_YEARS = 30.0


@dataclass(frozen=True)
class Change:
    """A quantity before and after, each with its error where known."""

    name: str
    old: float | None
    old_sigma: float | None
    new: float | None
    new_sigma: float | None

    @property
    def change(self) -> float | None:
        return None if self.old is None or self.new is None else self.new - self.old

    def to_dict(self) -> dict[str, Any]:
        return {**vars(self), "change": self.change}


@dataclass(frozen=True)
class Influence:
    """What one new measure does (or, set aside, would do) to the refitted orbit: the orbit with it
    less the one without.

    Attributes
    ----------
    distance : float
        In the errors of the refitted orbit, all elements together.
    element : str
        The element that it moves most.
    in_sigma : float
        By how many of its errors.
    period : float
        Change of P, years.
    """

    distance: float
    element: str
    in_sigma: float
    period: float

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


@dataclass(frozen=True)
class OrbitCompared:
    """How well one orbit fits: reduced chi2 (a value's mean square in its error).

    `all`, `recent` (the last 30 years) and `new` are None where there are no values.
    """

    name: str
    all: float | None
    recent: float | None
    new: float | None

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


def refitted(
    pair: Pair, elements: Elements, errors: str, on_progress: Callable[[float], None] | None = None
) -> tuple[Solution, str]:
    """The orbit of all measures, by a search or, where that has no answer, from `elements`.

    Returns it and, in the second case, the reason why the search has no answer.
    """
    try:
        found = solve(pair, errors=errors, on_progress=on_progress)
    except Undetermined as why:
        return refine_from(pair, elements, errors=errors), why.reason
    return replace(found, elements=found.elements.near(elements.T)), ""


def influences(
    pair: Pair,
    solution: Solution,
    rows: Sequence[int],
    errors: str,
    on_step: Callable[[float], None] | None = None,
) -> list[Influence | None]:
    """The influence of some rows of a pair on its solution, each by a refit without it.

    A row that is set aside is refitted with instead, to say what it would do.
    """
    t0 = solution.uncertainty.reference_epoch
    whole = regular_from_elements(solution.elements, t0)
    covariance = solution.uncertainty.covariance
    size = np.sqrt(np.maximum(np.diag(covariance), 1e-300))
    inverse = np.linalg.pinv(covariance / np.outer(size, size), rcond=1e-12, hermitian=True)
    found: list[Influence | None] = []
    for done, row in enumerate(rows):
        if on_step is not None:
            on_step(done / len(rows))
        use = pair.measures.use.copy()
        sign = 1.0 if use[row] else -1.0
        use[row] = not use[row]
        try:
            without = refine_from(
                pair.with_measures(replace(pair.measures, use=use)),
                solution.elements,
                errors=errors,
            ).elements
        except Undetermined:
            found.append(None)
            continue
        step = sign * (whole - regular_from_elements(without, t0)) / size
        moved = {
            name: sign * _gap(name, solution.elements, without) / sigma
            for name, sigma in solution.sigma.items()
            if sigma
        }
        most = max(moved, key=lambda name: abs(moved[name]), default="P")
        found.append(Influence(
            float(np.sqrt(max(step @ inverse @ step, 0.0))), most,
            float(moved.get(most, 0.0)), sign * (solution.elements.P - without.P),
        ))  # fmt: skip
    return found


def _gap(name: str, new: Elements, old: Elements) -> float:
    gap = getattr(new, name) - getattr(old, name)
    if name == "T":
        return gap - new.P * np.rint(gap / new.P)
    if name in ("node", "omega"):
        return float((gap + 180.0) % 360.0 - 180.0)
    return gap


def same_side(old: Elements, new: Elements) -> Elements:
    """`new` with the node on the side of the old one, so that the two can be compared."""
    if abs((new.node - old.node + 180.0) % 360.0 - 180.0) <= 90.0:
        return new
    return replace(new, node=new.node + 180.0, omega=new.omega + 180.0)


def element_changes(
    old: Elements,
    old_sigma: dict[str, float | None],
    new: Elements,
    new_sigma: dict[str, float | None],
) -> tuple[Change, ...]:
    """Each element before and after; angles of the new one within half a turn of the old."""
    new = same_side(old, new.near(old.T))
    found = []
    for name in NAMES:
        value = getattr(old, name) + _gap(name, new, old)
        found.append(
            Change(name, getattr(old, name), old_sigma.get(name), value, new_sigma.get(name))
        )
    return tuple(found)


def squares(
    elements: Elements, measures: Measures, robust: bool
) -> tuple[FloatArray, FloatArray]:
    """Squares of O-C of theta and rho in their errors, shape (2, n), and which of them count.

    With `robust` they are weighted as the noise model does (see `relorbit.solve.student`); of a
    row not in use they are NaN.
    """
    r = residuals(elements, measures)
    z = np.stack([r.theta_in_sigma, r.rho_in_sigma])
    square = z * z * student().weight(z) if robust else z * z
    square = np.where(measures.use, square, np.nan)
    return square, np.isfinite(square)


def compare_orbits(
    orbits: Sequence[tuple[str, Elements]], measures: Measures, new: FloatArray, robust: bool
) -> tuple[OrbitCompared, ...]:
    """Reduced chi2 of several orbits on all measures in use, the recent and the new ones.

    `measures` bring the errors to judge by; `new` is a mask of its rows. `robust` as in `squares`.
    """
    recent = measures.epoch >= measures.epoch.max() - RECENT_YEARS
    found = []
    for name, elements in orbits:
        square, counted = squares(elements, measures, robust)

        def mean(
            rows: FloatArray, square: FloatArray = square, counted: FloatArray = counted
        ) -> float | None:
            values = square[:, rows][counted[:, rows]]
            return float(values.mean()) if values.size else None

        found.append(OrbitCompared(name, mean(np.ones_like(recent)), mean(recent), mean(new)))
    return tuple(found)
