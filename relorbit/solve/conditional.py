"""The constants at many (P, e, phase): drawn from nearly their own posterior, and weighed exactly.

For measures with small errors the likelihood is a Gaussian in x and y, so that at given (P, e, T)
the Thiele-Innes constants have a Gaussian posterior which can be integrated over exactly (Lucy
2014, A&A 563, A126). Here they are drawn from that Gaussian, and the weight of a draw carries
what the Gaussian is not: the likelihood in theta and rho themselves and the prior.

In place of A, B, F, G stand alpha and beta, z = alpha w + beta conj(w) (see `orbit.elements`).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from relorbit.orbit.kepler import TWO_PI, FloatArray, eccentric_anomaly
from relorbit.orbit.third_law import MASS_FACTOR
from relorbit.solve.target import Target

BLOCK = 16384  # values at a time: the working arrays stay in the processor's cache
WIDE = 2.5  # some draws come from a Gaussian wider by this
WIDE_SHARE, WIDE_SHARE_VAGUE = 0.04, 0.4  # where the measures, and where the prior decides
CUSP_SHARE, CUSP_WITHIN = 0.35, 4.5  # draws around a face-on orbit, where it is so many sigma off


@dataclass(frozen=True)
class Draws:
    """One draw of the constants for each of m (P, e, phase), and its weight.

    Attributes
    ----------
    alpha, beta : complex ndarray, shape (m,), arcsec.
    parallax : ndarray, shape (m,), mas, or None.
    log_weight : ndarray, shape (m,)
        ln of likelihood times prior over the density of the draw, the draw of (P, e, phase) left
        to the caller; the likelihood without its constant factor.
    chi2 : ndarray, shape (m,), in theta and rho.
    """

    alpha: NDArray[np.complex128]
    beta: NDArray[np.complex128]
    parallax: FloatArray | None
    log_weight: FloatArray
    chi2: FloatArray

    def joined(self, other: Draws) -> Draws:
        """These and others."""
        columns = (
            None if one is None else np.concatenate([one, two])
            for one, two in zip(vars(self).values(), vars(other).values(), strict=True)
        )
        return Draws(*columns)


def draw_constants(target: Target, q: FloatArray, rng: np.random.Generator) -> Draws:
    """Draw the constants at each of m places q, shape (m, 3): ln P, e, phase in turns."""
    size = q.shape[0]
    normals, choice = rng.standard_normal((size, 4)), rng.random((size, 3))
    alpha, beta = np.empty((2, size), dtype=complex)
    log_weight, chi2 = np.empty((2, size))
    rows = max(1, BLOCK // target.time.size)
    room = np.empty((7, min(rows, size), target.time.size))
    for start in range(0, size, rows):
        part = slice(start, start + rows)
        block = room[:, : q[part].shape[0]]
        X, Y = unit_places(target.time, q[part], block)
        small, large, swapped, density = _draw(
            target, X, Y, block, normals[part], choice[part], np.exp(q[part, 0])
        )
        first, second = np.where(swapped, small, large), np.where(swapped, large, small)
        alpha[part], beta[part] = first, second
        chi2[part] = exact_chi2(target, X, Y, first, second, block[2:])
        log_weight[part] = target.prior.log_density_of_projection(large, small)
        log_weight[part] -= 0.5 * chi2[part] + density
    log_weight += target.prior.log_density_of_shape(q[:, 1])
    P, a = np.exp(q[:, 0]), np.abs(alpha) + np.abs(beta)
    parallax = None
    if target.parallax is not None:
        parallax, odds = _parallaxes(target, P, a, rng)
        log_weight += odds
    log_weight += target.prior.log_density_of_axis(a, P, parallax)
    return Draws(alpha, beta, parallax, log_weight, chi2)


def _parallaxes(
    target: Target, P: FloatArray, a: FloatArray, rng: np.random.Generator
) -> tuple[FloatArray, FloatArray]:
    """Parallaxes (mas), shape (m,), and ln of their own density over that they are drawn from.

    With a prior mass they come from near the parallax that gives this mass, as far as the error
    of the parallax allows.
    """
    value, sigma = target.parallax
    if target.prior.mass is None or not sigma > 0.0:
        return _positive(value, sigma, P.size, rng), np.zeros(P.size)
    mass, mass_sigma = target.prior.mass
    wanted = 1000.0 * a * np.cbrt(MASS_FACTOR / (mass * P**2))
    precision = 1.0 / sigma**2 + (3.0 * mass / (mass_sigma * wanted)) ** 2
    centre = (value / sigma**2 + wanted * (3.0 * mass / (mass_sigma * wanted)) ** 2) / precision
    step = rng.standard_normal(P.size)
    # wings: the mass goes as the third power, which is no Gaussian
    wide = rng.random(P.size) < WIDE_SHARE_VAGUE
    step *= np.where(wide, WIDE, 1.0)
    found = centre + step / np.sqrt(precision)
    bell = (1.0 - WIDE_SHARE_VAGUE) * np.exp(-0.5 * step**2)
    bell += WIDE_SHARE_VAGUE * np.exp(-0.5 * (step / WIDE) ** 2) / WIDE
    odds = -0.5 * ((found - value) / sigma) ** 2 - np.log(sigma)
    odds -= np.log(bell) + 0.5 * np.log(precision)
    return np.maximum(found, 1e-9), np.where(found > 0.0, odds, -np.inf)


def _positive(value: float, sigma: float, size: int, rng: np.random.Generator) -> FloatArray:
    """Draws of a Gaussian, those at or below 0 drawn anew."""
    found = rng.normal(value, sigma, size)
    while (wrong := np.flatnonzero(found <= 0.0)).size:
        found[wrong] = rng.normal(value, sigma, wrong.size)
    return found


def unit_places(
    time: FloatArray, q: FloatArray, room: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """X and Y on the unit ellipse, shape (m, n), in the first two arrays of `room`.

    `time` counts from the reference epoch, at which q has its phase; q has shape (m, 3).
    """
    X, Y, mean, whole = room[:4]
    e = q[:, 1:2]
    np.multiply(np.exp(-q[:, :1]), time, out=mean)
    mean += q[:, 2:3]
    np.rint(mean, out=whole)
    mean -= whole
    mean *= TWO_PI
    half = eccentric_anomaly(mean, e)
    half *= 0.5
    # by the tangent: the quickest of the functions, and cos E - 1 keeps its precision
    tangent = np.tan(half, out=half)
    np.multiply(tangent, tangent, out=X)
    np.add(X, 1.0, out=Y)
    np.reciprocal(Y, out=Y)
    X *= Y
    X *= -2.0
    X += 1.0 - e
    Y *= tangent
    Y *= 2.0 * np.sqrt((1.0 - e) * (1.0 + e))
    return X, Y


def exact_chi2(
    target: Target,
    X: FloatArray,
    Y: FloatArray,
    alpha: NDArray[np.complex128],
    beta: NDArray[np.complex128],
    room: FloatArray,
) -> FloatArray:
    """chi2 in theta (wrapped) and rho, shape (m,), for X, Y of shape (m, n)."""
    x, y, other, gap = room[:4]
    A, B = (alpha + beta).real[:, None], (alpha + beta).imag[:, None]
    F, G = (beta - alpha).imag[:, None], (alpha - beta).real[:, None]
    np.multiply(X, A, out=x)
    x += np.multiply(Y, F, out=other)
    np.multiply(X, B, out=y)
    y += np.multiply(Y, G, out=other)
    along, across = other, gap
    np.multiply(x, target.cosine, out=along)
    along += np.multiply(y, target.sine, out=gap)
    np.multiply(y, target.cosine, out=across)
    spare = room[4]
    across -= np.multiply(x, target.sine, out=spare)
    np.arctan2(across, along, out=gap)
    gap *= target.per_theta
    chi2 = np.einsum("mn,mn->m", gap, gap)
    x *= x
    y *= y
    x += y
    np.sqrt(x, out=x)
    x -= target.rho
    x *= target.per_rho
    return chi2 + np.einsum("mn,mn->m", x, x)


def _lift() -> FloatArray:
    """What turns the nine sums of weights times XX, XY, YY into the normal matrix, shape (9, 16).

    The unknowns (Re alpha, Im alpha, Re beta, Im beta) move x and y by the rows of `MOVES` times
    X and times Y.
    """
    lift = np.empty((3, 3, 4, 4))
    for row, (first, second) in enumerate(((0, 0), (0, 1), (1, 1))):
        for column, (one, other) in enumerate(((0, 0), (0, 1), (1, 1))):
            total = np.zeros((4, 4))
            for s, t in {(first, second), (second, first)}:
                for k, m in {(one, other), (other, one)}:
                    total += np.outer(MOVES[k, s], MOVES[m, t])
            lift[row, column] = total
    return lift.reshape(9, 16)


# [x or y, X or Y, unknown]
MOVES = np.array([[[1, 0, 1, 0], [0, -1, 0, 1]], [[0, 1, 0, 1], [1, 0, -1, 0]]], dtype=float)
LIFT = _lift()


def _normal_equations(
    target: Target, X: FloatArray, Y: FloatArray, product: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Normal matrix, shape (m, 4, 4), and right side for (Re alpha, Im alpha, Re beta, Im beta)."""
    sums = np.empty((X.shape[0], 3, 3))
    for slot, (first, second) in enumerate(((X, X), (X, Y), (Y, Y))):
        sums[:, slot] = np.multiply(first, second, out=product) @ target.weights
    normal = (sums.reshape(-1, 9) @ LIFT).reshape(-1, 4, 4)
    by_X, by_Y = X @ target.pulls, Y @ target.pulls
    return normal, by_X @ MOVES[:, 0] + by_Y @ MOVES[:, 1]


