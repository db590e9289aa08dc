"""The certified limit that no allowed layout can pass."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from layout.engine.ascent import newton_ascent
from layout.engine.feasible import Feasible
from layout.engine.goal import Goal, Relaxed
from layout.engine.hull_ascent import HullAscent
from layout.engine.model import ChannelTable, LinearModel
from layout.engine.rank_aware import PooledRankAware, RankAwareRelaxation, flat_column, rank_aware_in_source_space
from layout.engine.relaxation import PooledRelaxation
from layout.engine.remaining import Remaining

Relax = Callable[[np.ndarray], Relaxed]
FLOOR = 1e-9  # bits or metres: relative tolerances of a score nearer to 0 are taken of this


@dataclass(frozen=True)
class Bound:
    """weights (n_candidates,) at which the limit `value` of the score was certified; relaxed: f there.

    rounds: of pool growth. Valid whatever the convergence: `value` - `relaxed` is the most a longer run could take off.
    """

    value: float
    relaxed: float
    weights: np.ndarray
    rounds: int
    stopped_by_clock: bool = False


def certify(goal: Goal, feasible: Feasible, weights: np.ndarray) -> tuple[float, float]:
    """(limit, f(weights)) from the goal's rows: f(w) - g·w plus the best linear price of any allowed layout."""
    value, gradient = goal.tangent(weights)
    best, _ = feasible.best_linear(gradient)
    return value - float(gradient @ weights) + best, value


def certify_by_rank(
    model: LinearModel, feasible: Feasible, weights: np.ndarray, target: np.ndarray
) -> tuple[float, float]:
    """The same [bits] for the rank-aware relaxation with compressed target rows (n_channels, p), in source space."""
    channels = most_channels(model, feasible)
    value, gradient = rank_aware_in_source_space(model, weights, target, channels)
    best, _ = feasible.best_linear(gradient)
    return value - float(gradient @ weights) + best, value


@dataclass(frozen=True)
class Tangent:
    """limit of the score that the tangent at `weights` puts on every allowed layout; value and gradient of f there."""

    limit: float
    value: float
    weights: np.ndarray
    gradient: np.ndarray
    rounds: int = 0
    stopped_by_clock: bool = False


def tighten(
    goal: Goal,
    feasible: Feasible,
    layout: np.ndarray,
    *,
    tolerance: float = 2e-4,
    rounds: int = 60,
    deadline: float | None = None,
) -> Bound:
    """Maximise the relaxation from an allowed layout (k,) on until its own gap is under `tolerance` (relative).

    The limit is certified anew, from the goal's rows, at the weights reached. All candidates are priced every round,
    in the pool or not.
    """
    start = np.zeros(feasible.n_candidates)
    start[layout] = 1.0
    tangent = tighten_to(goal.relaxed, feasible, start, tolerance=tolerance, rounds=rounds, deadline=deadline)
    limit, relaxed = certify(goal, feasible, tangent.weights)
    return Bound(limit, relaxed, tangent.weights, tangent.rounds, tangent.stopped_by_clock)


def tighten_to(
    relax: Relax,
    feasible: Feasible,
    start: np.ndarray,
    *,
    target: float | None = None,
    tolerance: float = 2e-4,
    rounds: int = 60,
    deadline: float | None = None,
) -> Tangent:
    """The best tangent found from weights `start` (n_candidates,) on.

    relax: pool of candidates -> relaxation on it (a goal's `relaxed`). With a `target` the ascent also ends as soon
    as the limit is below it, or f itself so far above it that no tangent can be below.
    """
    ascent = (_CellAscent if feasible.cells is not None else _hull)(relax, feasible, start)
    best: Tangent | None = None
    done = 0
    while True:
        done += 1
        weights, value, gradient = ascent.advance(tolerance)
        price, vertex = feasible.best_linear(gradient)
        limit = value - float(gradient @ weights) + price
        late = deadline is not None and time.monotonic() > deadline
        if best is None or limit < best.limit:
            best = Tangent(limit, value, weights, gradient, done, late)
        settled = limit - value <= tolerance * max(abs(value), FLOOR)
        decided = target is not None and (limit <= target or value - target > limit - value)
        if settled or decided or late or done >= rounds:
            return replace(best, rounds=done, stopped_by_clock=late and not settled)
        ascent.grow(vertex, gradient)


def most_channels(model: ChannelTable, feasible: Feasible) -> int:
    """The most channels that any allowed layout brings."""
    channels = (model.channels < model.n_channels).sum(axis=1).astype(float)
    return int(np.floor(feasible.best_linear(channels)[0] + 1e-6))


