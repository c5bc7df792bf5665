"""`kind`: is it a pair at all? At rest, straight motion and orbit, with the odds."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.regular import SIZE
from relorbit.orbit.straight import RectilinearElements, straight_sigma
from relorbit.orbit.third_law import AU_M, JULIAN_YEAR_S, SUN_GM_M3_S2
from relorbit.solve.flat_models import Marginal, at_rest, straight
from relorbit.solve.limits import StraightMotion, straight_motion
from relorbit.solve.observations import Observations
from relorbit.solve.posterior import Posterior
from relorbit.solve.prior import Prior
from relorbit.solve.sample import sample
from relorbit.solve.solution import Notice

SPEEDS = 1e-4, 1.0  # arcsec a year, of two stars passing: common practice, no published source
DECISIVE, SUGGESTIVE = 100.0, 3.0  # odds
SAMPLES, FEWEST = 1500, 1  # where no orbit fits, the few that nearly do are enough
HEAVIEST_PAIR = 200.0  # suns; more than this binds no pair: common practice, no published source
APART = 5.0  # errors between two parallaxes that are not of one distance
YEARS_AHEAD = (2, 5, 10, 15, 20, 30, 50, 75, 100)
CLEAR = 5.0  # errors apart at which two predictions differ clearly
PLACES = 400_000  # of samples and measures at a time
KINDS = ("rest", "straight", "orbit")
AU_A_YEAR = AU_M / JULIAN_YEAR_S  # in metres a second


@dataclass(frozen=True)
class Hypothesis:
    """One of the kinds: marginal likelihood (ln), BIC, chi2, and the probability by the odds.

    The three are given equal odds before the measures are looked at.
    """

    name: str
    log_evidence: float
    bic: float
    chi2: float
    unknowns: int
    probability: float

    def to_dict(self) -> dict[str, Any]:
        return {key: (value if not isinstance(value, float) or np.isfinite(value) else None)
                for key, value in vars(self).items()}  # fmt: skip


@dataclass(frozen=True)
class EscapeTest:
    """The projected relative speed against the speed of escape at the projected distance.

    Both projections err to the side of "bound": the test can show that a pair is not bound, not
    that it is.

    Attributes
    ----------
    distance_au, distance_au_sigma : float
    speed_km_s, speed_km_s_sigma : float
    escape_km_s, escape_km_s_sigma : float or None
        sqrt(2 G M / distance) with the mass given.
    mass_needed, mass_needed_sigma : float
        The total mass, in suns, below which the pair is not bound.
    source : str
        Where the motion comes from: "measures" or "proper motions".
    parallax_gap : float or None
        Difference of the parallaxes over its error, where both are known.
    """

    distance_au: float
    distance_au_sigma: float
    speed_km_s: float
    speed_km_s_sigma: float
    escape_km_s: float | None
    escape_km_s_sigma: float | None
    mass_needed: float
    mass_needed_sigma: float
    source: str
    parallax_gap: float | None = None

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


@dataclass(frozen=True)
class Decider:
    """A measure that would decide: its epoch, the gap between the predictions, and the error
    (each of x and y, arcsec) that it must not exceed. `epoch` is None where none within a century
    would."""

    epoch: float | None
    gap: float
    precision: float

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


@dataclass(frozen=True)
class Secondary:
    """Parallax and proper motion of the companion, with errors; None where unknown.

    Parallaxes in mas, proper motions in mas a year (that in right ascension times cos(dec));
    `pm_err_mas_yr` is the error of the difference from those of the primary, in each direction.
    InputError for a parallax or a proper motion without an error above 0, or half a proper motion.
    """

    parallax_mas: float | None = None
    parallax_err_mas: float | None = None
    pm_ra_mas_yr: float | None = None
    pm_dec_mas_yr: float | None = None
    pm_err_mas_yr: float | None = None

    def __post_init__(self) -> None:
        motions = (self.pm_ra_mas_yr is not None) + (self.pm_dec_mas_yr is not None)
        if motions == 1:
            raise InputError("a proper motion of the companion needs both pm_ra and pm_dec")
        for known, error, what in (
            (self.parallax_mas is not None, self.parallax_err_mas, "parallax"),
            (motions == 2, self.pm_err_mas_yr, "proper motion"),
        ):
            if known and not (error is not None and 0.0 < error < np.inf):
                raise InputError(f"the {what} of the companion needs an error above 0: nothing "
                                 "can be tested without")  # fmt: skip


@dataclass(frozen=True)
class Kind:
    """What a pair is, as far as its measures tell.

    Attributes
    ----------
    verdict : "orbit", "open" or "optical"
    odds_orbit : float
        Odds for an orbit against the better of the two others.
    hypotheses : tuple of Hypothesis, in the order of `KINDS`.
    motion : StraightMotion
    rectilinear : RectilinearElements or None
        None where no motion is seen.
    escape : EscapeTest or None
        None without a parallax.
    decider : Decider or None
        None where the matter is decided.
    posterior : Posterior, the orbits that fit.
    """

    pair: str
    verdict: str
    odds_orbit: float
    hypotheses: tuple[Hypothesis, ...]
    motion: StraightMotion
    rectilinear: RectilinearElements | None
    escape: EscapeTest | None
    decider: Decider | None
    posterior: Posterior
    speed_range: tuple[float, float] = SPEEDS
    warnings: tuple[Notice, ...] = field(default=())

    def to_dict(self) -> dict[str, Any]:
        """The JSON of ``relorbit kind --json``, schema relorbit/kind/1."""
        return {
            "schema": "relorbit/kind/1",
            "pair": self.pair,
            "verdict": self.verdict,
            "odds_orbit": self.odds_orbit if np.isfinite(self.odds_orbit) else None,
            "hypotheses": [one.to_dict() for one in self.hypotheses],
            "rectilinear": None if self.rectilinear is None else self.rectilinear.to_dict(),
            "escape": None if self.escape is None else self.escape.to_dict(),
            "decider": None if self.decider is None else self.decider.to_dict(),
            "speed_range": list(self.speed_range),
            "prior": self.posterior.prior.to_dict(),
            "errors": self.posterior.errors,
            "noise": [group.to_dict() for group in self.posterior.noise],
            "warnings": [one.to_dict() for one in self.warnings],
        }


def kind(
    pair: Pair,
    seed: int = 0,
    prior: Prior | str | None = None,
    *,
    speed_range: tuple[float, float] = SPEEDS,
    mass: tuple[float, float] | None = None,
    secondary: Secondary | None = None,
    epoch_range: tuple[float, float] | None = None,
    errors: str = "as-given",
    group_by: Sequence[str] | str | None = None,
    offsets: Sequence[str] | str | None = None,
    on_progress: Callable[[float], None] | None = None,
) -> Kind:
    """Compare no relative motion, straight motion and orbit.

    Parameters
    ----------
    pair : Pair
    seed : int
    prior : Prior, str or None
        Of the orbit; its range of axes is also that of the separation of the other two.
    speed_range : (float, float)
        arcsec a year: the speeds of two stars passing are uniform in their logarithm.
    mass : (float, float), optional
        Total mass in suns and its standard deviation, for the speed of escape.
    secondary : Secondary, optional
        Parallax and proper motion of the companion.
    epoch_range, errors, group_by, offsets, on_progress
        As in `sample`. Errors from the residuals are those that the most likely orbit leaves, and
        hold for all three kinds.

    Raises
    ------
    InputError
        For a prior, a mass or a range that cannot be.
    Undetermined
        As `sample`.
    """
    low, high = speed_range
    if not 0.0 < low < high < np.inf:
        raise InputError(f"the speeds {low:g} to {high:g} are not a range above 0")
    if mass is not None and not (mass[0] > 0.0 and mass[1] >= 0.0):
        raise InputError(f"a mass of {mass[0]:g} +/- {mass[1]:g} suns cannot be")
    posterior = sample(
        pair, SAMPLES, seed, prior, fewest=FEWEST, epoch_range=epoch_range, errors=errors,
        group_by=group_by, offsets=offsets, on_progress=on_progress,
    )  # fmt: skip
    observations = posterior.observations
    _require_a_line(observations)
    line = straight_motion(observations)
    rng = np.random.default_rng(seed)
    rho_range = posterior.prior.axis_range
    middle = 0.5 * float(observations.epoch[0] + observations.epoch[-1])
    start = middle, line.place + line.motion * (middle - line.epoch), line.motion
    rest = at_rest(observations, rho_range, rng)
    moving = straight(observations, start, rho_range, speed_range, rng)
    moving = replace(moving, chi2=min(moving.chi2, line.chi2))
    bound = Marginal(posterior.log_evidence, float(posterior.chi2.min()), SIZE,
                     posterior.effective_size, posterior.pareto_k)  # fmt: skip
    hypotheses = _hypotheses((rest, moving, bound), observations.numbers)
    escape = _escape_test(pair, line, mass, secondary)
    odds = _odds(hypotheses)
    verdict = _verdict(hypotheses, odds, escape, mass)
    rectilinear = line.rectilinear() if abs(line.motion) > 0.0 else None
    decider = None if verdict == "orbit" else _decider(posterior, line, observations)
    return Kind(pair.name, verdict, odds, hypotheses, line, rectilinear, escape, decider,
                posterior, speed_range, posterior.warnings)  # fmt: skip


def _require_a_line(o: Observations) -> None:
    """Raise Undetermined where there are no positions at two epochs."""
    whole = (o.per_theta > 0.0) & (o.per_rho > 0.0)
    if np.unique(np.round(o.epoch[whole], 4)).size < 2:
        raise Undetermined(
            "theta and rho together were measured at one epoch only: what straight motion would "
            "be is not known. Measure both in another season.",
            code="too-few-positions",
        )


def _hypotheses(marginals: tuple[Marginal, ...], numbers: int) -> tuple[Hypothesis, ...]:
    evidence = np.array([one.log_evidence for one in marginals])
    odds = np.exp(evidence - evidence.max())
    odds /= odds.sum()
    return tuple(
        Hypothesis(name, one.log_evidence, one.chi2 + one.unknowns * float(np.log(numbers)),
                   one.chi2, one.unknowns, float(share))
        for name, one, share in zip(KINDS, marginals, odds, strict=True)
    )  # fmt: skip


def _odds(hypotheses: tuple[Hypothesis, ...]) -> float:
    rest, moving, orbit = (one.log_evidence for one in hypotheses)
    return float(np.exp(np.clip(orbit - max(rest, moving), -700.0, 700.0)))


def _verdict(
    hypotheses: tuple[Hypothesis, ...],
    odds: float,
    escape: EscapeTest | None,
    mass: tuple[float, float] | None,
) -> str:
    """In one word; straight motion is only called optical where it is far likelier than an orbit,
    or faster than the speed of escape by three standard deviations: that of the mass given, or of
    any pair."""
    if odds > DECISIVE:
        return "orbit"
    if escape is not None:
        value, sigma = mass or (HEAVIEST_PAIR, 0.0)
        too_fast = escape.mass_needed - value > 3.0 * np.hypot(escape.mass_needed_sigma, sigma)
        if too_fast or (escape.parallax_gap or 0.0) > APART:
            return "optical"
    rest, moving, orbit = (one.log_evidence for one in hypotheses)
    if moving > rest and moving - orbit > np.log(DECISIVE):
        return "optical"
    return "open"


def _escape_test(
    pair: Pair,
    line: StraightMotion,
    mass: tuple[float, float] | None,
    secondary: Secondary | None,
) -> EscapeTest | None:
    if pair.parallax_mas is None or not pair.parallax_mas > 0.0:
        return None
    parallax, parallax_err = pair.parallax_mas / 1000.0, (pair.parallax_err_mas or 0.0) / 1000.0
    motion, motion_err, source = abs(line.motion), line.motion_sigma, "measures"
    gap = None
    if secondary is not None:
        found = _from_proper_motions(pair, secondary)
        if found is not None:
            (motion, motion_err), source = found, "proper motions"
        gap = _parallax_gap(pair, secondary)
    distance, speed = line.rho / parallax, motion / parallax * AU_A_YEAR / 1000.0
    of_parallax = parallax_err / parallax
    distance_err = distance * np.hypot(line.rho_sigma / max(line.rho, 1e-12), of_parallax)
    speed_err = speed * np.hypot(motion_err / max(motion, 1e-300), of_parallax)
    # M = v^2 s / 2 G; the parallax enters as its third power
    needed = (1000.0 * speed) ** 2 * distance * AU_M / (2.0 * SUN_GM_M3_S2)
    needed_err = needed * np.sqrt(
        (2.0 * motion_err / max(motion, 1e-300)) ** 2
        + (line.rho_sigma / max(line.rho, 1e-12)) ** 2
        + (3.0 * of_parallax) ** 2
    )
    escape = escape_err = None
    if mass is not None:
        escape = float(np.sqrt(2.0 * SUN_GM_M3_S2 * mass[0] / (distance * AU_M)) / 1000.0)
        escape_err = escape * 0.5 * float(np.hypot(mass[1] / mass[0], distance_err / distance))
    return EscapeTest(
        float(distance), float(distance_err), float(speed), float(speed_err), escape, escape_err,
        float(needed), float(needed_err), source, gap,
    )  # fmt: skip


def _from_proper_motions(pair: Pair, other: Secondary) -> tuple[float, float] | None:
    if other.pm_ra_mas_yr is None:
        return None
    if pair.pm_ra_mas_yr is None or pair.pm_dec_mas_yr is None:
        raise InputError("the companion's proper motion needs that of the pair itself beside it, "
                         "which its file does not have")  # fmt: skip
    east, north = other.pm_ra_mas_yr - pair.pm_ra_mas_yr, other.pm_dec_mas_yr - pair.pm_dec_mas_yr
    return float(np.hypot(east, north) / 1000.0), float(other.pm_err_mas_yr / 1000.0)


def _parallax_gap(pair: Pair, other: Secondary) -> float | None:
    if other.parallax_mas is None:
        return None
    error = np.hypot(pair.parallax_err_mas or 0.0, other.parallax_err_mas or 0.0)
    if not error > 0.0:
        return None
    return float(abs(pair.parallax_mas - other.parallax_mas) / error)


def _decider(posterior: Posterior, line: StraightMotion, o: Observations) -> Decider:
    """The first future year in which half of the orbits are clear of the straight line."""
    last = float(o.epoch[-1])
    epochs = last + np.array(YEARS_AHEAD, dtype=float)
    # few samples of many measures: the memory that all their places would take
    rows = posterior.equal_rows(int(np.clip(PLACES // (len(o) + 1), 50, 400)))
    every = np.concatenate([o.epoch, epochs])
    z = posterior.places(rows, every)
    time = o.epoch - line.epoch
    weight = np.maximum(o.sky_weight, 1e-12)
    # the straight line that would be fitted to the measures if the orbit were true
    basis = np.stack([np.ones_like(time), time])
    normal = basis * weight @ basis.T
    coefficients = (z[:, : len(o)] * weight) @ basis.T @ np.linalg.inv(normal)
    ahead = coefficients[:, :1] + coefficients[:, 1:] * (epochs - line.epoch)
    gap = np.median(np.abs(z[:, len(o) :] - ahead), axis=0)
    own = straight_sigma(line.epoch, line.covariance, epochs)
    usual = float(np.median(1.0 / np.sqrt(weight[o.sky_weight > 0.0])))
    need = gap**2 / CLEAR**2 - own**2
    good = need >= usual**2
    if good.any():
        first = int(np.argmax(good))
        return Decider(float(epochs[first]), float(gap[first]), float(np.sqrt(need[first])))
    best = int(np.argmax(need))
    if need[best] > 0.0:
        return Decider(float(epochs[best]), float(gap[best]), float(np.sqrt(need[best])))
    return Decider(None, float(gap[-1]), 0.0)
