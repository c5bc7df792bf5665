"""A measure of two catalogue positions beside those that a pair has."""

from __future__ import annotations

import numpy as np

from relorbit.errors import InputError
from relorbit.measures.between import Place, PlaceMeasure, apart
from relorbit.measures.intake import SAME_EPOCH_YR
from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures

NEAR = 60.0  # arcsec: farther from the pair's place a position is hardly that of its primary


def already(pair: Pair, new: Measures) -> list[int]:
    """Measures from space, from 1, that a pair has of the epoch of a new one by other observers.

    Raises
    ------
    InputError
        Where it has one by the same observer: the measure would count twice.
    """
    m = pair.measures
    same = (np.abs(m.epoch - new.epoch[0]) <= SAME_EPOCH_YR) & (m.technique == "space")
    theirs = np.flatnonzero(same & (m.observer == new.observer[0]))
    if theirs.size:
        who = f" by {new.observer[0]}" if new.observer[0] else ""
        raise InputError(
            f"{pair.name} has a measure from space{who} of {new.epoch[0]:.3f} already (measure "
            f"{theirs[0] + 1}); name another catalogue as the observer, or another epoch"
        )
    return (np.flatnonzero(same) + 1).tolist()


def far_from(pair: Pair, found: PlaceMeasure) -> float | None:
    """Arcsec from the pair's place to the primary, where that is too far; else None."""
    if pair.ra_deg is None or pair.dec_deg is None:
        return None
    motion = pair.pm_ra_mas_yr or 0.0, pair.pm_dec_mas_yr or 0.0
    home = Place(pair.ra_deg, pair.dec_deg, 2000.0, pm_ra_mas_yr=motion[0],
                 pm_dec_mas_yr=motion[1])  # fmt: skip
    gap = apart(home, found.a, found.a.epoch)
    return gap if gap > NEAR else None
