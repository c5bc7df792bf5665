"""Straight motion, its marginal likelihood, and what kind of pair it is."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from invented import ORBIT
from simulate import observed

from relorbit.errors import InputError, Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, polar
from relorbit.orbit.straight import rectilinear_elements, straight_position, straight_sigma
from relorbit.show.kind_text import kind_text
from relorbit.solve.flat_models import at_rest, straight
from relorbit.solve.kind import Secondary, kind
from relorbit.solve.limits import straight_motion
from relorbit.solve.observations import observe
from relorbit.solve.short_arc import curved_motion, short_arc_answer
from relorbit.solve.solver import solve

EPOCH = np.linspace(1980.0, 2020.0, 24)


def measured(z: np.ndarray, epoch: np.ndarray, error: float, seed: int, **who: object) -> Pair:
    rng = np.random.default_rng(seed)
    noise = rng.normal(size=z.size) + 1j * rng.normal(size=z.size)
    theta, rho = polar(z + error * noise)
    errors = np.degrees(error / rho), np.full(z.size, error)
    return Pair.from_arrays(epoch, theta, rho, *errors, **who)


def passing(seed: int = 1, **who: object) -> Pair:
    """Closest at 2000.0 at 2 arcsec and theta 30, moving 0.05 arcsec a year towards theta 120."""
    z = 2.0 * np.exp(1j * np.radians(30.0)) + 0.05 * np.exp(1j * np.radians(120.0)) * (EPOCH - 2000)
    return measured(z, EPOCH, 0.02, seed, **who)


def test_rectilinear_elements_of_a_known_line():
    place = 2.0 * np.exp(1j * np.radians(30.0)) - 0.5 * np.exp(1j * np.radians(120.0))
    motion = 0.05 * np.exp(1j * np.radians(120.0))
    found = rectilinear_elements(1990.0, place, motion, np.zeros((4, 4)))
    assert found.closest_theta == pytest.approx(30.0)
    assert found.closest_rho == pytest.approx(2.0)
    assert found.closest_epoch == pytest.approx(2000.0)
    assert found.direction == pytest.approx(120.0)
    assert found.motion == pytest.approx(0.05)
    assert abs(straight_position(1990.0, place, motion, 2000.0)) == pytest.approx(2.0)
    with pytest.raises(ValueError, match="nothing moves"):
        rectilinear_elements(1990.0, place, 0j, np.zeros((4, 4)))


def test_errors_of_rectilinear_elements_are_those_of_repeated_measuring():
    found = [straight_motion(observe(passing(seed).measures)).rectilinear() for seed in range(300)]
    for name in ("closest_theta", "closest_rho", "closest_epoch", "direction", "motion"):
        values = np.array([getattr(one, name) for one in found])
        said = np.mean([one.sigma[name] for one in found])
        assert values.std(ddof=1) == pytest.approx(said, rel=0.17), name


def test_the_error_of_a_straight_prediction_grows_from_mid_epoch():
    line = straight_motion(observe(passing().measures))
    sigma = straight_sigma(line.epoch, line.covariance, [line.epoch, 2040.0, 2060.0])
    assert sigma[0] == pytest.approx(0.02 / np.sqrt(EPOCH.size), rel=0.1)
    assert sigma[0] < sigma[1] < sigma[2]


def test_marginal_likelihood_of_straight_motion_against_a_sum_over_a_grid():
    """Seven coarse measures, the prior sampled and the likelihood averaged."""
    epoch = np.linspace(1990.0, 2010.0, 7)
    z = 1.0 + 0.3j + (0.004 - 0.01j) * (epoch - 2000.0)
    o = observe(measured(z, epoch, 0.15, 3).measures)
    line = straight_motion(o)
    start = 2000.0, line.place + line.motion * (2000.0 - line.epoch), line.motion
    ranges = (0.2, 5.0), (1e-4, 0.5)
    found = straight(o, start, *ranges, np.random.default_rng(1))
    rng = np.random.default_rng(2)
    count, total = 400_000, []
    rho, speed = (np.exp(rng.uniform(*np.log(ends), count)) for ends in ranges)
    place = rho * np.exp(1j * np.radians(rng.uniform(-40, 80, count)))
    motion = speed * np.exp(2j * np.pi * rng.random(count))
    share = 120.0 / 360.0  # of the directions; the others have no likelihood to speak of
    for k in range(0, count, 50_000):
        part = slice(k, k + 50_000)
        w = place[part, None] + motion[part, None] * (o.epoch - 2000.0)
        gap = np.angle(w * np.exp(-1j * o.theta)) * o.per_theta
        along = (np.abs(w) - o.rho) * o.per_rho
        total.append(np.exp(-0.5 * ((gap**2).sum(axis=1) + (along**2).sum(axis=1))))
    plain = np.concatenate(total) * share
    error = plain.std() / np.sqrt(count) / plain.mean()
    assert error < 0.05
    assert found.log_evidence == pytest.approx(np.log(plain.mean()), abs=4.0 * error + 0.03)
    rest = at_rest(o, ranges[0], np.random.default_rng(1))
    assert rest.effective_size > 1000
    assert rest.chi2 >= found.chi2


def test_an_optical_pair_is_called_so_and_an_orbit_shown():
    optical = kind(passing(), prior=None)
    assert optical.verdict in ("optical", "open")
    assert optical.odds_orbit < 1.0
    assert optical.hypotheses[1].bic < min(optical.hypotheses[0].bic, optical.hypotheses[2].bic)
    assert optical.rectilinear.closest_rho == pytest.approx(2.0, abs=0.03)
    rng = np.random.default_rng(2)
    found = kind(observed(ORBIT, EPOCH, 0.02, rng))
    assert found.verdict == "orbit"
    assert found.odds_orbit > 1e6
    assert found.decider is None
    assert "orbit shown" in kind_text(found)


def test_a_passing_star_too_fast_for_any_pair_is_optical_by_its_speed():
    fast = kind(passing(parallax=2.0, parallax_err=0.05), mass=(2.0, 0.5))
    test = fast.escape
    # 2 arcsec at 2 mas are 1000 au, 0.05 arcsec a year are 118.5 km/s
    assert test.distance_au == pytest.approx(1000.0, rel=0.05)
    assert test.speed_km_s == pytest.approx(118.5, rel=0.03)
    # 42.1 km/s at 1 au from 1 sun: sqrt(2 GM/r)
    assert test.escape_km_s == pytest.approx(42.12 * np.sqrt(2.0 / 1000.0), rel=0.03)
    ratio = test.speed_km_s / test.escape_km_s
    assert test.mass_needed == pytest.approx(2.0 * ratio**2, rel=1e-6)
    assert fast.verdict == "optical"
    assert "could not hold them" in " ".join(kind_text(fast).split())


def test_parallaxes_and_proper_motions_of_both_stars_are_used():
    pair = passing(parallax=20.0, parallax_err=0.3, pm_ra=10.0, pm_dec=-20.0)
    far = kind(pair, secondary=Secondary(4.0, 0.2, 10.0, 30.0, 0.5))
    assert far.escape.source == "proper motions"
    assert far.escape.parallax_gap == pytest.approx(16.0 / np.hypot(0.3, 0.2))
    assert far.verdict == "optical"
    assert "two stars passing at different distances (odds" in kind_text(far)
    # 50 mas a year at 20 mas: 2.5 au a year
    assert far.escape.speed_km_s == pytest.approx(2.5 * 4.74047, rel=1e-3)


def test_a_mass_that_is_given_is_held_against_the_speed():
    """0.05 arcsec a year at 20 mas and 2 arcsec: bound by 40 suns or more, but not by 2."""
    pair = passing(parallax=20.0, parallax_err=0.1)
    free, light, heavy = (kind(pair, mass=mass) for mass in (None, (2.0, 0.5), (60.0, 5.0)))
    assert 3.0 < light.escape.mass_needed < 60.0
    assert light.escape.speed_km_s > light.escape.escape_km_s
    assert [free.verdict, light.verdict, heavy.verdict] == ["open", "optical", "open"]
    assert "optical: two stars passing too fast to be bound (odds" in kind_text(light)


@pytest.mark.parametrize(
    ("said", "why"),
    [
        ({"parallax_mas": 20.0}, "the parallax of the companion needs an error above 0"),
        ({"pm_ra_mas_yr": 1.0, "pm_dec_mas_yr": 2.0}, "the proper motion of the companion needs"),
        ({"pm_ra_mas_yr": 1.0, "pm_err_mas_yr": 0.1}, "needs both pm_ra and pm_dec"),
    ],
)
def test_a_companion_without_errors_is_refused(said, why):
    with pytest.raises(InputError, match=why):
        Secondary(**said)


def test_a_motion_of_the_companion_needs_that_of_the_pair():
    pair = passing(parallax=20.0, parallax_err=0.1)
    other = Secondary(pm_ra_mas_yr=1.0, pm_dec_mas_yr=2.0, pm_err_mas_yr=0.1)
    with pytest.raises(InputError, match="that of the pair itself"):
        kind(pair, secondary=other)


def test_a_slow_pair_is_left_open_with_what_would_decide():
    rng = np.random.default_rng(4)
    slow = observed(Elements(1000.0, 1990.0, 0.3, 3.0, 60.0, 40.0, 100.0), EPOCH, 0.02, rng)
    found = kind(replace(slow, parallax_mas=20.0, parallax_err_mas=0.2))
    assert found.verdict == "open"
    text = " ".join(kind_text(found).split())
    assert "curvature not shown yet: common motion, bound only if the total mass exceeds" in text
    assert found.decider.epoch > 2020.0
    # the measure named must be able to tell the two apart
    assert found.decider.gap > 5.0 * found.decider.precision
    assert "would decide" in text


def test_stars_at_rest_to_each_other_are_seen_as_such():
    still = measured(np.full(EPOCH.size, 1.5 + 0.5j), EPOCH, 0.02, 5)
    found = kind(still)
    rest, moving, orbit = (one.log_evidence for one in found.hypotheses)
    assert rest > max(moving, orbit)
    assert "no relative motion shown" in kind_text(found)


def test_kind_needs_positions_at_two_epochs():
    pair = Pair.from_arrays([2000.0, 2000.0, 2010.0], [10.0, 11.0, 20.0], [1.0, 1.0, np.nan],
                            [1.0] * 3, [0.02, 0.02, np.nan])  # fmt: skip
    with pytest.raises(Undetermined, match="measured at one epoch only"):
        kind(pair)


def test_kind_refuses_nonsense():
    with pytest.raises(InputError, match="speeds"):
        kind(passing(), speed_range=(1.0, 0.1))
    with pytest.raises(InputError, match="mass"):
        kind(passing(), mass=(-1.0, 0.1))


def test_a_short_arc_says_what_it_knows():
    rng = np.random.default_rng(4)
    slow = observed(Elements(1000.0, 1990.0, 0.3, 3.0, 60.0, 40.0, 100.0), EPOCH, 0.02, rng)
    with pytest.raises(Undetermined) as caught:
        solve(slow)
    answer = short_arc_answer(slow, caught.value)
    for word in ("Known: at", "a^3/P^2 is", "relorbit sample", "longer than about"):
        assert word in answer.reason
    span = answer.known["axis_cubed_over_period_squared"]
    assert span["low95"] < 27.0 / 1e6 < span["high95"]
    # another cause comes back as it is
    other = Undetermined("no", code="too-few-epochs")
    assert short_arc_answer(slow, other) is other


def test_acceleration_is_seen_where_there_is_one():
    z = 2.0 + 0.02j * (EPOCH - 2000.0) + 0.5 * (0.0004 - 0.0002j) * (EPOCH - 2000.0) ** 2
    curve = curved_motion(observe(measured(z, EPOCH, 0.01, 7).measures))
    assert curve.seen
    gap = curve.acceleration - (0.0004 - 0.0002j)
    assert max(abs(gap.real), abs(gap.imag)) < 4.0 * curve.acceleration_sigma
    assert not curved_motion(observe(passing().measures)).seen
