"""Uniform straight motion: the rectilinear elements of an optical pair."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from relorbit.orbit.elements import polar
from relorbit.orbit.kepler import FloatArray


@dataclass(frozen=True)
class RectilinearElements:
    """Straight motion by its closest point; every value with its standard deviation.

    Attributes
    ----------
    closest_theta, closest_rho : float
        Degrees and arcsec at the closest point.
    closest_epoch : float
        Julian year.
    direction : float
        Position angle that the motion points to, degrees in [0, 360).
    motion : float
        arcsec a year.
    sigma : dict
        One standard deviation of each, by name; None where the motion is zero.
    """

    closest_theta: float
    closest_rho: float
    closest_epoch: float
    direction: float
    motion: float
    sigma: dict[str, float | None]

    def to_dict(self) -> dict[str, Any]:
        return dict(vars(self))


NAMES = ("closest_theta", "closest_rho", "closest_epoch", "direction", "motion")


def straight_position(
    epoch: float, place: complex, motion: complex, epochs: ArrayLike
) -> NDArray[np.complex128]:
    """z = x + i y (arcsec) at epochs, of a place at `epoch` and a motion a year."""
    return place + motion * (np.asarray(epochs, dtype=float) - epoch)


def straight_sigma(
    epoch: float, covariance: FloatArray, epochs: ArrayLike
) -> FloatArray:
    """Error of the predicted place (arcsec, root of the mean square of x and y) at epochs.

    `covariance` is that of (x, x motion, y, y motion), shape (4, 4), at `epoch`.
    """
    time = np.asarray(epochs, dtype=float) - epoch
    c = covariance
    both = [c[k, k] + 2.0 * time * c[k, k + 1] + time**2 * c[k + 1, k + 1] for k in (0, 2)]
    return np.sqrt(0.5 * (both[0] + both[1]))


def rectilinear_elements(
    epoch: float, place: complex, motion: complex, covariance: FloatArray
) -> RectilinearElements:
    """Rectilinear elements and their errors to first order.

    Parameters
    ----------
    epoch : float
        Julian year of the place.
    place, motion : complex
        x + i y, arcsec and arcsec a year.
    covariance : ndarray, shape (4, 4)
        Of (x, x motion, y, y motion).

    Raises
    ------
    ValueError
        When the motion is zero: there is then no closest point.

    Notes
    -----
    With the unit vector n of the motion, the closest point is the part of the place across n, and
    its epoch lies (place . n)/motion before `epoch`.
    """
    speed = abs(motion)
    if not speed > 0.0:
        raise ValueError("nothing moves: there is no closest point")
    n = motion / speed
    # the place in axes along and across the motion
    along, across = (place * np.conj(n)).real, (place * np.conj(n)).imag
    z = 1j * across * n
    theta, rho = polar(np.array([z]))
    # derivatives by (x, vx, y, vy): turning the motion by d angle turns the axes
    d_place = np.array([1.0, 0.0, 1j, 0.0]) * np.conj(n)
    d_motion = np.array([0.0, 1.0, 0.0, 1j]) * np.conj(n)
    d_angle, d_speed = d_motion.imag / speed, d_motion.real
    d_along = d_place.real + across * d_angle
    d_across = d_place.imag - along * d_angle
    d_epoch = -(d_along - along / speed * d_speed) / speed
    gradients = {
        "closest_theta": np.degrees(d_angle),
        "closest_rho": np.sign(across) * d_across,
        "closest_epoch": d_epoch,
        "direction": np.degrees(d_angle),
        "motion": d_speed,
    }
    sigma = {name: float(np.sqrt(max(g @ covariance @ g, 0.0))) for name, g in gradients.items()}
    return RectilinearElements(
        float(theta[0]), float(rho[0]), float(epoch - along / speed),
        float(np.degrees(np.angle(motion)) % 360.0), float(speed), dict(sigma),
    )  # fmt: skip
