"""Points on a scalp: projection, normals, and an evenly dense cloud of surface samples."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import trimesh

from layout.anatomy.head import Surface


@dataclass(frozen=True)
class SurfacePoints:
    """Points on a surface: positions (n, 3) [m], the face of each (n,), barycentric weights in it (n, 3)."""

    positions: np.ndarray
    face: np.ndarray
    weights: np.ndarray


@dataclass(frozen=True)
class SurfaceCloud:
    """Dense surface samples: positions (n, 3) [m], outward unit normals (n, 3), areas (n,) [m²]."""

    positions: np.ndarray
    normals: np.ndarray
    areas: np.ndarray


def project(surface: Surface, points: np.ndarray) -> SurfacePoints:
    """The nearest point of the surface to each of `points` (n, 3) [m]."""
    points = np.atleast_2d(np.asarray(points, dtype=float))
    positions, _, face = trimesh.proximity.closest_point(surface.mesh, points)
    weights = trimesh.triangles.points_to_barycentric(surface.vertices[surface.faces[face]], positions)
    weights = np.clip(weights, 0.0, 1.0)
    return SurfacePoints(positions, face, weights / weights.sum(axis=1, keepdims=True))


def normals_at(surface: Surface, where: SurfacePoints) -> np.ndarray:
    """Outward unit normals (n, 3), the vertex normals interpolated over each face."""
    normals = np.einsum("nk,nkd->nd", where.weights, surface.normals[surface.faces[where.face]])
    return normals / np.linalg.norm(normals, axis=1, keepdims=True)


def tangents_at(normals: np.ndarray) -> np.ndarray:
    """Two unit tangents per normal (n, 2, 3): the first as nearly +y (front) as allowed, the second = normal
    × first.

    Where the normal is ±y itself the first tangent is ∓z, the limit met when coming down the forehead or up
    the occiput.
    """
    first = np.array([0.0, 1.0, 0.0]) - normals[:, 1:2] * normals
    length = np.linalg.norm(first, axis=1)
    degenerate = length < 1e-6
    along = normals[degenerate]
    down = np.array([0.0, 0.0, -1.0]) * np.sign(along[:, 1:2])
    first[degenerate] = down - np.einsum("nd,nd->n", down, along)[:, None] * along
    length[degenerate] = 1.0
    first = first / length[:, None]
    return np.stack([first, np.cross(normals, first)], axis=1)


def dense_cloud(surface: Surface, max_edge: float) -> SurfaceCloud:
    """Vertices of the surface after splitting every face evenly until no edge is longer than `max_edge` [m].

    Normals are interpolated from the surface's own vertex normals, so a coarse mesh does not leave facets in
    them.
    """
    vertices, faces, normals = surface.vertices, surface.faces, surface.normals
    edges = vertices[faces] - vertices[np.roll(faces, 1, axis=1)]
    longest = np.linalg.norm(edges, axis=2).max()
    while longest > max_edge:
        vertices, faces, attributes = trimesh.remesh.subdivide(vertices, faces, vertex_attributes={"n": normals})
        normals = attributes["n"]
        longest /= 2
    triangles = vertices[faces]
    face_area = np.linalg.norm(np.cross(triangles[:, 1] - triangles[:, 0], triangles[:, 2] - triangles[:, 0]), axis=1)
    areas = np.bincount(faces.ravel(), np.repeat(face_area / 6, 3), minlength=len(vertices))
    return SurfaceCloud(vertices, normals / np.linalg.norm(normals, axis=1, keepdims=True), areas)


def first_hit(surface: Surface, origins: np.ndarray, directions: np.ndarray) -> np.ndarray:
    """Where each ray (origins and directions (n, 3)) first meets the surface (n, 3) [m]; rows of nan where
    it misses.

    Möller & Trumbore 1997, J Graph Tools 2:21, all rays against all faces.
    """
    a, b, c = (surface.vertices[surface.faces[:, corner]] for corner in range(3))
    ab, ac = b - a, c - a
    hits = np.full((len(origins), 3), np.nan)
    for row, (origin, direction) in enumerate(zip(origins, directions, strict=True)):
        p = np.cross(direction, ac)
        determinant = np.einsum("fd,fd->f", ab, p)
        safe = np.where(np.abs(determinant) < 1e-20, np.inf, determinant)
        offset = origin - a
        u = np.einsum("fd,fd->f", offset, p) / safe
        q = np.cross(offset, ab)
        v = (q @ direction) / safe
        along = np.einsum("fd,fd->f", ac, q) / safe
        edge = 1e-9  # rays through a vertex or an edge must not slip between faces
        met = np.isfinite(safe) & (u >= -edge) & (v >= -edge) & (u + v <= 1 + edge) & (along >= 0)
        if met.any():
            hits[row] = origin + along[met].min() * direction
    return hits
