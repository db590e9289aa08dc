"""Maximising a smooth concave function over a set with a cheap projection: projected Newton steps."""

from __future__ import annotations

from collections.abc import Callable

import numba
import numpy as np


@numba.njit(cache=True)
def project_on_cells(point: np.ndarray, cell: np.ndarray, group: np.ndarray, counts: np.ndarray) -> np.ndarray:
    """Nearest w >= 0 with at most 1 in each cell and exactly counts[g] in each group; cells lie within groups.

    point (n,); cell (n,) of 0..n_cells-1, entries of one cell adjacent; group (n,); counts (n_groups,) float. For one
    cell the projection is max(y - max(λ, τ), 0), τ the threshold of its own simplex and λ that of its group's total,
    so λ is the root of a decreasing function, found by bisection.
    """
    n = len(point)
    threshold = np.empty(n)
    first = 0
    while first < n:
        last = first
        while last < n and cell[last] == cell[first]:
            last += 1
        ordered = np.sort(point[first:last])[::-1]
        running, shift = -1.0, 0.0
        for place in range(last - first):
            running += ordered[place]
            if ordered[place] > running / (place + 1):
                shift = running / (place + 1)
        threshold[first:last] = shift
        first = last
    out = np.zeros(n)
    for g in range(len(counts)):
        if counts[g] <= 0:
            continue
        low, high = np.inf, -np.inf
        for i in range(n):
            if group[i] == g:
                low, high = min(low, point[i] - counts[g] - 1.0), max(high, point[i])
        for _ in range(80):
            middle = 0.5 * (low + high)
            total = 0.0
            for i in range(n):
                if group[i] == g:
                    total += max(point[i] - max(middle, threshold[i]), 0.0)
            if total > counts[g]:
                low = middle
            else:
                high = middle
        for i in range(n):
            if group[i] == g:
                out[i] = max(point[i] - max(low, threshold[i]), 0.0)
    return out


@numba.njit(cache=True)
def best_of_quadratic(
    start: np.ndarray,
    slope: np.ndarray,
    curvature: np.ndarray,
    cell: np.ndarray,
    group: np.ndarray,
    counts: np.ndarray,
) -> np.ndarray:
    """Maximise slope · d + ½ dᵀ curvature d, d = w - start, over the set of `project_on_cells`.

    curvature (n, n) is negative semidefinite. Accelerated projected gradient with restart (Beck & Teboulle 2009, SIAM J
    Imaging Sci 2:183; O'Donoghue & Candès 2015, Found Comput Math 15:715); the step is from a power iteration.
    """
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
    point = start.copy()
    ahead = start.copy()
    momentum = 1.0
    for _ in range(400):
        upward = slope + curvature @ (ahead - start)
        trial = project_on_cells(ahead + step * upward, cell, group, counts)
        if (upward * (trial - point)).sum() < 0:
            momentum = 1.0
            upward = slope + curvature @ (point - start)
            trial = project_on_cells(point + step * upward, cell, group, counts)
        grown = 0.5 * (1.0 + np.sqrt(1.0 + 4.0 * momentum * momentum))
        ahead = trial + (momentum - 1.0) / grown * (trial - point)
        moved = np.abs(trial - point).max()
        point, momentum = trial, grown
        if moved < 1e-6:
            break
    return point


def newton_ascent(
    value: Callable[[np.ndarray], float],
    second_order: Callable[[np.ndarray], tuple[float, np.ndarray, np.ndarray]],
    start: np.ndarray,
    cell: np.ndarray,
    group: np.ndarray,
    counts: np.ndarray,
    iterations: int,
    stop: Callable[[np.ndarray, float, np.ndarray], bool],
) -> tuple[np.ndarray, float]:
    """Projected Newton with backtracking: each step maximises the quadratic model over the set and walks towards it.

    second_order(point) gives value, gradient and Hessian (negative semidefinite); the set is `project_on_cells`'s;
    stop(point, value, gradient) ends the ascent. Returns the point and its value. A handful of steps replaces hundreds
    of gradient steps whose cost is the same factorisation.
    """
    point = project_on_cells(start, cell, group, counts)
    height, slope, curvature = second_order(point)
    for _ in range(iterations):
        if stop(point, height, slope):
            break
        goal = best_of_quadratic(point, slope, curvature, cell, group, counts)
        rise = slope @ (goal - point)
        if rise <= 1e-14 * (1.0 + abs(height)):
            break
        stride = 1.0
        while value(point + stride * (goal - point)) < height + 1e-3 * stride * rise:
            stride *= 0.5
            if stride < 1e-4:
                return point, height
        point = point + stride * (goal - point)
        height, slope, curvature = second_order(point)
    return point, height