def _draw(
    target: Target,
    X: FloatArray,
    Y: FloatArray,
    room: FloatArray,
    normals: FloatArray,
    choice: FloatArray,
    P: FloatArray,
) -> tuple[NDArray, NDArray, NDArray[np.bool_], FloatArray]:
    """The smaller and the larger of alpha and beta, which it was, and ln of the draw's density."""
    normal, right = _normal_equations(target, X, Y, room[2])
    loose = np.trace(normal, axis1=1, axis2=2)
    slack = target.ridge * np.eye(4) + 1e-13 * loose[:, None, None] * np.eye(4)
    normal += slack
    centre = np.linalg.solve(normal, right[..., None])[..., 0]
    if target.prior.mass is not None:
        normal, centre = _with_mass(target, normal, right, centre, P)
    swapped = np.hypot(centre[:, 0], centre[:, 1]) < np.hypot(centre[:, 2], centre[:, 3])
    # the smaller one last: its own posterior is then the last block of the inverse root
    order = np.where(swapped[:, None], np.array([2, 3, 0, 1]), np.arange(4))
    rows = np.arange(order.shape[0])[:, None, None]
    normal = normal[rows, order[:, :, None], order[:, None, :]]
    centre = np.take_along_axis(centre, order, axis=1)
    root = np.linalg.cholesky(normal)
    diagonal = np.einsum("mjj->mj", root)
    # where the ridge weighs, the prior decides and has wide wings
    weak = 4.0 * target.ridge > 0.02 * diagonal.min(axis=1) ** 2
    share = np.where(weak, WIDE_SHARE_VAGUE, WIDE_SHARE)
    step, cusp_odds = _steps(root, centre, normals, choice, share)
    square = np.einsum("mj,mj->m", step, step)
    bell = np.log((1.0 - share) + share * np.exp(0.5 * square * (1.0 - WIDE**-2)) / WIDE**4)
    density = bell - 0.5 * square + np.log(cusp_odds)
    density += np.log(diagonal).sum(axis=1) - 2.0 * np.log(TWO_PI)
    c = centre + _solve_transposed(root, step)
    return c[:, 2] + 1j * c[:, 3], c[:, 0] + 1j * c[:, 1], swapped, density


