"""Triangle meshes as graphs: edges, areas, parents of a halved mesh, links between faces."""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_array, csr_array

from layout.anatomy.head import Surface


def edges(faces: np.ndarray, n_vertices: int, positions: np.ndarray | None = None) -> csr_array:
    """Symmetric adjacency (n_vertices, n_vertices) of a mesh: ones, or lengths where positions are given.

    positions (n_vertices, 3).
    """
    pairs = np.vstack([faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]])
    pairs = np.unique(np.sort(pairs, axis=1), axis=0)
    a, b = pairs.T
    weight = np.ones(len(a)) if positions is None else np.linalg.norm(positions[a] - positions[b], axis=1)
    both = np.concatenate([a, b]), np.concatenate([b, a])
    return coo_array((np.concatenate([weight, weight]), both), shape=(n_vertices, n_vertices)).tocsr()


def face_vectors(surface: Surface) -> tuple[np.ndarray, np.ndarray]:
    """Unit normals (n_faces, 3) and areas (n_faces,) of the faces."""
    tri = surface.vertices[surface.faces]
    cross = np.cross(tri[:, 1] - tri[:, 0], tri[:, 2] - tri[:, 0])
    length = np.linalg.norm(cross, axis=1)
    return cross / length[:, None], length / 2


def vertex_areas(surface: Surface) -> np.ndarray:
    """A third of the area of each face around a vertex (n_vertices,)."""
    _, area = face_vectors(surface)
    return np.bincount(surface.faces.ravel(), np.repeat(area / 3, 3), minlength=len(surface.vertices))


def parent_faces(faces: np.ndarray, n_parents: int) -> np.ndarray:
    """Faces (n_faces / 4, 3) of the mesh from which `faces` came by halving every edge, parents first.

    Each parent face holds one small face of three edge midpoints; a midpoint's only parent neighbours are the
    ends of its edge. Raises ValueError where the mesh did not come about so.
    """
    pairs = np.vstack([faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]])  # each edge in both directions
    down = pairs[(pairs[:, 0] >= n_parents) & (pairs[:, 1] < n_parents)]
    down = down[np.lexsort((down[:, 1], down[:, 0]))]
    middle = faces[(faces >= n_parents).all(axis=1)]
    n_midpoints = faces.max() + 1 - n_parents
    two_each = np.repeat(np.arange(n_midpoints), 2) + n_parents
    if len(middle) * 4 != len(faces) or not np.array_equal(down[:, 0], two_each):
        raise ValueError("the mesh is no halved mesh with its parents' vertices first")
    ends = down[:, 1].reshape(-1, 2)[middle - n_parents]  # (n, 3 midpoints, 2 ends)

    def shared(a: np.ndarray, b: np.ndarray) -> np.ndarray:
        same = a[:, :, None] == b[:, None, :]
        if not (same.sum(axis=(1, 2)) == 1).all():
            raise ValueError("the mesh is no halved mesh with its parents' vertices first")
        return a[same.any(axis=2)]

    corner = [shared(ends[:, i], ends[:, j]) for i, j in ((2, 0), (0, 1), (1, 2))]
    return np.stack(corner, axis=1)


def faces_across(faces: np.ndarray) -> np.ndarray:
    """Neighbours (n_faces, 3) of the faces of a closed oriented mesh: over the edges 0-1, 1-2 and 2-0.

    Raises ValueError where an edge does not belong to exactly two faces that run along it in opposite
    directions.
    """
    n_vertices = faces.max() + 1
    start, end = faces.ravel(), np.roll(faces, -1, axis=1).ravel()
    there, back = start * n_vertices + end, end * n_vertices + start
    order = np.argsort(there)
    place = np.minimum(np.searchsorted(there, back, sorter=order), len(there) - 1)
    if not np.array_equal(there[order[place]], back) or (np.diff(there[order]) == 0).any():
        raise ValueError("the mesh is not closed and oriented")
    return (order[place] // 3).reshape(faces.shape)


def face_links(faces: np.ndarray) -> np.ndarray:
    """Triangles (m, 3) over the faces of a closed oriented mesh: a fan over the faces around each vertex."""
    following = np.roll(faces_across(faces), 1, axis=1).ravel()  # counter-clockwise around each corner
    vertex = faces.ravel()
    face = np.repeat(np.arange(len(faces)), 3)
    first = np.full(faces.max() + 1, len(faces))
    np.minimum.at(first, vertex, face)
    fan = np.stack([first[vertex], face, following], axis=1)
    return fan[(fan[:, 0] != fan[:, 1]) & (fan[:, 0] != fan[:, 2])]


def at_face_centres(values: np.ndarray, faces: np.ndarray) -> np.ndarray:
    """Vertex values (n_vertices, m) interpolated at the middle of each face (n_faces, m).

    The mesh is closed and oriented. Weights 4/9 on the face's corners and -1/9 on the far corners of its
    three neighbours: exact for quadratic values on a regular triangular lattice, where the plain mean of the
    corners flattens every fold.
    """
    corners = values[faces].sum(axis=1)
    across = faces_across(faces)
    far = faces[across].sum(axis=2) - faces - np.roll(faces, -1, axis=1)
    return (4 * corners - values[far].sum(axis=1)) / 9
