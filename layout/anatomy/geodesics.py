"""Shortest distances over the scalp from the landmarks.

Exact polyhedral geodesics (Mitchell, Mount, Papadimitriou 1987, SIAM J Comput 16:647) by pygeodesic; the
heat method was found up to 10 % off on such meshes.
"""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Landmarks, Surface
from layout.anatomy.scalp_points import project

# Barycentric: thinner slivers trouble the solver, and a two-hundredth of an edge is 0.04 mm.
_CORNER = 0.005


def landmark_distances(scalp: Surface, landmarks: Landmarks, points: np.ndarray) -> np.ndarray:
    """Geodesic distances (n, 4) [m] from NAS, LPA, RPA and inion to scalp points (n, 3) [m]."""
    starts = np.stack([landmarks.nas, landmarks.lpa, landmarks.rpa, landmarks.inion])
    return geodesic_distances(scalp, starts, points)


def great_circle_distances(centre: np.ndarray, landmarks: Landmarks, points: np.ndarray) -> np.ndarray:
    """The same (n, 4) [m] in closed form for a scalp that is a sphere about `centre` (3,) [m]."""
    starts = np.stack([landmarks.nas, landmarks.lpa, landmarks.rpa, landmarks.inion]) - centre
    outward = points - centre
    sine = np.linalg.norm(np.cross(outward[:, None], starts[None]), axis=2)
    angle = np.arctan2(sine, outward @ starts.T)
    return angle * np.linalg.norm(starts, axis=1)


def geodesic_distances(surface: Surface, starts: np.ndarray, points: np.ndarray) -> np.ndarray:
    """Geodesic distances (n_points, n_starts) [m] over a closed surface.

    Starts (n_starts, 3) and points (n_points, 3) become vertices of a refined mesh, so nothing is
    interpolated (a face where shortest ways from two sides meet has no smooth distance). One that is nearer
    to an edge than 0.5 % of its face's height is moved that far in; one that near to a vertex is taken for
    the vertex.
    """
    from pygeodesic import geodesic

    vertices, faces, index = _insert(surface, np.vstack([starts, points]))
    solver = geodesic.PyGeodesicAlgorithmExact(vertices, faces)
    first, targets = index[: len(starts)], index[len(starts) :]
    return np.column_stack([solver.geodesicDistances(np.array([start]), None)[0][targets] for start in first])


def _insert(surface: Surface, points: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Vertices, faces and the vertex number (n,) of every point after each point has split the face it lies
    in.
    """
    where = project(surface, points)
    vertices = list(surface.vertices)
    split: dict[int, list[tuple[int, int, int]]] = {}
    inside: dict[int, dict[int, np.ndarray]] = {}  # per split face: barycentric coordinates of its vertices
    index = np.empty(len(where.face), dtype=int)
    for row, (face, weights) in enumerate(zip(where.face.tolist(), where.weights, strict=True)):
        corners = surface.faces[face].tolist()
        parts = split.setdefault(face, [tuple(corners)])
        known = inside.setdefault(face, dict(zip(corners, np.eye(3), strict=True)))
        shares = [np.linalg.solve(np.column_stack([known[v] for v in part]), weights) for part in parts]
        at = int(np.argmax([share.min() for share in shares]))
        part, share = parts[at], shares[at]
        if share.max() > 1 - 2 * _CORNER:
            index[row] = part[int(np.argmax(share))]
            continue
        share = np.maximum(share, _CORNER)
        share = share / share.sum()
        index[row] = new = len(vertices)
        known[new] = sum(weight * known[v] for weight, v in zip(share, part, strict=True))
        vertices.append(sum(weight * vertices[v] for weight, v in zip(share, part, strict=True)))
        a, b, c = part
        parts[at : at + 1] = [(a, b, new), (b, c, new), (c, a, new)]
    whole = np.delete(surface.faces, list(split), axis=0)
    return np.array(vertices), np.vstack([whole, *split.values()]), index
