"""An orbit found together with what each group of measures is worth."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from math import erfc, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from relorbit.errors import InputError
from relorbit.measures.table import Measures
from relorbit.orbit.regular import elements_from_regular, regular_from_elements
from relorbit.solve.basins import FIRST_STEPS, find_basins, settle, starting_orbits
from relorbit.solve.groups import chosen_groups, group_names
from relorbit.solve.holding import Holding
from relorbit.solve.linear import sky_data
from relorbit.solve.noise import Layout, Noise, best_of, estimate
from relorbit.solve.observations import Observations, complete_errors
from relorbit.solve.refine import Refined, places_of_values, polar_problem, refine, sky_problem
from relorbit.solve.student import student

ERRORS = ("as-given", "from-residuals")
FOLLOWED = 6  # orbits of the first search whose noise is estimated
LIGHT = 0.3  # relative weight below which a value is named: a residual above three sigma
BEYOND_CHANCE = 0.01  # probability of so large a residual, the number of values considered
ENOUGH = 2000  # measures on which orbits are sought and compared
MUCH = 0.9  # change of the logarithm of an error that is worth another search
WORSE_QUARTER = 0.25
MOST_TURNS = 3  # how often orbit and weights may change places


@dataclass(frozen=True)
class NoiseGroup:
    """What the measures of one group are worth.

    Attributes
    ----------
    name : str
    measures : int, fitted.
    across_arcsec, along_arcsec : float or None
        Median error of its measures across and along the direction of the pair; None where it
        measured no theta or no rho.
    across_factor, along_factor : float or None
        By how much the errors given (or usual) were multiplied.
    across_factor_sigma, along_factor_sigma : float or None
        Standard deviation of their natural logarithms.
    theta_offset, theta_offset_sigma, theta_offset_p : float or None
        Zero point of theta, degrees, observed minus true; its probability by chance.
    rho_offset, rho_offset_sigma, rho_offset_p : float or None
        The same of ln rho: 0.01 for separations one per cent too large.
    share : float
        Of the whole weight (sum of 1/error^2, across and along).
    rows : tuple of int, in the pair's measures.
    theta_weight, rho_weight : tuple of float or None
        Of each row, from 0 to 1; None where missing.
    """

    name: str
    measures: int
    across_arcsec: float | None
    along_arcsec: float | None
    across_factor: float | None
    along_factor: float | None
    across_factor_sigma: float | None
    along_factor_sigma: float | None
    theta_offset: float | None
    theta_offset_sigma: float | None
    theta_offset_p: float | None
    rho_offset: float | None
    rho_offset_sigma: float | None
    rho_offset_p: float | None
    share: float
    rows: tuple[int, ...]
    theta_weight: tuple[float | None, ...]
    rho_weight: tuple[float | None, ...]

    @property
    def down_weighted(self) -> tuple[int, ...]:
        """Rows of which a value counts for less than `LIGHT` of its weight."""
        return tuple(
            row
            for row, *weights in zip(self.rows, self.theta_weight, self.rho_weight, strict=True)
            if any(weight is not None and weight < LIGHT for weight in weights)
        )

    def to_dict(self) -> dict[str, Any]:
        plain = {name: getattr(self, name) for name in self.__dataclass_fields__}
        for name in ("rows", "theta_weight", "rho_weight"):
            plain[name] = list(plain[name])
        return {**plain, "down_weighted": list(self.down_weighted)}


@dataclass(frozen=True)
class Weighing:
    """Noise found with an orbit, and the observations as that orbit was fitted to them."""

    noise: Noise
    observations: Observations
    groups: tuple[NoiseGroup, ...]
    measures: Measures


def errors_from_residuals(
    errors: str, group_by: Sequence[str] | str | None, offsets: Sequence[str] | str | None
) -> bool:
    """Whether errors are to be estimated; InputError for words that say neither or both."""
    if errors not in ERRORS:
        raise InputError(f"errors cannot be {errors!r}; take {' or '.join(ERRORS)}")
    if errors == "as-given" and (group_by is not None or offsets):
        raise InputError(
            "groups and zero points belong to errors taken from the residuals; ask for those"
        )
    return errors == "from-residuals"


def layout_of(
    measures: Measures,
    rows: NDArray[np.intp],
    group_by: Sequence[str] | str | None = None,
    offsets: Sequence[str] | str | None = None,
) -> Layout:
    """Groups of the rows fitted; `offsets` names those with zero points, or says ``all``.

    Where every group is to have one, the largest keeps 0: one zero point of all measures could
    not be told from the orbit's node and size. Raises InputError for a group or grouping that
    does not exist.
    """
    names, parents = (part[rows] for part in group_names(measures, group_by))
    known, first, group = np.unique(names, return_index=True, return_inverse=True)
    known = tuple(known.tolist())
    chosen = () if not offsets else chosen_groups(offsets, known)
    if len(chosen) == len(known) and chosen:
        largest = known[int(np.argmax(np.bincount(group)))]
        chosen = tuple(name for name in chosen if name != largest)
        if not chosen:
            raise InputError(
                f"{largest} is the only group: its zero point cannot be told from the orbit"
            )
    slots = tuple(known.index(name) for name in chosen)
    return Layout(known, tuple(parents[first].tolist()), group, slots)


def find_weighed_orbits(
    o: Observations,
    layout: Layout,
    held: Holding,
    period_range: tuple[float, float] | None = None,
    on_progress: Callable[[float], None] | None = None,
) -> tuple[float, Refined, Noise, Observations]:
    """Search with the errors as given and weigh; where that changes much, search again.

    A slip in a measure that states a small error can bend every orbit of the first search. So the
    second one gives all measures errors of one size, the likelier noise of both is taken, and the
    last search has its weights.

    Returns the reference epoch, the orbits (chi2 with the weights of the best one), the noise and
    the observations with its weights.
    """
    report = on_progress or (lambda share: None)
    few, part = _fewer(o, layout)
    t0, orbits = find_basins(few, held, period_range, lambda share: report(0.3 * share))
    noise = best_of(few, part, orbits.u[:FOLLOWED], t0, held, lambda: report(0.3))
    if not _as_given(noise):
        level = _levelled(few)
        data, level_t0 = sky_data(level), level.mean_epoch
        starts = starting_orbits(data, level_t0, held, period_range)
        # orbits at the minima of the map, before a slip has drawn them away
        near = refine(sky_problem(data, level_t0), starts, held, FIRST_STEPS, 1e-2).u
        pool = [_moved(orbits.u, t0, level_t0), near]
        t0, orbits = find_basins(
            level, held, period_range, lambda s: report(0.35 + 0.25 * s), starts
        )
        pool = _promising(few, part, t0, np.concatenate([*pool, orbits.u]))[:FOLLOWED]
        other = best_of(few, part, pool, t0, held, lambda: report(0.6))
        noise = min(noise, other, key=lambda one: one.deviance)
        known, before = noise.u, noise.reference_epoch
        second = _for_a_search(noise.weighted(few))
        t0, orbits = find_basins(second, held, period_range, lambda s: report(0.65 + 0.25 * s))
        starts = [held.put_back(_moved(known[None], before, t0), t0)[0], *orbits.u[:FOLLOWED]]
        noise = best_of(few, part, starts, t0, held, lambda: report(0.95))
    if few is not o:
        noise = estimate(o, layout, noise.u, t0, held, None, lambda: report(0.96))
    return (t0, *settle_with_weights(o, noise, orbits.u, t0, held, lambda: report(0.98)))


def _fewer(o: Observations, layout: Layout) -> tuple[Observations, Layout]:
    """Of the rows of each large group so many, evenly through time, that `ENOUGH` are left."""
    if len(o) <= ENOUGH:
        return o, layout
    most = max(ENOUGH // len(layout.names), 1)
    keep = []
    for slot in range(len(layout.names)):
        rows = np.flatnonzero(layout.group == slot)
        chosen = np.linspace(0.0, rows.size - 1.0, min(rows.size, most)).round().astype(int)
        keep.append(rows[chosen])
    rows = np.sort(np.concatenate(keep))
    return o.select(rows), replace(layout, group=layout.group[rows])


def _moved(u: NDArray[np.float64], t0: float, to: float) -> NDArray[np.float64]:
    """Orbits u, shape (c, 7), in the regular coordinates of another reference epoch."""
    return np.array([regular_from_elements(elements_from_regular(one, t0), to) for one in u])


def _promising(
    o: Observations, layout: Layout, t0: float, u: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Orbits u, shape (c, 7), by their median residuals in each group: blind to a few slips."""
    r = np.abs(polar_problem(o, t0).with_jacobian(u)[0][:, places_of_values(o)])
    theta, rho = np.flatnonzero(o.per_theta), np.flatnonzero(o.per_rho)
    cell = np.concatenate([2 * layout.group[theta], 2 * layout.group[rho] + 1])
    score = np.zeros(len(u))
    for one in np.unique(cell):
        values = r[:, cell == one]
        score += values.shape[1] * np.log(np.maximum(np.median(values, axis=1), 1e-3))
    score = np.where(np.isfinite(score), score, np.inf)
    return u[np.argsort(score, kind="stable")]