def tighten_by_rank(
    left: Remaining,
    feasible: Feasible,
    start: np.ndarray,
    *,
    target: float | None = None,
    tolerance: float = 1e-3,
    rounds: int = 30,
) -> Tangent | None:
    """The same with the rank-aware relaxation of what is `left`; None where it cannot be below the plain one."""
    channels = most_channels(left, feasible)
    if channels >= left.target.shape[1] or channels == 0:
        return None
    nuisance = left.nuisance_gram[:-1, :-1].copy()
    nuisance[np.diag_indices_from(nuisance)] -= 1.0
    if left.offset.any():
        column = flat_column(left.offset)
        nuisance += np.outer(column, column)
    whole = RankAwareRelaxation(left.target, nuisance, left.candidate_of_channel, channels)

    def relax(pool: np.ndarray) -> PooledRankAware:
        return PooledRankAware(whole, PooledRelaxation(left, pool))

    return tighten_to(relax, feasible, start, target=target, tolerance=tolerance, rounds=rounds)


class _CellAscent:
    """Ascent in the weights themselves where projection on the rules is cheap (cells)."""

    def __init__(self, relax: Relax, feasible: Feasible, start: np.ndarray) -> None:
        self.relax, self.feasible = relax, feasible
        pool = np.flatnonzero(start)
        if len(np.unique(feasible.cells[pool])) < feasible.size:
            gradient = relax(pool).gradient_everywhere(start[pool])
            pool = np.union1d(pool, np.flatnonzero(feasible.best_linear(gradient)[1]))
        self._set_pool(pool, start)

    def _set_pool(self, pool: np.ndarray, weights: np.ndarray) -> None:
        cells = self.feasible.cells
        self.pool = pool
        self._relaxation = self.relax(pool)
        kept = np.isin(pool, self.feasible.keep)
        free = np.flatnonzero(~np.isin(cells[pool], cells[pool[kept]]))
        self._free = free[np.argsort(cells[pool[free]], kind="stable")]
        self._fixed = kept.astype(float)
        group = self.feasible.group[pool]
        kept_counts = np.bincount(group[kept], minlength=len(self.feasible.counts))
        self._counts = (self.feasible.counts - kept_counts).astype(float)
        self._cell, self._group = cells[pool[self._free]], group[self._free]
        self._weights = weights[pool]

    def advance(self, tolerance: float) -> tuple[np.ndarray, float, np.ndarray]:
        def whole(free: np.ndarray) -> np.ndarray:
            point = self._fixed.copy()
            point[self._free] = free
            return point

        def second_order(free: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
            height, slope, curvature = self._relaxation.second_order(whole(free))
            return height, slope[self._free], curvature[np.ix_(self._free, self._free)]

        def settled(free: np.ndarray, height: float, slope: np.ndarray) -> bool:
            price = np.zeros(self.feasible.n_candidates)
            price[self.pool[self._free]] = slope - slope.min() + 1.0  # a constant changes no gap; keeps the pool ahead
            best, _ = self.feasible.best_linear(price)
            return best - price[self.pool[self._free]] @ free <= 0.5 * tolerance * abs(height)

        if not len(self._free):
            height = self._relaxation.value(self._fixed)
            return self._everywhere(self._fixed), height, self._relaxation.gradient_everywhere(self._fixed)
        free, height = newton_ascent(
            lambda free: self._relaxation.value(whole(free)),
            second_order,
            self._weights[self._free],
            self._cell,
            self._group,
            self._counts,
            12,
            settled,
        )
        self._weights = whole(free)
        return self._everywhere(self._weights), height, self._relaxation.gradient_everywhere(self._weights)

    def _everywhere(self, weights: np.ndarray) -> np.ndarray:
        everywhere = np.zeros(self.feasible.n_candidates)
        everywhere[self.pool] = weights
        return everywhere

    def grow(self, vertex: np.ndarray, gradient: np.ndarray) -> None:
        entering = np.flatnonzero((vertex > 0.5) & ~np.isin(np.arange(len(vertex)), self.pool))
        level = gradient[vertex > 0.5].min()
        room = max(0, self.feasible.size - len(entering))
        rivals = np.setdiff1d(np.flatnonzero(gradient > level - 0.02 * abs(level)), np.union1d(self.pool, entering))
        rivals = rivals[np.argsort(-gradient[rivals], kind="stable")][:room]
        live = self.pool[(self._weights > 0) | (gradient[self.pool] > 0.5 * level)]
        self._set_pool(np.unique(np.concatenate([live, entering, rivals])), self._everywhere(self._weights))


def _hull(relax: Relax, feasible: Feasible, start: np.ndarray) -> HullAscent:
    """From weights that may not fill every group yet."""
    points = [start]
    held = np.bincount(feasible.group, weights=start, minlength=len(feasible.counts))
    if (held < feasible.counts - 1e-6).any():
        pool = np.flatnonzero(start)
        points.append(feasible.best_linear(relax(pool).gradient_everywhere(start[pool]))[1])
    return HullAscent(relax, points)
