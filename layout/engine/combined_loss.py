"""A goal that must still hold when any one of the chosen candidates falls silent.

As a function of weights it is min over i of f(w - w_i e_i), f the goal without losses: a minimum of concave functions.
Since f never falls when a weight grows, f(S without i) >= the score of S for every candidate i, chosen or not: any mix
of the members' tangents is a valid limit.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from layout.engine.combined import LEAST_MIX, soft_curvature, soft_minimum, typical_size
from layout.engine.combined_loss_information import RelaxedInformationLoss
from layout.engine.goal import Goal, Relaxed
from layout.engine.information_goal import InformationGoal


@dataclass(frozen=True)
class AnyOneLost:
    """The score left after the most harmful loss of one chosen candidate; of no candidates, the goal's own.

    The first candidate added to nothing gains nothing, so a search should start from a layout that is good for the
    goal without losses. Swaps cost k times those of the goal. The relaxation is the soft minimum over the candidates
    (see Worst) of steepness `sharpness` / `typical_size`; start its ascent with weight on two electrodes or more: where
    only one has weight, its loss has no slope to climb.
    """

    goal: Goal
    sharpness: float = 3000.0

    @property
    def n_candidates(self) -> int:
        """Number of candidates."""
        return self.goal.n_candidates

    @property
    def has_offset(self) -> np.ndarray:
        """Which candidates see the flat offset (n_candidates,) bool."""
        return self.goal.has_offset

    @property
    def highest(self) -> float:
        """That of the goal without losses."""
        return self.goal.highest

    @cached_property
    def steepness(self) -> float:
        """Steepness of the soft minimum, per unit of score."""
        return self.sharpness / typical_size((self.goal,))

    def score(self, chosen: np.ndarray) -> float:
        """Score of a set."""
        chosen = np.asarray(chosen, dtype=int)
        return min((self.goal.score(np.delete(chosen, i)) for i in range(len(chosen))), default=self.goal.score(chosen))

    def pairs(self, candidates: np.ndarray) -> np.ndarray:
        """Score of every pair of candidates that see the offset (n, n): that of a single electrode, nothing."""
        return np.full((len(candidates), len(candidates)), self.goal.score(np.zeros(0, dtype=int)))

    def priced(self, chosen: np.ndarray) -> LossPricing:
        """The chosen set, ready to price its changes."""
        return LossPricing(self.goal, chosen)

    def relaxed(self, pool: np.ndarray) -> Relaxed:
        """The relaxation on a pool of candidates."""
        if isinstance(self.goal, InformationGoal):
            return RelaxedInformationLoss(self.goal.model, pool, self.steepness)
        return RelaxedLoss(self.goal.relaxed(pool), self.steepness, self.n_candidates)

    def tangent(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        """(f, g): a mix of the tangents of the goal with one candidate silent.

        The proportions are the soft minimum's, from the goal's relaxation; the tangents themselves are not.
        """
        weights = np.asarray(weights, dtype=float)
        live = np.flatnonzero(weights)
        if not len(live):
            return self.goal.tangent(weights)
        _, mix = soft_minimum(losses(self.goal.relaxed(live), weights[live]), self.steepness)
        kept = np.flatnonzero(mix > LEAST_MIX * mix.max())
        mix = mix[kept] / mix[kept].sum()
        value, gradient = 0.0, np.zeros(self.n_candidates)
        for part, silent in zip(mix, live[kept], strict=True):
            without = weights.copy()
            without[silent] = 0.0
            height, slope = self.goal.tangent(without)
            slope = slope.copy()
            slope[silent] = 0.0
            # the member's tangent at `weights` has the same height: its weight at `silent` does not count
            value += part * height
            gradient += part * slope
        return value, gradient


def losses(relaxed: Relaxed, weights: np.ndarray) -> np.ndarray:
    """The relaxed score with each of the pool's candidates silent (n_pool,)."""
    if hasattr(relaxed, "losses"):
        return relaxed.losses(weights)
    whole = relaxed.value(weights)
    values = np.full(len(weights), whole)
    for i in np.flatnonzero(weights):
        without = weights.copy()
        without[i] = 0.0
        values[i] = relaxed.value(without)
    return values


