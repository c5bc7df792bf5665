"""How far measures lie from where an orbit, with its errors, says they should."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import chdtrc

from relorbit.orbit.elements import Elements, complex_position, polar
from relorbit.orbit.kepler import FloatArray
from relorbit.orbit.partials import polar_derivatives
from relorbit.orbit.regular import Uncertainty, position_and_jacobian, regular_from_elements

WORTH_A_REFIT = 0.05  # probability below which errors to first order are not trusted
# rows of the measures -> chi2, values, probability
Refit = Callable[[FloatArray], tuple[float, int, float]]
# row of the measures -> how far off its theta and its rho are alone, in sigma, 0 or more
Profile = Callable[[int], tuple[float, float]]
MOST_PROFILES = 100  # measures, those farthest off, that are told by profiles
ON_THE_SPOT = 0.1  # sigma: so near the prediction no side of it is measured
WIDEST_ANGLE = 180.0  # degrees: an angle known worse than this is not known


@dataclass(frozen=True)
class Deviations:
    """Measures against predictions, arrays of shape (n,) but for `covariance`.

    Attributes
    ----------
    theta, rho : predicted, degrees and arcsec.
    theta_sigma, rho_sigma : error of the prediction; 0 where the orbit brings none; by profiles
        that on the side where the measure lies.
    d_theta, d_rho : observed minus predicted; NaN where not measured.
    theta_in_sigma, rho_in_sigma : over the errors of prediction and measure together.
    chi2 : of each measure, the correlation of theta and rho in the prediction included.
    values : how many values each measure has.
    probability : of so large a chi2 by chance.
    gap : ndarray, shape (2 n,)
        O-C of theta (radians), then rho; NaN where not measured.
    covariance : ndarray, shape (2 n, 2 n)
        Of `gap`: the measures' errors and the orbit's, which all of them share.
    own_variance : ndarray, shape (2 n,)
        The measures' part of its diagonal.
    refit : callable or None
        chi2, values and probability of some rows by a refit (see `relorbit.derive.surprise`).
    """

    theta: FloatArray
    rho: FloatArray
    theta_sigma: FloatArray
    rho_sigma: FloatArray
    d_theta: FloatArray
    d_rho: FloatArray
    theta_in_sigma: FloatArray
    rho_in_sigma: FloatArray
    chi2: FloatArray
    values: FloatArray
    probability: FloatArray
    gap: FloatArray
    covariance: FloatArray
    own_variance: FloatArray
    refit: Refit | None = None

    def with_profiles(self, profile: Profile) -> Deviations:
        """The same, errors of predictions by profiles of the likelihood instead of first order.

        How far off a value is, is then the root of the rise of chi2 (see
        `relorbit.derive.surprise`); the error of the prediction is what that leaves when the
        measure's own is taken off.
        """
        count = self.theta.size
        sigma = np.stack([np.radians(self.theta_sigma), self.rho_sigma])
        standard = np.stack([self.theta_in_sigma, self.rho_in_sigma])
        gap = self.gap.reshape(2, count)
        own = self.own_variance.reshape(2, count)
        size = np.nan_to_num(np.abs(standard)).max(axis=0)
        for k in np.argsort(-size, kind="stable")[:MOST_PROFILES]:
            z = np.array(profile(int(k)))
            for kind in (0, 1):
                if not z[kind] > ON_THE_SPOT or not np.isfinite(gap[kind, k]):
                    continue
                variance = (gap[kind, k] / z[kind]) ** 2 - own[kind, k]
                sigma[kind, k] = np.sqrt(max(variance, 0.0))
                standard[kind, k] = gap[kind, k] / np.sqrt(max(variance, 0.0) + own[kind, k])
        return replace(
            self, theta_sigma=np.minimum(np.degrees(sigma[0]), WIDEST_ANGLE), rho_sigma=sigma[1],
            theta_in_sigma=standard[0], rho_in_sigma=standard[1],
        )  # fmt: skip

    def with_refits(self, refit: Refit) -> Deviations:
        """The same, what looks surprising tested again by refits."""
        chi2, probability = self.chi2.copy(), self.probability.copy()
        for k in np.flatnonzero(probability < WORTH_A_REFIT):
            again = refit(np.array([k]))
            if again[2] > probability[k]:
                chi2[k], probability[k] = again[0], again[2]
        return replace(self, chi2=chi2, probability=probability, refit=refit)

    def together(self, rows: FloatArray | None = None) -> tuple[float, int, float]:
        """chi2, values and probability of some measures as one set (by default all)."""
        found = self._linear(rows)
        if self.refit is None or found[2] >= WORTH_A_REFIT:
            return found
        again = self.refit(np.arange(self.theta.size) if rows is None else rows)
        return again if again[2] > found[2] else found

    def _linear(self, rows: FloatArray | None) -> tuple[float, int, float]:
        count = self.theta.size
        rows = np.arange(count) if rows is None else np.asarray(rows, dtype=int)
        slots = np.concatenate([rows, rows + count])
        slots = slots[np.isfinite(self.gap[slots])]
        return _chi2(self.gap[slots], self.covariance[np.ix_(slots, slots)])


def deviations(
    elements: Elements,
    uncertainty: Uncertainty | None,
    epoch: FloatArray,
    theta: FloatArray,
    rho: FloatArray,
    theta_err: FloatArray,
    rho_err: FloatArray,
) -> Deviations:
    """O-C of measures that were not fitted, in the light of all errors.

    Parameters
    ----------
    elements : Elements
    uncertainty : Uncertainty or None
    epoch, theta, rho, theta_err, rho_err : ndarray, shape (n,)
        Julian years, degrees, arcsec; NaN where missing.

    Notes
    -----
    Errors of the orbit are carried to first order.
    """
    count = epoch.size
    z = complex_position(elements, epoch)
    predicted_theta, predicted_rho = polar(z)
    orbit = np.zeros((2 * count, 2 * count))
    if uncertainty is not None:
        t0 = uncertainty.reference_epoch
        z, dz = position_and_jacobian(regular_from_elements(elements, t0), t0, epoch)
        J = np.concatenate(polar_derivatives(z, dz), axis=1)
        orbit = J.T @ uncertainty.covariance @ J
        # rounding may leave the variance of what is hardly known a little below 0
        np.fill_diagonal(orbit, np.maximum(np.diag(orbit), 0.0))
    d_theta = np.remainder(theta - predicted_theta + 180.0, 360.0) - 180.0
    gap = np.concatenate([np.radians(d_theta), rho - predicted_rho])
    own = np.concatenate([np.radians(theta_err), rho_err])
    own_variance = np.nan_to_num(own) ** 2
    covariance = orbit + np.diag(own_variance)
    sigma, total = np.sqrt(np.diag(orbit)), np.sqrt(np.diag(covariance))
    with np.errstate(divide="ignore", invalid="ignore"):
        standard = gap / total
    each = []
    for k in range(count):
        slots = np.array([k, k + count])
        slots = slots[np.isfinite(gap[slots])]
        each.append(_chi2(gap[slots], covariance[np.ix_(slots, slots)]))
    chi2, values, probability = (np.array(part, dtype=float) for part in zip(*each, strict=True))
    return Deviations(
        predicted_theta, predicted_rho,
        np.minimum(np.degrees(sigma[:count]), WIDEST_ANGLE), sigma[count:],
        d_theta, rho - predicted_rho, standard[:count], standard[count:],
        chi2, values, probability, gap, covariance, own_variance,
    )  # fmt: skip


def _chi2(gap: FloatArray, covariance: FloatArray) -> tuple[float, int, float]:
    if not gap.size:
        return 0.0, 0, 1.0
    scale = 1.0 / np.sqrt(np.diag(covariance))
    scaled = scale * gap
    value = float(scaled @ np.linalg.solve(covariance * np.outer(scale, scale), scaled))
    return value, gap.size, float(chdtrc(gap.size, max(value, 0.0)))
