"""Cutting a triangle mesh along lines that run across its faces, so that neighbouring pieces share their vertices."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Surface

# A cut nearer to a vertex than this share of an edge goes through the vertex, which is moved along the edge onto it:
# without it the cut leaves slivers.
_SNAP = 0.15


def halved(surface: Surface, longest: float) -> Surface:
    """The same polyhedron with every edge halved until none is longer than `longest` [m]."""
    import trimesh

    vertices, faces = surface.vertices, surface.faces
    length = np.linalg.norm(vertices[faces] - vertices[np.roll(faces, 1, axis=1)], axis=2).max()
    while length > longest:
        vertices, faces = trimesh.remesh.subdivide(vertices, faces)
        length /= 2
    return Surface(np.asarray(vertices), np.asarray(faces))


def cut(vertices: np.ndarray, faces: np.ndarray, height: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Split the faces along the line where `height` (n_vertices,), linear over each face, is zero.

    Returns vertices (m, 3), faces (k, 3) and for each face whether it lies on the positive side (k,) bool. Old vertices
    keep their numbers; those nearer to the line than 15 % of an edge are moved onto it.
    """
    vertices, height = vertices.copy(), height.astype(float).copy()
    _snap(vertices, faces, height)
    sign = np.sign(height).astype(int)
    corner_signs = sign[faces]
    crossed = (corner_signs.min(axis=1) < 0) & (corner_signs.max(axis=1) > 0)
    new_vertices: list[np.ndarray] = []
    numbers: dict[tuple[int, int], int] = {}

    def middle(a: int, b: int) -> int:
        key = (a, b) if a < b else (b, a)
        if key not in numbers:
            low, high = key
            share = height[low] / (height[low] - height[high])
            numbers[key] = len(vertices) + len(new_vertices)
            new_vertices.append(vertices[low] + share * (vertices[high] - vertices[low]))
        return numbers[key]

    parts: list[tuple[int, int, int]] = []
    sides: list[int] = []
    for face in faces[crossed].tolist():
        signs = [int(sign[v]) for v in face]
        if 0 in signs:
            at = signs.index(0)
            a, b, c = (face[(at + k) % 3] for k in range(3))
            m = middle(b, c)
            parts += [(a, b, m), (a, m, c)]
            sides += [int(sign[b]), int(sign[c])]
            continue
        at = next(k for k in range(3) if signs.count(signs[k]) == 1)
        a, b, c = (face[(at + k) % 3] for k in range(3))
        ab, ac = middle(a, b), middle(a, c)
        parts.append((a, ab, ac))
        # The shorter diagonal of the rest gives the better shaped pair.
        place = [*(vertices[v] for v in (b, c)), *(new_vertices[v - len(vertices)] for v in (ab, ac))]
        if np.linalg.norm(place[0] - place[3]) <= np.linalg.norm(place[1] - place[2]):
            parts += [(ab, b, ac), (b, c, ac)]
        else:
            parts += [(ab, b, c), (ab, c, ac)]
        sides += [int(sign[a]), -int(sign[a]), -int(sign[a])]
    whole = faces[~crossed]
    positive = corner_signs[~crossed].sum(axis=1) > 0
    if parts:
        faces = np.vstack([whole, np.array(parts, dtype=faces.dtype)])
        positive = np.concatenate([positive, np.array(sides) > 0])
        vertices = np.vstack([vertices, np.array(new_vertices).reshape(-1, 3)])
    return vertices, faces, positive


def _snap(vertices: np.ndarray, faces: np.ndarray, height: np.ndarray) -> None:
    pairs = np.vstack([faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]])
    size = len(vertices)
    keys = np.unique(np.concatenate([pairs @ [size, 1], pairs @ [1, size]]))
    pairs = np.column_stack([keys // size, keys % size])
    near, far = height[pairs[:, 0]], height[pairs[:, 1]]
    across = near * far < 0
    pairs, near, far = pairs[across], near[across], far[across]
    share = near / (near - far)
    order = np.lexsort((pairs[:, 1], share))
    taken: set[int] = set()
    for row in order[share[order] < _SNAP].tolist():
        a, b = pairs[row].tolist()
        if a in taken or b in taken:
            continue
        taken.add(a)
        vertices[a] += share[row] * (vertices[b] - vertices[a])
    height[sorted(taken)] = 0.0


def boundary_loop(faces: np.ndarray) -> np.ndarray:
    """Vertex numbers (n,) around the one border of a piece of surface, in the sense of its faces.

    Raises ValueError where the border is not one simple loop.
    """
    start, end = faces.ravel(), np.roll(faces, -1, axis=1).ravel()
    size = int(faces.max()) + 1
    free = ~np.isin(start * size + end, end * size + start)
    after = dict(zip(start[free].tolist(), end[free].tolist(), strict=True))
    if not after or len(after) != int(free.sum()):
        raise ValueError("the piece must have one border without branches")
    first = min(after)
    loop = [first]
    while (following := after[loop[-1]]) != first:
        loop.append(following)
    if len(loop) != len(after):
        raise ValueError("the piece must have one border")
    return np.array(loop)


def largest_part(faces: np.ndarray) -> np.ndarray:
    """Which faces (n, 3) belong to the largest part that hangs together over edges (n,) bool."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    pairs = np.sort(np.vstack([faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]]), axis=1)
    owner = np.tile(np.arange(len(faces)), 3)
    order = np.lexsort((pairs[:, 1], pairs[:, 0]))
    pairs, owner = pairs[order], owner[order]
    same = (pairs[1:] == pairs[:-1]).all(axis=1)
    links = owner[:-1][same], owner[1:][same]
    graph = coo_array((np.ones(len(links[0])), links), shape=(len(faces), len(faces)))
    _, label = connected_components(graph, directed=False)
    return label == np.argmax(np.bincount(label))
