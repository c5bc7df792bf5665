"""The samples of the orbits that fit: the result of `sample`."""

from __future__ import annotations

from dataclasses import dataclass, field
from os import PathLike
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.elements import NAMES, Elements
from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_anomaly, unit_ellipse
from relorbit.orbit.third_law import MASS_FACTOR
from relorbit.solve.observations import Observations
from relorbit.solve.prior import Prior
from relorbit.solve.solution import Notice
from relorbit.solve.weighing import NoiseGroup
from relorbit.solve.weights import resampled

if TYPE_CHECKING:
    from astropy.table import Table


@dataclass(frozen=True)
class Posterior:
    """Weighted independent samples of the orbit; arrays have shape (m,).

    Attributes
    ----------
    pair : str
    P, T, e, a, i, node, omega : ndarrays
        Julian years, Julian year, arcsec, degrees. T is the passage nearest to the reference
        epoch, or the next one where that keeps all samples together; node in [0, 180).
    alpha, beta : complex ndarrays
        The constants, arcsec: z = alpha w + beta conj(w), see `relorbit.orbit.elements`.
    weight : ndarray, sum 1.
    chi2 : ndarray
    parallax : ndarray or None, mas, drawn within its error.
    mode : ndarray of int
        Number of the separate part of the posterior that a sample belongs to, 0 the likeliest.
    effective_size : float
        Independent samples of equal weight that are worth as much.
    pareto_k : float
        Shape of the tail of the weights: below 0.5 good, above 0.7 not to be trusted.
    log_evidence : float
        ln of the marginal likelihood, without the constant factor of the likelihood.
    drawn : int
        Draws made for these samples.
    prior : Prior
        With its ranges spelled out.
    reference_epoch : float
    size, seed : int, as asked for.
    error_scale : float
        The factor by which the errors of the measures were multiplied.
    observations : Observations
        As they were taken, with these errors.
    errors : "as-given" or "from-residuals"
    noise : tuple of NoiseGroup
        What each group of measures is worth; empty for errors as given.
    warnings : tuple of Notice
    """

    pair: str
    P: FloatArray
    T: FloatArray
    e: FloatArray
    a: FloatArray
    i: FloatArray
    node: FloatArray
    omega: FloatArray
    alpha: NDArray[np.complex128]
    beta: NDArray[np.complex128]
    weight: FloatArray
    chi2: FloatArray
    parallax: FloatArray | None
    mode: NDArray[np.intp]
    effective_size: float
    pareto_k: float
    log_evidence: float
    drawn: int
    prior: Prior
    reference_epoch: float
    size: int
    seed: int
    observations: Observations
    error_scale: float = 1.0
    parallax_mas: float | None = None
    parallax_err_mas: float | None = None
    errors: str = "as-given"
    noise: tuple[NoiseGroup, ...] = ()
    warnings: tuple[Notice, ...] = field(default=())

    def __len__(self) -> int:
        return self.P.size

    @property
    def mass(self) -> FloatArray | None:
        """Total mass of each sample, solar masses; None without a parallax."""
        if self.parallax is None:
            return None
        return MASS_FACTOR * (1000.0 * self.a / self.parallax) ** 3 / self.P**2

    @property
    def axis_cubed_over_period_squared(self) -> FloatArray:
        """a^3/P^2 of each sample, arcsec^3/yr^2."""
        return self.a**3 / self.P**2

    def orbit(self, row: int) -> Elements:
        """One sample as elements."""
        return Elements(*(float(getattr(self, name)[row]) for name in NAMES))

    @property
    def best(self) -> Elements:
        """The sample of least chi2."""
        return self.orbit(int(np.argmin(self.chi2)))

    def equal_rows(self, size: int, seed: int = 0) -> NDArray[np.intp]:
        """Rows drawn in proportion to weight: with them every sample counts the same."""
        return resampled(self.weight, size, np.random.default_rng(seed))

    def places(self, rows: NDArray[np.intp], epochs: FloatArray) -> NDArray[np.complex128]:
        """z = x + i y (arcsec) of the samples `rows` at epochs, shape (rows, epochs)."""
        e = self.e[rows][:, None]
        turns = (epochs - self.T[rows][:, None]) / self.P[rows][:, None]
        X, Y = unit_ellipse(eccentric_anomaly(TWO_PI * (turns - np.rint(turns)), e), e)
        w = X + 1j * Y
        return self.alpha[rows][:, None] * w + self.beta[rows][:, None] * np.conj(w)

    def to_table(self) -> Table:
        """An astropy Table: P, T, e, a, i, node, omega, mass (with a parallax), weight."""
        from relorbit.solve.saved_samples import table_of

        return table_of(self)

    def write(self, path: str | PathLike[str]) -> None:
        """Save as ECSV or FITS by the name's suffix; see `relorbit.solve.saved_samples`."""
        from relorbit.solve.saved_samples import write_samples

        write_samples(self, path)
