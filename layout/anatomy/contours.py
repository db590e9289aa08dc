"""Plane cuts of a closed scalp mesh: the contour through three points, measured along its length."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Surface
from layout.errors import LayoutError


@dataclass(frozen=True)
class Contour:
    """A polyline on a surface. points (n, 3) [m]; lengths (n,) [m] cumulative from the first point.

    via_length [m]: where the middle one of the three defining points lies. end_length [m]: where the third
    lies (the whole length of an open contour, less than it for a closed loop).
    """

    points: np.ndarray
    lengths: np.ndarray
    via_length: float
    end_length: float

    @property
    def via_fraction(self) -> float:
        """Fraction of the way from the first to the last defining point at which the middle one lies."""
        return self.via_length / self.end_length

    def at(self, fraction: float | np.ndarray) -> np.ndarray:
        """Points (..., 3) [m] at fractions of the length between the first and the last defining point."""
        return self.at_length(np.asarray(fraction) * self.end_length)

    def at_length(self, length: float | np.ndarray) -> np.ndarray:
        """Points (..., 3) [m] at distances [m] along the polyline."""
        return np.stack([np.interp(length, self.lengths, self.points[:, axis]) for axis in range(3)], axis=-1)

    def fraction_of(self, point: np.ndarray) -> float:
        """Fraction at which the polyline passes nearest to `point` (3,)."""
        return locate(self.points, self.lengths, point)[0] / self.end_length


def cumulative_length(points: np.ndarray) -> np.ndarray:
    """Distances (n,) [m] of the corners of a polyline (n, 3) from its start."""
    return np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(points, axis=0), axis=1))])


def locate(points: np.ndarray, lengths: np.ndarray, point: np.ndarray) -> tuple[float, float]:
    """Length [m] along the polyline at which it is nearest to `point` (3,), and that distance [m]."""
    steps = np.diff(points, axis=0)
    squared = np.einsum("nd,nd->n", steps, steps)
    along = np.einsum("nd,nd->n", point - points[:-1], steps)
    along = np.clip(along / np.where(squared > 0, squared, 1.0), 0.0, 1.0)
    distances = np.linalg.norm(points[:-1] + along[:, None] * steps - point, axis=1)
    nearest = int(np.argmin(distances))
    return float(lengths[nearest] + along[nearest] * np.sqrt(squared[nearest])), float(distances[nearest])


def plane_loops(surface: Surface, normal: np.ndarray, offset: float) -> list[np.ndarray]:
    """Closed polylines (n, 3) [m], first point repeated at the end, where the plane normal·x = offset cuts
    the surface.

    Each cut face runs from its edge that goes out of the positive side to its edge that comes back; in a
    closed and consistently oriented mesh those steps chain into loops without any search. The mesh is cut
    exactly.
    """
    height = surface.vertices @ normal - offset
    above = height > 0
    first, second, third = (above[column] for column in surface.faces.T)
    cut = np.flatnonzero((first != second) | (second != third))
    if len(cut) == 0:
        return []
    rows = surface.faces[cut]
    corner_above = above[rows]
    one_above = corner_above.sum(axis=1) == 1
    lone = np.argmax(corner_above == one_above[:, None], axis=1)
    at = np.arange(len(cut))
    corner, after, before = rows[at, lone], rows[at, (lone + 1) % 3], rows[at, (lone + 2) % 3]
    ends = [np.where(one_above, after, before), np.where(one_above, before, after)]
    low, high = (np.minimum(corner, ends[0]), np.maximum(corner, ends[0]))
    size = len(surface.vertices)
    start_key = low * size + high
    end_key = np.minimum(corner, ends[1]) * size + np.maximum(corner, ends[1])
    order = np.argsort(start_key)
    follows = order[np.minimum(np.searchsorted(start_key, end_key, sorter=order), len(order) - 1)]
    if not np.array_equal(start_key[follows], end_key):
        raise LayoutError("scalp surface: must be closed and consistently oriented, but a plane cut does not close")
    share = height[low] / (height[low] - height[high])
    points = surface.vertices[low] + share[:, None] * (surface.vertices[high] - surface.vertices[low])

    loops = []
    successor = follows.tolist()
    seen = [False] * len(successor)
    for first in range(len(successor)):
        if seen[first]:
            continue
        chain, here = [], first
        while not seen[here]:
            seen[here] = True
            chain.append(here)
            here = successor[here]
        loops.append(points[[*chain, chain[0]]])
    return loops


def plane_through(a: np.ndarray, b: np.ndarray, c: np.ndarray) -> tuple[np.ndarray, float]:
    """Unit normal (3,) and offset [m] of the plane through three points.

    Raises LayoutError where the points lie on a line.
    """
    normal = np.cross(b - a, c - a)
    length = np.linalg.norm(normal)
    if length <= 1e-9 * max(np.linalg.norm(b - a) * np.linalg.norm(c - a), 1e-30):
        raise LayoutError(f"landmarks: three points of a scalp contour must not lie on a line, got {a}, {b}, {c}")
    return normal / length, float(normal @ a / length)


def three_point_loop(surface: Surface, start: np.ndarray, via: np.ndarray, end: np.ndarray) -> Contour:
    """The whole closed cut by the plane of three surface points (3,) [m], from start through via and end
    back to start.

    Of several loops the one nearest to the three points is taken. Raises LayoutError where the plane does
    not cut.
    """
    best = None
    for points in plane_loops(surface, *plane_through(start, via, end)):
        lengths = cumulative_length(points)
        found = [locate(points, lengths, point) for point in (start, via, end)]
        miss = sum(distance for _, distance in found)
        if best is None or miss < best[0]:
            best = (miss, points, lengths, [length for length, _ in found])
    if best is None:
        raise LayoutError(f"scalp surface: the plane through {start}, {via}, {end} does not cut it")
    _, points, lengths, (at_start, at_via, at_end) = best
    total = lengths[-1]
    ahead_via, ahead_end = (at_via - at_start) % total, (at_end - at_start) % total
    if ahead_via > ahead_end:
        points, lengths = points[::-1], total - lengths[::-1]
        at_start = total - at_start
        ahead_via, ahead_end = total - ahead_via, total - ahead_end
    open_points, open_lengths = points[:-1], lengths[:-1]
    later = open_lengths > at_start
    first = np.array([[np.interp(at_start, lengths, points[:, axis]) for axis in range(3)]])
    corners = np.concatenate([first, open_points[later], open_points[~later], first])
    return Contour(corners, cumulative_length(corners), float(ahead_via), float(ahead_end))


def three_point_contour(surface: Surface, start: np.ndarray, via: np.ndarray, end: np.ndarray) -> Contour:
    """The part of `three_point_loop` from start through via to end."""
    loop = three_point_loop(surface, start, via, end)
    inside = loop.lengths < loop.end_length
    points = np.concatenate([loop.points[inside], loop.at_length(loop.end_length)[None]])
    return Contour(points, cumulative_length(points), loop.via_length, loop.end_length)