def _as_given(noise: Noise) -> bool:
    """True where the errors given were about right and no value is off beyond chance."""
    known = noise.weight[np.isfinite(noise.weight)]
    farthest = -float(ndtri(0.5 * BEYOND_CHANCE / known.size))
    lightest = student().weight(np.array(farthest)) / student().full_weight
    return bool(np.abs(noise.log_factor).max() < MUCH and known.min() >= lightest)


def _for_a_search(o: Observations) -> Observations:
    """The observations as places on the sky can stand for them.

    Where theta is off by a large angle, the place is off along the direction of the pair too, by
    rho sigma_theta^2 / 2; a down-weighted theta would else leave a precise wrong place.
    """
    with np.errstate(divide="ignore"):
        angle = np.where(o.per_theta > 0.0, 1.0 / o.per_theta, 0.0)
        along = np.hypot(1.0 / o.per_rho, 0.5 * o.sky_rho * angle**2)
    return replace(o, per_rho=np.where(o.per_rho > 0.0, 1.0 / along, 0.0))


def _levelled(o: Observations) -> Observations:
    """The observations with no error smaller than that of the worse quarter."""
    across = np.where(o.per_theta > 0.0, o.per_theta / np.maximum(o.sky_rho, 1e-9), np.inf)
    along = np.where(o.per_rho > 0.0, o.per_rho, np.inf)
    both = np.concatenate([across, along])
    most = np.quantile(both[np.isfinite(both)], WORSE_QUARTER)
    return replace(
        o,
        per_theta=o.per_theta * np.minimum(most / across, 1.0),
        per_rho=o.per_rho * np.minimum(most / along, 1.0),
    )


