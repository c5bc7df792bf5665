"""Is the posterior calibrated? Simulation-based calibration, run by hand.

    python tests/benchmarks/posterior_calibration.py [PAIRS]

Pairs are drawn from the prior itself, observed, and sampled; the rank of the truth among the
samples of each quantity must be uniform (Talts, Betancourt, Simpson, Vehtari & Gelman 2018,
arXiv 1804.06788), and the intervals must hold the truth as often as they say.

That holds over all pairs drawn, and over any part of them that is chosen by what was measured. It
does not hold over a part chosen by the truth: of the pairs whose true period is long, those stand
out whose samples say so. So the table by the arc that the median of the samples tells is the one
that must show 68 and 95 per cent. In the table by the true arc, what a perfect posterior would show
stands beside what was found: the probability, by the samples, that an orbit lies in the interval
and covers such an arc, over that of covering such an arc.
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
from relorbit.solve.weights import around, circular_mean, quantiles

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


def cut_values(case: Case, posterior: Posterior) -> dict[str, tuple[float, np.ndarray]]:
    """The truth and the samples of each quantity, circles cut opposite to the samples."""
    truth, p = case.elements, posterior
    mass = mass_from_axis(truth.P, truth.a, case.parallax)
    found = {"P": (truth.P, p.P), "e": (truth.e, p.e), "a": (truth.a, p.a), "i": (truth.i, p.i),
             "mass": (mass, p.mass)}  # fmt: skip
    phase = (p.reference_epoch - p.T) / p.P
    true_phase = (p.reference_epoch - truth.T) / truth.P
    for name, turn, value, values in (
        ("T", 1.0, true_phase, phase), ("node", 180.0, truth.node, p.node),
        ("omega", 360.0, truth.omega, p.omega),
    ):  # fmt: skip
        centre = circular_mean(values, p.weight, turn)
        found[name] = float(around(value, centre, turn)), around(values, centre, turn)
    return {name: found[name] for name in QUANTITIES}


def ranks(case: Case, posterior: Posterior) -> tuple[dict[str, float], dict[str, float]]:
    """Share of the samples below the truth: on fixed scales, and cut opposite to the samples."""
    fixed, cut = {}, {}
    turns = {"T": 1.0, "node": 180.0, "omega": 360.0}
    for name, (value, values) in cut_values(case, posterior).items():
        cut[name] = float(posterior.weight @ (values < value))
        turn = turns.get(name)
        if turn is None:
            fixed[name] = cut[name]
        else:
            fixed[name] = float(posterior.weight @ (values % turn < value % turn))
    return fixed, cut


def expected(case: Case, posterior: Posterior) -> np.ndarray:
    """Probability of an arc and of an interval that holds the truth, by the samples.

    Shape (arcs, quantities, 3): in the 68 per cent interval, in that of 95, anywhere.
    """
    w, cell = posterior.weight, np.digitize(SPAN / posterior.P, ARCS) - 1
    found = np.empty((len(ARCS) - 1, len(QUANTITIES), 3))
    for slot, (_, values) in enumerate(cut_values(case, posterior).values()):
        order = np.argsort(values, kind="stable")
        rank = np.empty(w.size)
        rank[order] = np.cumsum(w[order]) - 0.5 * w[order]
        for k, share in enumerate((0.68, 0.95, np.inf)):
            inside = np.abs(rank - 0.5) < 0.5 * share
            found[:, slot, k] = np.bincount(cell, w * inside, minlength=len(ARCS) - 1)
    return found


def p_of_uniform(values: np.ndarray, bins: int = BINS) -> float:
    """Probability of counts as uneven as these, by chi-square."""
    counts = np.histogram(values, bins, (0.0, 1.0))[0]
    expected = values.size / bins
    return float(chi2_distribution.sf(((counts - expected) ** 2 / expected).sum(), bins - 1))


def coverage(cut: np.ndarray, share: float) -> float:
    """How often the central interval of a share holds the truth."""
    return float(np.mean(np.abs(cut - 0.5) < 0.5 * share))


@dataclass(frozen=True)
class Calibration:
    """What came out: ranks on fixed scales and on cut ones, shape (pairs, 8); the true arcs and
    those that the median period tells, shape (pairs,); `expected`, summed over the pairs."""

    fixed: np.ndarray
    cut: np.ndarray
    true_arc: np.ndarray
    seen_arc: np.ndarray
    expected: np.ndarray


def run(pairs: int, seed: int = 20_000, size: int = 1000) -> Calibration:
    """Draw pairs, sample them and rank the truth."""
    rng = np.random.default_rng(seed)
    fixed, cut, true_arc, seen_arc, sums = [], [], [], [], 0.0
    begun, warned = time.perf_counter(), 0
    for number in range(pairs):
        case = drawn_from_the_prior(rng)
        posterior = sample(case.pair, size, number, PRIOR)
        one, other = ranks(case, posterior)
        fixed.append([one[name] for name in QUANTITIES])
        cut.append([other[name] for name in QUANTITIES])
        true_arc.append(SPAN / case.elements.P)
        seen_arc.append(SPAN / quantiles(posterior.P, posterior.weight, 0.5))
        sums = sums + expected(case, posterior)
        warned += posterior.pareto_k > 0.7 or posterior.effective_size < size
    print(f"{pairs} pairs in {time.perf_counter() - begun:.0f} s; {warned} with a warning of heavy "
          "tails or of too few samples")  # fmt: skip
    return Calibration(*map(np.array, (fixed, cut, true_arc, seen_arc)), sums)


def print_coverage(found: Calibration, arcs: np.ndarray, by_truth: bool) -> None:
    """A line for each range of arcs; the standard error in per cent ends it."""
    heads = "  ".join(f"{name:>9s}" for name in (*QUANTITIES, "all"))
    print(f"  arc             pairs  {heads}   error of one")
    for slot, (low, high) in enumerate(pairwise(ARCS)):
        inside = (arcs >= low) & (arcs < high)
        some, count = found.cut[inside], int(inside.sum())
        cells = [(coverage(c, 0.68), coverage(c, 0.95)) for c in (*some.T, some.ravel())]
        text = "  ".join(f"{100 * a:4.1f}/{100 * b:4.1f}" for a, b in cells)
        errors = [100.0 * np.sqrt(share * (1.0 - share) / max(count, 1)) for share in (0.68, 0.95)]
        print(f"  {100 * low:3.0f} to {100 * high:3.0f} %  {count:6d}  {text}   "
              "{:.1f}/{:.1f}".format(*errors))  # fmt: skip
        if by_truth:
            shares = found.expected[slot, :, :2] / found.expected[slot, :, 2:]
            cells = [*shares, shares.mean(axis=0)]
            text = "  ".join(f"{100 * a:4.1f}/{100 * b:4.1f}" for a, b in cells)
            print(f"     perfect:           {text}")


def main() -> None:
    pairs = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    found = run(pairs)
    print("\np of uniform ranks, 20 bins (bar: none below 0.001)")
    for slot, name in enumerate(QUANTITIES):
        print(f"  {name:6s} {p_of_uniform(found.fixed[:, slot]):.4f}")
    print("\ncoverage in per cent by the arc that the samples tell (bar: 68 and 95 within 3)")
    print_coverage(found, found.seen_arc, by_truth=False)
    print("\ncoverage in per cent by the true arc, and what a perfect posterior would show")
    print_coverage(found, found.true_arc, by_truth=True)


if __name__ == "__main__":
    main()
