"""A mixture of Student-t distributions in the shape of an orbit, fitted to weighted points.

The adaptive importance sampling of Cappe, Douc, Guillin, Marin & Robert (2008, Statistics and
Computing 18, 447): points are drawn from the mixture, weighed, and the mixture is fitted to the
weighted points by expectation and maximisation, until its shape is that of the target.

The three coordinates y are ln P, L = -ln(1 - e) and the true anomaly at the reference epoch, in
turns. What a short arc allows runs along P^2 ~ (1 - e)^-3 at a constant true anomaly: in these
coordinates that is a straight line.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from relorbit.orbit.kepler import FloatArray, eccentric_anomaly
from relorbit.solve.weights import resampled

FREEDOM = 5.0  # degrees of freedom: wings heavy enough, and (1 + d^2/5)^-4 is quick
# normalising factor: Gamma(4)/(Gamma(5/2) (5 pi)^(3/2))
FACTOR = 6.0 / (1.3293403881791370 * (5.0 * np.pi) ** 1.5)
WIDEST = 0.6, 0.3  # sigma of a component in L and in turns
HIGHEST_E = 0.9999
HIGHEST_L = float(-np.log(1.0 - HIGHEST_E))
BLOCK = 12_000  # values at a time: they stay in the processor's cache
STEPS = 8  # of expectation and maximisation
POINTS = 50  # for each component: a mixture is fitted to so many at the most
FEWEST = 12.0  # points (effective) that a component is kept for


def shape_of(y: FloatArray) -> tuple[FloatArray, FloatArray]:
    """q = (ln P, e, phase in turns), shape (m, 3), of y, and ln |dq/dy|, shape (m,)."""
    q = y.copy()
    rest = np.exp(-y[:, 1])
    e = q[:, 1] = -np.expm1(-y[:, 1])
    half = np.pi * (y[:, 2] - np.rint(y[:, 2]))
    E = 2.0 * np.arctan(np.sqrt(rest / (1.0 + e)) * np.tan(half))
    q[:, 2] = (E - e * np.sin(E)) / (2.0 * np.pi)
    # dM/dnu = (1 - e^2)^(3/2) / (1 + e cos nu)^2 and de/dL = 1 - e
    bend = rest + 2.0 * e * np.cos(half) ** 2
    return q, 1.5 * np.log(rest * (1.0 + e)) - 2.0 * np.log(bend) - y[:, 1]


def coordinates_of(q: FloatArray) -> FloatArray:
    """y, shape (m, 3), of q = (ln P, e, phase in turns)."""
    y = q.copy()
    e = np.minimum(q[:, 1], HIGHEST_E)
    y[:, 1] = -np.log1p(-e)
    E = eccentric_anomaly(2.0 * np.pi * (q[:, 2] - np.rint(q[:, 2])), e)
    y[:, 2] = np.arctan(np.sqrt((1.0 + e) / (1.0 - e)) * np.tan(0.5 * E)) / np.pi
    return y


@dataclass(frozen=True)
class Mixture:
    """A sum of k Student-t distributions and a uniform one over a box.

    The third coordinate is a circle of circumference 1. A component reaches half a
    turn to each side of its centre; what it draws beyond that, or outside the box, is no draw.

    Attributes
    ----------
    share : ndarray, shape (k,), sum 1 - `uniform`.
    centre : ndarray, shape (k, 3)
    root : ndarray, shape (k, 3, 3), lower triangular root of each scale matrix.
    box : (float, float), range of ln P; L is in [0, `HIGHEST_L`).
    uniform : float, the share of the uniform part.
    """

    share: FloatArray
    centre: FloatArray
    root: FloatArray
    box: tuple[float, float]
    uniform: float = 0.01

    def draw(self, size: int, rng: np.random.Generator) -> FloatArray:
        """The draws that lie inside, shape (m, 3), of `size`; m <= size, in no order."""
        counts = _shared_out(np.append(self.share, self.uniform), size, rng)
        which = np.repeat(np.arange(self.share.size), counts[:-1])
        scale = np.sqrt(FREEDOM / rng.chisquare(FREEDOM, which.size))
        step = rng.standard_normal((which.size, 3)) * scale[:, None]
        step = np.einsum("mij,mj->mi", self.root[which], step)
        y = self.centre[which] + step
        inside = (np.abs(step[:, 2]) < 0.5) & (y[:, 1] >= 0.0) & (y[:, 1] < HIGHEST_L)
        inside &= (y[:, 0] >= self.box[0]) & (y[:, 0] <= self.box[1])
        flat = rng.random((counts[-1], 3))
        flat *= np.array([self.box[1] - self.box[0], HIGHEST_L, 1.0])
        flat[:, 0] += self.box[0]
        y = np.concatenate([y[inside], flat])
        y[:, 2] -= np.rint(y[:, 2])
        return y

    def beside(self, other: Mixture, share: float) -> Mixture:
        """This mixture with another one added, which gets a share."""
        own = 1.0 - share
        return Mixture(
            np.concatenate([own * self.share, share * other.share]),
            np.concatenate([self.centre, other.centre]),
            np.concatenate([self.root, other.root]),
            self.box,
            own * self.uniform + share * other.uniform,
        )

    def parts(self, y: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Density of each component times its share, shape (k, m), and d^2 of each."""
        inverse, height = self._inverse()
        square, fall = np.empty((2, self.share.size, y.shape[0]))
        self._fill(y, inverse, height, square, fall)
        return fall, square

    def log_density(self, y: FloatArray) -> FloatArray:
        """ln of the density at y, shape (m, 3), inside the box."""
        inverse, height = self._inverse()
        size = max(64, BLOCK // self.share.size)
        rooms = np.empty((2, self.share.size, min(size, y.shape[0])))
        density = np.full(y.shape[0], self.uniform / ((self.box[1] - self.box[0]) * HIGHEST_L))
        for start in range(0, y.shape[0], size):
            part = y[start : start + size]
            square, fall = rooms[:, :, : part.shape[0]]
            self._fill(part, inverse, height, square, fall)
            density[start : start + size] += fall.sum(axis=0)
        return np.log(density)

    def _inverse(self) -> tuple[FloatArray, FloatArray]:
        """The inverse roots, shape (k, 3, 3, 1), and the height of each peak, shape (k, 1)."""
        volume = np.abs(np.prod(np.diagonal(self.root, 0, 1, 2), axis=1))
        return np.linalg.inv(self.root)[..., None], (FACTOR * self.share / volume)[:, None]

    def _fill(
        self,
        y: FloatArray,
        inverse: FloatArray,
        height: FloatArray,
        square: FloatArray,
        fall: FloatArray,
    ) -> None:
        """d^2 and the density of each component at y, in place: new memory costs the most."""
        offset, form = np.empty((2, *square.shape))
        np.subtract(y[:, 0], self.centre[:, :1], out=offset)
        np.multiply(inverse[:, 0, 0], offset, out=square)
        square *= square
        np.multiply(inverse[:, 1, 0], offset, out=form)
        np.multiply(inverse[:, 2, 0], offset, out=fall)
        np.subtract(y[:, 1], self.centre[:, 1:2], out=offset)
        form += inverse[:, 1, 1] * offset
        form *= form
        square += form
        fall += np.multiply(inverse[:, 2, 1], offset, out=form)
        np.subtract(y[:, 2], self.centre[:, 2:], out=offset)
        offset -= np.rint(offset, out=form)
        offset *= inverse[:, 2, 2]
        fall += offset
        fall *= fall
        square += fall
        np.multiply(square, 1.0 / FREEDOM, out=fall)
        fall += 1.0
        np.reciprocal(fall, out=fall)
        fall *= fall
        fall *= fall
        fall *= height


def _shared_out(share: FloatArray, size: int, rng: np.random.Generator) -> np.ndarray:
    """Whole numbers that add up to `size`, each the expected one within 1."""
    ends = np.cumsum(share / share.sum()) * size + rng.random()
    ends[-1] = size + 0.999999
    counts = np.diff(np.floor(ends), prepend=0.0).astype(int)
    counts[-1] += size - counts.sum()
    return np.maximum(counts, 0)


def mixture_around(
    centre: FloatArray,
    covariance: FloatArray,
    share: FloatArray,
    box: tuple[float, float],
    uniform: float = 0.01,
) -> Mixture:
    """A mixture with given centres, shape (k, 3), and covariances, shape (k, 3, 3), made sound."""
    widest = np.array([0.5 * (box[1] - box[0]), *WIDEST])
    sigma = np.sqrt(np.einsum("kjj->kj", covariance))
    sigma = np.where(np.isfinite(sigma) & (sigma > 0.0), sigma, widest)
    correlation = covariance / (sigma[:, :, None] * sigma[:, None, :])
    correlation = np.where(np.isfinite(correlation), correlation, 0.0)
    correlation = 0.9999 * correlation + np.eye(3) * (1.0001 - 0.9999 * np.einsum(
        "kjj->kj", correlation)[:, :, None])  # fmt: skip
    sound = np.linalg.eigvalsh(correlation)[:, 0] > 0.0
    correlation = np.where(sound[:, None, None], correlation, np.eye(3))
    sigma = np.minimum(sigma, widest)
    root = np.linalg.cholesky(correlation) * sigma[:, :, None]
    return Mixture((1.0 - uniform) * share / share.sum(), centre, root, box, uniform)


def fitted(
    y: FloatArray, weight: FloatArray, most: int, box: tuple[float, float], rng: np.random.Generator
) -> Mixture:
    """The mixture that comes nearest to weighted points.

    Parameters
    ----------
    y : ndarray, shape (m, 3)
    weight : ndarray, shape (m,), sum 1.
    most : int
        Number of components to begin with.
    """
    effective = 1.0 / float(weight @ weight)
    most = int(max(1, min(most, effective / FEWEST)))
    points = POINTS * (most + 10)
    if weight.size > 1.5 * points:
        y = y[resampled(weight, points, rng)]
        weight = np.full(points, 1.0 / points)
    spread = _covariance(y, weight, y[np.argmax(weight)])
    centre = _centres(y, weight, most, spread, rng)
    covariance = np.repeat(spread[None] / most**0.67, centre.shape[0], axis=0)
    mixture = mixture_around(centre, covariance, np.ones(centre.shape[0]), box)
    for _ in range(STEPS):
        mixture = _improved(mixture, y, weight, effective, spread)
    # what the components may have missed: one of all the points, and a wider one
    every = _mean(y, weight)
    return mixture_around(
        np.concatenate([mixture.centre, every[None]]),
        np.concatenate([mixture.root @ np.swapaxes(mixture.root, 1, 2), 3.0 * spread[None]]),
        np.append(0.94 * mixture.share / mixture.share.sum(), 0.06), box,
    )  # fmt: skip


def _improved(
    mixture: Mixture, y: FloatArray, weight: FloatArray, effective: float, spread: FloatArray
) -> Mixture:
    """One step of expectation and maximisation (Peel & McLachlan 2000, from memory)."""
    parts, square = mixture.parts(y)
    parts *= weight / np.maximum(parts.sum(axis=0), 1e-300)
    total = parts.sum(axis=1)
    kept = total * effective > 0.3 * FEWEST
    if not kept.any():
        return mixture
    parts, square, total = parts[kept], square[kept], total[kept]
    pull = parts * ((FREEDOM + 3.0) / (FREEDOM + square))
    gap = y.T - mixture.centre[kept][:, :, None]
    gap[:, 2] -= np.rint(gap[:, 2])
    shift = (gap @ pull[:, :, None])[..., 0] / pull.sum(axis=1)[:, None]
    gap -= shift[:, :, None]
    covariance = (gap * pull[:, None]) @ np.swapaxes(gap, 1, 2)
    covariance /= total[:, None, None]
    # a component of few points leans on the spread of all
    lean = 2.0 / (2.0 + total * effective)
    covariance += lean[:, None, None] * spread / kept.size
    return mixture_around(mixture.centre[kept] + shift, covariance, total, mixture.box)


def _mean(y: FloatArray, weight: FloatArray) -> FloatArray:
    gap = y - y[np.argmax(weight)]
    gap[:, 2] -= np.rint(gap[:, 2])
    return y[np.argmax(weight)] + weight @ gap


def _covariance(y: FloatArray, weight: FloatArray, origin: FloatArray) -> FloatArray:
    gap = y - origin
    gap[:, 2] -= np.rint(gap[:, 2])
    gap -= weight @ gap
    return (gap * weight[:, None]).T @ gap


def _centres(
    y: FloatArray, weight: FloatArray, most: int, spread: FloatArray, rng: np.random.Generator
) -> FloatArray:
    """Points far from each other, by the rule of Arthur & Vassilvitskii (2007), k-means++."""
    some = rng.choice(y.shape[0], size=min(400, y.shape[0]), p=weight)
    points = y[some]
    sigma = np.sqrt(np.maximum(np.diag(spread), 1e-30))
    chosen = [points[0]]
    nearest = np.full(points.shape[0], np.inf)
    for _ in range(most - 1):
        gap = points - chosen[-1]
        gap[:, 2] -= np.rint(gap[:, 2])
        nearest = np.minimum(nearest, ((gap / sigma) ** 2).sum(axis=1))
        total = nearest.sum()
        if not total > 0.0:
            break
        chosen.append(points[rng.choice(points.shape[0], p=nearest / total)])
    return np.array(chosen)
