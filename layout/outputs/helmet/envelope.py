"""The scalp swollen by a distance, seen from the middle of the head: what a rigid shell over it must keep to."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.head import Surface
from layout.anatomy.mesh_graph import face_vectors

_BLOCK = 1000  # directions at once: some dozens of faces, edges and corners are near each
_NEARER = 0.8  # of what is straight ahead: parts beside a ray may be that much nearer to the centre


def spherical(azimuth: np.ndarray, elevation: np.ndarray) -> np.ndarray:
    """Unit directions (..., 3): azimuth [rad] from x (right) towards y (front), elevation [rad] above the xy plane."""
    level = np.cos(elevation)
    return np.stack([level * np.cos(azimuth), level * np.sin(azimuth), np.sin(elevation) + 0 * azimuth], axis=-1)


def angles_of(points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Azimuth and elevation (...) [rad] of points (..., 3) seen from the origin."""
    level = np.hypot(points[..., 0], points[..., 1])
    return np.arctan2(points[..., 1], points[..., 0]), np.arctan2(points[..., 2], level)


class Envelope:
    """A scalp seen from a point (3,) [m] inside it."""

    def __init__(self, scalp: Surface, centre: np.ndarray) -> None:
        self._corners = scalp.vertices - centre
        self._faces, self._edges = scalp.faces, scalp.mesh.edges_unique
        self._normals, _ = face_vectors(scalp)
        self._parts = (
            (_Seen(self._corners[self._faces].mean(axis=1), self._spread(self._faces)), self._leave_faces),
            (_Seen(self._corners[self._edges].mean(axis=1), self._spread(self._edges)), self._leave_edges),
            (_Seen(self._corners, 0.0), self._leave_corners),
        )

    def radii(self, directions: np.ndarray, distances: tuple[float, ...]) -> np.ndarray:
        """How far (n, k) [m] from the centre each ray (n, 3) leaves the scalp swollen by each of k distances [m].

        The swollen scalp is the union of the balls about its points: prisms on its faces, cylinders about its edges,
        balls about its corners. A ray leaves it where it leaves the last of them: no nearer to any point of the scalp
        than the distance. Undercuts (behind ears, under the occiput) are bridged.
        """
        result = np.zeros((len(directions), len(distances)))
        for first in range(0, len(directions), _BLOCK):
            block = directions[first : first + _BLOCK]
            for seen, leave in self._parts:
                ray, part = seen.near(block, max(distances))
                for number, distance in enumerate(distances):
                    along = leave(block[ray], part, distance)
                    np.maximum.at(result[first : first + _BLOCK, number], ray, along)
        return result

    def _spread(self, parts: np.ndarray) -> float:
        corners = self._corners[parts]
        return float(np.linalg.norm(corners - corners.mean(axis=1, keepdims=True), axis=2).max())

    def _leave_faces(self, rays: np.ndarray, part: np.ndarray, distance: float) -> np.ndarray:
        """Where each ray (n, 3) leaves the prism on a face (n,), 0 where it does not."""
        normal, corners = self._normals[part], self._corners[self._faces[part]]
        slope = np.einsum("nd,nd->n", normal, rays)
        facing = slope > 1e-6
        along = (np.einsum("nd,nd->n", normal, corners[:, 0]) + distance) / np.where(facing, slope, 1.0)
        foot = along[:, None] * rays - distance * normal
        inside = facing
        for one in range(3):
            side = np.cross(normal, corners[:, (one + 1) % 3] - corners[:, one])
            inside = inside & (np.einsum("nd,nd->n", side, foot - corners[:, one]) >= 0)
        return np.where(inside, along, 0.0)

    def _leave_edges(self, rays: np.ndarray, part: np.ndarray, distance: float) -> np.ndarray:
        """Where each ray leaves the cylinder about an edge, 0 where it does not."""
        start, end = self._corners[self._edges[part, 0]], self._corners[self._edges[part, 1]]
        length = np.linalg.norm(end - start, axis=1)
        unit = (end - start) / length[:, None]
        rise, from_start = np.einsum("nd,nd->n", rays, unit), np.einsum("nd,nd->n", start, unit)
        across, beside = rays - rise[:, None] * unit, start - from_start[:, None] * unit
        square = np.maximum(np.einsum("nd,nd->n", across, across), 1e-12)
        towards = np.einsum("nd,nd->n", across, beside)
        room = towards**2 - square * (np.einsum("nd,nd->n", beside, beside) - distance**2)
        along = (towards + np.sqrt(np.maximum(room, 0.0))) / square
        place = along * rise - from_start
        return np.where((room >= 0) & (place >= 0) & (place <= length), along, 0.0)

    def _leave_corners(self, rays: np.ndarray, part: np.ndarray, distance: float) -> np.ndarray:
        """Where each ray leaves the ball about a corner, 0 where it does not."""
        corner = self._corners[part]
        along = np.einsum("nd,nd->n", corner, rays)
        room = distance**2 - np.einsum("nd,nd->n", corner, corner) + along**2
        return np.where(room >= 0, along + np.sqrt(np.maximum(room, 0.0)), 0.0)


class _Seen:
    """Parts of a mesh by the direction of their middles (n, 3); spread [m]: how far a part reaches from its middle."""

    def __init__(self, middles: np.ndarray, spread: float) -> None:
        self._reach = np.linalg.norm(middles, axis=1)
        self._tree, self._spread = cKDTree(middles / self._reach[:, None]), spread

    def near(self, directions: np.ndarray, distance: float) -> tuple[np.ndarray, np.ndarray]:
        """Ray and part (m,) of all pairs where the part swollen by `distance` may be met."""
        _, ahead = self._tree.query(directions)
        widest = np.arcsin(np.minimum(1.0, (distance + self._spread) / (_NEARER * self._reach[ahead])))
        near = self._tree.query_ball_point(directions, 2 * np.sin(widest / 2))
        counts = [len(one) for one in near]
        return np.repeat(np.arange(len(directions)), counts), np.concatenate(near).astype(int)
