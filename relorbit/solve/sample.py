"""`sample`: every orbit that fits, in proportion to its probability."""

from __future__ import annotations

import numbers
from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import geometry_from_projection
from relorbit.solve.adapt import Drawn, adapted, completed
from relorbit.solve.beginning import start
from relorbit.solve.mixture import Mixture, shape_of
from relorbit.solve.modes import modes_of
from relorbit.solve.observations import Observations, observe
from relorbit.solve.posterior import Posterior
from relorbit.solve.prior import Prior
from relorbit.solve.sample_warnings import gather, mass_contradiction
from relorbit.solve.target import Target
from relorbit.solve.weights import circular_mean, effective_size, normalised, pareto_k

if TYPE_CHECKING:
    pass

MOST_SIZE = 2_000_000
FREE_SAMPLES = 400  # without a prior mass, to see whether it contradicts the measures
USABLE = 200  # effective samples from which an answer is given though more were asked for


def sample(
    pair: Pair,
    size: int = 10_000,
    seed: int = 0,
    prior: Prior | str | None = None,
    *,
    epoch_range: tuple[float, float] | None = None,
    scale_errors: bool = False,
    fewest: int = USABLE,
    on_progress: Callable[[float], None] | None = None,
) -> Posterior:
    """Samples of all orbits that fit, in proportion to their probability.

    Parameters
    ----------
    pair : Pair
        Three measures at different epochs are enough; with so few the prior speaks.
    size : int
        Effective samples asked for, 1 to 2,000,000.
    seed : int
        The same seed gives the same samples.
    prior : Prior, str or None
        Words as on the command line (see `Prior.of`), or None for the default.
    epoch_range : (float, float), optional
        Julian years; measures outside are not used.
    scale_errors : bool
        Multiply all errors by the root of the least reduced chi2 where that is above 1.
    fewest : int
        With fewer effective samples than this (and than `size`) there is no answer.
    on_progress : callable, optional
        Called with the share done, 0 to 1; what it raises ends the work.

    Returns
    -------
    Posterior

    Raises
    ------
    InputError
        For a size, a seed or a prior that cannot be.
    Undetermined
        When the measures are all at one epoch, have too few values, or the weights of the samples
        degenerate so that the size asked for is out of reach.

    Notes
    -----
    The constants are integrated out by Lucy (2014, A&A 563, A126); (ln P, e, phase) are drawn by
    adaptive importance sampling; see `conditional` and `mixture`.
    """
    size, seed = _whole(size, "size", 1, MOST_SIZE), _whole(seed, "seed", 0, 2**63)
    observations = observe(pair.measures, epoch_range)
    enough(observations)
    prior = Prior.of(prior).completed(pair, observations)
    report = on_progress or (lambda share: None)
    contradiction = None
    if prior.mass is not None:
        free = sample(pair, FREE_SAMPLES, seed, replace(prior, mass=None), fewest=1,
                      epoch_range=epoch_range, scale_errors=scale_errors)  # fmt: skip
        contradiction = mass_contradiction(free.mass, free.weight, prior.mass)
    parallax, scale = _parallax(pair), 1.0
    if scale_errors:
        scale, observations = scaled(observations, prior)
    target, mixture, orbits = start(
        observations, prior, parallax, lambda share: report(0.1 * share)
    )
    rng = np.random.default_rng(seed)
    first = adapted(target, mixture, rng, lambda share: report(0.1 + 0.2 * share))
    drawn, mixture = completed(target, first, size, rng, lambda share: report(0.3 + 0.7 * share))
    report(1.0)
    try:
        posterior = _posterior(pair, observations, target, mixture, drawn, size, seed, fewest)
    except Undetermined as error:
        if contradiction is not None:
            error = Undetermined(f"{error.reason} {contradiction.text}.", error.code, error.known)
        raise error from None
    posterior = replace(
        posterior, error_scale=scale, parallax_mas=pair.parallax_mas,
        parallax_err_mas=pair.parallax_err_mas,
    )  # fmt: skip
    return gather(posterior, float(orbits.chi2[0]), contradiction)


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
    from relorbit.orbit.regular import SIZE
    from relorbit.solve.basins import find_basins

    _, orbits = find_basins(observations, None, prior.period_range)
    dof = observations.numbers - SIZE
    scale = float(np.sqrt(max(1.0, orbits.chi2[0] / dof))) if dof > 0 else 1.0
    enlarged = replace(
        observations,
        per_theta=observations.per_theta / scale,
        per_rho=observations.per_rho / scale,
    )
    return scale, enlarged


def _whole(value: Any, name: str, low: int, high: int) -> int:
    whole = isinstance(value, numbers.Integral) and not isinstance(value, bool)
    if not whole or not low <= value <= high:
        raise InputError(f"the {name} {value!r} is not a whole number from {low} to {high}")
    return int(value)


def _parallax(pair: Pair) -> tuple[float, float] | None:
    if pair.parallax_mas is None or not pair.parallax_mas > 0.0:
        return None
    return pair.parallax_mas, pair.parallax_err_mas or 0.0


def _posterior(
    pair: Pair,
    observations: Observations,
    target: Target,
    mixture: Mixture,
    drawn: Drawn,
    size: int,
    seed: int,
    fewest: int,
) -> Posterior:
    log_weight = drawn.log_weight
    weight = normalised(log_weight)
    reached, tail = effective_size(weight), pareto_k(weight)
    if reached < min(size, fewest):
        raise _degenerate(reached, drawn.size, size)
    keep = weight > 0.0
    top = float(log_weight.max())
    evidence = top + float(np.log(np.exp(log_weight - top).sum()))
    alpha, beta, chi2 = (getattr(drawn.draws, name)[keep] for name in ("alpha", "beta", "chi2"))
    parallax = None if drawn.draws.parallax is None else drawn.draws.parallax[keep]
    y, weight = drawn.y[keep], weight[keep]
    q = shape_of(y)[0]
    P = np.exp(q[:, 0])
    # the passages of one and the same revolution, wherever the mean phase is
    phase = q[:, 2] - np.rint(q[:, 2] - _nearest(circular_mean(q[:, 2], weight, 1.0)))
    a, i, node, omega = geometry_from_projection(alpha, beta)
    return Posterior(
        pair.name, P, target.reference_epoch - phase * P, q[:, 1], a, i, node, omega, alpha, beta,
        weight, chi2, parallax, modes_of(mixture, y, weight), reached, tail, evidence,
        drawn.size,        target.prior, target.reference_epoch, size, seed, observations,
    )  # fmt: skip


def _nearest(phase: float) -> float:
    return phase - 1.0 if phase > 0.5 else phase


def _degenerate(reached: float, drawn: int, size: int) -> Undetermined:
    return Undetermined(
        f"the weights of the samples degenerate: {drawn} draws are worth {reached:.0f} "
        f"independent ones of the {size} asked for. The measures and the prior are too far apart, "
        "or the errors of the measures too small for what they are; look at the fit with solve.",
        code="weights-degenerate",
        known={"effective_size": reached, "drawn": drawn},
    )
