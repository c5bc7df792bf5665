"""Kepler's equation against mpmath at 50 digits.

The promise: within 4 units in the last place of E, or 1e-15 rad, for 0 <= e <= 0.9999. A mean
anomaly of many revolutions is judged as the exact value of the double that was given.
"""

import mpmath
import numpy as np
import pytest

from relorbit.orbit.kepler import eccentric_anomaly

DIGITS = 50
ECCENTRICITIES = np.array([0.0, 1e-9, 0.01, 0.2, 0.4999, 0.5, 0.6, 0.7, 0.71, 0.9, 0.99, 0.9999])


def reference(mean, e):
    """E of exact doubles M and e, an mpf."""
    M, e = mpmath.mpf(float(mean)), mpmath.mpf(float(e))
    turns = mpmath.nint(M / (2 * mpmath.pi))
    m = abs(M - 2 * mpmath.pi * turns)
    # right of the root of a rising convex function, so Newton's steps fall to it monotonically
    E = min(m + e, mpmath.pi)
    for _ in range(200):
        step = (E - e * mpmath.sin(E) - m) / (1 - e * mpmath.cos(E))
        E -= step
        if abs(step) <= mpmath.mpf(10) ** (5 - DIGITS) * abs(E):
            break
    else:
        raise AssertionError(f"the reference did not converge at M={mean}, e={e}")
    return 2 * mpmath.pi * turns + (E if 2 * mpmath.pi * turns <= M else -E)


def worst(mean, e):
    """Largest error in units of what is allowed, and where."""
    mean, e = (part.ravel() for part in np.broadcast_arrays(mean, e))
    ours = eccentric_anomaly(mean, e)
    with mpmath.workdps(DIGITS):
        errors = [
            float(abs(mpmath.mpf(float(E)) - reference(m, k)))
            for E, m, k in zip(ours, mean, e, strict=True)
        ]
    allowed = np.maximum(4.0 * np.spacing(np.abs(ours)), 1e-15)
    ratio = np.array(errors) / allowed
    at = int(np.argmax(ratio))
    return ratio[at], f"M={mean[at]!r}, e={e[at]!r}, E={ours[at]!r}, error {errors[at]:.3g}"


def cases(name):
    random = np.random.default_rng(20260)
    if name == "half turns either way":
        return random.uniform(-np.pi, np.pi, 3000), random.uniform(0.0, 0.9999, 3000)
    if name == "one revolution":
        return random.uniform(0.0, 2.0 * np.pi, 3000), random.choice(ECCENTRICITIES, 3000)
    if name == "towards a parabola":
        return random.uniform(-np.pi, np.pi, 2000), 1.0 - 10.0 ** random.uniform(-4, -1, 2000)
    if name == "periastron":
        M = np.geomspace(1e-18, 0.3, 60) * np.tile([1.0, -1.0], 30)
        return M[:, None], np.append(ECCENTRICITIES, 0.99985)
    if name == "apastron":
        M = np.pi - np.append(0.0, np.geomspace(1e-15, 0.1, 24))
        return np.concatenate([M, -M])[:, None], ECCENTRICITIES
    if name == "many revolutions":
        turns = np.rint(10.0 ** random.uniform(0, 5, 2500)) * random.choice([-1, 1], 2500)
        return 2.0 * np.pi * turns + random.uniform(-np.pi, np.pi, 2500), random.choice(
            ECCENTRICITIES, 2500
        )
    if name == "many revolutions, at periastron":
        turns = np.rint(10.0 ** random.uniform(0, 5, 1500)) * random.choice([-1, 1], 1500)
        return 2.0 * np.pi * turns * (1.0 + random.choice([0, 1e-16, 1e-12, 1e-9], 1500)), 0.9999
    raise KeyError(name)


@pytest.mark.parametrize(
    "name",
    ["half turns either way", "one revolution", "towards a parabola", "periastron", "apastron",
     "many revolutions", "many revolutions, at periastron"],
)  # fmt: skip
def test_error_of_the_eccentric_anomaly(name):
    ratio, where = worst(*cases(name))
    assert ratio <= 1.0, where


def test_tiny_mean_anomalies_keep_their_relative_precision():
    """Below 1e-15 rad the promise above says nothing, so ulps alone are counted here."""
    M = np.geomspace(1e-18, 1e-3, 80)[:, None]
    M, e = (part.ravel() for part in np.broadcast_arrays(M, ECCENTRICITIES))
    ours = eccentric_anomaly(M, e)
    with mpmath.workdps(DIGITS):
        exact = [reference(m, k) for m, k in zip(M, e, strict=True)]
        ulps = [
            float(abs(E - mpmath.mpf(float(x)))) / np.spacing(x)
            for E, x in zip(exact, ours, strict=True)
        ]
    assert max(ulps) <= 4.0
