"""Do two sensors take the same room on the scalp? Circles and turned rectangles in the plane between them."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from layout.brief.objects_stock import FootprintBrief

# [m] Rectangles are shrunk by this and given rounded edges as wide: then two that only touch do not overlap, and both
# shapes are compared alike, as the distance of a core from a core.
_EDGE = 1e-6
_ROUNDING = 1e-9  # [m]


def footprints_overlap(
    pairs: np.ndarray,
    kind: np.ndarray,
    footprints: list[FootprintBrief | None],
    clearances: np.ndarray,
    centres: np.ndarray,
    frames: np.ndarray,
) -> np.ndarray:
    """Which of the pairs (p, 2) of n sensors have footprints nearer than the larger of their clearances (p,) bool.

    kind (n,): index into footprints (None: takes no room) and clearances [m]. centres (n, 3) [m]; frames (n, 3, 3) rows
    normal, front, left. Both are laid along their normals into the plane whose normal is the mean of theirs, through
    the middle between them; there a circle stays a circle (its foreshortening, 1 - cos of half the angle between the
    normals, is left out: under 0.5 % for neighbours 15 mm apart on a head).
    """
    import shapely

    takes_room = np.array([one is not None for one in footprints])
    result = np.zeros(len(pairs), dtype=bool)
    rows = np.flatnonzero(takes_room[kind[pairs]].all(axis=1))
    if len(rows) == 0:
        return result
    ends = pairs[rows]
    x, y = _plane_axes(frames[ends[:, 0]], frames[ends[:, 1]])
    middle = centres[ends].mean(axis=1)
    distance_left = np.asarray(clearances, dtype=float)[kind[ends]].max(axis=1)
    cores = []
    for end in ends.T:
        core = np.empty(len(rows), dtype=object)
        for number in np.unique(kind[end]):
            mine = np.flatnonzero(kind[end] == number)
            shape, who = footprints[number], end[mine]
            corners, radius = _core(shape)
            # corners (c, 2) to the right and to the front of each sensor
            points = centres[who][:, None] + np.einsum("c,nd->ncd", corners[:, 0], -frames[who, 2])
            points = points + np.einsum("c,nd->ncd", corners[:, 1], frames[who, 1]) - middle[mine][:, None]
            flat = np.stack(
                [np.einsum("ncd,nd->nc", points, x[mine]), np.einsum("ncd,nd->nc", points, y[mine])], axis=2
            )
            core[mine] = shapely.points(flat[:, 0]) if len(corners) == 1 else shapely.polygons(flat)
            distance_left[mine] += radius
        cores.append(core)
    result[rows] = shapely.distance(*cores) < distance_left - _ROUNDING
    return result


def near_pairs(
    kind: np.ndarray, footprints: list[FootprintBrief | None], clearances: np.ndarray, centres: np.ndarray
) -> np.ndarray:
    """Pairs (p, 2) of sensors whose footprints may overlap: nearer than their largest reach and clearance together."""
    reach = np.array([0.0 if one is None else _reach(one) for one in footprints])
    with_room = np.flatnonzero(np.array([one is not None for one in footprints])[kind])
    if len(with_room) < 2:
        return np.zeros((0, 2), dtype=int)
    farthest = 2 * reach[kind].max() + clearances[kind].max()
    pairs = cKDTree(centres[with_room]).query_pairs(farthest, output_type="ndarray")
    return with_room[pairs].reshape(-1, 2)


def _reach(shape: FootprintBrief) -> float:
    """Radius [m] of the circle around a footprint."""
    return shape.width / 2 if shape.shape == "circle" else float(np.hypot(shape.width, shape.depth)) / 2


def _core(shape: FootprintBrief) -> tuple[np.ndarray, float]:
    """Corners (c, 2) [m] to the right and to the front of the centre, and the radius [m] about them that is covered."""
    if shape.shape == "circle":
        return np.zeros((1, 2)), shape.width / 2
    half = np.array([shape.width, shape.depth]) / 2 - _EDGE
    corners = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * half
    cos, sin = np.cos(shape.turn), np.sin(shape.turn)
    return corners @ np.array([[cos, sin], [-sin, cos]]), _EDGE


def _plane_axes(first: np.ndarray, second: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Unit axes (n, 3) of the planes whose normals are the means of those of two frames each."""
    normal = first[:, 0] + second[:, 0]
    length = np.linalg.norm(normal, axis=1, keepdims=True)
    # Opposite sides of a head have no plane between them; they are never neighbours.
    normal = np.where(length > 1e-6, normal / np.maximum(length, 1e-6), first[:, 0])
    x = first[:, 1] - np.einsum("nd,nd->n", first[:, 1], normal)[:, None] * normal
    size = np.linalg.norm(x, axis=1, keepdims=True)
    other = first[:, 2] - np.einsum("nd,nd->n", first[:, 2], normal)[:, None] * normal
    x = np.where(size > 1e-3, x, other)
    x = x / np.linalg.norm(x, axis=1, keepdims=True)
    return x, np.cross(normal, x)
