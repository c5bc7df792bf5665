"""Quadrants of a pair of two like stars: the assignment that one orbit explains best.

Near-equal stars are taken one for the other at random, so no measure's quadrant can be trusted.
The orbit is then looked for without asking for quadrants (see `relorbit.solve.folded`), and each
measure takes the side that the orbit has. One question always stays open: all quadrants turned
together give the same orbit seen from the other star. The side that most measures were given is
taken, and the other one reported where that is no clear majority.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair
from relorbit.measures.slips import QUADRANT
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.regular import elements_from_regular
from relorbit.solve.observations import observe
from relorbit.solve.slip_fit import SlipData, likeliest, settled, slip_data
from relorbit.solve.slip_search import improbability, robust_orbits
from relorbit.solve.trying import enough_for_an_orbit

ABOUT_AS_GOOD = 9.0  # minus twice the logarithm of how much less likely an assignment may be
LEAST_SHARE = 0.02  # of quadrants flipped
MOST_ORBITS, TURNS = 8, 6
CLEAR = 3.0  # standard deviations of chance that make a majority of quadrants clear


@dataclass(frozen=True)
class Assignment:
    """Quadrants for all measures, and the orbit that explains them.

    Attributes
    ----------
    flips : tuple of int
        Measures to turn by 180 degrees, as they stand in the pair.
    elements : Elements
    worse : float
        Minus twice the logarithm of how much less likely than the best; 0 for that.
    turned : bool
        True for the best with every quadrant turned.
    """

    flips: tuple[int, ...]
    elements: Elements
    worse: float
    turned: bool = False

    def to_dict(self) -> dict[str, Any]:
        return {
            "flips": list(self.flips), "elements": self.elements.to_dict(),
            "worse": self.worse, "turned": self.turned,
        }  # fmt: skip


def joint_quadrants(pair: Pair) -> tuple[Assignment, ...]:
    """The assignments of quadrants that one orbit explains best, the best first.

    Parameters
    ----------
    pair : Pair
        Its quadrants count for nothing, but for which of the two stars is the primary.

    Returns
    -------
    tuple of Assignment
        Those about as good as the best.

    Raises
    ------
    Undetermined
        Where the measures are too few for an orbit.
    """
    o = observe(pair.measures)
    if not enough_for_an_orbit(o):
        raise Undetermined(
            "too few positions to tell quadrants by an orbit; measure again in a later season",
            code="too-few-positions",
        )
    d, orbits = joint_orbits(slip_data(pair.measures, o))
    found: list[Assignment] = []
    seen: list[NDArray[np.bool_]] = []
    best = orbits[0][1]
    for u, worse in orbits:
        if worse - best > ABOUT_AS_GOOD:
            break
        flipped = likeliest(d, u)[0] == QUADRANT
        if any(np.mean(flipped != other) < 0.02 for other in seen):
            continue
        seen.append(flipped)
        found.append(_assignment(d, u, flipped, worse - best))
    if not clear_majority(seen[0]):
        flips = tuple(sorted(set(d.o.rows.tolist()) - set(found[0].flips)))
        e = found[0].elements
        other = Elements(e.P, e.T, e.e, e.a, e.i, e.node, e.omega + 180.0)
        found.insert(1, Assignment(flips, other, 0.0, True))
    return tuple(found)


def joint_orbits(
    d: SlipData, on_step: Callable[[], None] | None = None
) -> tuple[SlipData, list[tuple[FloatArray, float]]]:
    """The orbits of a list whose quadrants are in doubt, as those of `robust_orbits`.

    At first either quadrant is as likely; then the share of those that the best orbit flips is
    taken for their probability. The data are returned with that.
    """
    even = d.in_doubt(0.5)
    found = robust_orbits(even, on_step)
    share = float(np.mean(on_the_side_of_most(even, found[0][0])[1]))
    d = d.in_doubt(float(np.clip(share, LEAST_SHARE, 0.5)))
    orbits = []
    for u, _ in found[:MOST_ORBITS]:
        u = settled(d, on_the_side_of_most(even, u)[0], TURNS)[0]
        orbits.append((u, improbability(d, u)))
    return d, sorted(orbits, key=lambda one: one[1])


def on_the_side_of_most(d: SlipData, u: FloatArray) -> tuple[FloatArray, NDArray[np.bool_]]:
    """The orbit, turned by 180 degrees where that flips fewer measures; and which are flipped."""
    kinds, out = likeliest(d, u)
    flipped = kinds == QUADRANT
    if np.mean(flipped[~out]) <= 0.5:
        return u, flipped
    u = np.concatenate([u[:3], -u[3:]])
    return u, likeliest(d, u)[0] == QUADRANT


def clear_majority(flipped: NDArray[np.bool_]) -> bool:
    """True where chance alone would hardly leave so few quadrants to flip."""
    count = flipped.size
    return bool(count - 2 * np.count_nonzero(flipped) > CLEAR * np.sqrt(count))


def _assignment(
    d: SlipData, u: FloatArray, flipped: NDArray[np.bool_], worse: float
) -> Assignment:
    flips = tuple(sorted(d.o.rows[flipped].tolist()))
    return Assignment(flips, elements_from_regular(u, d.t0), float(worse))
