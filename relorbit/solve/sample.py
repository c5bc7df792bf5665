"""`sample`: every orbit that fits, in proportion to its probability."""

from __future__ import annotations

import numbers
from collections.abc import Callable, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import geometry_from_projection
from relorbit.solve.adapt import Drawn, adapted, completed
from relorbit.solve.beginning import start
from relorbit.solve.limits import straight_motion
from relorbit.solve.measured import Measured, measured
from relorbit.solve.mixture import Mixture, shape_of
from relorbit.solve.modes import modes_of
from relorbit.solve.observations import Observations
from relorbit.solve.posterior import Posterior
from relorbit.solve.prior import Prior
from relorbit.solve.sample_warnings import gather, mass_contradiction
from relorbit.solve.target import Target
from relorbit.solve.weights import circular_mean, effective_size, normalised, pareto_k

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
    errors: str = "as-given",
    group_by: Sequence[str] | str | None = None,
    offsets: Sequence[str] | str | None = None,
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
    errors, group_by, offsets
        As in `solve`: with "from-residuals" the likelihood has the errors, zero points and weights
        of groups that an orbit is found with there (see `relorbit.solve.measured`).
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
        degenerate so that the size asked for is out of reach; `known` says what the measures do.

    Notes
    -----
    The constants are integrated out by Lucy (2014, A&A 563, A126); (ln P, e, phase) are drawn by
    adaptive importance sampling; see `conditional` and `mixture`.
    """
    size, seed = _whole(size, "size", 1, MOST_SIZE), _whole(seed, "seed", 0, 2**63)
    report = on_progress or (lambda share: None)
    given = measured(
        pair, prior, epoch_range=epoch_range, scale_errors=scale_errors, errors=errors,
        group_by=group_by, offsets=offsets, on_progress=lambda share: report(0.0),
    )  # fmt: skip
    contradiction = None
    if given.prior.mass is not None:
        free = replace(given, prior=replace(given.prior, mass=None))
        free, _ = _sampled(pair, free, FREE_SAMPLES, seed, 1, lambda share: report(0.0))
        contradiction = mass_contradiction(free.mass, free.weight, given.prior.mass)
    try:
        posterior, best = _sampled(pair, given, size, seed, fewest, report)
    except Undetermined as error:
        if contradiction is not None:
            error = Undetermined(f"{contradiction.text}. {error.reason}", error.code, error.known)
        raise error from None
    return gather(posterior, pair, best, contradiction)


def _sampled(
    pair: Pair,
    given: Measured,
    size: int,
    seed: int,
    fewest: int,
    report: Callable[[float], None],
) -> tuple[Posterior, float]:
    """Samples without warnings, and the least chi2 of any orbit."""
    target, mixture, orbits = start(
        given.observations, given.prior, _parallax(pair), lambda share: report(0.1 * share)
    )
    rng = np.random.default_rng(seed)
    first = adapted(target, mixture, rng, lambda share: report(0.1 + 0.2 * share))
    drawn, mixture = completed(target, first, size, rng, lambda share: report(0.3 + 0.7 * share))
    report(1.0)
    posterior = _posterior(pair, given, target, mixture, drawn, size, seed, fewest)
    return posterior, float(orbits.chi2[0])


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
    given: Measured,
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
        raise _degenerate(reached, drawn.size, size, given.observations)
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
        drawn.size, target.prior, target.reference_epoch, size, seed, given.observations,
        given.scale, pair.parallax_mas, pair.parallax_err_mas, given.errors, given.noise,
    )  # fmt: skip


def _nearest(phase: float) -> float:
    return phase - 1.0 if phase > 0.5 else phase


def _degenerate(reached: float, drawn: int, size: int, o: Observations) -> Undetermined:
    line, bare = straight_motion(o), np.count_nonzero(o.per_theta == 0.0)
    alone = " (rho alone, as in most rows here, leaves too many places open)"
    return Undetermined(
        f"the weights of the samples degenerate: {drawn} draws are worth {reached:.0f} "
        f"independent ones of the {size} asked for. The measures and the prior are too far apart, "
        "or the errors of the measures too small for what they are; look at the fit with solve"
        f"{alone if 2 * bare > len(o) else ''}. "
        f"{line.text()}",
        code="weights-degenerate",
        known=line.known() | {"effective_size": reached, "drawn": drawn},
    )
