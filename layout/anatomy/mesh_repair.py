"""Making a closed, outward-oriented surface of a given size out of what a file holds, and saying what was changed."""

from __future__ import annotations

import numpy as np
from scipy.sparse.csgraph import breadth_first_order, connected_components

from layout.anatomy.face_edges import edges_by_face, face_adjacency, open_edges, rims_of, same_rows, wound_alike
from layout.anatomy.head import Surface
from layout.anatomy.mesh_graph import edges
from layout.anatomy.scalp_points import project
from layout.anatomy.triangle_crossings import crossing_faces
from layout.errors import FileError
from layout.units import MM

SAME_PLACE = 1e-8  # m: vertices nearer than this are one
WIDEST_HOLE = 40 * MM  # filled up to here: the opening under a skull is some 35 mm
RIVAL = 0.5  # a second body of this share of the largest one's area makes the file ambiguous
FARTHEST_SMOOTHED = 5 * MM  # off the surface as given: farther, it would be another surface
FARTHEST_PULLED = 20 * MM  # a vertex that lay far off along the surface may come as far back
SMOOTHING_ROUNDS = 40
PINCH_ROUNDS = 10
MOST_FINS = 0.005  # share of edges with more than two faces up to which those faces are left out


def clean_mesh(where: str, vertices: np.ndarray, faces: np.ndarray) -> tuple[np.ndarray, np.ndarray, list[str]]:
    """One body [m] with every vertex once, no repeated or empty face, all faces turned one way round.

    A mesh without such faults comes back as it was, in its own order. `where` begins every sentence. Raises FileError
    for a file with several bodies of like size, or whose faces cannot be turned one way round.
    """
    notes: list[str] = []
    vertices, faces = _merged(where, vertices, faces, notes)
    faces = _without_fins(where, faces, notes)
    vertices, faces = _largest_body(where, vertices, faces, notes)
    faces = _wound(where, faces, notes)
    return vertices, faces, notes


def close_mesh(where: str, vertices: np.ndarray, faces: np.ndarray) -> tuple[np.ndarray, np.ndarray, list[str]]:
    """Small holes of a clean mesh [m] filled. Raises FileError for a hole wider than WIDEST_HOLE."""
    vertices, faces = _unpinched(where, vertices, faces)
    rims = rims_of(open_edges(faces))
    for rim in rims:
        points = vertices[rim]
        width = float(np.linalg.norm(np.ptp(points, axis=0)))
        if width > WIDEST_HOLE:
            raise FileError(
                f"{where}: must be a closed surface, but it has a hole of {width / MM:.0f} mm (holes of up to "
                f"{WIDEST_HOLE / MM:g} mm are filled)."
            )
        middle = len(vertices)
        vertices = np.vstack([vertices, points.mean(axis=0)])
        # The rim runs along the open edges as their own faces do: the new faces run the other way.
        faces = np.vstack([faces, np.column_stack([np.roll(rim, -1), rim, np.full(len(rim), middle)])])
    return vertices, faces, [f"{where}: {_count(len(rims), 'hole was', 'holes were')} filled."] if rims else []


def turn_outward(where: str, vertices: np.ndarray, faces: np.ndarray) -> tuple[np.ndarray, list[str]]:
    """Faces of a consistently wound mesh with their normals outwards (by the sign of the volume about the middle)."""
    if signed_volume(vertices, faces) >= 0:
        return faces, []
    return faces[:, ::-1].copy(), [f"{where}: its faces looked inwards and were turned round."]


def signed_volume(vertices: np.ndarray, faces: np.ndarray) -> float:
    """Volume about the mean vertex: exact for a closed mesh, of the right sign for a nearly closed one."""
    a, b, c = (vertices[faces] - vertices.mean(axis=0)).transpose(1, 0, 2)
    return float(np.einsum("nd,nd->", a, np.cross(b, c)) / 6)


def decimate(vertices: np.ndarray, faces: np.ndarray, wanted: int) -> tuple[np.ndarray, np.ndarray]:
    """The mesh with some `wanted` vertices: edges collapsed by least quadric error (Garland & Heckbert 1997, SIGGRAPH,
    209-216; from memory) by the library fast-simplification. Left as it is where it has no more than that.
    """
    if len(vertices) <= wanted:
        return vertices, faces
    import fast_simplification

    middle = vertices.mean(axis=0)
    in_mm = ((vertices - middle) / MM).astype(np.float32)
    # A closed surface like a sphere has twice as many faces as vertices, less four.
    fewer, kept = fast_simplification.simplify(in_mm, faces.astype(np.int32), target_count=2 * wanted - 4)
    return np.asarray(fewer, float) * MM + middle, np.asarray(kept, np.int64)


