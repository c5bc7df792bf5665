"""What an observer should be told beside the numbers of a solution."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from relorbit.measures.pair import Pair
from relorbit.solve.observations import Observations
from relorbit.solve.solution import Notice, Solution

if TYPE_CHECKING:
    from relorbit.solve.weighing import NoiseGroup

ENOUGH_COVERED = 0.75  # Aitken's rule: an orbit is worth computing once this much is covered
CLOSE_RIVAL = 9.0  # rise of scaled chi2, three standard deviations, up to which a rival is named
VAGUE = 0.2  # relative error of the period that is worth a warning
WELL_KNOWN_E = 0.2  # error of e up to which an orbit can be called circular
VAGUE_NODE = 30.0  # error of the node, degrees, that is worth a warning
NEARLY_FACE_ON = 60.0  # how far from edge-on, degrees, an orbit is nearly face-on
WIDE_ERRORS, ENOUGH_DOF = 0.5, 8  # reduced chi2 under which assumed errors are too wide
FEW_MEASURES = 6  # of a group, that do not tell its errors: common practice, no published source
HIGHEST_E = 0.999  # beyond this an ellipse is no longer told from a needle
POOR_FIT = 2.0  # reduced chi2 above which the measures disagree with their own errors
PLAUSIBLE_MASS = (0.05, 300.0)  # total mass in solar masses: common practice, no published source


def gather(
    solution: Solution, pair: Pair, observations: Observations, found: list[Notice]
) -> Solution:
    """The solution with its warnings, those `found` during the fit first."""
    notices = [*found, *_of_the_orbit(solution), *_of_the_measures(solution, pair, observations)]
    return replace(solution, warnings=tuple(notices))


def _of_the_orbit(s: Solution) -> Iterator[Notice]:
    scale = s.error_scale**2
    covered = s.span / s.elements.P
    if covered < ENOUGH_COVERED:
        yield Notice(
            "short-arc",
            f"the measures cover {100 * covered:.0f} % of a revolution: the orbit is provisional, "
            "and the errors, which suppose small ones, are too small",
        )
    rivals = [one for one in s.alternatives if (one.chi2 - s.chi2) / scale < CLOSE_RIVAL]
    if rivals:
        periods = ", ".join(f"{one.elements.P:.4g}" for one in rivals[:4])
        yield Notice(
            "rival-orbits", f"other orbits fit nearly as well, with periods of {periods} years"
        )
    sigma_P = s.sigma["P"]
    if sigma_P is not None and sigma_P > VAGUE * s.elements.P:
        yield Notice("period-uncertain", f"the period is only known to {sigma_P:.2g} years")
    if s.elements.e > HIGHEST_E and "e" not in s.held:
        yield Notice(
            "eccentricity-at-limit",
            "the eccentricity runs to 1: needles seen nearly edge-on fit best, and a, i, e and the "
            "mass mean little; measures around the closest approach would cure it",
        )
    yield from _without_meaning(s)
    if s.mass_total is not None:
        low, high = PLAUSIBLE_MASS
        if not low < s.mass_total.value < high:
            yield Notice(
                "mass-implausible",
                f"a total mass of {s.mass_total.value:.3g} suns is not one of stars: check the "
                "parallax (in mas), the separations (in arcsec) and the period",
            )


def _without_meaning(s: Solution) -> Iterator[Notice]:
    sigma = s.sigma
    if s.elements.e == 0.0:
        yield Notice(
            "circular", "a circle has no periastron: omega is 0 and T the passage of the node"
        )
    elif sigma["e"] is not None and s.elements.e < 2.0 * sigma["e"] < 2.0 * WELL_KNOWN_E:
        yield Notice(
            "nearly-circular",
            "e does not differ from 0 by two standard deviations: T and omega are poorly known, "
            "the place of the companion in its orbit is not",
        )
    if s.elements.i in (0.0, 180.0):
        yield Notice(
            "face-on", "a face-on orbit has no node: node is 0 and omega is counted from it"
        )
    elif (
        sigma["node"] is not None
        and sigma["node"] > VAGUE_NODE
        and abs(s.elements.i - 90.0) > NEARLY_FACE_ON
    ):
        yield Notice(
            "nearly-face-on",
            "the orbit is nearly face-on: node and omega are poorly known, their "
            + ("sum is not" if s.elements.i < 90.0 else "difference is not"),
        )


def _of_small_groups(s: Solution) -> Iterator[Notice]:
    small = [group.name for group in s.noise if group.measures < FEW_MEASURES]
    if s.noise and s.dof < ENOUGH_DOF:
        yield Notice(
            "few-for-errors",
            f"{s.dof} degrees of freedom are too few to tell errors from residuals: those found "
            "lean on the ones given, or usual for the technique",
        )
    elif small:
        names = "; ".join(small[:4]) + ("; ..." if len(small) > 4 else "")
        yield Notice(
            "few-for-errors",
            f"fewer than {FEW_MEASURES} measures do not tell the errors of a group: those of "
            f"{names} lean on their technique",
        )


def _of_the_measures(s: Solution, pair: Pair, o: Observations) -> Iterator[Notice]:
    yield from default_errors(o)
    if o.assumed.all() and s.reduced_chi2 < WIDE_ERRORS and s.dof >= ENOUGH_DOF:
        yield Notice(
            "wide-errors",
            f"reduced chi2 is {s.reduced_chi2:.2f}: the measures agree better than the errors "
            "assumed for them, and the errors given are too large",
        )
    if s.error_scale > 1.0:
        yield Notice(
            "scaled-errors",
            f"reduced chi2 is {s.reduced_chi2:.2f}: the errors given are {s.error_scale:.2f} times "
            "the formal ones",
        )
    if s.reduced_chi2 > POOR_FIT:
        yield Notice(
            "poor-fit",
            "the measures scatter more than their errors allow: look for slips among the largest "
            "residuals",
        )
    yield from _of_small_groups(s)
    yield from down_weighted(s.noise, len(o))
    with np.errstate(invalid="ignore"):
        wrong_side = s.residuals.used & (np.abs(s.residuals.d_theta) > 90.0)
    if wrong_side.any():
        epochs = ", ".join(f"{epoch:.2f}" for epoch in s.residuals.epoch[wrong_side][:4])
        yield Notice(
            "wrong-side",
            f"on the other side of the primary, perhaps with a swapped quadrant: "
            f"{int(wrong_side.sum())} measured at {epochs}",
        )
    yield from not_at_j2000(pair, o)


def default_errors(o: Observations) -> Iterator[Notice]:
    """Said where measures bring no errors."""
    assumed = int(o.assumed.sum())
    if assumed:
        yield Notice(
            "default-errors",
            f"{assumed} of {len(o)} measures bring no errors and were given those usual for their "
            "technique",
        )


def down_weighted(noise: Sequence[NoiseGroup], measures: int) -> Iterator[Notice]:
    """Said where a robust fit has left measures aside."""
    down = sorted(row for group in noise for row in group.down_weighted)
    if down:
        rows = ", ".join(str(row + 1) for row in down[:8]) + (" ..." if len(down) > 8 else "")
        yield Notice(
            "down-weighted",
            f"{len(down)} of {measures} measures lie more than three times their group's error off "
            f"and count for little: measure {rows}; look for slips",
        )


def not_at_j2000(pair: Pair, o: Observations) -> Iterator[Notice]:
    """Said where theta could not be brought to J2000."""
    left = int(np.count_nonzero(pair.measures.equinox[o.rows] != "J2000"))
    if left:
        yield Notice(
            "not-at-J2000",
            f"theta of {left} measures is not at equinox J2000: give the position of the pair so "
            "that it can be brought there",
        )
