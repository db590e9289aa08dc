"""Which triangles of a mesh pass through each other.

Boxes are swept along one axis; of each pair of boxes that meet, edges of one triangle are tried against the other.
Triangles that share an edge cross only where one is folded flat on the other. Triangles in one plane that merely
overlap are not found: scanned surfaces do not have them.
"""

from __future__ import annotations

import numba
import numpy as np

_FOLDED = -0.9999  # cosine between the normals of two neighbours that lie on each other


def crossing_faces(vertices: np.ndarray, faces: np.ndarray) -> np.ndarray:
    """True (n_faces,) for every face that passes through another face of the same mesh.

    vertices (n, 3) in any unit, faces (n_faces, 3). Edges against faces by Möller & Trumbore 1997, J Graph Tools 2:21.
    """
    vertices = np.ascontiguousarray(vertices, float)
    corners = vertices[faces]
    low, high = corners.min(axis=1), corners.max(axis=1)
    axis = int(np.argmax(np.ptp(vertices, axis=0)))
    order = np.argsort(low[:, axis], kind="stable")
    found = _sweep(
        np.ascontiguousarray(corners[order]),
        np.ascontiguousarray(faces[order]),
        np.ascontiguousarray(low[order]),
        np.ascontiguousarray(high[order]),
        axis,
    )
    result = np.zeros(len(faces), dtype=bool)
    result[order] = found
    return result


@numba.njit(cache=True)
def _sweep(corners, faces, low, high, axis):
    n = len(faces)
    found = np.zeros(n, dtype=np.bool_)
    for i in range(n):
        for j in range(i + 1, n):
            if low[j, axis] > high[i, axis]:
                break
            apart = False
            for d in range(3):
                if low[j, d] > high[i, d] or low[i, d] > high[j, d]:
                    apart = True
                    break
            if not apart and _meet(corners[i], corners[j], faces[i], faces[j]):
                found[i] = True
                found[j] = True
    return found


@numba.njit(cache=True)
def _meet(a, b, face_a, face_b):
    shared = 0
    own_a, own_b = -1, -1  # the edge opposite a shared corner
    for i in range(3):
        for j in range(3):
            if face_a[i] == face_b[j]:
                shared += 1
                own_a, own_b = i, j
    if shared >= 2:
        return _folded(a, b)
    if shared == 1:
        i, j = (own_a + 1) % 3, (own_a + 2) % 3
        if _pierces(a[i], a[j], b):
            return True
        i, j = (own_b + 1) % 3, (own_b + 2) % 3
        return _pierces(b[i], b[j], a)
    for i in range(3):
        j = (i + 1) % 3
        if _pierces(a[i], a[j], b) or _pierces(b[i], b[j], a):
            return True
    return False


@numba.njit(cache=True)
def _cross(a, b):
    return a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]


@numba.njit(cache=True)
def _minus(a, b):
    return a[0] - b[0], a[1] - b[1], a[2] - b[2]


@numba.njit(cache=True)
def _dot(a, b):
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


@numba.njit(cache=True)
def _folded(a, b):
    n = _cross(_minus(a[1], a[0]), _minus(a[2], a[0]))
    m = _cross(_minus(b[1], b[0]), _minus(b[2], b[0]))
    size = np.sqrt(_dot(n, n) * _dot(m, m))
    return size > 0.0 and _dot(n, m) < _FOLDED * size


@numba.njit(cache=True)
def _pierces(start, end, tri):
    """Whether the segment goes through the inside of the triangle."""
    ab, ac, way = _minus(tri[1], tri[0]), _minus(tri[2], tri[0]), _minus(end, start)
    p = _cross(way, ac)
    determinant = _dot(ab, p)
    scale = np.sqrt(_dot(ab, ab) * _dot(ac, ac) * _dot(way, way))
    if abs(determinant) <= 1e-12 * scale:
        return False
    offset = _minus(start, tri[0])
    u = _dot(offset, p) / determinant
    if u < 0.0 or u > 1.0:
        return False
    q = _cross(offset, ab)
    v = _dot(way, q) / determinant
    if v < 0.0 or u + v > 1.0:
        return False
    t = _dot(ac, q) / determinant
    return 0.0 < t < 1.0
