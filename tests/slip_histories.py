"""Invented histories of three techniques with slips placed in them, and how vetting fares."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from simulate import history_epochs, published_like

from relorbit.measures.dates import julian_years
from relorbit.measures.pair import Pair
from relorbit.measures.slips import FACTORS, YEARS
from relorbit.measures.table import Measures
from relorbit.measures.vetting import Finding
from relorbit.orbit.elements import Elements, complex_position, polar, positions
from relorbit.solve.vetted import vet

TECHNIQUES = ("eyepiece", "camera", "interferometer")
FEWEST, MOST = 20, 150
VALUES = ("quadrant", "mirror", "quarter", "rho-factor", "year", "interchange", "day-month")
REPEATS = ("same-night", "mean-of-nights")
LARGE = 8.0  # sigma


@dataclass(frozen=True)
class Placed:
    """A slip in one row, and by how many sigma it moved the measure."""

    row: int
    kind: str
    moved: float


def clean_history(rng: np.random.Generator) -> tuple[Elements, Pair]:
    """20 to 150 measures by three techniques, each with an error of its own, the better later.

    In up to a third of the histories every measure has a calendar date.
    """
    while True:
        truth = published_like(rng)
        epoch = history_epochs(truth, rng)
        if FEWEST <= epoch.size <= MOST:
            break
    dates = [""] * epoch.size
    if rng.random() < 1 / 3 and epoch[0] > 1600.0:
        dates = [date_of(t) for t in epoch]
        epoch = julian_years(dates, "auto", lambda _, what: ValueError(what))
    return truth, three_techniques(truth, epoch, dates, rng)


def long_history(rng: np.random.Generator, count: int) -> tuple[Elements, Pair]:
    """So many measures, spread evenly over two revolutions."""
    truth = published_like(rng)
    epoch = np.sort(2020.0 - rng.uniform(0.0, 2.0, count) * truth.P)
    return truth, three_techniques(truth, epoch, [""] * count, rng)


def three_techniques(
    truth: Elements, epoch: np.ndarray, dates: list[str], rng: np.random.Generator
) -> Pair:
    """Measures of an orbit, the errors of each technique stated."""
    place = np.arange(epoch.size) / epoch.size * 3 + rng.normal(0.0, 0.4, epoch.size)
    group = np.clip(place.astype(int), 0, 2)
    largest = max(0.002, min(0.15, 0.25 * truth.a))
    errors = np.sort(np.exp(rng.uniform(np.log(0.002), np.log(largest), 3)))[::-1]
    error = errors[group]
    noise = error * (rng.normal(size=epoch.size) + 1j * rng.normal(size=epoch.size))
    theta, rho = polar(complex_position(truth, epoch) + noise)
    theta_err = np.degrees(np.arctan2(error, rho))
    return Pair.from_arrays(
        epoch, theta, rho, theta_err, error, technique=np.array(TECHNIQUES)[group],
        observer=np.array(["A", "B", "C"])[group], epoch_obs=dates, ra=rng.uniform(0.0, 360.0),
        dec=rng.uniform(-70.0, 70.0), allow_any_epoch=True,
    )  # fmt: skip


def date_of(epoch: float) -> str:
    """A Julian year as a date to the day, year, month, day."""
    days = int(np.floor((epoch - 2000.0) * 365.25 + 0.5))
    return str(np.datetime64("2000-01-01") + np.timedelta64(days, "D"))


def place_slips(
    truth: Elements, pair: Pair, rng: np.random.Generator, count: int, kinds: tuple[str, ...]
) -> tuple[Pair, list[Placed]]:
    """The pair with slips in so many rows, and what they are."""
    m = pair.measures
    columns = {name: getattr(m, name).copy() for name in ("epoch", "theta", "rho")}
    dates = m.epoch_obs.copy().astype("U40")
    placed, extra = [], []
    for row in rng.choice(len(m), count, replace=False).tolist():
        kind = str(rng.choice(kinds))
        if kind == "day-month" and not swapped(dates[row]):
            kind = "quadrant"
        if kind in REPEATS:
            extra.append((row, kind))
            continue
        epoch, theta, rho = slipped(kind, m.epoch[row], m.theta[row], m.rho[row], rng)
        if kind == "day-month":
            dates[row] = swapped(dates[row])
            epoch = julian_years([dates[row]], "auto", lambda _, what: ValueError(what))[0]
        if kind == "year" and dates[row]:
            dates[row] = ""
        placed.append(Placed(row, kind, moved(truth, m, row, epoch, theta, rho)))
        columns["epoch"][row], columns["theta"][row], columns["rho"][row] = epoch, theta, rho
    m = replace(m, **columns, epoch_obs=dates)
    for row, kind in extra:
        m = repeat(m, row, kind, rng)
        placed.append(Placed(len(m) - 1, kind, 0.0))
    return pair.with_measures(m), placed


def slipped(
    kind: str, epoch: float, theta: float, rho: float, rng: np.random.Generator
) -> tuple[float, float, float]:
    """A measure with a slip in it."""
    if kind == "quadrant":
        theta += 180.0
    elif kind == "mirror":
        theta = -theta
    elif kind == "quarter":
        theta += rng.choice([90.0, 270.0])
    elif kind == "rho-factor":
        rho *= float(rng.choice(FACTORS)) ** rng.choice([-1, 1])
    elif kind == "year":
        epoch += float(rng.choice(YEARS))
    elif kind == "interchange":
        theta, rho = rho, theta
    return epoch, theta % 360.0 % 360.0, rho


def swapped(date: str) -> str:
    """A date with day and month exchanged; empty where that is none or the same."""
    if not date:
        return ""
    year, month, day = date.split("-")
    return f"{year}-{day}-{month}" if int(day) <= 12 and day != month else ""


def moved(
    truth: Elements, m: Measures, row: int, epoch: float, theta: float, rho: float
) -> float:
    """By how many sigma a slip moves a measure, or the orbit under it."""
    there, here = (np.array(positions(truth, t)).ravel() for t in (epoch, m.epoch[row]))
    gap = np.array([theta - m.theta[row], rho - m.rho[row]]) - (there - here)
    gap[0] = (gap[0] + 180.0) % 360.0 - 180.0
    return float(np.hypot(*(gap / (m.theta_err[row], m.rho_err[row]))))


def repeat(m: Measures, row: int, kind: str, rng: np.random.Generator) -> Measures:
    """The measures with one more: the same night rounded, or a mean made of a row and others."""
    one = m.select([row])
    if kind == "same-night":
        return m.append(replace(
            one, theta=np.round(one.theta, 2) % 360.0, rho=np.round(one.rho, 4),
            nights=np.array([1.0]),
        ))  # fmt: skip
    count = int(rng.integers(2, 5))
    offset = np.linspace(-0.05, 0.05, count)
    nights = m.select([row] * count)
    nights = replace(
        nights, epoch=nights.epoch + offset, epoch_obs=np.full(count, ""),
        theta=(nights.theta + rng.normal(0.0, 0.3, count) * nights.theta_err) % 360.0,
        rho=np.abs(nights.rho + rng.normal(0.0, 0.3, count) * nights.rho_err),
    )  # fmt: skip
    theta = one.theta + np.mean((nights.theta - one.theta + 180.0) % 360.0 - 180.0)
    mean = replace(
        one, epoch=np.array([np.round(nights.epoch.mean(), 3)]), epoch_obs=np.array([""]),
        theta=np.round(theta % 360.0, 2) % 360.0, rho=np.array([np.round(nights.rho.mean(), 4)]),
        nights=np.array([float(count)]),
    )  # fmt: skip
    keep = np.arange(len(m)) != row
    # the row itself gives way to its nights, at the end, so that no other row changes its place
    rest = replace(m, use=m.use & keep)
    return rest.append(nights).append(mean)


def slip_trial(seed: int, kinds: tuple[str, ...] = (*VALUES, *REPEATS)) -> tuple:
    """Placed slips, findings, and how many rows are clean, of one history with 1 to 5 slips."""
    rng = np.random.default_rng(seed)
    truth, pair = clean_history(rng)
    pair, placed = place_slips(truth, pair, rng, int(rng.integers(1, 6)), kinds)
    found = vet(pair)
    clean = int(pair.measures.use.sum()) - len(placed)
    return placed, found, clean


def tally(placed: list[Placed], found: list[Finding]) -> tuple[list, list, list[Finding]]:
    """(slip, named rightly) of the large ones and of repeats, and findings on clean rows."""
    by_row = {one.row: one for one in found}
    named = [(one, one.row in by_row and by_row[one.row].kind == one.kind) for one in placed]
    large = [both for both in named if both[0].moved > LARGE]
    repeats = [both for both in named if both[0].kind in REPEATS]
    rows = {one.row for one in placed}
    return large, repeats, [one for one in found if one.row not in rows]
