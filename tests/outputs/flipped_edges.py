"""A judge of distances along a mesh: straightest ways by edge flips (Sharp & Crane 2020, ACM Trans Graph 39:249) as
potpourri3d has them, another method and other code than the windows of Mitchell, Mount and Papadimitriou.

A flipped way is straight everywhere but need not be the shortest of all: it is never shorter than the distance.
"""

import numpy as np
import potpourri3d

NEAR = 1e-7  # share of a triangle's side, and metres off it, up to which a point counts as on it


class Judge:
    """Points (n, 3) [m] on a closed mesh become vertices: faces and edges that hold them are split."""

    def __init__(self, surface, points: np.ndarray) -> None:
        self._vertices = [np.array(vertex) for vertex in surface.vertices]
        self._faces = [tuple(face) for face in surface.faces.tolist()]
        self.index = [self._insert(point) for point in points]
        self._solver = potpourri3d.EdgeFlipGeodesicSolver(np.array(self._vertices), np.array(self._faces))

    def distance(self, a: int, b: int) -> float:
        """Length [m] of the way between two of the points."""
        return float(np.linalg.norm(np.diff(self._way(a, b), axis=0), axis=1).sum())

    def lowest(self, a: int, b: int) -> float:
        """Height z [m] of the lowest point of that way."""
        return float(self._way(a, b)[:, 2].min())

    def height(self, a: int) -> float:
        """Height z [m] of a point."""
        return float(self._vertices[self.index[a]][2])

    def _way(self, a: int, b: int) -> np.ndarray:
        start, end = self.index[a], self.index[b]
        if start == end:
            return self._vertices[start][None]
        return self._solver.find_geodesic_path(v_start=start, v_end=end)

    def _insert(self, point: np.ndarray) -> int:
        corners = np.array(self._vertices)[np.array(self._faces)]
        sides = np.stack([corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]], axis=2)
        shares = np.einsum("fij,fj->fi", np.linalg.pinv(sides), point - corners[:, 0])
        weights = np.column_stack([1 - shares.sum(axis=1), shares])
        off = np.linalg.norm(np.einsum("fc,fcd->fd", weights, corners) - point, axis=1)
        face = int(np.argmin(off + np.maximum(-weights.min(axis=1), 0.0)))
        assert off[face] < NEAR, "the point lies on the mesh"
        assert weights[face].min() > -NEAR, "the point lies on the mesh"
        (low, middle, _), (_, b, c) = np.sort(weights[face]), np.array(self._faces[face])[np.argsort(weights[face])]
        if middle < NEAR:
            return int(c)
        new = len(self._vertices)
        self._vertices.append(point)
        if low < NEAR:  # on the edge b-c, which two faces share
            for split in [i for i, one in enumerate(self._faces) if b in one and c in one]:
                self._split(split, new, {(b, c), (c, b)})
        else:
            self._split(face, new, set())
        return new

    def _split(self, face: int, new: int, without: set) -> None:
        """Replace a face by those that join its sides to `new`, but for the side on which it lies."""
        a, b, c = self._faces[face]
        parts = [(x, y, new) for x, y in ((a, b), (b, c), (c, a)) if (x, y) not in without]
        self._faces[face] = parts[0]
        self._faces += parts[1:]
