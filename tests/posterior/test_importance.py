"""The parts that the sampler is built of: weights, mixtures, proposals, priors, against theory."""

from __future__ import annotations

import numpy as np
import pytest
from invented import ORBIT
from simulate import observed

from relorbit.orbit.elements import Elements, complex_position, projection
from relorbit.solve.conditional import draw_constants, exact_chi2, unit_places
from relorbit.solve.mixture import (
    HIGHEST_L,
    Mixture,
    coordinates_of,
    fitted,
    mixture_around,
    shape_of,
)
from relorbit.solve.observations import observe
from relorbit.solve.prior import Prior
from relorbit.solve.residuals import residuals
from relorbit.solve.target import target_of
from relorbit.solve.weights import (
    around,
    circular_mean,
    effective_size,
    normalised,
    pareto_k,
    quantiles,
    resampled,
)


def test_effective_size_of_equal_and_of_one_weight():
    assert effective_size(np.full(50, 0.02)) == pytest.approx(50.0)
    assert effective_size(np.array([0.0, 3.0, 0.0])) == pytest.approx(1.0)
    assert effective_size(np.zeros(4)) == 0.0


@pytest.mark.parametrize("k", [0.2, 0.5, 0.9])
def test_pareto_k_is_found_of_weights_drawn_with_it(k):
    rng = np.random.default_rng(1)
    weight = (rng.random(40_000) ** -k) / k  # a generalised Pareto tail of shape k
    assert pareto_k(weight / weight.sum()) == pytest.approx(k, abs=0.12)


def test_pareto_k_of_bounded_weights_is_small_and_of_few_weights_unknown():
    rng = np.random.default_rng(1)
    assert pareto_k(rng.random(10_000)) < 0.1
    assert np.isnan(pareto_k(rng.random(10)))


def test_normalised_survives_far_exponents():
    weight = normalised(np.array([-2000.0, -2000.0 + np.log(3.0), -np.inf]))
    assert weight == pytest.approx([0.25, 0.75, 0.0])
    assert not normalised(np.full(3, -np.inf)).any()


def test_quantiles_weigh():
    values, weight = np.array([3.0, 1.0, 2.0, np.nan]), np.array([1.0, 1.0, 2.0, 5.0])
    assert quantiles(values, weight, 0.5) == pytest.approx(2.0)
    rng = np.random.default_rng(3)
    x = rng.normal(size=20_000)
    # weights that turn a standard Gaussian into one about 0.5
    shifted = quantiles(x, np.exp(0.5 * x), (0.16, 0.5, 0.84))
    assert shifted == pytest.approx([0.5 - 0.994, 0.5, 0.5 + 0.994], abs=0.05)


def test_angles_about_the_end_of_the_circle():
    angle, weight = np.array([350.0, 10.0, 20.0]), np.array([1.0, 1.0, 0.0])
    assert around(circular_mean(angle, weight), 0.0) == pytest.approx(0.0, abs=1e-9)
    assert around(angle, 0.0) == pytest.approx([-10.0, 10.0, 20.0])


def test_resampling_is_in_proportion():
    rows = resampled(np.array([0.1, 0.0, 0.9]), 1000, np.random.default_rng(0))
    assert np.bincount(rows, minlength=3) == pytest.approx([100, 0, 900], abs=1)


def test_coordinates_go_there_and_back_and_stretch_as_said():
    rng = np.random.default_rng(2)
    columns = rng.normal(size=50), rng.uniform(0.01, 6.0, 50), rng.uniform(-0.45, 0.45, 50)
    y = np.stack(columns, axis=-1)
    q, stretch = shape_of(y)
    assert coordinates_of(q) == pytest.approx(y, abs=1e-9)
    h = 1e-6
    columns = [(shape_of(y + h * d)[0] - shape_of(y - h * d)[0]) / (2 * h) for d in np.eye(3)]
    jacobian = np.stack(columns, axis=-1)
    assert np.log(np.abs(np.linalg.det(jacobian))) == pytest.approx(stretch, abs=1e-4)