def repair_surface(where: str, vertices: np.ndarray, faces: np.ndarray, wanted: int) -> tuple[Surface, list[str]]:
    """A closed, outward surface without crossings and of at most `wanted` vertices (a few more where holes are filled).

    vertices (n, 3) [m], faces (m, 3). What was changed is told in sentences that begin with `where`; a sound surface of
    no more than `wanted` vertices comes back exactly as it was. Raises FileError for what cannot be mended.
    """
    vertices, faces, notes = clean_mesh(where, vertices, faces)
    vertices, faces, more = close_mesh(where, vertices, faces)
    notes += more
    faces, more = turn_outward(where, vertices, faces)
    notes += more
    before = len(vertices)
    vertices, faces = decimate(vertices, faces, wanted)
    if len(vertices) < before:
        notes.append(f"{where}: thinned from {before:,} to {len(vertices):,} vertices.")
        vertices, faces, _ = clean_mesh(where, vertices, faces)
        vertices, faces, _ = close_mesh(where, vertices, faces)
    vertices, more = uncross(where, vertices, faces)
    return Surface(vertices, faces), notes + more


def uncross(where: str, vertices: np.ndarray, faces: np.ndarray) -> tuple[np.ndarray, list[str]]:
    """Vertices (n, 3) [m] smoothed around faces that pass through each other until none do.

    Each round moves the vertices of such faces and their neighbours halfway to the mean of their own neighbours. Raises
    FileError where SMOOTHING_ROUNDS rounds do not do or the surface would move more than FARTHEST_SMOOTHED.
    """
    bad = crossing_faces(vertices, faces)
    if not bad.any():
        return vertices, []
    first, given = int(bad.sum()), vertices
    neighbours = edges(faces, len(vertices))
    count = neighbours.sum(axis=1)
    vertices = vertices.copy()
    for _ in range(SMOOTHING_ROUNDS):
        near = np.zeros(len(vertices), dtype=bool)
        near[faces[bad]] = True
        near |= neighbours @ near > 0
        smoothed = (neighbours @ vertices) / np.maximum(count, 1)[:, None]
        vertices[near] += 0.5 * (smoothed - vertices)[near]
        bad = crossing_faces(vertices, faces)
        moved = np.linalg.norm(vertices - given, axis=1)
        if moved.max() > FARTHEST_PULLED:
            break
        if not bad.any():
            touched = moved > 0
            off = np.linalg.norm(
                project(Surface(given, faces), vertices[touched]).positions - vertices[touched], axis=1
            )
            if off.max() > FARTHEST_SMOOTHED:
                break
            return vertices, [
                f"{where}: {_count(first, 'face', 'faces')} passed through others; {int(touched.sum())} vertices were "
                f"smoothed, to at most {off.max() / MM:.1f} mm off the surface as given."
            ]
    raise FileError(
        f"{where}: must not pass through itself, but {_count(first, 'face does', 'faces do')} and smoothing by up to "
        f"{FARTHEST_SMOOTHED / MM:g} mm does not mend it."
    )


def _count(number: int, one: str, many: str) -> str:
    return f"{number:,} {one if number == 1 else many}"


def _merged(where: str, vertices: np.ndarray, faces: np.ndarray, notes: list[str]) -> tuple[np.ndarray, np.ndarray]:
    cells = np.round((vertices - vertices.min(axis=0)) / SAME_PLACE).astype(np.int64)
    first, number = same_rows(cells)
    if len(first) < len(vertices):
        order = np.argsort(first)  # keep the file's order
        rank = np.empty(len(order), dtype=np.int64)
        rank[order] = np.arange(len(order))
        faces = rank[number][faces]
        notes.append(
            f"{where}: {_count(len(vertices) - len(first), 'repeated vertex was', 'repeated vertices were')} merged."
        )
        vertices = vertices[first[order]]
    empty = (faces[:, 0] == faces[:, 1]) | (faces[:, 1] == faces[:, 2]) | (faces[:, 2] == faces[:, 0])
    whole = faces[~empty]
    first, _ = same_rows(np.sort(whole, axis=1))
    whole = whole[np.sort(first)]
    if len(whole) < len(faces):
        notes.append(
            f"{where}: {_count(len(faces) - len(whole), 'face', 'faces')} without area or given twice left out."
        )
    if len(whole) < 4:
        raise FileError(f"{where}: must hold a surface, but only {len(whole)} of its faces are triangles.")
    return vertices, whole


