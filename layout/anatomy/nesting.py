"""Surfaces inside each other with a least gap: small breaches are mended by moving the inner one inwards."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.head import Surface
from layout.anatomy.mesh_graph import edges
from layout.anatomy.scalp_points import normals_at, project
from layout.errors import FileError
from layout.units import MM

FARTHEST = 6 * MM  # a breach that needs more is not of the meshing: two files do not belong together
_MARGIN = 0.02  # of the gap: so that the next measurement does not find it a rounding short
_ROUNDS = 30


def depth_inside(surface: Surface, points: np.ndarray) -> np.ndarray:
    """Distances (n,) [m] of points (n, 3) to a closed surface, positive inside, negative outside."""
    where = project(surface, points)
    offset = where.positions - points
    outward = np.einsum("nd,nd->n", offset, normals_at(surface, where))
    return np.copysign(np.linalg.norm(offset, axis=1), outward)


def move_inside(
    where: str, points: np.ndarray, outer: Surface, gap: float, farthest: float = FARTHEST
) -> tuple[np.ndarray, list[str]]:
    """Points (n, 3) [m] at least `gap` [m] under a surface; the few that are not are moved there the shortest way.

    `where` begins the sentence that says how many moved and how far. Raises FileError where a point would
    have to move more than `farthest` [m].
    """
    depth = _depth_where_it_matters(points, outer, gap)
    short = np.flatnonzero(depth < gap)
    if not len(short):
        return points, []
    _refuse_far(where, float((gap - depth[short]).max()), gap, farthest)
    moved = points.copy()
    for _ in range(_ROUNDS):
        on = project(outer, moved[short])
        normals = normals_at(outer, on)
        lack = (1 + _MARGIN) * gap - depth[short]
        moved[short] -= lack[:, None] * normals
        depth[short] = depth_inside(outer, moved[short])
        if (depth[short] >= gap).all():
            break
    else:
        _refuse_far(where, np.inf, gap, farthest)
    away = np.linalg.norm(moved - points, axis=1)
    _refuse_far(where, float(away.max()), gap, farthest)
    return moved, [
        f"{where}: {len(short):,} of {len(points):,} points were moved inwards by at most {away.max() / MM:.1f} mm to "
        f"keep {gap / MM:g} mm to the surface around."
    ]


def nest(
    where: str, inner: Surface, outer: Surface, gap: float, farthest: float = FARTHEST
) -> tuple[Surface, list[str]]:
    """The inner surface with `gap` [m] to the outer one everywhere, measured at the vertices of both.

    `where` names the pair. Raises FileError where a vertex would have to move more than `farthest` [m].
    """
    given = inner.vertices
    vertices, _ = move_inside(where, given, outer, gap, farthest)
    neighbours = edges(inner.faces, len(vertices))
    for _ in range(_ROUNDS):
        surface = Surface(vertices, inner.faces)
        # Where the outer surface dips between vertices of the inner one, the corners of the face below give way.
        at_risk = _near(outer.vertices, surface, gap)
        if not len(at_risk):
            break
        on = project(surface, outer.vertices[at_risk])
        offset = outer.vertices[at_risk] - on.positions
        outward = normals_at(surface, on)
        height = np.copysign(np.linalg.norm(offset, axis=1), np.einsum("nd,nd->n", offset, outward))
        short = np.flatnonzero(height < gap)
        if not len(short):
            break
        lack = np.zeros(len(vertices))
        for corner in range(3):
            np.maximum.at(lack, inner.faces[on.face[short], corner], (1 + _MARGIN) * gap - height[short])
        ring = (neighbours @ lack) / np.maximum(neighbours.sum(axis=1), 1)
        vertices = vertices - np.maximum(lack, 0.5 * ring)[:, None] * surface.normals
        _refuse_far(where, float(np.linalg.norm(vertices - given, axis=1).max()), gap, farthest)
    else:
        _refuse_far(where, np.inf, gap, farthest)
    if vertices is given:
        return inner, []
    away = np.linalg.norm(vertices - given, axis=1)
    return Surface(vertices, inner.faces), [
        f"{where}: {int((away > 0).sum()):,} of {len(vertices):,} vertices of the inner one were moved inwards by at "
        f"most {away.max() / MM:.1f} mm to keep {gap / MM:g} mm between them."
    ]


def _refuse_far(where: str, needed: float, gap: float, farthest: float) -> None:
    if needed > farthest:
        said = f"{needed / MM:.0f} mm short" if np.isfinite(needed) else "too near in places"
        raise FileError(
            f"{where}: must lie inside the surface around with {gap / MM:g} mm to spare (up to {farthest / MM:g} mm "
            f"are mended), but it is {said}."
        )


def _near(points: np.ndarray, surface: Surface, gap: float) -> np.ndarray:
    """Points (indices) that may be nearer to the surface than the gap, by its vertices and longest edge, or inside."""
    tri = surface.vertices[surface.faces]
    reach = np.linalg.norm(tri - np.roll(tri, 1, axis=1), axis=2).max()
    away, nearest = cKDTree(surface.vertices).query(points)
    below = np.einsum("nd,nd->n", points - surface.vertices[nearest], surface.normals[nearest]) <= gap
    return np.flatnonzero((away <= reach + gap) | below)


def _depth_where_it_matters(points: np.ndarray, outer: Surface, gap: float) -> np.ndarray:
    """Depth (n,) [m]; inf for points that are plainly deeper than the gap, so that few are measured exactly."""
    tri = outer.vertices[outer.faces]
    reach = np.linalg.norm(tri - np.roll(tri, 1, axis=1), axis=2).max()
    away, nearest = cKDTree(outer.vertices).query(points)
    inside = np.einsum("nd,nd->n", outer.vertices[nearest] - points, outer.normals[nearest]) > 0.5 * away
    depth = np.full(len(points), np.inf)
    close = np.flatnonzero((away <= reach + gap) | ~inside)
    if len(close):
        depth[close] = depth_inside(outer, points[close])
    return depth
