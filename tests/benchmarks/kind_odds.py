"""Are pairs called what they are, and do the odds mean what they say? Run by hand.

    python tests/benchmarks/kind_odds.py [OF_EACH]

Optical pairs and binaries are drawn from the very priors that `kind` then compares.
"""

from __future__ import annotations

import sys
from itertools import pairwise
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, complex_position, polar
from relorbit.solve.flat_models import chi2_of_places
from relorbit.solve.kind import Kind, kind
from relorbit.solve.limits import straight_motion
from relorbit.solve.observations import observe
from relorbit.solve.prior import Prior

SPAN, FIRST = 40.0, 1980.0
AXES, PERIODS, SPEEDS = (0.3, 10.0), (30.0, 3000.0), (1e-3, 0.3)
CURVED = 25.0  # five standard deviations
PRIOR = Prior(period_range=PERIODS, axis_range=AXES)
EDGES = (0.0, 0.01, 0.1, 0.3, 0.7, 0.9, 0.99, 1.0)


def _log_uniform(rng: np.random.Generator, ends: tuple[float, float]) -> float:
    return float(np.exp(rng.uniform(*np.log(ends))))


def drawn(rng: np.random.Generator, binary: bool) -> tuple[Pair, float]:
    """A pair, and by how much chi2 of the best straight line is above that of the truth."""
    while True:
        count = int(rng.integers(8, 31))
        epoch = FIRST + SPAN * np.sort(np.concatenate([[0.0, 1.0], rng.random(count - 2)]))
        if binary:
            P = _log_uniform(rng, PERIODS)
            elements = Elements(
                P, FIRST + P * rng.random(), 0.9999 * rng.random(), _log_uniform(rng, AXES),
                float(np.degrees(np.arccos(rng.uniform(-1.0, 1.0)))), 180.0 * rng.random(),
                360.0 * rng.random(),
            )  # fmt: skip
            z = complex_position(elements, epoch)
        else:
            place = _log_uniform(rng, AXES) * np.exp(2j * np.pi * rng.random())
            motion = _log_uniform(rng, SPEEDS) * np.exp(2j * np.pi * rng.random())
            z = place + motion * (epoch - FIRST - 0.5 * SPAN)
        # the errors belong to the list, not to the place: else they would tell of it
        sigma_rho, sigma_theta = 0.02, 1.0
        theta, rho = polar(z)
        theta = (theta + sigma_theta * rng.normal(size=count)) % 360.0
        rho = rho + sigma_rho * rng.normal(size=count)
        if rho.min() > 0.0:
            break
    pair = Pair.from_arrays(epoch, theta, rho, np.full(count, sigma_theta),
                            np.full(count, sigma_rho))  # fmt: skip
    o = observe(pair.measures)
    truth = float(chi2_of_places(o, z[None])[0])
    return pair, straight_motion(o).chi2 - truth


def share_of_orbit(found: Kind) -> float:
    """Probability of an orbit against straight motion alone."""
    _, moving, orbit = found.hypotheses
    return float(1.0 / (1.0 + np.exp(np.clip(moving.log_evidence - orbit.log_evidence, -700, 700))))


def main() -> None:
    each = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    rng = np.random.default_rng(11)
    wrong = {"optical": 0, "binary": 0}
    shares, truths = [], []
    for number in range(each):
        pair, _ = drawn(rng, binary=False)
        found = kind(pair, number, PRIOR, speed_range=SPEEDS)
        wrong["optical"] += found.odds_orbit > 100.0
        shares.append(share_of_orbit(found))
        truths.append(False)
    curved = 0
    plain = 0
    while curved < each:
        pair, fall = drawn(rng, binary=True)
        plain += 1
        if fall <= CURVED and plain > each:
            continue
        found = kind(pair, plain, PRIOR, speed_range=SPEEDS)
        if fall > CURVED:
            curved += 1
            wrong["binary"] += found.odds_orbit < 0.01
        if plain <= each:
            shares.append(share_of_orbit(found))
            truths.append(True)
    total = 100.0 * sum(wrong.values()) / (2 * each)
    print(f"called wrongly at odds above 100:1: {wrong['optical']} of {each} optical pairs, "
          f"{wrong['binary']} of {each} binaries with curvature above 5 sigma: {total:.2f} % "
          "(bar: below 2)")  # fmt: skip
    print("calibration of the odds, orbit against straight motion, drawn half and half")
    print("  said (mean)     pairs   orbits among them")
    shares, truths = np.array(shares), np.array(truths)
    for low, high in pairwise(EDGES):
        inside = (shares >= low) & ((shares < high) | (high == 1.0))
        if inside.any():
            n, mean = int(inside.sum()), float(shares[inside].mean())
            error = np.sqrt(mean * (1.0 - mean) / n)
            print(f"  {mean:.4f}       {n:6d}   {truths[inside].mean():.4f} +/- {error:.4f}")


if __name__ == "__main__":
    main()
