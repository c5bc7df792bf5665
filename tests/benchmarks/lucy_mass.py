"""Lucy's test: the mass from incomplete orbits. Run by hand.

    python tests/benchmarks/lucy_mass.py [CAMPAIGNS]

The model binary is that of Lucy (2014, A&A 563, A126), from memory: P = 100 yr, a = 1 arcsec,
e = 0.5, i = 60, omega = 250, node = 120, 15 measures evenly over a share of the orbit. His headline
is that the posterior mean of a^3/P^2 has no bias once 40 per cent or more of the orbit is covered.
His error, the phase at which the measures begin and his range of periods are not known for sure
here. At 40 per cent they decide: the excess of a mean over a skew posterior goes with the square of
the error. So two errors are run, in x and in y. `triple_sum` is the same mean in another way,
without any of the sampler: a plain sum over ln P, e and phase.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from simulate import observed

from relorbit.errors import Undetermined
from relorbit.orbit.elements import Elements
from relorbit.orbit.kepler import TWO_PI, eccentric_anomaly, unit_ellipse
from relorbit.solve.prior import Prior
from relorbit.solve.sample import sample

MODEL = Elements(100.0, 1940.0, 0.5, 1.0, 60.0, 120.0, 250.0)
ERRORS, MEASURES, FIRST = (0.05, 0.02), 15, 1900.0
CHECKED, PERIODS = (0.4, 0.5, 0.6), (20.0, 400.0)  # shares and periods of the sum beside
SHARES = tuple(0.1 * k for k in range(1, 11))
SIZE = 800
PRIORS = ("flat-constants", "default")


def campaign(share: float, error: float, rng: np.random.Generator):
    """One simulated campaign over a share of the orbit."""
    epoch = FIRST + MODEL.P * share * (np.arange(MEASURES) + 0.5) / MEASURES
    return observed(MODEL, epoch, error, rng)


def triple_sum(pair, error: float, prior: Prior, places=(60, 40, 80)) -> float:
    """Posterior mean of a^3/P^2 over the true one, the constants flat and integrated out.

    The likelihood is the Gaussian in x and y of equal errors, in which the integral over the
    constants is 1/det, and a^3 is taken at the best of them. `places` of ln P, e and phase.
    """
    m = pair.measures
    z = m.rho * np.exp(1j * np.radians(m.theta))
    time = m.epoch - m.epoch.mean()
    ln_P, e, phase = (
        low + (high - low) * (np.arange(n) + 0.5) / n
        for n, (low, high) in zip(
            places, (tuple(np.log(prior.period_range)), (0.0, 1.0), (0.0, 1.0)), strict=True
        )
    )
    e, phase = (one.ravel()[:, None] for one in np.meshgrid(e, phase))
    log_weight, values = [], []
    for P in np.exp(ln_P):
        turns = phase + time / P
        X, Y = unit_ellipse(eccentric_anomaly(TWO_PI * (turns - np.rint(turns)), e), e)
        XX, XY, YY = ((one * other).sum(axis=1) for one, other in ((X, X), (X, Y), (Y, Y)))
        det = XX * YY - XY**2
        by_X, by_Y = X @ z, Y @ z
        AB, FG = (YY * by_X - XY * by_Y) / det, (XX * by_Y - XY * by_X) / det
        chi2 = (z @ z.conj()).real - (by_X.conj() * AB + by_Y.conj() * FG).real
        a = 0.5 * (np.abs(AB - 1j * FG) + np.abs(AB + 1j * FG))
        log_weight.append(-0.5 * chi2 / error**2 - np.log(det))
        values.append(a**3 / P**2)
    log_weight, values = np.concatenate(log_weight), np.concatenate(values)
    weight = np.exp(log_weight - log_weight.max())
    return float(weight @ values / weight.sum() / (MODEL.a**3 / MODEL.P**2))


def mean_of_mass(pair, prior: Prior | str, seed: int) -> tuple[float, float]:
    """Posterior mean and median of a^3/P^2 over the true one."""
    posterior = sample(pair, SIZE, seed, prior)
    values = posterior.axis_cubed_over_period_squared / (MODEL.a**3 / MODEL.P**2)
    order = np.argsort(values)
    median = values[order][np.searchsorted(np.cumsum(posterior.weight[order]), 0.5)]
    return float(posterior.weight @ values), float(median)


def row(
    share: float, error: float, prior: str, campaigns: int, seed: int = 3
) -> tuple[np.ndarray, int]:
    """Means and medians of some campaigns, shape (n, 2), and how many could not be sampled."""
    rng = np.random.default_rng(seed)
    found, lost = [], 0
    for number in range(campaigns):
        pair = campaign(share, error, rng)
        try:
            found.append(mean_of_mass(pair, prior, number))
        except Undetermined:
            lost += 1
    return np.array(found), lost


def print_table(error: float, prior: str, campaigns: int) -> None:
    """A line for each share covered."""
    print(f"error {error} arcsec, prior {prior}, {campaigns} campaigns: posterior mean of a^3/P^2 "
          "over the truth")  # fmt: skip
    print("  covered   mean  +/-     scatter   mean of medians   not sampled")
    for share in SHARES:
        values, lost = row(share, error, prior, campaigns)
        mean, scatter = values[:, 0].mean(), values[:, 0].std(ddof=1)
        print(f"  {100 * share:5.0f} %  {mean:6.3f}  {scatter / np.sqrt(len(values)):6.3f}  "
              f"{scatter:8.3f}  {values[:, 1].mean():10.3f}  {lost:12d}", flush=True)  # fmt: skip


def print_check(error: float, campaigns: int) -> None:
    """Samples against the plain sum, campaign by campaign."""
    prior = Prior(constants="flat", period_range=PERIODS)
    print(f"error {error} arcsec, flat constants, periods {PERIODS[0]:.0f} to {PERIODS[1]:.0f} "
          f"years, {campaigns} campaigns: samples, plain sum, median ratio")  # fmt: skip
    for share in CHECKED:
        rng = np.random.default_rng(3)
        pairs = [campaign(share, error, rng) for _ in range(campaigns)]
        found = np.array([
            (mean_of_mass(pair, prior, k)[0], triple_sum(pair, error, prior))
            for k, pair in enumerate(pairs)
        ])  # fmt: skip
        means, ratio = found.mean(axis=0), np.median(found[:, 0] / found[:, 1])
        print(f"  {100 * share:5.0f} %  {means[0]:6.3f}  {means[1]:6.3f}  {ratio:6.3f}", flush=True)


def main() -> None:
    campaigns = int(sys.argv[1]) if len(sys.argv) > 1 else 60
    for error in ERRORS:
        print_check(error, min(campaigns, 12))
        for prior in reversed(PRIORS):
            print_table(error, prior, campaigns)


if __name__ == "__main__":
    main()
