"""Campbell and Thiele-Innes elements, conversion both ways, positions.

The complex number z = x + i y stands for the sky plane: x = rho cos theta to the north,
y = rho sin theta to the east. With w = X + i Y on the unit ellipse, the projection of a tilted
orbit is z = alpha w + beta conj(w), where

    alpha = a (1 + cos i)/2 exp(i (omega + node)) = ((A + G) + i (B - F)) / 2
    beta  = a (1 - cos i)/2 exp(i (node - omega)) = ((A - G) + i (B + F)) / 2
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_anomaly, unit_ellipse

NAMES = ("P", "T", "e", "a", "i", "node", "omega")
ANGLES = ("node", "omega")
# |alpha| or |beta| this much smaller than the other is rounding, and the orbit is face-on
FACE_ON = 4.0 * np.finfo(float).eps
_UNITS = {"P": "yr", "a": "arcsec", "i": "deg", "node": "deg", "omega": "deg", "e": ""}


@dataclass(frozen=True)
class ThieleInnes:
    """The constants of Thiele (1883) and Innes (1926): x = A X + F Y, y = B X + G Y (arcsec)."""

    A: float
    B: float
    F: float
    G: float

    def to_dict(self) -> dict[str, float]:
        return {"A": self.A, "B": self.B, "F": self.F, "G": self.G}


@dataclass(frozen=True)
class Elements:
    """Campbell elements of a relative orbit, equinox J2000.

    Attributes
    ----------
    P : float
        Period, Julian years of 365.25 days, above 0.
    T : float
        A periastron passage, Julian year (TT).
    e : float
        Eccentricity, 0 <= e < 1.
    a : float
        Semimajor axis, arcsec, above 0.
    i : float
        Inclination, degrees in [0, 180]; below 90 when theta increases.
    node : float
        Position angle of the node, degrees; stored in [0, 360).
    omega : float
        Argument of periastron of the secondary about the primary, degrees; stored in [0, 360).

    Every field takes a float or an `astropy.units.Quantity`. A value outside its range raises
    ValueError.
    """

    P: float
    T: float
    e: float
    a: float
    i: float
    node: float
    omega: float

    def __post_init__(self) -> None:
        for name in NAMES:
            value = _plain(getattr(self, name), name)
            object.__setattr__(self, name, float(bearing(value)) if name in ANGLES else value)
        for name, good, rule in (
            ("P", self.P > 0.0, "above 0"),
            ("e", 0.0 <= self.e < 1.0, "in 0 <= e < 1"),
            ("a", self.a > 0.0, "above 0"),
            ("i", 0.0 <= self.i <= 180.0, "in 0 to 180 degrees"),
        ):
            if not good:
                raise ValueError(f"{name} must be {rule}, not {getattr(self, name):g}")

    def folded(self) -> Elements:
        """The same sky path with the node in [0, 180)."""
        if self.node < 180.0:
            return self
        return replace(self, node=self.node - 180.0, omega=self.omega + 180.0)

    def near(self, epoch: float) -> Elements:
        """The same orbit with T the passage nearest to `epoch` (Julian year)."""
        return replace(self, T=self.T + self.P * np.rint((epoch - self.T) / self.P))

    def to_dict(self) -> dict[str, float]:
        return {name: getattr(self, name) for name in NAMES}


def _plain(value: Any, name: str) -> float:
    """A float in the unit of element `name`; a Quantity or a Time is converted."""
    if name == "T" and hasattr(value, "jyear"):
        value = value.tt.jyear
    elif hasattr(value, "to_value"):
        value = value.to_value(_UNITS.get(name, "yr"))
    number = float(value)
    if not np.isfinite(number):
        raise ValueError(f"{name} must be a finite number, not {number}")
    return number


def bearing(degrees: ArrayLike) -> FloatArray:
    """Angles brought to [0, 360) degrees."""
    angle = np.remainder(degrees, 360.0)
    # the remainder of a tiny negative angle rounds to 360 itself
    return np.where(angle >= 360.0, 0.0, angle)


def projection(elements: Elements) -> tuple[complex, complex]:
    """The coefficients alpha and beta (arcsec) of z = alpha w + beta conj(w)."""
    i, node, omega = np.radians([elements.i, elements.node, elements.omega])
    # cos^2(i/2) and sin^2(i/2), which keep i near 0 and near 180
    alpha = elements.a * np.cos(0.5 * i) ** 2 * np.exp(1j * (omega + node))
    beta = elements.a * np.sin(0.5 * i) ** 2 * np.exp(1j * (node - omega))
    if elements.i == 180.0:
        alpha = 0.0
    return complex(alpha), complex(beta)


def thiele_innes_from_campbell(elements: Elements) -> ThieleInnes:
    """Thiele-Innes constants of an orbit (Binnendijk, Properties of Double Stars, 1960, ch. 2,
    from memory)."""
    alpha, beta = projection(elements)
    return ThieleInnes(*constants_from_projection(alpha, beta))


def constants_from_projection(alpha: Any, beta: Any) -> tuple[Any, Any, Any, Any]:
    """A, B, F, G from alpha and beta (complex scalars or arrays)."""
    alpha, beta = np.asarray(alpha), np.asarray(beta)
    return (
        alpha.real + beta.real,
        alpha.imag + beta.imag,
        beta.imag - alpha.imag,
        alpha.real - beta.real,
    )


def projection_from_constants(A: Any, B: Any, F: Any, G: Any) -> tuple[Any, Any]:
    """alpha and beta from A, B, F, G (scalars or arrays)."""
    return 0.5 * ((A + G) + 1j * (B - F)), 0.5 * ((A - G) + 1j * (B + F))


def geometry_from_projection(alpha: Any, beta: Any) -> tuple[Any, Any, Any, Any]:
    """a (arcsec), i, node in [0, 180) and omega in [0, 360) (degrees) from alpha and beta.

    Complex scalars or arrays. Face-on orbits, where only the sum (i = 0) or the difference
    (i = 180) of node and omega exists, are given with node = 0. Constants held in double
    precision cannot tell an inclination from 0 (or 180) within 3e-8 rad, so such an orbit is
    given as exactly face-on.
    """
    alpha, beta = np.asarray(alpha, dtype=complex), np.asarray(beta, dtype=complex)
    p, q = np.abs(alpha), np.abs(beta)
    prograde, retrograde = q <= FACE_ON * p, p <= FACE_ON * q
    i = np.degrees(2.0 * np.arctan2(np.sqrt(q), np.sqrt(p)))
    i = np.where(prograde, 0.0, np.where(retrograde, 180.0, i))
    total, difference = np.angle(alpha), np.angle(beta)
    node = np.where(prograde | retrograde, 0.0, 0.5 * (total + difference))
    omega = np.where(retrograde, -difference, total - node)
    node, omega = bearing(np.degrees(node)), np.degrees(omega)
    other = node >= 180.0
    return p + q, i, np.where(other, node - 180.0, node), bearing(omega + 180.0 * other)


def campbell_from_thiele_innes(constants: ThieleInnes, P: float, T: float, e: float) -> Elements:
    """Campbell elements from A, B, F, G and P, T, e.

    The node is given in [0, 180): the sky path does not tell which node is the ascending one.
    Raises ValueError when all four constants are zero.
    """
    alpha, beta = projection_from_constants(constants.A, constants.B, constants.F, constants.G)
    return Elements(P, T, e, *map(float, geometry_from_projection(alpha, beta)))


def complex_position(elements: Elements, epochs: ArrayLike) -> NDArray[np.complex128]:
    """z = x + i y (arcsec; x north, y east) at `epochs` (Julian years, any shape)."""
    epochs = np.asarray(epochs, dtype=float)
    mean = TWO_PI * np.remainder((epochs - elements.T) / elements.P, 1.0)
    X, Y = unit_ellipse(eccentric_anomaly(mean, elements.e), elements.e)
    alpha, beta = projection(elements)
    w = X + 1j * Y
    return alpha * w + beta * np.conj(w)


def polar(z: NDArray[np.complex128]) -> tuple[FloatArray, FloatArray]:
    """theta (degrees in [0, 360)) and rho (arcsec) of z = x + i y."""
    return bearing(np.degrees(np.angle(z))), np.abs(z)


def positions(elements: Elements, epochs: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Position angle and separation at given epochs.

    Parameters
    ----------
    elements : Elements
    epochs : array_like
        Julian years (TT), any shape.

    Returns
    -------
    theta, rho : ndarray
        Degrees in [0, 360) from north through east, and arcsec, of the shape of `epochs`.
    """
    return polar(complex_position(elements, epochs))