def _without_fins(where: str, faces: np.ndarray, notes: list[str]) -> np.ndarray:
    """Without the faces on edges that belong to more than two faces."""
    owner, pairs = edges_by_face(faces)
    _, number = same_rows(pairs)
    count = np.bincount(number)
    crowded = int((count > 2).sum())
    if not crowded:
        return faces
    said = _count(crowded, "edge belongs", "edges belong")
    if crowded > MOST_FINS * len(count):
        raise FileError(f"{where}: each edge must belong to at most two faces, but {said} to more.")
    bad = np.zeros(len(faces), dtype=bool)
    bad[owner[(count > 2)[number]]] = True
    notes.append(f"{where}: {said} to more than two faces; {int(bad.sum())} faces were left out.")
    return faces[~bad]


def _largest_body(
    where: str, vertices: np.ndarray, faces: np.ndarray, notes: list[str]
) -> tuple[np.ndarray, np.ndarray]:
    """Bodies are told apart by edges, so that two which touch in a single vertex are two."""
    links = face_adjacency(faces)
    n_bodies, body = connected_components(links, directed=False)
    if n_bodies > 1:
        tri = vertices[faces]
        area = np.linalg.norm(np.cross(tri[:, 1] - tri[:, 0], tri[:, 2] - tri[:, 0]), axis=1)
        areas = np.bincount(body, area)
        ranked = np.sort(areas)[::-1]
        if ranked[1] > RIVAL * ranked[0]:
            raise FileError(
                f"{where}: must hold one surface, but it holds {n_bodies}, the second "
                f"{100 * ranked[1] / ranked[0]:.0f} % as large."
            )
        faces = faces[body == np.argmax(areas)]
        notes.append(f"{where}: {_count(n_bodies - 1, 'smaller body was', 'smaller bodies were')} left out.")
    used = np.zeros(len(vertices), dtype=bool)
    used[faces] = True
    if used.all():
        return vertices, faces
    return vertices[used], (np.cumsum(used) - 1)[faces]


def _wound(where: str, faces: np.ndarray, notes: list[str]) -> np.ndarray:
    """Neighbours run along their common edge in opposite directions."""
    if wound_alike(faces):
        return faces
    links = face_adjacency(faces)
    order, before = breadth_first_order(links, 0, directed=False)
    following = np.roll(faces, -1, axis=1)
    agrees = np.ones(len(faces), dtype=bool)  # with the face it was reached from, as they stand
    child = order[1:]
    parent = before[child]
    for i in range(3):
        for j in range(3):
            same = (faces[child, i] == faces[parent, j]) & (following[child, i] == following[parent, j])
            agrees[child[same]] = False
    turned = np.zeros(len(faces), dtype=bool)
    for face, origin in zip(child.tolist(), parent.tolist(), strict=True):
        turned[face] = turned[origin] == agrees[face]
    if turned.sum() > len(faces) / 2:
        turned = ~turned
    faces = np.where(turned[:, None], faces[:, ::-1], faces)
    if not wound_alike(faces):
        raise FileError(f"{where}: must have an inside and an outside, but its faces cannot be turned one way round.")
    notes.append(f"{where}: {_count(int(turned.sum()), 'face was', 'faces were')} turned to agree with the others.")
    return faces


def _unpinched(where: str, vertices: np.ndarray, faces: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Without the faces around vertices where two holes touch, so that every rim is one simple loop."""
    for _ in range(PINCH_ROUNDS):
        starts, count = np.unique(open_edges(faces)[:, 0], return_counts=True)
        pinched = starts[count > 1]
        if not len(pinched):
            return vertices, faces
        faces = faces[~np.isin(faces, pinched).any(axis=1)]
        if len(faces) < 4:
            break
        vertices, faces = _largest_body(where, vertices, faces, [])
    raise FileError(f"{where}: must be a closed surface, but it is full of holes.")