def a_mixture() -> Mixture:
    centre = np.array([[1.0, 0.5, 0.45], [2.0, 2.0, -0.1]])
    spread = np.array([[[0.05, 0.02, 0.0], [0.02, 0.1, 0.0], [0.0, 0.0, 0.005]], np.eye(3) * 0.02])
    return mixture_around(centre, spread, np.array([0.3, 0.7]), (0.0, 4.0))


def test_a_mixture_draws_by_its_density():
    mixture, rng = a_mixture(), np.random.default_rng(5)
    y = mixture.draw(100_000, rng)
    volume = 4.0 * HIGHEST_L
    flat = rng.random((400_000, 3)) * [4.0, HIGHEST_L, 1.0] - [0.0, 0.0, 0.5]
    density = np.exp(mixture.log_density(flat))
    # the share of the draws that lies inside, and where: by Monte Carlo over the box
    assert density.mean() * volume == pytest.approx(y.shape[0] / 100_000, abs=0.01)
    inside = (flat[:, 0] < 1.5) & (np.abs(flat[:, 2]) > 0.4)
    expected = (density * inside).mean() * volume
    drawn = np.count_nonzero((y[:, 0] < 1.5) & (np.abs(y[:, 2]) > 0.4)) / 100_000
    assert drawn == pytest.approx(expected, abs=0.01)


def test_a_fitted_mixture_comes_near_the_points_also_across_the_end_of_the_circle():
    rng = np.random.default_rng(5)
    one = rng.normal([1.0, 0.5, 0.5], [0.05, 0.1, 0.03], (4000, 3))
    other = rng.normal([3.0, 3.0, 0.0], [0.1, 0.3, 0.02], (2000, 3))
    y = np.concatenate([one, other])
    y[:, 2] -= np.rint(y[:, 2])
    mixture = fitted(y, np.full(6000, 1.0 / 6000), 4, (0.0, 4.0), rng)
    again = mixture.draw(20_000, rng)
    near = np.abs(again[:, 0] - 1.0) < 0.3
    assert near.mean() == pytest.approx(2.0 / 3.0, abs=0.07)
    assert np.median(np.abs(again[near, 2])) > 0.45


def test_the_prior_of_the_constants_has_the_integral_one():
    prior = Prior(axis_range=(0.5, 2.0))
    rng = np.random.default_rng(6)
    # alpha and beta from a density that is known, heavy towards face-on orbits
    low, high = -9.0, np.log(2.0)
    p, q = np.exp(rng.uniform(low, high, (2, 400_000)))
    drawn = 1.0 / (2.0 * np.pi * (high - low)) ** 2 / (p * p * q * q)
    density = np.exp(prior.log_density_of_projection(p + 0j, q + 0j))
    density *= np.exp(prior.log_density_of_axis(p + q, np.ones_like(p), None))
    assert (density / drawn).mean() == pytest.approx(1.0, abs=0.03)
    flat = Prior(constants="flat", axis_range=(0.5, 2.0))
    density = np.exp(flat.log_density_of_projection(p + 0j, q + 0j))
    assert (density / drawn).mean() == pytest.approx(1.0, abs=0.03)


def test_the_default_prior_is_isotropic_and_uniform_in_ln_a():
    """alpha and beta of random orbits lie as the density says: compared in boxes."""
    rng = np.random.default_rng(7)
    count = 200_000
    a, cosine = np.exp(rng.uniform(np.log(0.5), np.log(2.0), count)), rng.uniform(-1, 1, count)
    p, q = 0.5 * a * (1 + cosine), 0.5 * a * (1 - cosine)
    for box in ((0.2, 0.4, 0.3, 0.6), (0.8, 1.2, 0.1, 0.2), (0.05, 0.1, 0.9, 1.4)):
        inside = (p > box[0]) & (p < box[1]) & (q > box[2]) & (q < box[3])
        P, Q = rng.uniform(*box[:2], 50_000), rng.uniform(*box[2:], 50_000)
        prior = Prior(axis_range=(0.5, 2.0))
        density = np.exp(prior.log_density_of_projection(P + 0j, Q + 0j))
        density *= np.exp(prior.log_density_of_axis(P + Q, np.ones_like(P), None))
        area = (box[1] - box[0]) * (box[3] - box[2])
        expected = (density * P * Q).mean() * (2 * np.pi) ** 2 * area
        assert inside.mean() == pytest.approx(expected, rel=0.05)


