"""The measures as samples take them: with errors as given, enlarged, or from their residuals."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.regular import SIZE
from relorbit.solve.basins import find_basins
from relorbit.solve.determined import require_enough
from relorbit.solve.holding import Holding
from relorbit.solve.observations import Observations, observe
from relorbit.solve.prior import Prior
from relorbit.solve.student import student
from relorbit.solve.weighing import (
    NoiseGroup,
    errors_from_residuals,
    find_weighed_orbits,
    layout_of,
    weighing,
)


@dataclass(frozen=True)
class Measured:
    """Measures with the errors that their likelihood is taken with.

    Attributes
    ----------
    observations : Observations
    prior : Prior, its ranges spelled out for them.
    errors : "as-given" or "from-residuals"
    scale : float
        By which all errors given were multiplied.
    noise : tuple of NoiseGroup
        What each group is worth; empty for errors as given.
    """

    observations: Observations
    prior: Prior
    errors: str = "as-given"
    scale: float = 1.0
    noise: tuple[NoiseGroup, ...] = ()


def measured(
    pair: Pair,
    prior: Prior | str | None = None,
    *,
    epoch_range: tuple[float, float] | None = None,
    scale_errors: bool = False,
    errors: str = "as-given",
    group_by: Sequence[str] | str | None = None,
    offsets: Sequence[str] | str | None = None,
    on_progress: Callable[[float], None] | None = None,
) -> Measured:
    """The measures of a pair with the errors asked for; the options are those of `sample`.

    Errors from the residuals are those of `solve`: factors of groups, zero points, and weights
    that leave slips aside, found with the most likely orbit and then held. So that the samples
    of a well-known orbit scatter as its covariance says, all errors are enlarged by the price of
    the heavy tail (`Student.variance`). The uncertainty of the zero points is not carried on.

    Raises
    ------
    InputError
        For a prior, a group or a choice of errors that cannot be.
    Undetermined
        When the measures are too few, or all at one epoch.
    """
    given = observe(pair.measures, epoch_range)
    enough(given)
    prior = Prior.of(prior).completed(pair, given)
    if not errors_from_residuals(errors, group_by, offsets):
        scale, observations = scaled(given, prior) if scale_errors else (1.0, given)
        return Measured(observations, prior, errors, scale)
    if scale_errors:
        raise InputError("errors from the residuals need no scale: ask for one of the two")
    require_enough(given, Holding())
    layout = layout_of(pair.measures, given.rows, group_by, offsets)
    _, _, noise, weighted = find_weighed_orbits(
        given, layout, Holding(), prior.period_range, on_progress
    )
    price = np.sqrt(student().variance * student().mean_weight)
    observations = replace(
        weighted, per_theta=weighted.per_theta / price, per_rho=weighted.per_rho / price
    )
    groups = weighing(pair.measures, given, noise, weighted).groups
    return Measured(observations, prior, errors, 1.0, groups)


def enough(o: Observations) -> None:
    """Refuse what no prior can help.

    Raises Undetermined.
    """
    epochs = np.unique(np.round(o.epoch, 4)).size
    if epochs < 2:
        raise Undetermined(
            "the measures are all at one epoch: no motion, and so no orbit, can be seen. Measure "
            "again in a later season.",
            code="too-few-epochs",
            known={"epochs": epochs},
        )
    both = np.count_nonzero((o.per_theta > 0.0) & (o.per_rho > 0.0))
    if both < 2 or o.numbers < 5:
        raise Undetermined(
            f"only {both} of the measures have both theta and rho, {o.numbers} values in all: "
            "samples need at least three measures. Measure again.",
            code="too-few-measures",
            known={"numbers": o.numbers},
        )


def scaled(observations: Observations, prior: Prior) -> tuple[float, Observations]:
    """The root of the least reduced chi2, at least 1, and the measures with errors so enlarged."""
    _, orbits = find_basins(observations, None, prior.period_range)
    dof = observations.numbers - SIZE
    scale = float(np.sqrt(max(1.0, orbits.chi2[0] / dof))) if dof > 0 else 1.0
    enlarged = replace(
        observations,
        per_theta=observations.per_theta / scale,
        per_rho=observations.per_rho / scale,
    )
    return scale, enlarged
