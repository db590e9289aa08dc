"""The certified limit that no allowed layout can pass."""

from __future__ import annotations

import time
from dataclasses import dataclass

import numpy as np

from layout.engine.ascent import newton_ascent, project_on_cells, project_on_simplex
from layout.engine.feasible import Feasible
from layout.engine.model import LinearModel
from layout.engine.relaxation import PooledRelaxation, value_and_gradient


@dataclass(frozen=True)
class Bound:
    """weights (n_candidates,) at which the limit `value` [bits] was certified; relaxed: f there; rounds of pool growth.

    Valid whatever the convergence: `value` - `relaxed` is what a longer run could at most take off it.
    """

    value: float
    relaxed: float
    weights: np.ndarray
    rounds: int
    stopped_by_clock: bool = False


def certify(model: LinearModel, feasible: Feasible, weights: np.ndarray) -> tuple[float, float]:
    """(limit, f(weights)) recomputed in source space: f(w) - g·w plus the best linear price of any allowed layout."""
    value, gradient = value_and_gradient(model, weights)
    best, _ = feasible.best_linear(gradient)
    return value - float(gradient @ weights) + best, value


def tighten(
    model: LinearModel,
    feasible: Feasible,
    layout: np.ndarray,
    *,
    tolerance: float = 2e-4,
    rounds: int = 60,
    deadline: float | None = None,
    start: np.ndarray | None = None,
) -> Bound:
    """Maximise the relaxation until its own gap is under `tolerance` (relative), and certify the limit there.

    layout (k,): an allowed layout, where the ascent starts unless weights `start` are given. Candidates enter the pool
    when their price says so; all of them are priced every round.
    """
    solver = _CellAscent if feasible.cells is not None else _VertexAscent
    ascent = solver(model, feasible, layout, start)
    best: tuple[float, np.ndarray] | None = None
    stopped = False
    done = 0
    while done < rounds:
        done += 1
        weights, value, gradient = ascent.advance(tolerance)
        price, vertex = feasible.best_linear(gradient)
        limit = value - float(gradient @ weights) + price
        if best is None or limit < best[0]:
            best = (limit, weights)
        if limit - value <= tolerance * max(abs(value), 1e-12):
            break
        stopped = deadline is not None and time.monotonic() > deadline
        if stopped or not ascent.grow(gradient, vertex):
            break
    limit, relaxed = certify(model, feasible, best[1])
    return Bound(limit, relaxed, best[1], done, stopped)


class _CellAscent:
    """Ascent in the weights themselves where projection on the rules is cheap (cells)."""

    def __init__(self, model: LinearModel, feasible: Feasible, layout: np.ndarray, start: np.ndarray | None) -> None:
        self.model, self.feasible = model, feasible
        weights = np.zeros(feasible.n_candidates)
        weights[layout] = 1.0
        weights = weights if start is None else start
        self._set_pool(np.flatnonzero(weights), weights)

    def _set_pool(self, pool: np.ndarray, weights: np.ndarray) -> None:
        cells = self.feasible.cells
        self.pool = pool
        self._relaxation = PooledRelaxation(self.model, pool)
        kept = np.isin(pool, self.feasible.keep)
        free = np.flatnonzero(~np.isin(cells[pool], cells[pool[kept]]))
        self._free = free[np.argsort(cells[pool[free]], kind="stable")]
        self._fixed = kept.astype(float)
        group = self.feasible.group[pool]
        self._counts = self.feasible.counts - np.bincount(group[kept], minlength=len(self.feasible.counts)).astype(
            float
        )
        self._cell, self._group = cells[pool[self._free]], group[self._free]
        self._weights = weights[pool]

    def _project(self, point: np.ndarray) -> np.ndarray:
        out = self._fixed.copy()
        out[self._free] = project_on_cells(point[self._free], self._cell, self._group, self._counts)
        return out

    def advance(self, tolerance: float) -> tuple[np.ndarray, float, np.ndarray]:
        def settled(point: np.ndarray, value: float, slope: np.ndarray) -> bool:
            spread = np.zeros(self.feasible.n_candidates)
            spread[self.pool] = slope - slope.min() + 1.0  # a constant does not change the gap; keeps the pool ahead
            best, _ = self.feasible.best_linear(spread)
            return best - spread[self.pool] @ point <= 0.5 * tolerance * abs(value)

        point, value = newton_ascent(
            self._relaxation.value, self._relaxation.second_order, self._project, self._weights, 12, settled
        )
        self._weights = point
        weights = np.zeros(self.feasible.n_candidates)
        weights[self.pool] = point
        return weights, value, self._relaxation.gradient_everywhere(point)

    def grow(self, gradient: np.ndarray, vertex: np.ndarray) -> bool:
        weights = np.zeros(self.feasible.n_candidates)
        weights[self.pool] = self._weights
        entering = np.flatnonzero((vertex > 0.5) & ~np.isin(np.arange(len(vertex)), self.pool))
        level = gradient[vertex > 0.5].min()
        room = max(0, self.feasible.size - len(entering))
        rivals = np.setdiff1d(np.flatnonzero(gradient > level - 0.02 * abs(level)), np.union1d(self.pool, entering))
        rivals = rivals[np.argsort(-gradient[rivals], kind="stable")][:room]
        live = self.pool[(self._weights > 0) | (gradient[self.pool] > 0.5 * level)]
        self._set_pool(np.unique(np.concatenate([live, entering, rivals])), weights)
        return True


class _VertexAscent:
    """Ascent over convex combinations of layouts that the linear programme proposed (simplicial decomposition).

    von Hohenbalken 1977, Mathematical Programming 13:49. Serves any linear rules, spacing among them.
    """

    def __init__(self, model: LinearModel, feasible: Feasible, layout: np.ndarray, start: np.ndarray | None) -> None:
        self.model, self.feasible = model, feasible
        first = np.zeros(feasible.n_candidates)
        first[layout] = 1.0
        self._vertices = [first] if start is None else [first, start]
        self._mix = np.full(len(self._vertices), 1.0 / len(self._vertices))

    def advance(self, tolerance: float) -> tuple[np.ndarray, float, np.ndarray]:
        stack = np.column_stack(self._vertices)
        pool = np.flatnonzero(stack.any(axis=1))
        stack = stack[pool]
        relaxation = PooledRelaxation(self.model, pool)

        def value(mix: np.ndarray) -> float:
            return relaxation.value(stack @ mix)

        def second_order(mix: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
            height, slope, curvature = relaxation.second_order(stack @ mix)
            return height, stack.T @ slope, stack.T @ curvature @ stack

        def settled(mix: np.ndarray, height: float, slope: np.ndarray) -> bool:
            return slope.max() - slope @ mix <= 0.2 * tolerance * abs(height)

        self._mix, height = newton_ascent(value, second_order, project_on_simplex, self._mix, 12, settled)
        weights = np.zeros(self.feasible.n_candidates)
        weights[pool] = stack @ self._mix
        return weights, height, relaxation.gradient_everywhere(weights[pool])

    def grow(self, gradient: np.ndarray, vertex: np.ndarray) -> bool:
        held = self._mix > 1e-9
        self._vertices = [v for v, live in zip(self._vertices, held, strict=True) if live] + [vertex]
        self._mix = np.append(self._mix[held], 0.0)
        return True
