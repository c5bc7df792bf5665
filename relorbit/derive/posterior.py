"""What the samples of a posterior agree on: intervals, modes, turning points, positions."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from relorbit.derive.ephemeris import julian_years
from relorbit.orbit.kepler import TWO_PI, FloatArray, unit_ellipse
from relorbit.solve.posterior import Posterior
from relorbit.solve.weights import around, circular_mean, quantiles

SCHEMA = "relorbit/sampled-ephemeris/1"
SUMMARY_SCHEMA = "relorbit/posterior/1"
SHARES = (0.025, 0.16, 0.5, 0.84, 0.975)
UNITS = {
    "P": "yr", "T": "Julian yr", "e": "", "a": "arcsec", "i": "deg", "node": "deg",
    "omega": "deg", "a^3/P^2": "arcsec^3/yr^2", "mass": "solar masses",
    "next periastron": "Julian yr", "closest": "arcsec", "next closest": "Julian yr",
    "widest": "arcsec", "next widest": "Julian yr",
}  # fmt: skip
MOST_ORBITS = 4000  # samples followed round their orbits
PLACES = 360  # on each orbit
OF_MODES = ("P", "T", "e", "a", "i")
VALUES = 2_000_000  # positions at a time


@dataclass(frozen=True)
class Interval:
    """The median, and the central intervals of 68 and 95 per cent."""

    median: float
    low68: float
    high68: float
    low95: float
    high95: float

    def to_dict(self) -> dict[str, float | None]:
        return {name: value if np.isfinite(value) else None for name, value in vars(self).items()}


@dataclass(frozen=True)
class Mode:
    """One separate part of a posterior: its probability and the intervals of its elements."""

    probability: float
    intervals: dict[str, Interval]

    def to_dict(self) -> dict[str, Any]:
        intervals = {name: one.to_dict() for name, one in self.intervals.items()}
        return {"probability": self.probability, "intervals": intervals}


@dataclass(frozen=True)
class PosteriorSummary:
    """Intervals of all quantities (units in `UNITS`) and the separate modes, likeliest first.

    Of one mode only, `modes` is empty.
    """

    intervals: dict[str, Interval]
    modes: tuple[Mode, ...]

    def to_dict(self) -> dict[str, Any]:
        return {
            "schema": SUMMARY_SCHEMA,
            "units": {name: UNITS[name] for name in self.intervals},
            "intervals": {name: one.to_dict() for name, one in self.intervals.items()},
            "modes": [mode.to_dict() for mode in self.modes],
        }


def interval(values: FloatArray, weight: FloatArray) -> Interval:
    """Weighted median and central intervals; NaN values are left out."""
    low95, low68, median, high68, high95 = map(float, quantiles(values, weight, SHARES))
    return Interval(median, low68, high68, low95, high95)


def folded_angles(posterior: Posterior) -> tuple[FloatArray, FloatArray]:
    """node and omega (degrees) that run on where the circle ends.

    A sky path does not tell (node, omega) from (node + 180, omega + 180). Each sample is given as
    the one of the two, and with the whole turn, that is nearest to the others, so that no peak is
    cut in two.
    """
    p = posterior
    node = around(p.node, circular_mean(p.node, p.weight, 180.0), 180.0)
    omega = p.omega + np.where(np.rint((node - p.node) / 180.0) % 2.0 == 1.0, 180.0, 0.0)
    return node, around(omega, circular_mean(omega, p.weight))


def quantities(posterior: Posterior, after: float | None = None) -> dict[str, FloatArray]:
    """Every quantity of `UNITS` for each sample, shape (m,); the turning points with `after`."""
    p = posterior
    node, omega = folded_angles(p)
    found = {"P": p.P, "T": p.T, "e": p.e, "a": p.a, "i": p.i, "node": node, "omega": omega}
    found["a^3/P^2"] = p.axis_cubed_over_period_squared
    if p.mass is not None:
        found["mass"] = p.mass
    if after is not None:
        found["next periastron"] = p.T + np.ceil((after - p.T) / p.P) * p.P
    return found


def summary(posterior: Posterior, after: float) -> PosteriorSummary:
    """Medians and intervals of the elements and of what follows from them.

    Parameters
    ----------
    posterior : Posterior
    after : float
        Julian year from which the next periastron and extremes are counted.
    """
    p = posterior
    columns = quantities(p, after)
    found = {name: interval(values, p.weight) for name, values in columns.items()}
    rows = p.equal_rows(min(MOST_ORBITS, max(len(p), 1)))
    even = np.ones(rows.size)
    found |= {name: interval(v, even) for name, v in extremes(p, rows, after).items()}
    modes = []
    for number in range(int(p.mode.max(initial=0)) + 1):
        inside = p.mode == number
        odds = float(p.weight[inside].sum())
        weight = p.weight[inside]
        part = {name: interval(columns[name][inside], weight) for name in OF_MODES}
        modes.append(Mode(odds, part))
    return PosteriorSummary(found, tuple(modes) if len(modes) > 1 else ())


def extremes(posterior: Posterior, rows: ArrayLike, after: float) -> dict[str, FloatArray]:
    """Closest and widest separation of the samples `rows`, and when each comes next."""
    p = posterior
    anomaly = TWO_PI * np.arange(PLACES) / PLACES
    e, P = p.e[rows][:, None], p.P[rows]
    square = np.abs(_places(p, rows, *unit_ellipse(anomaly, e))) ** 2
    found = {}
    for name, sign in (("closest", 1.0), ("widest", -1.0)):
        k = np.argmin(sign * square, axis=1)
        left, here, right = (
            np.take_along_axis(square, ((k + shift) % PLACES)[:, None], axis=1)[:, 0]
            for shift in (-1, 0, 1)
        )
        bend = left - 2.0 * here + right
        # the top of the parabola through three places
        step = np.where(bend * sign > 0.0, 0.5 * (left - right) / np.where(bend == 0, 1, bend), 0.0)
        E = anomaly[k] + np.clip(step, -1.0, 1.0) * TWO_PI / PLACES
        z = _places(p, rows, *unit_ellipse(E[:, None], e))[:, 0]
        epoch = p.T[rows] + (E - p.e[rows] * np.sin(E)) / TWO_PI * P
        found[name] = np.abs(z)
        found[f"next {name}"] = epoch + np.ceil((after - epoch) / P) * P
    return found


def _places(p: Posterior, rows: ArrayLike, X: FloatArray, Y: FloatArray) -> np.ndarray:
    w = X + 1j * Y
    return p.alpha[rows][:, None] * w + p.beta[rows][:, None] * np.conj(w)


@dataclass(frozen=True)
class SampledEphemeris:
    """Positions at other times with intervals.

    Attributes
    ----------
    epoch : ndarray, shape (n,), Julian years.
    theta : ndarray, shape (n, 5)
        Degrees at `SHARES`: 2.5, 16, 50, 84 and 97.5 per cent, the median in [0, 360) and the
        others counted from it, so that they may lie beyond; taken on the circle.
    rho : ndarray, shape (n, 5), arcsec.
    """

    epoch: FloatArray
    theta: FloatArray
    rho: FloatArray

    def rows(self) -> Iterator[dict[str, Any]]:
        for k, epoch in enumerate(self.epoch.tolist()):
            yield {"epoch": epoch, "theta": self.theta[k].tolist(), "rho": self.rho[k].tolist()}

    def to_dict(self) -> dict[str, Any]:
        """The JSON of ``relorbit ephemeris --from-samples --json``."""
        return {"schema": SCHEMA, "shares": list(SHARES), "rows": list(self.rows())}


def sampled_ephemeris(
    posterior: Posterior, epochs: ArrayLike, size: int = 10_000
) -> SampledEphemeris:
    """Medians and intervals of theta and rho at epochs (Julian years, Quantity or Time).

    `size` samples, drawn in proportion to weight, are followed.
    """
    epochs = np.atleast_1d(julian_years(epochs))
    rows = posterior.equal_rows(size)
    theta, rho = np.empty((2, epochs.size, len(SHARES)))
    step = max(1, VALUES // size)
    for start in range(0, epochs.size, step):
        part = slice(start, start + step)
        z = posterior.places(rows, epochs[part])
        rho[part] = np.quantile(np.abs(z), SHARES, axis=0).T
        theta[part] = _on_the_circle(np.degrees(np.angle(z)))
    return SampledEphemeris(epochs, theta, rho)


def _on_the_circle(angles: FloatArray) -> FloatArray:
    """Quantiles of angles (degrees), shape (m, n), cut opposite to their median: (n, 5)."""
    centre = np.degrees(np.angle(np.exp(1j * np.radians(angles)).mean(axis=0)))
    for _ in range(3):
        # the median about a centre becomes the next centre
        near = angles - 360.0 * np.rint((angles - centre) / 360.0)
        centre = np.median(near, axis=0)
    found = np.quantile(near, SHARES, axis=0)
    middle = found[2] % 360.0
    found += np.where(middle >= 360.0, 0.0, middle) - found[2]
    return found.T
