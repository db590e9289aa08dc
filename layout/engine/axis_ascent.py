"""Projected Newton ascent over weights in cells of a given total, or of at most 1 in groups of a given total."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numba
import numpy as np


@dataclass(frozen=True)
class Cells:
    """Weights w >= 0; cell c, the entries first[c]..first[c + 1], sums to total[c] or, in a group, to 1 at most.

    first (n_cells + 1,); total (n_cells,); group (n_cells,): -1 for a cell of given total, else the number of its
    group, whose cells together sum to counts[group].
    """

    first: np.ndarray
    total: np.ndarray
    group: np.ndarray
    counts: np.ndarray

    @staticmethod
    def of_totals(first: np.ndarray, total: np.ndarray) -> Cells:
        """Every cell has a given total."""
        return Cells(first, np.asarray(total, dtype=float), np.full(len(total), -1), np.zeros(0))

    @property
    def parts(self) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """What the compiled kernels take."""
        return self.first, self.total, self.group, self.counts


@numba.njit(cache=True)
def project(point: np.ndarray, first: np.ndarray, total: np.ndarray, group: np.ndarray, counts: np.ndarray):
    """Nearest allowed weights (n,): thresholds by sorting, and bisection for a group's common one."""
    out = np.zeros(len(point))
    n_cells = len(first) - 1
    threshold = np.empty(n_cells)
    for c in range(n_cells):
        ordered = np.sort(point[first[c] : first[c + 1]])[::-1]
        running = -(total[c] if group[c] < 0 else 1.0)
        shift = 0.0
        for place in range(len(ordered)):
            running += ordered[place]
            if ordered[place] > running / (place + 1):
                shift = running / (place + 1)
        threshold[c] = shift
        if group[c] < 0 and total[c] > 0:
            for i in range(first[c], first[c + 1]):
                out[i] = max(point[i] - shift, 0.0)
    for g in range(len(counts)):
        if counts[g] <= 0:
            continue
        low, high = np.inf, -np.inf
        for c in range(n_cells):
            if group[c] == g:
                for i in range(first[c], first[c + 1]):
                    low, high = min(low, point[i] - counts[g] - 1.0), max(high, point[i])
        for _ in range(60):
            middle = 0.5 * (low + high)
            held = 0.0
            for c in range(n_cells):
                if group[c] == g:
                    level = max(middle, threshold[c])
                    for i in range(first[c], first[c + 1]):
                        held += max(point[i] - level, 0.0)
            if held > counts[g]:
                low = middle
            else:
                high = middle
        for c in range(n_cells):
            if group[c] == g:
                level = max(low, threshold[c])
                for i in range(first[c], first[c + 1]):
                    out[i] = max(point[i] - level, 0.0)
    return out


@numba.njit(cache=True)
def best_of_quadratic(start, slope, curvature, first, total, group, counts):
    """Maximise slope · d + ½ dᵀ curvature d, d = w - start: accelerated projected gradient with restart (ascent.py)."""
    n = len(start)
    direction = np.ones(n) / np.sqrt(n)
    steepest = 0.0
    for _ in range(20):
        image = curvature @ direction
        steepest = np.sqrt((image * image).sum())
        if steepest <= 1e-300:
            break
        direction = image / steepest
    step = 1.0 / (1.25 * steepest + 1e-300)
    point, ahead, momentum = start.copy(), start.copy(), 1.0
    for _ in range(400):
        upward = slope + curvature @ (ahead - start)
        trial = project(ahead + step * upward, first, total, group, counts)
        if (upward * (trial - point)).sum() < 0:
            momentum = 1.0
            upward = slope + curvature @ (point - start)
            trial = project(point + step * upward, first, total, group, counts)
        grown = 0.5 * (1.0 + np.sqrt(1.0 + 4.0 * momentum * momentum))
        ahead = trial + (momentum - 1.0) / grown * (trial - point)
        moved = np.abs(trial - point).max()
        point, momentum = trial, grown
        if moved < 1e-6:
            break
    return point


def newton_in_cells(
    value: Callable[[np.ndarray], float],
    second_order: Callable[[np.ndarray], tuple[float, np.ndarray, np.ndarray]],
    start: np.ndarray,
    cells: Cells,
    iterations: int,
    stop: Callable[[np.ndarray, float, np.ndarray], bool],
) -> np.ndarray:
    """Each step maximises the quadratic model over the cells and walks towards it, halving the stride until it rises.

    second_order(point) gives value, gradient and a negative semidefinite metric; stop(point, value, gradient) ends.
    """
    point = project(start, *cells.parts)
    height, slope, curvature = second_order(point)
    for _ in range(iterations):
        if stop(point, height, slope):
            break
        goal = best_of_quadratic(point, slope, np.ascontiguousarray(curvature), *cells.parts)
        rise = slope @ (goal - point)
        if rise <= 1e-14 * (1.0 + abs(height)):
            break
        stride = 1.0
        while value(point + stride * (goal - point)) < height + 1e-3 * stride * rise:
            stride *= 0.5
            if stride < 1e-4:
                return point
        point = point + stride * (goal - point)
        height, slope, curvature = second_order(point)
    return point
