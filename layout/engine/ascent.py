"""Maximising a smooth concave function over a set with a cheap projection: projected Newton steps."""

from __future__ import annotations

from collections.abc import Callable

import numba
import numpy as np

Projection = Callable[[np.ndarray], np.ndarray]


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


def project_on_simplex(point: np.ndarray) -> np.ndarray:
    """Nearest w >= 0 with total 1 (Held, Wolfe & Crowder 1974, Mathematical Programming 6:62)."""
    order = np.sort(point)[::-1]
    shift = (np.cumsum(order) - 1.0) / np.arange(1, len(point) + 1)
    last = np.flatnonzero(order > shift)[-1]
    return np.maximum(point - shift[last], 0.0)


def newton_ascent(
    value: Callable[[np.ndarray], float],
    second_order: Callable[[np.ndarray], tuple[float, np.ndarray, np.ndarray]],
    project: Projection,
    start: np.ndarray,
    iterations: int,
    stop: Callable[[np.ndarray, float, np.ndarray], bool],
) -> tuple[np.ndarray, float]:
    """Projected Newton with backtracking: each step maximises the quadratic model over the set and walks towards it.

    second_order(point) gives value, gradient and Hessian (negative semidefinite); stop(point, value, gradient) ends the
    ascent. Returns the point and its value. A handful of steps replaces hundreds of gradient steps whose cost is the
    same factorisation.
    """
    point = project(start)
    height, slope, curvature = second_order(point)
    for _ in range(iterations):
        if stop(point, height, slope):
            break
        goal = _best_of_quadratic(point, slope, curvature, project)
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


def _best_of_quadratic(start: np.ndarray, slope: np.ndarray, curvature: np.ndarray, project: Projection) -> np.ndarray:
    """Accelerated projected gradient with restart on the model (Beck & Teboulle 2009; O'Donoghue & Candès 2015)."""
    step = 1.0 / (np.linalg.norm(curvature, 2 if len(curvature) < 40 else "fro") + 1e-300)
    point = ahead = start
    momentum = 1.0
    for _ in range(400):
        upward = slope + curvature @ (ahead - start)
        trial = project(ahead + step * upward)
        if upward @ (trial - point) < 0:
            momentum, ahead = 1.0, point
            upward = slope + curvature @ (ahead - start)
            trial = project(ahead + step * upward)
        grown = 0.5 * (1 + np.sqrt(1 + 4 * momentum**2))
        ahead = trial + (momentum - 1) / grown * (trial - point)
        moved = np.abs(trial - point).max()
        point, momentum = trial, grown
        if moved < 1e-9:
            break
    return point
