"""What is sampled: the likelihood in theta and rho, the Gaussian that comes near it, the prior."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.kepler import TWO_PI, FloatArray
from relorbit.solve.linear import SkyData
from relorbit.solve.observations import Observations
from relorbit.solve.prior import Prior

REACH = 3.0  # median separations: constants that the measures leave free are drawn within this


@dataclass(frozen=True)
class Target:
    """What is sampled: measures, their Gaussian in x and y, and the prior. Arrays of shape (n,).

    Attributes
    ----------
    time : years from the reference epoch.
    cosine, sine : of theta as measured.
    rho, per_theta, per_rho : as in `Observations`.
    weights : ndarray, shape (n, 3), w_xx, w_xy, w_yy of the Gaussian, 1/arcsec^2.
    pulls : ndarray, shape (n, 2), W z of the Gaussian.
    ridge : float, 1/arcsec^2, precision added where the measures leave constants free.
    """

    reference_epoch: float
    time: FloatArray
    cosine: FloatArray
    sine: FloatArray
    rho: FloatArray
    per_theta: FloatArray
    per_rho: FloatArray
    weights: FloatArray
    pulls: FloatArray
    ridge: float
    prior: Prior
    parallax: tuple[float, float] | None


def target_of(
    observations: Observations,
    z: NDArray[np.complex128],
    reference_epoch: float,
    prior: Prior,
    parallax: tuple[float, float] | None = None,
) -> Target:
    """The target for measures, the Gaussian taken at the places z of an orbit that fits.

    Parameters
    ----------
    observations : Observations
    z : complex ndarray, shape (n,)
        Where an orbit that fits has the companion, arcsec: there the likelihood is linearised,
        which makes it a better Gaussian than the measured places do.
    reference_epoch : float
    prior : Prior
        With its ranges spelled out.
    parallax : (float, float), optional
        Milliarcseconds and standard deviation (0 where unknown).
    """
    o = observations
    data = linearised(o, z)
    x, y = data.z.real, data.z.imag
    pulls = data.w_xx * x + data.w_xy * y, data.w_xy * x + data.w_yy * y
    ridge = 1.0 / (REACH * float(np.median(np.abs(z)))) ** 2
    if prior.constants == "flat":
        ridge *= 1e-6  # nothing holds the constants then but the range of axes
    return Target(
        reference_epoch, o.epoch - reference_epoch, np.cos(o.theta), np.sin(o.theta), o.rho,
        o.per_theta, o.per_rho, np.stack([data.w_xx, data.w_xy, data.w_yy], axis=-1),
        np.stack(pulls, axis=-1), ridge, prior, parallax,
    )  # fmt: skip


def linearised(observations: Observations, z: NDArray[np.complex128]) -> SkyData:
    """The Gaussian in x and y that the likelihood in theta and rho is near the places z."""
    o = observations
    rho = np.maximum(np.abs(z), 1e-12)
    unit = z / rho
    gap = o.theta - np.angle(z)
    gap -= TWO_PI * np.rint(gap / TWO_PI)
    across = np.where(o.per_theta > 0.0, rho * gap, 0.0)
    along = np.where(o.per_rho > 0.0, o.rho - rho, 0.0)
    # a pair closer than its own error has no direction: see `linear.sky_data`
    floor = np.where(o.per_rho > 0.0, 1.0 / np.where(o.per_rho > 0.0, o.per_rho, 1.0), 1e-9)
    w_across, w_along = (o.per_theta / np.maximum(rho, floor)) ** 2, o.per_rho**2
    c, s = unit.real, unit.imag
    return SkyData(
        o.epoch,
        z + unit * (along + 1j * across),
        w_along * c * c + w_across * s * s,
        (w_along - w_across) * c * s,
        w_along * s * s + w_across * c * c,
    )
