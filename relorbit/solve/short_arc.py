"""What a short arc does say: motion, acceleration, a^3/P^2, though not the elements."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.kepler import FloatArray
from relorbit.solve.limits import straight_motion
from relorbit.solve.linear import solve_scaled
from relorbit.solve.measured import measured
from relorbit.solve.observations import Observations
from relorbit.solve.sample import sample
from relorbit.solve.target import linearised
from relorbit.solve.weights import quantiles

SAMPLES = 400
SEEN = 11.8  # fall of chi2 for two unknowns that chance brings about in 0.3 % of cases
EXPLAINED = ("straight-line", "period-unbounded")  # reasons that this has an answer to


@dataclass(frozen=True)
class CurvedMotion:
    """x and y as parabolas in time: place, motion and acceleration at mid-epoch.

    Attributes
    ----------
    epoch : float, Julian year.
    acceleration : complex, x + i y, arcsec a year^2.
    acceleration_sigma : float, of each component, the mean of the two.
    fall : float, by how much chi2 is below that of the straight line (two unknowns).
    """

    epoch: float
    acceleration: complex
    acceleration_sigma: float
    fall: float

    @property
    def seen(self) -> bool:
        """Whether chance would hardly do as much."""
        return self.fall > SEEN


def curved_motion(observations: Observations) -> CurvedMotion:
    """Least squares of parabolas on x and y, the likelihood linearised at the best places."""
    o = observations
    t0 = o.mean_epoch
    time = o.epoch - t0
    chi2, p, normal = {}, None, None
    for unknowns in (2, 3):
        basis = np.stack([np.ones_like(time), time, 0.5 * time**2][:unknowns])
        z = o.sky_rho * np.exp(1j * o.theta)
        for _ in range(6):
            p, normal, chi2[unknowns] = _fit(o, z, basis)
            z = (p[:unknowns] + 1j * p[unknowns:]) @ basis
    covariance = np.linalg.pinv(normal, hermitian=True)
    sigma = np.sqrt(0.5 * (covariance[2, 2] + covariance[5, 5]))
    return CurvedMotion(t0, complex(p[2], p[5]), float(sigma), float(chi2[2] - chi2[3]))


def _fit(
    o: Observations, z: np.ndarray, basis: FloatArray
) -> tuple[FloatArray, FloatArray, float]:
    data = linearised(o, z)
    xx, xy, yy = (basis * w @ basis.T for w in (data.w_xx, data.w_xy, data.w_yy))
    normal = np.block([[xx, xy], [xy, yy]])
    x, y = data.z.real, data.z.imag
    right = np.concatenate(
        [basis @ (data.w_xx * x + data.w_xy * y), basis @ (data.w_xy * x + data.w_yy * y)]
    )
    p = solve_scaled(normal, right)
    return p, normal, data.constant - float(p @ right)


def short_arc_answer(pair: Pair, error: Undetermined, **options: Any) -> Undetermined:
    """The same refusal, with all that a short arc does say.

    Parameters
    ----------
    pair : Pair
    error : Undetermined
        What `solve` raised; one with another cause comes back as it is.
    **options
        ``epoch_range``, ``errors``, ``group_by`` and ``offsets`` as given to `solve`.
    """
    if error.code not in EXPLAINED:
        return error
    try:
        posterior = sample(pair, SAMPLES, **options)
        observations = posterior.observations
    except Undetermined:
        posterior, observations = None, measured(pair, **options).observations
    curve, line = curved_motion(observations), straight_motion(observations)
    known = error.known | line.known() | {
        "acceleration_north": curve.acceleration.real,
        "acceleration_east": curve.acceleration.imag,
        "acceleration_sigma": curve.acceleration_sigma,
        "acceleration_seen": curve.seen,
    }
    said = [error.reason, line.text()]
    if curve.seen:
        said.append(f"Acceleration {abs(curve.acceleration):.2g} +/- "
                    f"{curve.acceleration_sigma:.1g} arcsec/yr^2.")  # fmt: skip
    if posterior is not None:
        values = posterior.axis_cubed_over_period_squared
        low, middle, high = map(float, quantiles(values, posterior.weight, (0.025, 0.5, 0.975)))
        known["axis_cubed_over_period_squared"] = {"median": middle, "low95": low, "high95": high}
        said.append(f"a^3/P^2 is {low:.2g} to {high:.2g} arcsec^3/yr^2 (95 %).")
    said.append("All orbits that fit, and what they agree on: relorbit sample.")
    return Undetermined(" ".join(said), code=error.code, known=known)
