"""Is the posterior calibrated? Simulation-based calibration, run by hand.

    python tests/benchmarks/posterior_calibration.py [PAIRS]

Pairs are drawn from the prior itself, observed, and sampled; the rank of the truth among the
samples of each quantity must be uniform (Talts, Betancourt, Simpson, Vehtari & Gelman 2018,
arXiv 1804.06788), and the intervals must hold the truth as often as they say.
"""

from __future__ import annotations

import sys
import time
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.stats import chi2 as chi2_distribution

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, complex_position, polar
from relorbit.orbit.third_law import mass_from_axis
from relorbit.solve.posterior import Posterior
from relorbit.solve.prior import Prior
from relorbit.solve.sample import sample
from relorbit.solve.weights import around, circular_mean

SPAN, FIRST = 50.0, 1970.0
SHORTEST_ARC, LONGEST_ARC = 0.1, 3.0
AXES = 0.3, 3.0  # arcsec
PARALLAX, PARALLAX_ERROR = 20.0, 1.0  # mas
QUANTITIES = ("P", "e", "T", "a", "i", "node", "omega", "mass")
BINS = 20
ARCS = (0.0, 0.25, 0.5, 1.0, np.inf)
PRIOR = Prior(period_range=(SPAN / LONGEST_ARC, SPAN / SHORTEST_ARC), axis_range=AXES)


@dataclass(frozen=True)
class Case:
    """One simulated pair: the truth, its parallax, and what was measured."""

    elements: Elements
    parallax: float
    pair: Pair


def drawn_from_the_prior(rng: np.random.Generator) -> Case:
    """A pair from `PRIOR`, with 10 to 60 measures of its own errors."""
    count = int(rng.integers(10, 61))
    epoch = np.sort(np.concatenate([[0.0, 1.0], rng.random(count - 2)])) * SPAN + FIRST
    sigma_rho = np.exp(rng.uniform(np.log(0.01), np.log(0.1), count))
    sigma_theta = np.degrees(np.exp(rng.uniform(np.log(0.01), np.log(0.1), count)))
    while True:
        P = float(np.exp(rng.uniform(*np.log(PRIOR.period_range))))
        elements = Elements(
            P,
            FIRST + P * rng.random(),
            rng.random() * 0.9999,
            float(np.exp(rng.uniform(*np.log(AXES)))),
            float(np.degrees(np.arccos(rng.uniform(-1.0, 1.0)))),
            180.0 * rng.random(),
            360.0 * rng.random(),
        )
        theta, rho = polar(complex_position(elements, epoch))
        theta = (theta + sigma_theta * rng.normal(size=count)) % 360.0
        rho = rho + sigma_rho * rng.normal(size=count)
        # measures that no list can hold are thrown back; what is left is as probable as before
        if rho.min() > 0.0:
            break
    parallax = float(rng.normal(PARALLAX, PARALLAX_ERROR))
    pair = Pair.from_arrays(epoch, theta, rho, sigma_theta, sigma_rho, parallax=PARALLAX,
                            parallax_err=PARALLAX_ERROR)  # fmt: skip
    return Case(elements, parallax, pair)


def ranks(case: Case, posterior: Posterior) -> tuple[dict[str, float], dict[str, float]]:
    """Share of the samples below the truth: on fixed scales, and cut opposite to the samples."""
    truth, p = case.elements, posterior
    fixed, cut = {}, {}
    mass = mass_from_axis(truth.P, truth.a, case.parallax)
    for name, value, values in (
        ("P", truth.P, p.P), ("e", truth.e, p.e), ("a", truth.a, p.a), ("i", truth.i, p.i),
        ("mass", mass, p.mass),
    ):  # fmt: skip
        fixed[name] = cut[name] = float(p.weight @ (values < value))
    phase = (p.reference_epoch - p.T) / p.P
    true_phase = (p.reference_epoch - truth.T) / truth.P
    for name, turn, value, values in (
        ("T", 1.0, true_phase, phase), ("node", 180.0, truth.node, p.node),
        ("omega", 360.0, truth.omega, p.omega),
    ):  # fmt: skip
        fixed[name] = float(p.weight @ (values % turn < value % turn))
        centre = circular_mean(values, p.weight, turn)
        cut[name] = float(p.weight @ (around(values, centre, turn) < around(value, centre, turn)))
    return fixed, cut


def p_of_uniform(values: np.ndarray, bins: int = BINS) -> float:
    """Probability of counts as uneven as these, by chi-square."""
    counts = np.histogram(values, bins, (0.0, 1.0))[0]
    expected = values.size / bins
    return float(chi2_distribution.sf(((counts - expected) ** 2 / expected).sum(), bins - 1))


def coverage(cut: np.ndarray, share: float) -> float:
    """How often the central interval of a share holds the truth."""
    return float(np.mean(np.abs(cut - 0.5) < 0.5 * share))


def run(
    pairs: int, seed: int = 20_000, size: int = 1000
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Fixed and cut ranks, shape (pairs, 8), and the arcs covered."""
    rng = np.random.default_rng(seed)
    fixed, cut, arcs = [], [], []
    begun = time.perf_counter()
    for number in range(pairs):
        case = drawn_from_the_prior(rng)
        posterior = sample(case.pair, size, number, PRIOR)
        one, other = ranks(case, posterior)
        fixed.append([one[name] for name in QUANTITIES])
        cut.append([other[name] for name in QUANTITIES])
        arcs.append(SPAN / case.elements.P)
        if posterior.pareto_k > 0.7 or posterior.effective_size < size:
            print(f"  pair {number}: {posterior.effective_size:.0f} effective of "
                  f"{posterior.drawn}, Pareto k {posterior.pareto_k:.2f}")  # fmt: skip
    print(f"{pairs} pairs in {time.perf_counter() - begun:.0f} s")
    return np.array(fixed), np.array(cut), np.array(arcs)


def main() -> None:
    pairs = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    fixed, cut, arcs = run(pairs)
    print("\np of uniform ranks, 20 bins (bar: none below 0.001)")
    for slot, name in enumerate(QUANTITIES):
        print(f"  {name:6s} {p_of_uniform(fixed[:, slot]):.4f}")
    print("\ncoverage in per cent (bar: 68 and 95 within 3)")
    print("  arc             pairs  " + "  ".join(f"{name:>9s}" for name in (*QUANTITIES, "all")))
    for low, high in pairwise(ARCS):
        inside = (arcs >= low) & (arcs < high)
        some = cut[inside]
        cells = [(coverage(c, 0.68), coverage(c, 0.95)) for c in (*some.T, some.ravel())]
        text = "  ".join(f"{100 * a:4.0f}/{100 * b:4.1f}" for a, b in cells)
        print(f"  {100 * low:3.0f} to {100 * high:3.0f} %  {inside.sum():6d}  {text}")


if __name__ == "__main__":
    main()
