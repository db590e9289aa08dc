"""Ascent of a concave score over the hull of points that a linear programme proposed: simplicial decomposition.

von Hohenbalken 1977, Mathematical Programming 13:49. Serves any linear rules, spacing among them.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from layout.engine.ascent import newton_ascent
from layout.engine.goal import Relaxed

STEPS = 12  # Newton steps between two new points
HELD = 1e-9  # a point of smaller share is forgotten


class HullAscent:
    """Weights as a mix of points (n_points, n_candidates)."""

    def __init__(self, relax: Callable[[np.ndarray], Relaxed], points: list[np.ndarray]) -> None:
        self._relax, self._points = relax, points
        self._mix = np.full(len(points), 1.0 / len(points))

    @property
    def points(self) -> list[np.ndarray]:
        """Points that have a share in the weights, largest first."""
        order = np.argsort(-self._mix, kind="stable")
        return [self._points[i] for i in order if self._mix[i] > HELD]

    def advance(self, tolerance: float) -> tuple[np.ndarray, float, np.ndarray]:
        """(weights, score, gradient), each over all candidates, at the best mix of the points."""
        stack = np.column_stack(self._points)
        pool = np.flatnonzero(stack.any(axis=1))
        stack = stack[pool]
        relaxation = self._relax(pool)

        def value(mix: np.ndarray) -> float:
            return relaxation.value(stack @ mix)

        def second_order(mix: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
            height, slope, curvature = relaxation.second_order(stack @ mix)
            return height, stack.T @ slope, stack.T @ curvature @ stack

        def settled(mix: np.ndarray, height: float, slope: np.ndarray) -> bool:
            return slope.max() - slope @ mix <= 0.2 * tolerance * abs(height)

        one = np.zeros(len(self._mix), dtype=np.int64)  # a single cell that must be full: the simplex
        self._mix, height = newton_ascent(value, second_order, self._mix, one, one, np.ones(1), STEPS, settled)
        weights = np.zeros(len(self._points[0]))
        weights[pool] = stack @ self._mix
        return weights, height, relaxation.gradient_everywhere(weights[pool])

    def grow(self, point: np.ndarray, gradient: np.ndarray | None = None) -> None:
        """One more point; those without a share are forgotten. The gradient is not needed."""
        held = self._mix > HELD
        self._points = [v for v, live in zip(self._points, held, strict=True) if live] + [point]
        self._mix = np.append(self._mix[held], 0.0)
