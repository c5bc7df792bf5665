"""How fast, against general routines of scipy for the same problem, in the same run.

    python tests/benchmarks/speed.py [PART ...] [--pairs N] [--all-seven-pairs N]

Parts: search (cold solve against differential evolution), warm (refinement against a numerical
Jacobian), kepler, growth (with the number of measures), start (of the command line); all by
default. One thread. The ratios are printed, not asserted: they depend on the machine's load.
"""

from __future__ import annotations

import one_thread  # first: it sets the number of threads

# isort: split

import argparse
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from rivals import all_seven, refine_campbell, refine_plainly, three_nonlinear, warm_start
from scipy.optimize import newton
from simulate import observed, published_like

from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import eccentric_anomaly
from relorbit.orbit.regular import regular_from_elements
from relorbit.solve.linear import sky_data
from relorbit.solve.observations import observe
from relorbit.solve.refine import covariance, polar_problem, refine
from relorbit.solve.search import period_grid, search
from relorbit.solve.solver import solve

MEASURES = 100


def seconds(work: Callable[[], object], repeats: int = 1) -> float:
    """The shortest of some runs."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def pairs(count: int) -> list[tuple[Elements, Pair]]:
    """Pairs of 100 measures over 0.8 to 3 revolutions, which any method can solve."""
    made = []
    for number in range(count):
        rng = np.random.default_rng([77, number])
        elements = published_like(rng)
        span = elements.P * np.exp(rng.uniform(np.log(0.8), np.log(3.0)))
        epoch = np.sort(2020.0 - span * rng.random(MEASURES))
        error = np.clip(elements.a * rng.uniform(0.01, 0.05, MEASURES), 0.002, 0.15)
        made.append((elements, observed(elements, epoch, error, rng)))
    return made


def line(what: str, ours: list[float], theirs: list[float], bar: float) -> str:
    one, other = np.median(ours), np.median(theirs)
    return (
        f"{what:<44}{1e3 * one:>10.2f} ms{1e3 * other:>12.1f} ms"
        f"{other / one:>9.1f}    (bar: {bar:g})"
    )


def of_search(count: int, count_of_all_seven: int) -> None:
    """Cold solve of 100 measures against differential evolution."""
    ours, three, seven, found = [], [], [], []
    for number, (_, pair) in enumerate(pairs(max(count, count_of_all_seven))):
        observations = observe(pair.measures)
        ours.append(seconds(lambda pair=pair: solve(pair)))
        chi2 = solve(pair).chi2
        if number < count:
            start = time.perf_counter()
            best = three_nonlinear(observations, seed=number)
            three.append(time.perf_counter() - start)
            found.append(best <= chi2 * 1.05 + 1.0)
        if number < count_of_all_seven:
            start = time.perf_counter()
            all_seven(observations, seed=number)
            seven.append(time.perf_counter() - start)
        print(f"  pair {number + 1}: solve {1e3 * ours[-1]:.0f} ms, three "
              f"{three[-1] if number < count else np.nan:.2f} s, seven "
              f"{seven[-1] if number < count_of_all_seven else np.nan:.2f} s",
              file=sys.stderr)  # fmt: skip
    print(line("solve / three nonlinear parameters", ours[:count], three, 8))
    print(f"    differential evolution found the same orbit in {sum(found)} of {count} pairs")
    if seven:
        print(line("solve / all seven elements", ours[:count_of_all_seven], seven, 40))


def of_warm(count: int) -> None:
    """Refinement of 100 measures from a few standard deviations away."""
    ours, lean, plain, worse = [], [], [], 0
    for number, (elements, pair) in enumerate(pairs(count)):
        observations = observe(pair.measures)
        t0 = observations.mean_epoch
        problem = polar_problem(observations, t0)
        best = refine(problem, regular_from_elements(elements, t0), most_iterations=300).u[0]
        start = warm_start(best, covariance(problem, best), t0, np.random.default_rng(number))
        u = regular_from_elements(start, t0)
        ours.append(seconds(lambda p=problem, u=u: refine(p, u), 5))
        lean.append(seconds(lambda o=observations, s=start: refine_campbell(o, s), 3))
        plain.append(seconds(lambda o=observations, s=start: refine_plainly(o, s), 3))
        reached = 2.0 * refine_campbell(observations, start).cost
        worse += refine(problem, u).chi2[0] > reached + 1e-3
    print(line("refinement / least_squares with positions", ours, plain, 10))
    print(line("refinement / least_squares, leanest residuals", ours, lean, 10))
    print(f"    ours ended higher in {worse} of {count} pairs")


def of_kepler(count: int = 1_000_000) -> None:
    """Kepler's equation for a million values."""
    rng = np.random.default_rng(1)
    M, e = rng.uniform(0.0, 2.0 * np.pi, count), rng.uniform(0.0, 0.97, count)

    def by_newton() -> np.ndarray:
        start = M + 0.85 * e * np.sign(np.sin(M))  # Danby's starting value, from memory
        return newton(
            lambda E: E - e * np.sin(E) - M, start, fprime=lambda E: 1.0 - e * np.cos(E), maxiter=99
        )

    ours = [seconds(lambda: eccentric_anomaly(M, e), 5)]
    theirs = [seconds(by_newton, 3)]
    print(line(f"Kepler, {count:,} values / newton", ours, theirs, 10))
    print(f"    largest difference {np.abs(by_newton() - eccentric_anomaly(M, e)).max():.1e} rad")


