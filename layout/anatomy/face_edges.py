"""Faces and their edges in meshes that need not be closed or oriented."""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_array, csr_array


def face_adjacency(faces: np.ndarray) -> csr_array:
    """Which faces share an edge (n_faces, n_faces)."""
    owner, pairs = edges_by_face(faces)
    order = np.lexsort((pairs[:, 1], pairs[:, 0]))
    same = (pairs[order][1:] == pairs[order][:-1]).all(axis=1)
    a, b = owner[order][:-1][same], owner[order][1:][same]
    return coo_array((np.ones(len(a)), (a, b)), shape=(len(faces), len(faces))).tocsr()


def edges_by_face(faces: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Of every side of every face: the face (3 n,), and its two vertices (3 n, 2), the smaller number first."""
    pairs = np.stack([faces, np.roll(faces, -1, axis=1)], axis=2).reshape(-1, 2)
    return np.repeat(np.arange(len(faces)), 3), np.sort(pairs, axis=1)


def wound_alike(faces: np.ndarray) -> bool:
    """Whether neighbours run along every common edge in opposite directions."""
    directed = np.sort(faces.ravel() * (faces.max() + 1) + np.roll(faces, -1, axis=1).ravel())
    return not (directed[1:] == directed[:-1]).any()


def open_edges(faces: np.ndarray) -> np.ndarray:
    """Edges (n, 2) with a face on one side only, in that face's direction."""
    size = faces.max() + 1
    start, end = faces.ravel(), np.roll(faces, -1, axis=1).ravel()
    back = np.sort(end * size + start)
    there = start * size + end
    lone = back[np.minimum(np.searchsorted(back, there), len(back) - 1)] != there
    return np.column_stack([start[lone], end[lone]])


def rims_of(loops: np.ndarray) -> list[np.ndarray]:
    """Closed runs of vertices along open edges (n, 2), of which one starts at each vertex."""
    follows = dict(loops.tolist())
    rims = []
    while follows:
        start, at = follows.popitem()
        rim = [start]
        while at != start:
            rim.append(at)
            at = follows.pop(at)
        rims.append(np.array(rim))
    return rims


def same_rows(rows: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """First place of each different row of whole numbers (n, k), and which of them each row is (n,).

    As numpy's unique by rows, which is ten times slower.
    """
    order = np.lexsort(rows.T[::-1])
    new = np.concatenate([[True], (rows[order][1:] != rows[order][:-1]).any(axis=1)])
    number = np.empty(len(rows), dtype=np.int64)
    number[order] = np.cumsum(new) - 1
    return order[new], number
