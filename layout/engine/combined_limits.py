"""A goal to be maximised while localisation errors stay under given limits.

The search sees a lexicographic score: limits first, then the goal. The certificate is Lagrange's: for multipliers
μ >= 0 and every layout that keeps the limits, goal <= goal + Σ μ_r (x_r - e_r), which is concave in the weights.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from scipy.optimize import linprog

from layout.engine.combined import CombinedPricing, WeightedSum, Worst
from layout.engine.goal import Goal, Relaxed
from layout.errors import LayoutError

BROKEN = 1e3  # a broken limit costs this much score: more than any goal's bits, few enough to keep their digits

Tighten = Callable[[Goal, np.ndarray | None], tuple[float, np.ndarray]]


@dataclass(frozen=True)
class Limited:
    """`goal` under limits: pairs (goal that scores minus an error [m], the most that error may be [m]).

    A set that breaks a limit scores -BROKEN - Σ excess, excess = max(0, e/x - 1). multipliers (goal's unit per metre,
    one for each limit, >= 0; default 0): any of them give a valid limit for all sets that keep the limits, and only for
    those; `with_multipliers` finds good ones. LayoutError if the numbers do not fit.
    """

    goal: Goal
    limits: tuple[tuple[Goal, float], ...]
    multipliers: tuple[float, ...] | None = None

    def __post_init__(self) -> None:
        for _, most in self.limits:
            if not 0 < most < np.inf:
                raise LayoutError(f"A limit of the localisation error must be positive, not {most} m.")
        if len(self._multipliers) != len(self.limits) or not all(0 <= mu < np.inf for mu in self._multipliers):
            raise LayoutError(f"multipliers must be >= 0, one for each limit, not {self.multipliers}.")

    @property
    def _multipliers(self) -> tuple[float, ...]:
        return self.multipliers or (0.0,) * len(self.limits)

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
        """That of the goal without limits."""
        return self.goal.highest

    def errors(self, chosen: np.ndarray) -> np.ndarray:
        """The limited errors of a set (n_limits,) [m]."""
        return np.array([-member.score(chosen) for member, _ in self.limits])

    def kept(self, chosen: np.ndarray) -> bool:
        """Whether a set keeps every limit."""
        return bool(self._excess(-self.errors(chosen)) == 0)

    def _excess(self, scores: np.ndarray) -> np.ndarray:
        most = np.array([limit for _, limit in self.limits])
        excess = -scores / most.reshape(-1, *[1] * (scores.ndim - 1)) - 1.0
        return np.maximum(excess, 0.0).sum(axis=0)

    def merge(self, parts: np.ndarray) -> np.ndarray:
        """Lexicographic score from the goal's table and the limits' (1 + n_limits, ...)."""
        excess = self._excess(parts[1:])
        return np.where(excess > 0, -BROKEN - excess, parts[0])

    @property
    def _members(self) -> tuple[Goal, ...]:
        return (self.goal, *(member for member, _ in self.limits))

    def score(self, chosen: np.ndarray) -> float:
        """Score of a set."""
        return float(self.merge(np.array([member.score(chosen) for member in self._members])))

    def pairs(self, candidates: np.ndarray) -> np.ndarray:
        """Score of every pair of candidates that see the offset (n, n)."""
        return self.merge(np.stack([member.pairs(candidates) for member in self._members]))

    def priced(self, chosen: np.ndarray) -> CombinedPricing:
        """The chosen set, ready to price its changes."""
        return CombinedPricing(tuple(member.priced(chosen) for member in self._members), self.merge)

    @cached_property
    def lagrangian(self) -> Goal:
        """goal + Σ μ_r (x_r - e_r), which no layout that keeps the limits scores above."""
        active = [(mu, *limit) for mu, limit in zip(self._multipliers, self.limits, strict=True) if mu > 0]
        if not active:
            return self.goal
        return WeightedSum(
            (self.goal, *(member for _, member, _ in active)),
            (1.0, *(mu for mu, _, _ in active)),
            sum(mu * most for mu, _, most in active),
        )

    def relaxed(self, pool: np.ndarray) -> Relaxed:
        """The Lagrangian's relaxation on a pool of candidates: valid for the sets that keep the limits."""
        return self.lagrangian.relaxed(pool)

    def tangent(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        """(f, g) of the Lagrangian: valid for the sets that keep the limits."""
        return self.lagrangian.tangent(weights)

    @property
    def slack(self) -> Goal:
        """min over limits of 1 - e_r / x_r: if an upper limit of it is below 0, no layout can keep the limits."""
        return Worst(tuple(WeightedSum((member,), (1.0 / most,), 1.0) for member, most in self.limits), size=1.0)


def with_multipliers(
    limited: Limited, tighten: Tighten, *, steps: int = 12, tolerance: float = 1e-3
) -> tuple[Limited, float]:
    """The multipliers of the lowest limit found, and that limit, by cutting planes (Kelley 1960, J SIAM 8:703).

    tighten(goal, start weights or None) -> (upper limit of the goal over the allowed layouts, weights that nearly reach
    it). The limit is convex in the multipliers, with slope x - e at such weights. Each step costs one `tighten`; ends
    when limit and cutting-plane model agree to `tolerance` (relative).
    """
    most = np.array([limit for _, limit in limited.limits])
    heights, slopes = [], []
    mu, best = np.zeros(len(most)), None
    weights, widest = None, np.zeros(len(most))
    for _ in range(steps):
        trial = replace(limited, multipliers=tuple(mu))
        limit, weights = tighten(trial.lagrangian, weights)
        if best is None or limit < best[1]:
            best = (trial, limit)
        pool = np.flatnonzero(weights)
        heights.append(limited.goal.relaxed(pool).value(weights[pool]))
        errors = np.array([-member.relaxed(pool).value(weights[pool]) for member, _ in limited.limits])
        slopes.append(most - errors)
        if not widest.any():
            widest = 10.0 * max(abs(heights[0]), abs(limit)) / most
        model = linprog(
            np.append(np.zeros(len(most)), 1.0),
            A_ub=np.column_stack([np.array(slopes) * widest, -np.ones(len(slopes))]),
            b_ub=-np.array(heights),
            bounds=[(0.0, 1.0)] * len(most) + [(None, None)],
            method="highs",
        )
        mu = np.maximum(model.x[:-1], 0.0) * widest
        if best[1] - model.fun <= tolerance * abs(best[1]):
            break
    return best
