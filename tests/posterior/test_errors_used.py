"""Samples with errors taken from the residuals, and what is said of errors that are missing."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from invented import ORBIT
from simulate import observed

from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements
from relorbit.show.posterior_text import posterior_text
from relorbit.solve.kind import kind
from relorbit.solve.prior import Prior
from relorbit.solve.sample import sample
from relorbit.solve.saved_samples import read_samples
from relorbit.solve.short_arc import short_arc_answer
from relorbit.solve.solver import solve
from relorbit.solve.weights import quantiles


def of_two_observers(slips: int = 0, elements: Elements = ORBIT) -> Pair:
    """Sixty measures; Birch is half as good as he says, Alder's errors are four times too small."""
    rng = np.random.default_rng(5)
    m = observed(elements, np.sort(rng.uniform(1970.0, 2020.0, 60)), 0.02, rng).measures
    pride = np.where(np.arange(60) % 2 > 0, 4.0, 2.0)
    theta = m.theta.copy()
    theta[10 : 10 + slips] += 40.0
    return Pair.from_arrays(
        m.epoch, theta % 360.0, m.rho, m.theta_err / pride, m.rho_err / pride,
        observer=["Alder" if k % 2 else "Birch" for k in range(60)], parallax=40.0,
        parallax_err=0.4,
    )  # fmt: skip


def codes(result) -> list[str]:
    return [one.code for one in result.warnings]


def test_errors_from_the_residuals_are_those_of_the_solution():
    pair = of_two_observers(slips=3)
    fit = solve(pair, errors="from-residuals")
    p = sample(pair, 2000, seed=1, errors="from-residuals")
    for name in ("P", "e", "a", "i"):
        low, middle, high = quantiles(getattr(p, name), p.weight, (0.16, 0.5, 0.84))
        sigma = fit.sigma[name]
        assert 0.5 * (high - low) == pytest.approx(sigma, rel=0.1), name
        assert middle == pytest.approx(getattr(fit.elements, name), abs=0.25 * sigma), name
    assert [group.name for group in p.noise] == [group.name for group in fit.noise]
    assert "down-weighted" in codes(p)
    assert "poor-fit" not in codes(p)
    assert "poor-fit" in codes(sample(pair, 300))


def test_errors_are_said_and_saved(tmp_path):
    pair = of_two_observers()
    p = sample(pair, 300, errors="from-residuals", group_by="observer", offsets="all")
    assert "zero-points-held" in codes(p)
    p.write(tmp_path / "s.fits")
    again = read_samples(tmp_path / "s.fits")
    assert (again.errors, again.noise) == ("from-residuals", p.noise)
    from relorbit.derive.posterior import summary

    text = posterior_text(again, summary(again, 2027.0))
    assert "errors from the residuals" in text
    assert "Alder" in text
    plain = sample(pair, 300)
    assert (plain.errors, plain.noise) == ("as-given", ())
    assert "errors as given" in posterior_text(plain, summary(plain, 2027.0))


def test_errors_that_contradict_each_other_are_refused():
    pair = of_two_observers()
    with pytest.raises(InputError, match="one of the two"):
        sample(pair, 300, errors="from-residuals", scale_errors=True)
    with pytest.raises(InputError, match="belong to errors taken from the residuals"):
        sample(pair, 300, group_by="observer")
    few = observed(ORBIT, np.array([1985.0, 1993.0, 2001.0]), 0.02, np.random.default_rng(6))
    with pytest.raises(Undetermined, match="an orbit needs at least"):
        sample(few, 300, errors="from-residuals")


def test_kind_is_not_misled_by_errors_that_are_too_small():
    """A straight line with errors four times too small may look curved; not with its own."""
    rng = np.random.default_rng(2)
    epoch = np.linspace(1980.0, 2020.0, 30)
    z = 2.0 + 1.0j + (0.02 + 0.01j) * (epoch - 2000.0)
    z = z + 0.04 * (rng.normal(size=30) + 1j * rng.normal(size=30))
    pair = Pair.from_arrays(epoch, np.degrees(np.angle(z)) % 360.0, np.abs(z),
                            np.degrees(0.01 / np.abs(z)), np.full(30, 0.01))  # fmt: skip
    proud, sober = kind(pair), kind(pair, errors="from-residuals")
    assert proud.odds_orbit > 20.0
    assert sober.odds_orbit < 3.0
    assert sober.posterior.errors == "from-residuals"


