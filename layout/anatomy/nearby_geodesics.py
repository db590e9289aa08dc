"""Shortest distances over a surface from one point to points near it, at the cost of the surface's part around it."""

from __future__ import annotations

import numpy as np

from layout.anatomy.geodesics import geodesic_distances
from layout.anatomy.head import Surface


def distances_within(surface: Surface, start: np.ndarray, points: np.ndarray, reach: float) -> np.ndarray:
    """Geodesic distances (n,) [m] from `start` (3,) to points (n, 3) on the surface, inf where they exceed `reach` [m].

    Exact: a way no longer than `reach` never leaves the ball of that radius about its start, so the faces that meet the
    ball hold all of it; a longer way found on them proves only that the point is farther off.
    """
    away = np.linalg.norm(points - start, axis=1)
    near = np.flatnonzero(away <= reach)
    distances = np.full(len(points), np.inf)
    if len(near):
        found = geodesic_distances(_part(surface, start, reach), start[None], points[near])[:, 0]
        distances[near] = np.where(found <= reach, found, np.inf)
    return distances


def nearest_along(surface: Surface, start: np.ndarray, points: np.ndarray, count: int) -> tuple[np.ndarray, np.ndarray]:
    """The `count` points (or all n, if fewer) nearest to `start` along the surface: their numbers, and the distances
    [m]; nearest first, equal ones in the order given.
    """
    count = min(count, len(points))
    if count == 0:
        return np.zeros(0, dtype=int), np.zeros(0)
    reach = 1.2 * float(np.sort(np.linalg.norm(points - start, axis=1))[count - 1]) + 5e-3
    while True:
        distances = distances_within(surface, start, points, reach)
        if np.isfinite(distances).sum() >= count:
            order = np.argsort(distances, kind="stable")[:count]
            return order, distances[order]
        reach *= 1.5


def _part(surface: Surface, centre: np.ndarray, radius: float) -> Surface:
    """The faces that may meet a ball: those whose own enclosing ball about the mean of the corners does."""
    corners = surface.vertices[surface.faces]
    middle = corners.mean(axis=1)
    size = np.linalg.norm(corners - middle[:, None], axis=2).max(axis=1)
    faces = surface.faces[np.linalg.norm(middle - centre, axis=1) <= radius + size]
    used, numbers = np.unique(faces, return_inverse=True)
    return Surface(surface.vertices[used], numbers.reshape(-1, 3))
