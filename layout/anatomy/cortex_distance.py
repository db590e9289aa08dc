"""Distances along the cortex, not through the air between its folds.

Exact polyhedral geodesics (Mitchell, Mount, Papadimitriou 1987, SIAM J Comput 16:647) by pygeodesic, over the part of
the mesh within reach: a way of length r never leaves the ball of radius r about its start.
"""

from __future__ import annotations

import numpy as np

from layout.anatomy.geodesics import geodesic_distances
from layout.anatomy.head import Head, Surface


def distances_along_cortex(head: Head, start: int, reach: float) -> np.ndarray:
    """Distances (n_sources,) [m] from the source numbered `start`; inf for those farther than `reach` [m].

    On a sphere the great circle of the sources' shell, exact; sources on the other side, or on a piece of the mesh that
    hangs together with the start only outside the reach, are inf.
    """
    cortex = head.cortex
    origin = cortex.positions[start]
    straight = np.linalg.norm(cortex.positions - origin, axis=1)
    distances = np.full(len(cortex), np.inf)
    if head.sphere is not None:
        radius = float(np.linalg.norm(origin - head.sphere[0]))
        distances[:] = 2 * radius * np.arcsin(np.clip(straight / (2 * radius), 0.0, 1.0))
        distances[distances > reach] = np.inf
        return distances
    near = np.flatnonzero((straight <= reach) & (cortex.side == cortex.side[start]))
    part = _part_within(head.cortex_surface, origin, reach)
    found = geodesic_distances(part, origin[None], cortex.positions[near])[:, 0]
    found[near == start] = 0.0
    distances[near] = np.where(found <= reach, found, np.inf)
    return distances


def _part_within(surface: Surface, centre: np.ndarray, reach: float) -> Surface:
    """The faces with a point inside the ball, and whatever else has a corner in a slightly larger one."""
    tri = surface.vertices[surface.faces]
    longest = np.linalg.norm(tri - np.roll(tri, 1, axis=1), axis=2).max(axis=1)
    away = np.linalg.norm(tri - centre, axis=2).min(axis=1)
    faces = surface.faces[away <= reach + longest]
    used, number = np.unique(faces, return_inverse=True)
    return Surface(surface.vertices[used], number.reshape(faces.shape))