def _with_mass(
    target: Target, normal: FloatArray, right: FloatArray, centre: FloatArray, P: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Normal matrices and centres with the axis that a prior mass asks for as one measure more."""
    mass, mass_sigma = target.prior.mass
    parallax, parallax_sigma = target.parallax
    wanted = 1e-3 * parallax * np.cbrt(mass * P**2 / MASS_FACTOR)
    relative = np.hypot(mass_sigma / (3.0 * mass), parallax_sigma / parallax)
    precision = (relative * wanted) ** -2.0
    # a = |alpha| + |beta|: its gradient at the centre, along which a is the gradient's own length
    length = np.hypot(centre[:, ::2], centre[:, 1::2])
    gradient = centre / np.maximum(np.repeat(length, 2, axis=1), 1e-12)
    pull = precision[:, None] * gradient
    normal = normal + pull[:, :, None] * gradient[:, None, :]
    right = right + pull * wanted[:, None]
    return normal, np.linalg.solve(normal, right[..., None])[..., 0]


def _steps(
    root: FloatArray,
    centre: FloatArray,
    normals: FloatArray,
    choice: FloatArray,
    share: FloatArray,
) -> tuple[FloatArray, FloatArray]:
    """Standardised steps, shape (m, 4), and the factor by which the cusp changes their density.

    The prior goes up as 1/q towards a face-on orbit, q being the modulus of the smaller of alpha
    and beta: where that orbit is within reach, a share of the draws comes from a density with the
    same cusp, so that no weight is without bound.
    """
    wide = choice[:, 0] < share
    step = np.where(wide[:, None], WIDE, 1.0) * normals
    # where the smaller one vanishes, in standardised units: L22' (0 - centre)
    L22 = root[:, 2:, 2:]
    face_on = -np.stack([L22[:, 0, 0] * centre[:, 2] + L22[:, 1, 0] * centre[:, 3],
                         L22[:, 1, 1] * centre[:, 3]], axis=-1)  # fmt: skip
    distance = np.hypot(face_on[:, 0], face_on[:, 1])
    share_cusp = np.where(distance < CUSP_WITHIN, CUSP_SHARE, 0.0)
    reach = np.maximum(1.0, distance)
    at_cusp = choice[:, 1] < share_cusp
    angle, radius = TWO_PI * choice[:, 2], np.abs(normals[:, 2]) * reach
    ring = face_on + radius[:, None] * np.stack([np.cos(angle), np.sin(angle)], axis=-1)
    # the first two then come from their Gaussian, not the wide one: both are narrow together
    step[:, 2:] = np.where(at_cusp[:, None], ring, step[:, 2:])
    step[at_cusp, :2] = normals[at_cusp, :2]
    return step, _cusp_odds(step, face_on, reach, share, share_cusp)


def _cusp_odds(
    step: FloatArray,
    face_on: FloatArray,
    reach: FloatArray,
    share: FloatArray,
    share_cusp: FloatArray,
) -> FloatArray:
    """1 - share + share times the cusp's density over that of the bell in all four steps."""
    radius = np.maximum(np.hypot(*(step[:, 2:] - face_on).T), 1e-300)
    square = np.einsum("mj,mj->m", step, step)
    outer = np.einsum("mj,mj->m", step[:, :2], step[:, :2])
    bell = (1.0 - share) * np.exp(-0.5 * square)
    bell += share * np.exp(-0.5 * square / WIDE**2) / WIDE**4
    cusp = np.exp(-0.5 * (radius / reach) ** 2 - 0.5 * outer) * np.sqrt(2.0 * np.pi)
    cusp *= 2.0 / (TWO_PI * reach * radius)
    with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
        ratio = np.where(share_cusp > 0.0, cusp / np.maximum(bell, 1e-300), 0.0)
    return 1.0 - share_cusp + share_cusp * ratio


def _solve_transposed(root: FloatArray, step: FloatArray) -> FloatArray:
    """x of L' x = step for lower triangular L, shape (m, 4, 4)."""
    x = np.empty_like(step)
    for k in range(3, -1, -1):
        rest = step[:, k]
        for j in range(k + 1, 4):
            rest = rest - root[:, j, k] * x[:, j]
        x[:, k] = rest / root[:, k, k]
    return x
