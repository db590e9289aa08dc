"""Which triangle of a mesh is seen at each pixel of a parallel projection (a depth buffer)."""

from __future__ import annotations

import numba
import numpy as np

EDGE = -1e-9  # weight down to which a pixel counts as inside: no seams between neighbours


def seen_faces(
    points: np.ndarray, faces: np.ndarray, shape: tuple[int, int]
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Nearest face at every pixel centre.

    points (n_points, 3): column and row in pixels, and height towards the viewer. faces (n_faces, 3).
    shape: rows, columns; row 0 is at the bottom. Returns face (rows, columns), -1 where nothing is seen;
    weights (rows, columns, 3) of that face's corners, 0 there; height (rows, columns), -inf there.
    """
    face = np.full(shape, -1)
    weights = np.zeros((*shape, 3))
    height = np.full(shape, -np.inf)
    _fill(np.ascontiguousarray(points, dtype=float), faces.astype(np.int64), face, weights, height)
    return face, weights, height


@numba.njit(cache=True)
def _fill(points, faces, face, weights, height):
    rows, columns = face.shape
    for index in range(len(faces)):
        a, b, c = points[faces[index, 0]], points[faces[index, 1]], points[faces[index, 2]]
        double_area = (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])
        if abs(double_area) < 1e-12:  # seen edge-on
            continue
        first_column = max(0, int(np.ceil(min(a[0], b[0], c[0]))))
        last_column = min(columns - 1, int(np.floor(max(a[0], b[0], c[0]))))
        first_row = max(0, int(np.ceil(min(a[1], b[1], c[1]))))
        last_row = min(rows - 1, int(np.floor(max(a[1], b[1], c[1]))))
        for row in range(first_row, last_row + 1):
            for column in range(first_column, last_column + 1):
                at_b = ((column - a[0]) * (c[1] - a[1]) - (row - a[1]) * (c[0] - a[0])) / double_area
                at_c = ((b[0] - a[0]) * (row - a[1]) - (b[1] - a[1]) * (column - a[0])) / double_area
                at_a = 1 - at_b - at_c
                if at_a < EDGE or at_b < EDGE or at_c < EDGE:
                    continue
                z = at_a * a[2] + at_b * b[2] + at_c * c[2]
                if z > height[row, column]:
                    height[row, column] = z
                    face[row, column] = index
                    weights[row, column, 0] = at_a
                    weights[row, column, 1] = at_b
                    weights[row, column, 2] = at_c