def a_target(elements: Elements, error: float, prior: Prior):
    rng = np.random.default_rng(11)
    epoch = np.sort(rng.uniform(1970.0, 2020.0, 25))
    pair = observed(elements, epoch, error, rng)
    o = observe(pair.measures)
    prior = prior.completed(pair, o)
    return pair, o, target_of(o, complex_position(elements, o.epoch), o.mean_epoch, prior)


def test_chi2_of_the_sampler_is_that_of_the_residuals():
    pair, o, target = a_target(ORBIT, 0.1, Prior())
    q = np.array([[np.log(50.0), 0.3, (o.mean_epoch - 1990.0) / 50.0]])
    room = np.empty((7, 1, len(o)))
    X, Y = unit_places(target.time, q, room)
    alpha, beta = (np.array([value]) for value in projection(ORBIT))
    chi2 = exact_chi2(target, X, Y, alpha, beta, room[2:])
    assert chi2[0] == pytest.approx(residuals(ORBIT, pair.measures).chi2, rel=1e-9)


@pytest.mark.parametrize("i", [60.0, 2.0, 178.0])
def test_the_weights_integrate_the_constants_out(i):
    """The mean weight at one (P, e, T) against a plain Monte Carlo over a box of constants."""
    elements = Elements(50.0, 1990.0, 0.3, 1.0, i, 40.0, 100.0)
    _, o, target = a_target(elements, 0.25, Prior(axis_range=(0.1, 4.0)))
    rng = np.random.default_rng(12)
    q = np.array([[np.log(50.0), 0.3, (o.mean_epoch - 1990.0) / 50.0]])
    draws = draw_constants(target, np.repeat(q, 40_000, axis=0), rng)
    weight = np.exp(draws.log_weight + 60.0)
    # plain: uniform in ln p, ln q and both angles, which is dense where the prior is
    count = 400_000
    centre = projection(elements)
    large = 0 if abs(centre[0]) > abs(centre[1]) else 1
    width = 0.45
    big = centre[large] + width * ((2 * rng.random(count) - 1) + 1j * (2 * rng.random(count) - 1))
    low, high = np.log(1e-6), np.log(0.8)
    length = np.exp(rng.uniform(low, high, count))
    small = length * np.exp(2j * np.pi * rng.random(count))
    log_drawn = -np.log(2.0 * np.pi * (high - low)) - 2.0 * np.log(length)
    if i == 60.0:  # no cusp within reach: a box does better
        square = rng.random((2, count)) * 2.0 - 1.0
        small = centre[1 - large] + width * (square[0] + 1j * square[1])
        log_drawn = -2.0 * np.log(2.0 * width)
    alpha, beta = (big, small) if large == 0 else (small, big)
    X, Y = unit_places(target.time, q, np.empty((7, 1, len(o))))
    w = (X + 1j * Y)[0]
    chi2 = np.empty(count)
    for start in range(0, count, 20_000):
        part = slice(start, start + 20_000)
        z = alpha[part, None] * w + beta[part, None] * np.conj(w)
        gap = np.angle(z * np.exp(-1j * o.theta)) * o.per_theta
        along = (np.abs(z) - o.rho) * o.per_rho
        chi2[part] = (gap**2).sum(axis=1) + (along**2).sum(axis=1)
    prior = target.prior.log_density_of_projection(big, small)
    prior += target.prior.log_density_of_axis(abs(big) + abs(small), 50.0, None)
    prior += target.prior.log_density_of_shape(q[:, 1])[0]
    log_drawn = log_drawn - 2.0 * np.log(2.0 * width)
    plain = np.exp(prior - 0.5 * chi2 - log_drawn + 60.0)
    error = np.hypot(plain.std() / np.sqrt(count), weight.std() / np.sqrt(weight.size))
    assert weight.mean() == pytest.approx(plain.mean(), abs=4.0 * error)
    assert error < 0.05 * plain.mean()
    assert pareto_k(weight / weight.sum()) < 0.6