def test_the_answer_to_a_short_arc_has_the_errors_that_solve_was_asked_for():
    rng = np.random.default_rng(4)
    slow = observed(Elements(1000.0, 1990.0, 0.3, 3.0, 60.0, 40.0, 100.0),
                    np.linspace(1980.0, 2020.0, 24), 0.02, rng)  # fmt: skip
    m = slow.measures
    proud = Pair.from_arrays(m.epoch, m.theta, m.rho, m.theta_err / 4.0, m.rho_err / 4.0)
    error = Undetermined("no", code="straight-line")
    given = short_arc_answer(proud, error).known
    found = short_arc_answer(proud, error, errors="from-residuals").known
    assert found["motion_sigma"] / given["motion_sigma"] == pytest.approx(4.0, rel=0.3)


def test_what_is_missing_is_said(covered):
    bare = replace(covered, parallax_err_mas=None)
    assert "parallax-error-missing" in codes(sample(bare, 300))
    far = replace(covered, parallax_mas=0.5, parallax_err_mas=0.01)
    assert "mass-implausible" in codes(sample(far, 300))
    below = replace(covered, parallax_mas=-1.0)
    p = sample(below, 300)
    assert p.mass is None
    assert "parallax-unusable" in codes(p)
    m = covered.measures
    assert "default-errors" in codes(sample(Pair.from_arrays(m.epoch, m.theta, m.rho), 300))
    assert codes(sample(covered, 300)) == []


def test_a_degenerate_answer_says_what_is_known_all_the_same(covered):
    with pytest.raises(Undetermined, match="Known: at ") as caught:
        sample(covered, 500, prior=Prior(period_range=(5.0, 6.0)))
    assert caught.value.known["motion_sigma"] > 0.0


def test_exact_measures_have_no_residuals_to_take_errors_from():
    """Errors fall to nothing, and no draw is near enough: said, no fault."""
    rho = np.abs(np.linspace(-1.0, 1.0, 11)) + 1e-6
    theta = np.where(np.arange(11) < 5, 45.0, 225.0)
    pair = Pair.from_arrays(np.linspace(2000.0, 2020.0, 11), theta, rho, np.full(11, 1.0),
                            np.full(11, 0.02))  # fmt: skip
    with pytest.raises(Undetermined, match="errors of the measures too small"):
        sample(pair, 300, errors="from-residuals")


def test_a_separation_of_nothing_is_weighed_too():
    rng = np.random.default_rng(3)
    m = observed(ORBIT, np.sort(rng.uniform(1970.0, 2020.0, 40)), 0.02, rng).measures
    rho = np.where(np.arange(40) == 7, 0.0, m.rho)
    pair = Pair.from_arrays(m.epoch, m.theta, rho, m.theta_err, m.rho_err)
    (group,) = sample(pair, 300, errors="from-residuals").noise
    assert group.share == pytest.approx(1.0)
    assert 0.01 < group.across_arcsec < 0.04


def test_the_density_of_a_prior_mass_is_one_in_all():
    """Also where the mass is hardly known and half of its Gaussian would lie below 0."""
    prior = Prior(mass=(1.0, 2.0), period_range=(10.0, 100.0), axis_range=(1e-3, 1e3))
    ln_a = np.linspace(np.log(1e-4), np.log(10.0), 20_001)
    density = np.exp(prior.log_density_of_axis(np.exp(ln_a), np.full(ln_a.size, 50.0), 40.0))
    assert np.trapezoid(density, ln_a) == pytest.approx(1.0, abs=1e-4)


def test_progress_is_reported_while_a_prior_mass_is_checked(covered):
    """What progress raises is how to cancel: it must be called there too."""
    free, checked = [], []
    sample(covered, 300, on_progress=free.append)
    sample(covered, 300, prior="mass=2:0.5", on_progress=checked.append)
    assert checked.count(0.0) > free.count(0.0) + 3