def of_growth() -> None:
    """What the number of measures costs."""
    elements = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
    print(f"{'measures':>10}{'search':>12}{'solve':>12}")
    for count in (100, 1_000, 10_000, 20_000):
        rng = np.random.default_rng(1)
        epoch = np.sort(rng.uniform(1940.0, 2020.0, count))
        pair = observed(elements, epoch, 0.03, rng)
        data = sky_data(observe(pair.measures))
        periods = period_grid(80.0, 100)
        mapped = seconds(lambda d=data, p=periods: search(d, p), 3)
        solved = seconds(lambda p=pair: solve(p), 3)
        print(f"{count:>10,}{1e3 * mapped:>9.0f} ms{1e3 * solved:>9.0f} ms")


def of_start() -> None:
    """Whole processes of the command line."""
    elements = Elements(40.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)
    pair = observed(elements, np.linspace(1940.0, 2020.0, 100), 0.03, np.random.default_rng(1))
    m = pair.measures
    rows = zip(m.epoch, m.theta, m.rho, m.theta_err, m.rho_err, strict=True)
    with tempfile.TemporaryDirectory() as folder:
        table = Path(folder) / "pair.csv"
        lines = [",".join(f"{value:.6f}" for value in row) for row in rows]
        text = "\n".join(["epoch,theta,rho,theta_err,rho_err", *lines])
        table.write_text(text + "\n", encoding="utf-8")
        for words in (["--help"], ["--version"], ["solve", "--help"], ["solve", str(table)]):
            command = [sys.executable, "-m", "relorbit", *words]
            taken = seconds(
                lambda c=command: subprocess.run(c, check=True, capture_output=True), 3
            )
            shown = " ".join("pair.csv" if word == str(table) else word for word in words)
            print(f"relorbit {shown:<35}{1e3 * taken:>10.0f} ms")


def main() -> None:
    parts = ("search", "warm", "kepler", "growth", "start")
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("parts", nargs="*", default=parts, metavar="PART")
    parser.add_argument("--pairs", type=int, default=30)
    parser.add_argument("--all-seven-pairs", type=int, default=30)
    given = parser.parse_args()
    unknown = set(given.parts) - set(parts)
    if unknown:
        parser.error(f"no part is called {unknown.pop()}; there are {', '.join(parts)}")
    print(one_thread.machine())
    print(f"{'medians':<44}{'ours':>13}{'scipy':>15}{'ratio':>9}")
    if "search" in given.parts:
        of_search(given.pairs, given.all_seven_pairs)
    if "warm" in given.parts:
        of_warm(given.pairs)
    if "kepler" in given.parts:
        of_kepler()
    if "growth" in given.parts:
        of_growth()
    if "start" in given.parts:
        of_start()


if __name__ == "__main__":
    main()
