"""Exact nearest points on a triangle surface, for many points at once."""

from __future__ import annotations

from typing import NamedTuple

import numba
import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.head import Surface

CLUSTER = 32  # neighbouring faces that are passed over together


class NearestPoints(NamedTuple):
    """points (n, 3) [m] on the surface; inside_depth (n,) [m]: distance, positive inside, negative outside;
    normals (n, 3): outward unit vertex normals interpolated there; faces (n,): the face it lies on; shares (n, 3): its
    barycentric coordinates there.
    """

    points: np.ndarray
    inside_depth: np.ndarray
    normals: np.ndarray
    faces: np.ndarray
    shares: np.ndarray


def nearest_on_surface(surface: Surface, points: np.ndarray) -> NearestPoints:
    """Nearest point of the surface for each of the points (n, 3) [m].

    Exact over all faces (same answer as trimesh.proximity.closest_point): a face is measured unless the bounding
    sphere of its cluster, or its own, is farther than the best so far, which starts at the nearest face centre.
    """
    points = np.ascontiguousarray(points, float).reshape(-1, 3)
    tree = cKDTree(surface.vertices[surface.faces].mean(axis=1))
    faces = surface.faces[tree.indices]  # leaf by leaf: neighbours stand together
    corners = np.ascontiguousarray(surface.vertices[faces], float)
    centres = corners.mean(axis=1)
    reach = np.linalg.norm(corners - centres[:, None], axis=2).max(axis=1)
    start = tree.query(points)[0] if len(points) else np.empty(0)
    face = np.zeros(len(points), np.int64)
    shares = np.empty((len(points), 3))
    _search(points, corners, centres, reach, *_clusters(centres, reach), start, face, shares)
    nearest = np.einsum("nc,nci->ni", shares, corners[face])
    normals = np.einsum("nc,nci->ni", shares, surface.normals[faces[face]])
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    offset = nearest - points
    depth = np.copysign(np.linalg.norm(offset, axis=1), np.einsum("ni,ni->n", offset, normals))
    return NearestPoints(nearest, depth, normals, tree.indices[face], shares)


def _clusters(centres: np.ndarray, reach: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Centres and radii of spheres round the bounding spheres of each CLUSTER faces in a row."""
    first = np.arange(0, len(centres), CLUSTER)
    middles = np.add.reduceat(centres, first) / np.diff(first, append=len(centres))[:, None]
    away = np.linalg.norm(centres - np.repeat(middles, CLUSTER, axis=0)[: len(centres)], axis=1)
    return middles, np.maximum.reduceat(away + reach, first)


@numba.njit(cache=True)
def _minus(a, b):
    """As three numbers: an array would be allocated for every face."""
    return a[0] - b[0], a[1] - b[1], a[2] - b[2]


@numba.njit(cache=True)
def _dot(a, b):
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


@numba.njit(cache=True)
def _closest_shares(p, a, b, c):
    """Barycentric coordinates of the point of triangle abc nearest to p, region by region."""
    ab, ac, ap, bp, cp = _minus(b, a), _minus(c, a), _minus(p, a), _minus(p, b), _minus(p, c)
    d1, d2 = _dot(ab, ap), _dot(ac, ap)
    if d1 <= 0.0 and d2 <= 0.0:
        return 1.0, 0.0, 0.0
    d3, d4 = _dot(ab, bp), _dot(ac, bp)
    if d3 >= 0.0 and d4 <= d3:
        return 0.0, 1.0, 0.0
    over_c = d1 * d4 - d3 * d2
    if over_c <= 0.0 and d1 >= 0.0 and d3 <= 0.0:
        t = d1 / (d1 - d3)
        return 1.0 - t, t, 0.0
    d5, d6 = _dot(ab, cp), _dot(ac, cp)
    if d6 >= 0.0 and d5 <= d6:
        return 0.0, 0.0, 1.0
    over_b = d5 * d2 - d1 * d6
    if over_b <= 0.0 and d2 >= 0.0 and d6 <= 0.0:
        t = d2 / (d2 - d6)
        return 1.0 - t, 0.0, t
    over_a = d3 * d6 - d5 * d4
    if over_a <= 0.0 and d4 - d3 >= 0.0 and d5 - d6 >= 0.0:
        t = (d4 - d3) / ((d4 - d3) + (d5 - d6))
        return 0.0, 1.0 - t, t
    total = over_a + over_b + over_c
    return over_a / total, over_b / total, over_c / total


@numba.njit(cache=True)
def _farther(p, centre, limit):
    dx, dy, dz = p[0] - centre[0], p[1] - centre[1], p[2] - centre[2]
    return dx * dx + dy * dy + dz * dz > limit * limit


@numba.njit(parallel=True, cache=True)
def _search(points, corners, centres, reach, cluster_centres, cluster_reach, start, face, shares):
    for i in numba.prange(points.shape[0]):
        p = points[i]
        best = start[i] * (1.0 + 1e-9) + 1e-12  # so that the face of the nearest centre is never skipped
        for cluster in range(cluster_centres.shape[0]):
            if _farther(p, cluster_centres[cluster], best + cluster_reach[cluster]):
                continue
            first = cluster * CLUSTER
            for f in range(first, min(first + CLUSTER, corners.shape[0])):
                if _farther(p, centres[f], best + reach[f]):
                    continue
                u, v, w = _closest_shares(p, corners[f, 0], corners[f, 1], corners[f, 2])
                square = 0.0
                for axis in range(3):
                    gap = u * corners[f, 0, axis] + v * corners[f, 1, axis] + w * corners[f, 2, axis] - p[axis]
                    square += gap * gap
                distance = np.sqrt(square)
                if distance < best:
                    best = distance
                    face[i] = f
                    shares[i, 0], shares[i, 1], shares[i, 2] = u, v, w
