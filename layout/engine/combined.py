"""Goals made of goals over the same candidates: a weighted sum, and the worst of several scenarios.

A sum of concave scores with positive weights is concave, and so is a minimum of concave scores; both are computed from
the members' scores, tables and tangents alone.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from layout.engine.goal import Goal, Pricing, Relaxed
from layout.errors import LayoutError

LEAST_MIX = 1e-5  # of many members, those with a smaller part of the largest in a mix may be left out of derivatives
TYPICAL_COUNT = 32  # candidates' worth of weight, spread evenly, at which the size of a score is taken


def typical_size(goals: tuple[Goal, ...]) -> float:
    """A fixed positive number of the order of the goals' scores, in their unit: what softness is measured by."""
    n = goals[0].n_candidates
    weights = np.full(n, min(1.0, TYPICAL_COUNT / n))
    return max(abs(goal.tangent(weights)[0]) for goal in goals) or 1.0


def relaxed_values(goals: tuple[Goal, ...], weights: np.ndarray, pool: np.ndarray) -> np.ndarray:
    """The goals' relaxed scores (n_goals,) at weights (n_candidates,) whose support is the pool.

    A soft member's tangent lies above its relaxed score; a mix taken from it would not be the ascent's.
    """
    return np.array([goal.relaxed(pool).value(np.asarray(weights)[pool]) for goal in goals])


def soft_minimum(scores: np.ndarray, steepness: float, count: int | None = None) -> tuple[float, np.ndarray]:
    """(v, mix): v = -log(Σ exp(-steepness score) / count) / steepness, and its derivatives, a mix of sum 1.

    count: at least the number of scores (the default), so that v >= min score.
    """
    least = scores.min()
    share = np.exp(-steepness * (scores - least))
    return float(least - np.log(share.sum() / (count or len(scores))) / steepness), share / share.sum()


def soft_curvature(
    mix: np.ndarray, gradients: np.ndarray, hessian: np.ndarray, steepness: float
) -> tuple[np.ndarray, np.ndarray]:
    """Gradient (n,) and Hessian (n, n) of the soft minimum: gradients (n_members, n), hessian the mix's mean."""
    gradient = mix @ gradients
    spread = gradients - gradient
    return gradient, hessian - steepness * (mix[:, None] * spread).T @ spread


class _Goals:
    """What a combination takes over from its members."""

    goals: tuple[Goal, ...]

    def _check(self) -> None:
        if not self.goals:
            raise LayoutError("goals must hold at least one goal, but it is empty.")
        for goal in self.goals[1:]:
            if goal.n_candidates != self.n_candidates or (goal.has_offset != self.has_offset).any():
                raise LayoutError(
                    f"goals must all be over the same candidates, with the same ones seeing the offset, but one has "
                    f"{goal.n_candidates} where the first has {self.n_candidates}."
                )

    @property
    def n_candidates(self) -> int:
        """Number of candidates."""
        return self.goals[0].n_candidates

    @property
    def has_offset(self) -> np.ndarray:
        """Which candidates see the flat offset (n_candidates,) bool."""
        return self.goals[0].has_offset


@dataclass(frozen=True)
class CombinedPricing:
    """The members' priced sets under one rule: `merge` takes tables stacked along a first axis to one table."""

    members: tuple[Pricing, ...]
    merge: object

    @property
    def chosen(self) -> np.ndarray:
        """The chosen candidates (k,)."""
        return self.members[0].chosen

    @property
    def value(self) -> float:
        """Score of the chosen set."""
        return float(self.merge(np.array([one.value for one in self.members])))

    def additions(self) -> np.ndarray:
        """Score after adding each candidate (n_candidates,); -inf for those already chosen."""
        return self.merge(np.stack([one.additions() for one in self.members]))

    def removals(self) -> np.ndarray:
        """Score after dropping each chosen candidate (k,)."""
        return self.merge(np.stack([one.removals() for one in self.members]))

    def swaps(self) -> np.ndarray:
        """Score after dropping chosen[i] and adding candidate j (k, n_candidates); -inf for chosen j."""
        return self.merge(np.stack([one.swaps() for one in self.members]))


