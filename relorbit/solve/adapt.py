"""Drawing, weighing and fitting by turns, until enough draws have weight."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from relorbit.orbit.kepler import FloatArray
from relorbit.solve.beginning import UNIFORM
from relorbit.solve.conditional import Draws, draw_constants
from relorbit.solve.mixture import Mixture, fitted, shape_of
from relorbit.solve.target import Target
from relorbit.solve.weights import effective_size, normalised, pareto_k

FIRST_DRAWS, MOST_ROUND, LARGEST_BATCH = 1200, 6000, 20_000
VALUES_A_ROUND = 150_000  # draws times measures of a round where the start is vague
ROUNDS = 14
GOOD, POOR = 0.72, 0.25  # efficiency that is enough, and that is too little for many draws
COMPONENTS, MORE_COMPONENTS, MOST_COMPONENTS = 8, 28, 90
LEAST_EFFECTIVE = 150.0  # points that a mixture may be fitted to
HARDEST, LEAST_DRAWS = 60, 150_000  # draws for each effective sample asked for, but at least
HEAVY_TAIL = 0.7  # Pareto k from which the mixture does not reach where it should
ENOUGH_FOR_TAIL = 3000  # draws from which the tail is looked at
REFITS = 6
WING_POWER, WING_SHARE = 0.5, 0.25


@dataclass(frozen=True)
class Drawn:
    """Draws from one mixture.

    Attributes
    ----------
    size : int
        Number drawn, those outside the box included.
    y : ndarray, shape (m, 3), those inside; see `mixture`.
    draws : Draws, their constants.
    log_target : ndarray, shape (m,), likelihood times prior over the density of the constants.
    log_density : ndarray, shape (m,), of the mixture.
    """

    size: int
    y: FloatArray
    draws: Draws
    log_target: FloatArray
    log_density: FloatArray

    @property
    def log_weight(self) -> FloatArray:
        """ln of the weights, whose sum is the marginal likelihood."""
        return self.log_target - self.log_density - np.log(self.size)

    def joined(self, other: Drawn | None) -> Drawn:
        """These and others from the same mixture."""
        if other is None:
            return self
        arrays = ("y", "log_target", "log_density")
        both = {name: np.concatenate([getattr(self, name), getattr(other, name)])
                for name in arrays}  # fmt: skip
        return Drawn(self.size + other.size, draws=self.draws.joined(other.draws), **both)


def drawn_from(target: Target, mixture: Mixture, size: int, rng: np.random.Generator) -> Drawn:
    """Draw `size` times from a mixture."""
    y = mixture.draw(size, rng)
    q, stretch = shape_of(y)
    draws = draw_constants(target, q, rng)
    return Drawn(size, y, draws, draws.log_weight + stretch, mixture.log_density(y))


@dataclass
class Memory:
    """All draws of an adaptation, each weighed against all mixtures that they came from.

    The deterministic mixture weights of adaptive multiple importance sampling (Cornuet, Marin,
    Mira & Robert 2012, Scandinavian Journal of Statistics 39, 798): a point in a wing that one
    mixture has met by chance does not weigh more than it should. The samples handed out all come
    from the last mixture, which knows nothing of them: mixtures fitted to the very points that
    they weigh make wings a few per cent too thin.

    Attributes
    ----------
    y : ndarray, shape (m, 3)
    log_target : ndarray, shape (m,)
    summed : ndarray, shape (m,), number drawn times density, summed over the mixtures.
    mixtures : list of (number drawn, Mixture)
    """

    y: FloatArray = field(default_factory=lambda: np.empty((0, 3)))
    log_target: FloatArray = field(default_factory=lambda: np.empty(0))
    summed: FloatArray = field(default_factory=lambda: np.empty(0))
    mixtures: list[tuple[int, Mixture]] = field(default_factory=list)

    def take(self, mixture: Mixture, drawn: Drawn) -> FloatArray:
        """Take draws from a mixture in; returns its density at all draws so far."""
        there, here = np.exp(mixture.log_density(self.y)), np.exp(drawn.log_density)
        new = drawn.size * here
        for count, one in self.mixtures:
            new += count * np.exp(one.log_density(drawn.y))
        self.mixtures.append((drawn.size, mixture))
        self.summed = np.concatenate([self.summed + drawn.size * there, new])
        self.y = np.concatenate([self.y, drawn.y])
        self.log_target = np.concatenate([self.log_target, drawn.log_target])
        return np.concatenate([there, here])

    @property
    def log_weight(self) -> FloatArray:
        """ln of the weights, whose sum is the marginal likelihood."""
        return self.log_target - np.log(self.summed)

    def efficiency(self, density: FloatArray) -> float:
        """What the efficiency of a mixture of given density would be, judged by all draws so far.

        The mean of the target's weight over the target, 1 + the chi2 divergence, inverted.
        """
        log_weight = self.log_weight
        top = np.max(log_weight, initial=-np.inf)
        if not np.isfinite(top):
            return 0.0
        weight = np.exp(log_weight - top)
        return float(weight.sum() ** 2 / (weight @ (weight * self.summed / density)))

    def fitted(self, parts: int, box: tuple[float, float], rng: np.random.Generator) -> Mixture:
        """A mixture that draws as the target is, as far as it is known.

        Where many components are wanted the wings are long, and a part of them is fitted to the
        root of the weights, in which wings count for more.
        """
        log_weight, most = self.log_weight, min(parts, MOST_COMPONENTS)
        body = fitted(self.y, softened(log_weight, LEAST_EFFECTIVE), most, box, rng)
        if parts <= COMPONENTS:
            return body
        flat = np.log(normalised(log_weight) + 1e-300) * WING_POWER
        flat = np.where(np.isfinite(log_weight), flat + self._thinness(), -np.inf)
        wings = fitted(self.y, softened(flat, LEAST_EFFECTIVE), most // 2, box, rng)
        return body.beside(wings, WING_SHARE)

    def _thinness(self) -> FloatArray:
        """What makes equal weights of the draws a uniform density, taken to the other power."""
        return -(1.0 - WING_POWER) * np.log(self.summed)


def adapted(
    target: Target,
    mixture: Mixture,
    rng: np.random.Generator,
    on_round: Callable[[float], None] | None = None,
) -> tuple[Memory, Mixture, float]:
    """All draws made for it, a mixture that draws as the target is, and its efficiency.

    As long as a few draws have nearly all the weight, the weights are taken to a power below 1
    (Koblents & Miguez 2015, Statistics and Computing 25, 407, from memory).
    """
    size, parts = FIRST_DRAWS, COMPONENTS
    if mixture.uniform > UNIFORM:
        size = int(np.clip(VALUES_A_ROUND / target.time.size, FIRST_DRAWS, MOST_ROUND))
        parts = MORE_COMPONENTS
    memory, best, best_mixture = Memory(), 0.0, mixture
    for step in range(ROUNDS):
        if on_round is not None:
            on_round(step / ROUNDS)
        density = memory.take(mixture, drawn_from(target, mixture, size, rng))
        if effective_size(normalised(memory.log_weight)) > LEAST_EFFECTIVE:
            efficiency = memory.efficiency(density)
            gain = efficiency / max(best, 1e-9)
            if gain > 1.0:
                best, best_mixture = efficiency, mixture
            if _enough(best, gain, step):
                break
            if gain < 1.15 or best < 0.3:
                size = min(2 * size, MOST_ROUND)
                parts = max(MORE_COMPONENTS, int(1.4 * parts) if parts > COMPONENTS else 0)
        if not np.isfinite(np.max(memory.log_target, initial=-np.inf)):
            break
        mixture = memory.fitted(parts, mixture.box, rng)
    return memory, (best_mixture if best else mixture), best


def _enough(best: float, gain: float, step: int) -> bool:
    """Whether another round would cost more draws than it saves."""
    return best >= GOOD or (best > 0.4 and gain < 1.15 and step >= 3) or (
        best > 0.2 and gain < 1.05 and step >= 6
    )  # fmt: skip


def completed(
    target: Target,
    adaptation: tuple[Memory, Mixture, float],
    size: int,
    rng: np.random.Generator,
    on_progress: Callable[[float], None] | None = None,
) -> tuple[Drawn, Mixture]:
    """Draw until `size` are effective and the tail of the weights is sound, or hope is lost.

    `adaptation` is what `adapted` returns. The mixture is improved while it is poor.
    """
    memory, mixture, rate = adaptation
    refits, spent, most = REFITS, 0, max(HARDEST * size, LEAST_DRAWS)
    drawn, reached = None, 0.0
    while True:
        wanted = 1.02 * (size - reached) / max(rate, 0.01) + 100.0
        if refits and rate < POOR:
            wanted = MOST_ROUND
        drawn = drawn_from(target, mixture, int(min(wanted, LARGEST_BATCH)), rng).joined(drawn)
        weight = normalised(drawn.log_weight)
        reached = effective_size(weight)
        rate = reached / drawn.size
        if on_progress is not None:
            on_progress(min(reached / size, 0.99))
        heavy = weight.size > ENOUGH_FOR_TAIL and not pareto_k(weight) < HEAVY_TAIL
        done = reached >= size and not heavy
        if done or spent + drawn.size >= most or (reached >= size and not refits):
            return drawn, mixture
        if refits and (heavy or rate < POOR) and drawn.size > ENOUGH_FOR_TAIL:
            refits -= 1
            spent += drawn.size
            memory.take(mixture, drawn)
            if not np.isfinite(np.max(memory.log_target, initial=-np.inf)):
                return drawn, mixture
            mixture = memory.fitted(MOST_COMPONENTS, mixture.box, rng)
            drawn, reached, rate = None, 0.0, 2.0 * POOR


def softened(log_weight: FloatArray, least: float) -> FloatArray:
    """Weights of sum 1, to the highest power up to 1 at which `least` of them are effective."""
    if effective_size(normalised(log_weight)) >= least:
        return normalised(log_weight)
    finite = np.isfinite(log_weight)
    if np.count_nonzero(finite) <= least:
        return normalised(np.where(finite, 0.0, -np.inf))
    known = np.where(finite, log_weight, 0.0)
    low, high = 0.0, 1.0
    for _ in range(30):
        power = 0.5 * (low + high)
        tried = normalised(np.where(finite, power * known, -np.inf))
        low, high = (power, high) if effective_size(tried) >= least else (low, power)
    return normalised(np.where(finite, low * known, -np.inf))