class LossPricing:
    """The scores after one loss, of a chosen set (k,) and of its one-step changes, from the goal's own tables."""

    def __init__(self, goal: Goal, chosen: np.ndarray) -> None:
        self.goal, self.chosen = goal, np.asarray(chosen, dtype=int)
        self._whole = goal.priced(self.chosen)

    @cached_property
    def _without(self) -> list[LossPricing]:
        return [LossPricing(self.goal, np.delete(self.chosen, i)) for i in range(len(self.chosen))]

    @property
    def value(self) -> float:
        """Score of the chosen set."""
        return float(self._whole.removals().min()) if len(self.chosen) else self._whole.value

    def additions(self) -> np.ndarray:
        """Score after adding each candidate (n_candidates,): it or one of the others is lost; -inf for the chosen."""
        table = np.full(self.goal.n_candidates, self._whole.value)
        if len(self.chosen):
            table = np.minimum(table, self._whole.swaps().min(axis=0))
        table[self.chosen] = -np.inf
        return table

    def removals(self) -> np.ndarray:
        """Score after dropping each chosen candidate (k,)."""
        return np.array([left.value for left in self._without])

    def swaps(self) -> np.ndarray:
        """Score after dropping chosen[i] and adding candidate j (k, n_candidates); -inf for chosen j."""
        table = np.array([left.additions() for left in self._without]).reshape(-1, self.goal.n_candidates)
        table[:, self.chosen] = -np.inf
        return table


class RelaxedLoss:
    """The soft minimum of a relaxation with each of its pool's candidates silent."""

    def __init__(self, relaxed: Relaxed, steepness: float, count: int) -> None:
        self.pool, self._relaxed = relaxed.pool, relaxed
        # counted over all candidates: the value must not depend on the pool, or a worst of several would tilt with it
        self._steepness, self._count = steepness, count

    def _soft(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        return soft_minimum(losses(self._relaxed, weights), self._steepness, self._count)

    def _members(self, weights: np.ndarray) -> tuple[float, list[tuple[float, int, np.ndarray]]]:
        """The soft minimum, and (part, silent, weights without it) of the members that carry its derivatives."""
        height, mix = self._soft(weights)
        kept = np.flatnonzero(mix > LEAST_MIX * mix.max())
        members = []
        for i, part in zip(kept, mix[kept] / mix[kept].sum(), strict=True):
            without = weights.copy()
            without[i] = 0.0
            members.append((part, i, without))
        return height, members

    def value(self, weights: np.ndarray) -> float:
        """Score at pool weights (n_pool,) >= 0."""
        return self._soft(weights)[0]

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """Score, gradient (n_pool,) and Hessian (n_pool, n_pool) at pool weights (n_pool,) >= 0."""
        height, members = self._members(weights)
        gradients = np.empty((len(members), len(weights)))
        mean = np.zeros((len(weights), len(weights)))
        for place, (part, silent, without) in enumerate(members):
            _, gradients[place], hessian = self._relaxed.second_order(without)
            gradients[place, silent] = 0.0
            hessian[silent] = hessian[:, silent] = 0.0
            mean += part * hessian
        mix = np.array([part for part, _, _ in members])
        return height, *soft_curvature(mix, gradients, mean, self._steepness)

    def gradient_everywhere(self, weights: np.ndarray) -> np.ndarray:
        """Supergradient over all candidates (n_candidates,), pooled or not."""
        total = 0.0
        for part, silent, without in self._members(weights)[1]:
            gradient = self._relaxed.gradient_everywhere(without)
            gradient[self.pool[silent]] = 0.0
            total = total + part * gradient
        return total
