"""Invented pairs, with the solution a fit would give: true elements, and noise by a fixed seed."""

from __future__ import annotations

import numpy as np

from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements, positions
from relorbit.orbit.partials import polar_derivatives
from relorbit.orbit.regular import (
    Uncertainty,
    position_and_jacobian,
    regular_from_elements,
)
from relorbit.orbit.third_law import total_mass
from relorbit.solve.observations import observe
from relorbit.solve.residuals import residuals
from relorbit.solve.solution import Solution

TECHNIQUE_ERRORS = {"eyepiece": 0.05, "plate": 0.02, "interferometer": 0.004, "space": 0.002,
                    "camera": 0.03, "unknown": 0.08}  # fmt: skip

INVENTED = Elements(62.4, 1951.37, 0.43, 0.842, 51.3, 47.2, 118.6)


def simulate(
    elements: Elements,
    count: int = 60,
    first: float = 1920.0,
    last: float = 2015.0,
    techniques: tuple[str, ...] = ("eyepiece", "plate", "interferometer"),
    seed: int = 5,
    scale: float = 1.0,
) -> Measures:
    """Measures with the errors of their technique, the techniques following each other."""
    random = np.random.default_rng(seed)
    epoch = np.sort(random.uniform(first, last, count))
    technique = [techniques[k * len(techniques) // count] for k in range(count)]
    error = scale * np.array([TECHNIQUE_ERRORS[name] for name in technique])
    theta, rho = positions(elements, epoch)
    theta_err = np.minimum(np.degrees(error / rho), 60.0)
    observed = np.abs(rho + error * random.standard_normal(count))
    turned = np.mod(theta + theta_err * random.standard_normal(count), 360.0)
    observer = [f"Obs{k % 4}" for k in range(count)]
    return Measures.from_columns(
        {"epoch": epoch, "theta": turned, "rho": observed, "theta_err": theta_err,
         "rho_err": error, "technique": technique, "observer": observer}
    )  # fmt: skip


def solution_of(
    elements: Elements, pair: Pair, error_scale: float = 1.0, **more: object
) -> Solution:
    """A solution with the covariance of a fit that ended at `elements`."""
    measures = pair.measures
    observed, reference = observe(measures), float(np.mean(measures.epoch))
    z, dz = position_and_jacobian(
        regular_from_elements(elements, reference), reference, observed.epoch
    )
    d_theta, d_rho = polar_derivatives(z, dz)
    jacobian = np.concatenate([d_theta * observed.per_theta, d_rho * observed.per_rho], axis=1)
    covariance = np.linalg.inv(jacobian @ jacobian.T) * error_scale**2
    uncertainty = Uncertainty(reference, covariance)
    compared = residuals(elements, measures)
    mass = None
    if pair.parallax_mas is not None:
        mass = total_mass(elements, pair.parallax_mas, pair.parallax_err_mas, uncertainty)
    fields = {
        "pair": pair.name, "elements": elements, "uncertainty": uncertainty,
        "chi2": compared.chi2, "dof": max(observed.numbers - 7, 1), "error_scale": error_scale,
        "held": {}, "measures": len(measures), "used": len(observed), "residuals": compared,
        "mass_total": mass, "span": observed.span, "parallax_mas": pair.parallax_mas,
        "parallax_err_mas": pair.parallax_err_mas,
    }  # fmt: skip
    return Solution(**(fields | more))