def settle_with_weights(
    o: Observations,
    noise: Noise,
    u: NDArray[np.float64],
    t0: float,
    held: Holding,
    on_step: Callable[[], None] | None = None,
) -> tuple[Refined, Noise, Observations]:
    """All orbits under the weights of the best, until the best under them is that one."""
    for _ in range(MOST_TURNS):
        weighted = noise.weighted(o)
        problem = polar_problem(weighted, t0)
        orbits = settle(problem, np.vstack([noise.u, u]), held, on_step)
        own = settle(problem, noise.u[None], held, on_step)
        if orbits.chi2[0] >= own.chi2[0] - 1e-3:
            break
        other = estimate(o, noise.layout, orbits.u[0], t0, held, noise, on_step)
        if other.deviance >= noise.deviance:
            # less likely with its own weights: the orbit adopted stands first
            behind = orbits.chi2 > own.chi2[0] - 1e-3
            orbits = Refined(
                orbits.u[behind], orbits.chi2[behind], orbits.at_rest[behind], orbits.iterations
            )
            break
        noise = other
    return orbits, noise, weighted


def weighing(measures: Measures, o: Observations, noise: Noise, weighted: Observations) -> Weighing:
    """The noise of some rows of measures, as an observer reads it."""
    return Weighing(noise, weighted, _groups(o, noise), _with_noise(measures, o, noise))


def _groups(o: Observations, noise: Noise) -> tuple[NoiseGroup, ...]:
    good = noise.corrected(o)
    with np.errstate(divide="ignore", invalid="ignore"):
        # a pair that was not resolved has no direction, and its theta no error in arcsec
        known = (good.per_theta > 0.0) & (good.sky_rho > 0.0)
        across = np.where(known, good.sky_rho / good.per_theta, np.nan)
        along = np.where(good.per_rho > 0.0, 1.0 / good.per_rho, np.nan)
    weight = np.nan_to_num(noise.weight / np.stack([across, along], axis=1) ** 2)
    found = []
    for slot, name in enumerate(noise.layout.names):
        rows = np.flatnonzero(noise.layout.group == slot)
        found.append(NoiseGroup(
            name, rows.size, _median(across[rows]), _median(along[rows]),
            *(_plain(v) if _median(part[rows]) is not None else None
              for v, part in zip(np.exp(noise.log_factor[slot]), (across, along), strict=True)),
            *(_plain(v) for v in noise.log_factor_sigma[slot]),
            *_zero_point(np.degrees(noise.offset[slot, 0]),
                         np.degrees(noise.offset_sigma[slot, 0])),
            *_zero_point(noise.offset[slot, 1], noise.offset_sigma[slot, 1]),
            float(weight[rows].sum() / weight.sum()),
            tuple(o.rows[rows].tolist()),
            *(tuple(_plain(v) for v in noise.weight[rows, kind]) for kind in (0, 1)),
        ))  # fmt: skip
    return tuple(found)


def _zero_point(value: float, sigma: float) -> tuple[float | None, float | None, float | None]:
    if not np.isfinite(sigma):
        return None, None, None
    return float(value), float(sigma), erfc(abs(value) / sigma / sqrt(2.0))


def _plain(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _median(values: NDArray[np.float64]) -> float | None:
    values = values[np.isfinite(values)]
    return float(np.median(values)) if values.size else None


def _with_noise(measures: Measures, o: Observations, noise: Noise) -> Measures:
    """The measures with zero points taken off and the errors of their groups.

    Rows that were not fitted keep their errors.
    """
    theta_err, rho_err, _ = (part.copy() for part in complete_errors(measures))
    factor = np.exp(noise.log_factor[noise.layout.group])
    offset = noise.offset[noise.layout.group]
    theta, rho = measures.theta.copy(), measures.rho.copy()
    theta_err[o.rows] *= factor[:, 0]
    rho_err[o.rows] *= factor[:, 1]
    theta[o.rows] = np.mod(theta[o.rows] - np.degrees(offset[:, 0]), 360.0) % 360.0
    rho[o.rows] *= np.exp(-offset[:, 1])
    return replace(measures, theta=theta, rho=rho, theta_err=theta_err, rho_err=rho_err)
