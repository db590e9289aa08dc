"""Surfaces that every ray from a centre meets once, as radii over the directions of an icosphere."""

from __future__ import annotations

import numpy as np
import trimesh
from scipy.spatial import ConvexHull, cKDTree
from scipy.special import gammaln, lpmv


def icosphere(subdivisions: int) -> tuple[np.ndarray, np.ndarray]:
    """Unit directions (n, 3) and outward faces (m, 3) of a subdivided icosahedron, n = 10·4^s + 2."""
    mesh = trimesh.creation.icosphere(subdivisions=subdivisions, radius=1.0)
    vertices = np.asarray(mesh.vertices, dtype=float)
    return vertices / np.linalg.norm(vertices, axis=1, keepdims=True), np.asarray(mesh.faces, dtype=np.int64)


def hull_radius(points: np.ndarray, directions: np.ndarray) -> np.ndarray:
    """Radius (n,) of the hull of points (m, 3) along unit directions (n, 3); the origin must be inside."""
    facets = ConvexHull(points).equations  # normal·x + offset <= 0 inside
    reach = np.full(len(directions), np.inf)
    for block in np.array_split(facets, max(1, len(facets) // 256)):
        slope = directions @ block[:, :3].T
        with np.errstate(divide="ignore"):
            distance = np.where(slope > 0, -block[:, 3] / slope, np.inf)
        reach = np.minimum(reach, distance.min(axis=1))
    return reach


def real_harmonics(directions: np.ndarray, degree: int) -> tuple[np.ndarray, np.ndarray]:
    """Orthonormal real spherical harmonics (n, (degree + 1)²) and the degree l of each column."""
    x, y, z = directions.T
    azimuth = np.arctan2(y, x)
    columns, degrees = [], []
    for order_l in range(degree + 1):
        for m in range(order_l + 1):
            log_norm = gammaln(order_l - m + 1) - gammaln(order_l + m + 1)
            legendre = np.sqrt((2 * order_l + 1) / (4 * np.pi) * np.exp(log_norm)) * lpmv(m, order_l, z)
            waves = [np.ones_like(azimuth)] if m == 0 else [np.cos(m * azimuth), np.sin(m * azimuth)]
            columns += [legendre * wave * (1 if m == 0 else np.sqrt(2)) for wave in waves]
            degrees += [order_l] * len(waves)
    return np.stack(columns, axis=1), np.array(degrees)


def smooth_radius(directions: np.ndarray, radius: np.ndarray, degree: int, penalty: float) -> np.ndarray:
    """Radii (n,) fitted by spherical harmonics, ridge weight `penalty`·(l (l + 1))² on each coefficient."""
    basis, degrees = real_harmonics(directions, degree)
    ridge = penalty * (degrees * (degrees + 1.0)) ** 2
    coefficients = np.linalg.solve(basis.T @ basis + np.diag(ridge), basis.T @ radius)
    return basis @ coefficients


def blend(directions: np.ndarray, anchors: np.ndarray, values: np.ndarray, concentration: float) -> np.ndarray:
    """Values (k, m) at anchors (k, 3), mixed at (n, 3) with von Mises weights exp(concentration·cos)."""
    anchors = anchors / np.linalg.norm(anchors, axis=1, keepdims=True)
    weights = np.exp(concentration * (directions @ anchors.T - 1))
    return weights @ values / weights.sum(axis=1, keepdims=True)


def radius_along(vertices: np.ndarray, faces: np.ndarray, directions: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Radius (n,) of a star-shaped mesh about the origin along unit directions (n, 3), and the face (n,) met.

    Exact for the flat faces. Raises ValueError where a direction meets none of the 24 faces nearest by angle,
    which on an icosphere-like mesh means that the mesh is not star-shaped about the origin.
    """
    corners = vertices[faces]
    middle = corners.mean(axis=1)
    tree = cKDTree(middle / np.linalg.norm(middle, axis=1, keepdims=True))
    _, near = tree.query(directions, k=min(24, len(faces)))
    inverse = np.linalg.inv(np.swapaxes(corners, 1, 2))  # direction = Σ weight · corner
    weights = np.einsum("nkij,nj->nki", inverse[near], directions)
    best = np.argmax(weights.min(axis=2), axis=1)
    rows = np.arange(len(directions))
    chosen = weights[rows, best]
    if chosen.min() < -1e-9 * np.abs(chosen).max():
        raise ValueError("the surface is not star-shaped about its centre")
    return 1 / chosen.sum(axis=1), near[rows, best]


def lift_over(vertices: np.ndarray, faces: np.ndarray, points: np.ndarray, clearance: float) -> np.ndarray:
    """Vertices (n, 3) of a star-shaped mesh about the origin, raised till all points (m, 3) are well inside.

    Well inside: by `clearance`, measured to the plane of the facet above the point.

    Each pass raises the surface by a smooth bump (von Mises, concentration 40: some 9° wide) over the point
    that stands out most. Raises ValueError where 200 passes do not do.
    """
    directions = vertices / np.linalg.norm(vertices, axis=1, keepdims=True)
    reach = np.linalg.norm(points, axis=1)
    towards = points / reach[:, None]
    watched = np.arange(len(points))
    for _ in range(200):
        above, facet = radius_along(vertices, faces, towards[watched])
        tri = vertices[faces[facet]]
        normal = np.cross(tri[:, 1] - tri[:, 0], tri[:, 2] - tri[:, 0])
        cosine = np.einsum("ij,ij->i", normal, towards[watched]) / np.linalg.norm(normal, axis=1)
        short = clearance / cosine - (above - reach[watched])
        worst = np.argmax(short)
        if short[worst] <= 0:
            if len(watched) == len(points):
                return vertices
            watched = np.arange(len(points))  # the last word is over all points
            continue
        bump = np.exp(40 * (directions @ towards[watched[worst]] - 1))
        vertices = vertices + ((short[worst] + 0.02 * clearance) * bump)[:, None] * directions
        watched = watched[short > -clearance]
    raise ValueError("the inner skull could not be raised over the cortex")
