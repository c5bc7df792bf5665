"""What the residuals of an orbit still hide: a periodic wobble, or a drift.

The residuals are taken north and east, and one period is looked for in both together: the
statistic is the sum of what a sine in each lowers chi2 by, from the Lomb-Scargle periodogram of
each (Lomb 1976, Ap&SS 39, 447; Scargle 1982, ApJ 263, 835; with a floating mean Zechmeister &
Kuerster 2009, A&A 496, 577).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import betaincc, chdtri

from relorbit.derive.wobble import (
    Scatter,
    chi2_of,
    design,
    drift,
    ellipse,
    gain_of,
    minimum_mass,
    scatter_of,
)
from relorbit.errors import InputError, Undetermined
from relorbit.orbit.kepler import TWO_PI, FloatArray
from relorbit.solve.residuals import Residuals
from relorbit.solve.solution import Solution

SCHEMA = "relorbit/companion/1"
FEWEST = 10  # measures with both values
FINENESS = 8  # frequencies in each 1/span
LEVEL = 0.01
PERMUTATIONS = 999
BLOCK = 100  # permutations at a time: bounds the memory
SHORTEST = 2.0  # shortest period, in mean intervals between epochs


@dataclass(frozen=True)
class Wobble:
    """The period that lowers chi2 most.

    Attributes
    ----------
    period, period_sigma : float, years.
    amplitude_mas, amplitude_sigma_mas : float
        Semimajor axis of the ellipse that the residuals run through.
    gain : float
        By how much it lowers chi2, in units of the residuals' own scatter.
    probability : float
        Of so large a gain by chance at any period: the analytic false-alarm level.
    probability_permuted : float
        The same from shuffled residuals.
    mass_minimum : float or None
        Least mass of a dark companion, solar masses: around one of two equal stars of the pair's
        total mass; None without a parallax.
    """

    period: float
    period_sigma: float
    amplitude_mas: float
    amplitude_sigma_mas: float
    gain: float
    probability: float
    probability_permuted: float
    mass_minimum: float | None

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


@dataclass(frozen=True)
class Drift:
    """A straight drift beside the orbit: mas a year north and east, errors, its probability."""

    north: float
    north_sigma: float
    east: float
    east_sigma: float
    probability: float

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


@dataclass(frozen=True)
class CompanionSearch:
    """What a look through the residuals found.

    Attributes
    ----------
    pair : str
    measures : int
        With both values, used by the fit.
    level : float
        False-alarm probability below which a signal is worth following.
    found : bool
        True where the probability from shuffled residuals is not above it. The analytic one is an
        upper bound: it leaves out that nearby frequencies, and aliases, are alike.
    text : str
    wobble : Wobble
        The best period, worth following or not.
    drift : Drift
    period : ndarray, shape (f,), years, falling.
    power : ndarray, shape (f,)
        Gain of each period, in units of the residuals' scatter.
    threshold : float
        The gain at `level`, analytic.
    threshold_permuted : float
    """

    pair: str
    measures: int
    level: float
    found: bool
    text: str
    wobble: Wobble
    drift: Drift
    period: FloatArray
    power: FloatArray
    threshold: float
    threshold_permuted: float

    def to_dict(self) -> dict[str, Any]:
        return {
            "schema": SCHEMA,
            "pair": self.pair,
            "measures": self.measures,
            "level": self.level,
            "found": self.found,
            "text": self.text,
            "wobble": self.wobble.to_dict(),
            "drift": self.drift.to_dict(),
            "threshold": self.threshold,
            "threshold_permuted": self.threshold_permuted,
            "periodogram": {"period": self.period.tolist(), "power": self.power.tolist()},
        }


def search_companion(
    solution: Solution,
    *,
    period_range: tuple[float, float] | None = None,
    level: float = LEVEL,
    permutations: int = PERMUTATIONS,
    seed: int = 0,
    on_progress: Callable[[float], None] | None = None,
) -> CompanionSearch:
    """Look for a wobble and a drift in the residuals of a solution.

    Parameters
    ----------
    solution : Solution
        Its residuals with the errors they hold (those of the noise model where it was used).
    period_range : (float, float), optional
        Years; by default from twice the mean interval between epochs to the time span.
    level : float
        False-alarm probability below which a signal is called worth following.
    permutations : int
        How often the residuals are shuffled, at least 1/level.
    seed : int
    on_progress : callable, optional
        Called with the share done, 0 to 1; what it raises ends the work.

    Raises
    ------
    InputError
        For a level or a range that cannot be, or too few permutations for the level.
    Undetermined
        For fewer than ten measures with both values, or all at one epoch.
    """
    s = _scatter(solution.residuals)
    periods = _periods(s, period_range)
    _check(level, permutations)
    frequency = 1.0 / periods
    power = _periodogram(s, frequency)
    best = int(np.argmax(power))
    reference, dof = chi2_of(s), 2 * s.epoch.size - 7
    spread = reference / dof
    analytic = _false_alarm(power[best], reference, dof, s, frequency)
    highest = _shuffled(s, frequency, permutations, seed, on_progress)
    permuted = (1.0 + np.count_nonzero(highest >= power[best])) / (permutations + 1.0)
    wobble = _wobble(s, solution, periods, power, best, spread, analytic, permuted)
    moved = Drift(*drift(s, spread, solution.elements))
    found = bool(permuted <= level)
    threshold = _threshold(level, reference, dof, s, frequency)
    return CompanionSearch(
        solution.pair, s.epoch.size, level, found, _words(found, wobble, moved, level), wobble,
        moved, periods, power / spread, threshold / spread,
        float(np.quantile(highest, 1.0 - level)) / spread,
    )  # fmt: skip


def _scatter(residuals: Residuals) -> Scatter:
    s = scatter_of(residuals)
    if s.epoch.size < FEWEST or np.ptp(s.epoch) <= 0.0:
        raise Undetermined(
            f"{s.epoch.size} measures have both theta and rho: looking for a companion in the "
            f"residuals needs at least {FEWEST}, at different epochs",
            code="too-few-measures",
        )
    return s


def _periods(s: Scatter, wanted: tuple[float, float] | None) -> FloatArray:
    span = float(np.ptp(s.epoch))
    distinct = np.unique(np.round(s.epoch, 2)).size
    shortest, longest = SHORTEST * span / distinct, span
    if wanted is not None:
        shortest, longest = (float(value) for value in wanted)
        if not 0.0 < shortest < longest < np.inf:
            raise InputError(
                f"the periods {shortest:g} to {longest:g} years are not a range; give the "
                "shortest, above 0, and then a longer one"
            )
    count = max(2, int(np.ceil((1.0 / shortest - 1.0 / longest) * span * FINENESS)) + 1)
    if count > 200_000:
        raise InputError(
            f"{count} periods to try from {shortest:g} years on: give a longer shortest period"
        )
    return 1.0 / np.linspace(1.0 / longest, 1.0 / shortest, count)


def _check(level: float, permutations: int) -> None:
    if not 0.0 < level < 1.0:
        raise InputError(f"a false-alarm level is between 0 and 1, not {level:g}")
    if permutations < 1.0 / level - 1.0:
        raise InputError(
            f"{permutations} permutations cannot show a false-alarm probability of {level:g}; "
            f"take at least {int(np.ceil(1.0 / level))}"
        )


def _periodogram(s: Scatter, frequency: FloatArray) -> FloatArray:
    """Fall of chi2 by a sine north and one east, shape (f,), by astropy."""
    from astropy.timeseries import LombScargle

    total = np.zeros(frequency.size)
    for value, sigma in ((s.north, s.north_sigma), (s.east, s.east_sigma)):
        one = LombScargle(s.epoch - s.epoch[0], value, sigma, fit_mean=True, center_data=True)
        # in units of chi2 / 2
        total += 2.0 * one.power(frequency, method="cython", normalization="psd")
    return total


def _rate(s: Scatter, frequency: FloatArray) -> float:
    """Frequency range times the effective time span, 2 sqrt(pi var t) (Baluev 2008)."""
    weight = 1.0 / s.north_sigma**2 + 1.0 / s.east_sigma**2
    mean = np.average(s.epoch, weights=weight)
    variance = np.average((s.epoch - mean) ** 2, weights=weight)
    return float(np.ptp(frequency) * np.sqrt(2.0 * TWO_PI * variance))


def _false_alarm(
    gain: float, reference: float, dof: int, s: Scatter, frequency: FloatArray
) -> float:
    """Probability that chance alone makes a peak of this gain anywhere.

    Rice's formula for the maximum of chi2 of four degrees of freedom over frequency, as Baluev
    (2008, MNRAS 385, 1279) has it for two: single-trial probability plus upcrossings. The
    scatter being estimated too, the gain is first turned into the chi2 of the same single-trial
    probability.
    """
    share = min(gain / reference, 1.0)
    single = float(betaincc(2.0, 0.5 * (dof - 4), share))
    if single <= 0.0:
        return 0.0
    u = float(chdtri(4, single))
    crossings = _rate(s, frequency) * (0.5 * u) ** 1.5 * np.exp(-0.5 * u)
    return float(-np.expm1(-(single + crossings))) if single < 1.0 else 1.0


def _threshold(
    level: float, reference: float, dof: int, s: Scatter, frequency: FloatArray
) -> float:
    """The gain at a false-alarm level, by halving."""
    low, high = 0.0, reference
    for _ in range(60):
        middle = 0.5 * (low + high)
        if middle > 4.0 * reference / dof and (
            _false_alarm(middle, reference, dof, s, frequency) <= level
        ):
            high = middle
        else:
            low = middle
    return high


def _shuffled(
    s: Scatter,
    frequency: FloatArray,
    permutations: int,
    seed: int,
    on_progress: Callable[[float], None] | None,
) -> FloatArray:
    """The highest gain of residuals dealt out anew among the measures, shape (permutations,).

    The residuals of one measure across and along, in their errors, stay together.
    """
    random = np.random.default_rng(seed)
    columns = design(s, frequency)
    highest = np.empty(permutations)
    for start in range(0, permutations, BLOCK):
        if on_progress is not None:
            on_progress(start / permutations)
        count = min(BLOCK, permutations - start)
        order = np.argsort(random.random((count, s.epoch.size)), axis=1)
        north, east = s.dealt(order)
        gain = gain_of(columns, north, east)
        highest[start : start + count] = gain.max(axis=0)
    return highest


def _wobble(
    s: Scatter,
    solution: Solution,
    periods: FloatArray,
    power: FloatArray,
    best: int,
    spread: float,
    analytic: float,
    permuted: float,
) -> Wobble:
    period, error = _peak(1.0 / periods, power / spread, best)
    amplitude, sigma = ellipse(s, period, spread)
    mass = None
    if solution.mass_total is not None and solution.parallax_mas:
        mass = minimum_mass(
            1000.0 * amplitude / solution.parallax_mas, period, 0.5 * solution.mass_total.value
        )
    return Wobble(
        period, error, 1000.0 * amplitude, 1000.0 * sigma, float(power[best] / spread),
        analytic, float(permuted), mass,
    )  # fmt: skip


def _peak(frequency: FloatArray, power: FloatArray, best: int) -> tuple[float, float]:
    """Period at the top of the parabola through a peak, and its error where chi2 rises by one."""
    if 0 < best < power.size - 1:
        left, top, right = power[best - 1 : best + 2]
        bend = left - 2.0 * top + right
        if bend < 0.0:
            step = frequency[1] - frequency[0]
            f = frequency[best] + 0.5 * step * (left - right) / bend
            return float(1.0 / f), float(np.sqrt(2.0 / -bend) * step / f**2)
    f = frequency[best]
    return float(1.0 / f), float(0.5 * (frequency[1] - frequency[0]) / f**2)


def _words(found: bool, wobble: Wobble, moved: Drift, level: float) -> str:
    # shuffling cannot show less than one in its number; beyond that the analytic level speaks
    chance = f"{min(wobble.probability, wobble.probability_permuted):.1g}"
    if wobble.probability < 1e-6:
        chance = "below one in a million"
    if found:
        text = (
            f"a signal worth following: period {wobble.period:.3g} years, amplitude "
            f"{wobble.amplitude_mas:.2g} mas, false-alarm probability {chance}"
        )
        if wobble.mass_minimum is not None:
            text += f"; a dark companion would have at least {wobble.mass_minimum:.2g} solar masses"
    else:
        text = f"nothing: the best period, {wobble.period:.3g} years, is put down to chance"
    if moved.probability <= level:
        text += (
            "; the residuals drift, by "
            f"{np.hypot(moved.north, moved.east):.2g} mas a year: the orbit does not fit throughout"
        )
    return text


__all__ = ["CompanionSearch", "Drift", "Wobble", "search_companion"]