@dataclass(frozen=True)
class WeightedSum(_Goals):
    """constant + Σ weights[g] · goals[g]: a mean over scenarios, or a weighted sum of regions' informations.

    weights > 0, one for each goal; goals and constant in one unit once weighted. LayoutError if they do not fit.
    """

    goals: tuple[Goal, ...]
    weights: tuple[float, ...]
    constant: float = 0.0

    def __post_init__(self) -> None:
        self._check()
        if len(self.weights) != len(self.goals) or not all(0 < weight < np.inf for weight in self.weights):
            raise LayoutError(f"weights must be positive, one for each of {len(self.goals)} goals, not {self.weights}.")

    @property
    def highest(self) -> float:
        """The same sum of what the members can reach at most."""
        return float(self._sum(np.array([goal.highest for goal in self.goals])))

    def _sum(self, parts: np.ndarray) -> np.ndarray:
        return self.constant + np.tensordot(self.weights, parts, axes=1)

    def score(self, chosen: np.ndarray) -> float:
        """Score of a set."""
        return float(self._sum(np.array([goal.score(chosen) for goal in self.goals])))

    def pairs(self, candidates: np.ndarray) -> np.ndarray:
        """Score of every pair of candidates that see the offset (n, n)."""
        return self._sum(np.stack([goal.pairs(candidates) for goal in self.goals]))

    def priced(self, chosen: np.ndarray) -> CombinedPricing:
        """The chosen set, ready to price its changes."""
        return CombinedPricing(tuple(goal.priced(chosen) for goal in self.goals), self._sum)

    def relaxed(self, pool: np.ndarray) -> _RelaxedSum:
        """The relaxation on a pool of candidates."""
        return _RelaxedSum(pool, [goal.relaxed(pool) for goal in self.goals], self._sum)

    def tangent(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        """(f, g): the sum of the members' tangents."""
        values, gradients = zip(*(goal.tangent(weights) for goal in self.goals), strict=True)
        return float(self._sum(np.array(values))), np.asarray(self.weights) @ np.stack(gradients)


class _RelaxedSum:
    def __init__(self, pool: np.ndarray, members: list[Relaxed], merge) -> None:
        self.pool, self._members, self._merge = pool, members, merge
        self._constant = merge(np.zeros(len(members)))

    def value(self, weights: np.ndarray) -> float:
        return float(self._merge(np.array([one.value(weights) for one in self._members])))

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        values, gradients, hessians = zip(*(one.second_order(weights) for one in self._members), strict=True)
        height = float(self._merge(np.array(values)))
        return height, *(self._merge(np.stack(part)) - self._constant for part in (gradients, hessians))

    def gradient_everywhere(self, weights: np.ndarray) -> np.ndarray:
        return self._merge(np.stack([one.gradient_everywhere(weights) for one in self._members])) - self._constant


@dataclass(frozen=True)
class Worst(_Goals):
    """The least of the goals' scores: the worst of several heads, conductivities or noise levels.

    The relaxation is their soft minimum of steepness `sharpness` / size (default: `typical_size`), a concave function
    above the least by at most log(n_goals) / steepness; the tangents mix the members' tangents in its proportions. Any
    mix of sum 1 is a valid limit, so every limit holds, and the certificate closes to within that amount.
    """

    goals: tuple[Goal, ...]
    sharpness: float = 1000.0
    size: float | None = None

    def __post_init__(self) -> None:
        self._check()

    @cached_property
    def steepness(self) -> float:
        """Steepness of the soft minimum, per unit of score."""
        return self.sharpness / (self.size or typical_size(self.goals))

    @property
    def highest(self) -> float:
        """The least of what the members can reach at most."""
        return min(goal.highest for goal in self.goals)

    @staticmethod
    def _least(parts: np.ndarray) -> np.ndarray:
        return parts.min(axis=0)

    def score(self, chosen: np.ndarray) -> float:
        """Score of a set."""
        return min(goal.score(chosen) for goal in self.goals)

    def pairs(self, candidates: np.ndarray) -> np.ndarray:
        """Score of every pair of candidates that see the offset (n, n)."""
        return self._least(np.stack([goal.pairs(candidates) for goal in self.goals]))

    def priced(self, chosen: np.ndarray) -> CombinedPricing:
        """The chosen set, ready to price its changes."""
        return CombinedPricing(tuple(goal.priced(chosen) for goal in self.goals), self._least)

    def relaxed(self, pool: np.ndarray) -> _RelaxedWorst:
        """The relaxation on a pool of candidates: the soft minimum."""
        return _RelaxedWorst(pool, [goal.relaxed(pool) for goal in self.goals], self.steepness)

    def tangent(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        """(f, g): a mix of the members' tangents; the proportions, not the tangents, are from the relaxation."""
        pool = np.flatnonzero(weights)
        _, mix = soft_minimum(relaxed_values(self.goals, weights, pool), self.steepness)
        values, gradients = zip(*(goal.tangent(weights) for goal in self.goals), strict=True)
        return float(mix @ values), mix @ np.stack(gradients)


class _RelaxedWorst:
    def __init__(self, pool: np.ndarray, members: list[Relaxed], steepness: float) -> None:
        self.pool, self._members, self._steepness = pool, members, steepness

    def _mix(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        return soft_minimum(np.array([one.value(weights) for one in self._members]), self._steepness)

    def value(self, weights: np.ndarray) -> float:
        return self._mix(weights)[0]

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        values, gradients, hessians = zip(*(one.second_order(weights) for one in self._members), strict=True)
        height, mix = soft_minimum(np.array(values), self._steepness)
        hessian = np.tensordot(mix, np.stack(hessians), axes=1)
        return height, *soft_curvature(mix, np.stack(gradients), hessian, self._steepness)

    def gradient_everywhere(self, weights: np.ndarray) -> np.ndarray:
        return self._mix(weights)[1] @ np.stack([one.gradient_everywhere(weights) for one in self._members])
