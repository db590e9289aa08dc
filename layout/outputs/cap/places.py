"""From the scalp to the paper: points, directions and lines of the head on the gores."""

from __future__ import annotations

import numpy as np

from layout.anatomy.scalp_points import project
from layout.outputs.cap.gores import Cap

_STEP = 1e-3  # [m] between the points of a line


def on_paper(cap: Cap, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Gore numbers (n,) and places (n, 2) [m] on their papers of scalp points (n, 3) [m] above the rim."""
    gore, places, _ = _located(cap, points)
    return gore, places


def spots_on_paper(cap: Cap, points: np.ndarray, directions: np.ndarray) -> list[tuple[int, np.ndarray, np.ndarray]]:
    """Per scalp point its gore, its place (2,) [m] there and the unit direction (2,) on paper of a tangent (3,)."""
    gore, places, maps = _located(cap, points)
    turned = np.einsum("nik,nk->ni", maps, directions)
    turned = turned / np.linalg.norm(turned, axis=1, keepdims=True)
    return [(int(g), place, turn) for g, place, turn in zip(gore, places, turned, strict=True)]


def line_on_paper(cap: Cap, points: np.ndarray) -> list[tuple[int, np.ndarray]]:
    """The pieces of a line on the scalp (n, 3) [m], its points close together, as gore number and polyline [m]."""
    gore, places, _ = _located(cap, points)
    breaks = np.flatnonzero(np.diff(gore)) + 1
    runs = zip(np.split(gore, breaks), np.split(places, breaks), strict=True)
    return [(int(numbers[0]), run) for numbers, run in runs if len(run) > 1]


def even_steps(length: float) -> np.ndarray:
    """Lengths (n,) [m] about a millimetre apart from 0 to `length`."""
    return np.linspace(0.0, length, max(int(np.ceil(length / _STEP)), 1) + 1)


def _located(cap: Cap, points: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    where = project(cap.surface, points)
    gore = cap.gore_of_face[where.face]
    places, maps = np.empty((len(points), 2)), np.empty((len(points), 2, 3))
    for number in np.unique(gore):
        mine = gore == number
        piece = cap.gores[number]
        corners = cap.surface.faces[where.face[mine]]
        flat = piece.flat.points[np.searchsorted(piece.vertices, corners)]  # (m, 3, 2)
        places[mine] = np.einsum("mk,mkd->md", where.weights[mine], flat)
        solid = cap.surface.vertices[corners]
        edges = np.stack([solid[:, 1] - solid[:, 0], solid[:, 2] - solid[:, 0]], axis=2)  # (m, 3, 2)
        paper = np.stack([flat[:, 1] - flat[:, 0], flat[:, 2] - flat[:, 0]], axis=2)
        maps[mine] = paper @ np.linalg.pinv(edges)
    return gore, places, maps
