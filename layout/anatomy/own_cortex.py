"""A person's own cortex: sources with normals and areas on the surface as it is given, thinned where it is fine."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from layout.anatomy.head import CortexVertices, Sources, Surface
from layout.anatomy.mesh_repair import clean_mesh, decimate, turn_outward
from layout.anatomy.nearest_alike import nearest_alike
from layout.errors import FileError
from layout.units import MM

SIDES = {"left": -1, "right": 1}
LOST = 1e-6  # m: a vertex of the file farther than this from the cleaned mesh was left out of it


@dataclass(frozen=True)
class GivenCortex:
    """The cortex's files in the head frame, by side ("both" for a single file).

    vertices (n, 3) [m], faces (m, 3), mask (n,) true where there is cortex.
    """

    vertices: np.ndarray
    faces: np.ndarray
    mask: np.ndarray


@dataclass(frozen=True)
class OwnCortex:
    """Sources, the mesh they lie on, and the vertices of the files; notes: what was changed."""

    sources: Sources
    surface: Surface
    vertices: CortexVertices
    notes: tuple[str, ...]


@dataclass(frozen=True)
class _Piece:
    """One cleaned body: fine as in the file, surface thinned; side of it, or None where x tells vertex by vertex."""

    side: int | None
    fine: Surface
    surface: Surface


def build_own_cortex(given: dict[str, GivenCortex], wanted: int) -> OwnCortex:
    """Sources at the vertices of the given surface(s), some `wanted` of them at most on the whole cortex.

    A surface with more is thinned by edge collapses; the total area and the normals stay those of the file. Raises
    FileError for a surface that is broken beyond repair (own crossings do no harm to sources and are not looked for).
    """
    notes: list[str] = []
    pieces = []
    for where, one in given.items():
        for side, faces in _by_side(where, one):
            pieces.append(_cleaned(_name(where, side), one.vertices, faces, side, notes))
    total = sum(len(fine.vertices) for _, fine in pieces)
    if total > wanted:
        notes.append(f"cortex: thinned from {total:,} to some {wanted:,} sources; its area was kept.")
    thinned = [
        _Piece(side, fine, Surface(*decimate(fine.vertices, fine.faces, round(wanted * len(fine.vertices) / total))))
        for side, fine in pieces
    ]
    sources, surface, keep = _assemble(given, thinned)
    return OwnCortex(sources, surface, _vertices(given, thinned, sources, keep), tuple(notes))


def lump_areas(surface: Surface) -> np.ndarray:
    """A third of the area of each face around a vertex (n_vertices,) [m²], empty faces included."""
    tri = surface.vertices[surface.faces]
    area = np.linalg.norm(np.cross(tri[:, 1] - tri[:, 0], tri[:, 2] - tri[:, 0]), axis=1) / 2
    return np.bincount(surface.faces.ravel(), np.repeat(area / 3, 3), minlength=len(surface.vertices))


def _name(where: str, side: int | None) -> str:
    if where != "both":
        return f"cortex_{where}"
    return {None: "cortex", -1: "cortex (left)", 1: "cortex (right)"}[side]


def _by_side(where: str, one: GivenCortex) -> list[tuple[int | None, np.ndarray]]:
    """(side, faces) of each hemisphere in a file."""
    if where != "both":
        return [(SIDES[where], one.faces)]
    # Places, not numbers, tell what hangs together: an STL file repeats each vertex once a face.
    _, place = np.unique(np.round(one.vertices / (1e-3 * MM)).astype(np.int64), axis=0, return_inverse=True)
    place = place.reshape(-1)[one.faces]
    n_places = place.max() + 1
    pairs = (np.concatenate([place[:, 0], place[:, 1]]), np.concatenate([place[:, 1], place[:, 2]]))
    graph = coo_array((np.ones(len(pairs[0]), dtype=np.int8), pairs), shape=(n_places, n_places))
    _, body = connected_components(graph, directed=False)
    body = body[place[:, 0]]
    size = np.bincount(body)
    if len(size) < 2 or np.sort(size)[-2] < 0.2 * len(one.faces):
        return [(None, one.faces)]
    middle = np.bincount(body, one.vertices[one.faces].mean(axis=1)[:, 0]) / size
    return [(-1, one.faces[(middle < 0)[body]]), (1, one.faces[(middle >= 0)[body]])]


def _cleaned(
    where: str, vertices: np.ndarray, faces: np.ndarray, side: int | None, notes: list[str]
) -> tuple[int | None, Surface]:
    if not len(faces):
        raise FileError(f"{where}: must hold a surface, but the file has none on this side (the left has x < 0).")
    used = np.unique(faces)
    if len(used) < len(vertices):
        number = np.full(len(vertices), -1)
        number[used] = np.arange(len(used))
        vertices, faces = vertices[used], number[faces]
    vertices, faces, said = clean_mesh(where, vertices, faces)
    faces, more = turn_outward(where, vertices, faces)
    notes += said + more
    return side, Surface(vertices, faces)


def _assemble(given: dict[str, GivenCortex], pieces: list[_Piece]) -> tuple[Sources, Surface, list[np.ndarray]]:
    """Sources, the whole mesh, and which vertices of each piece's thinned mesh are sources."""
    mask_place = np.vstack([one.vertices for one in given.values()])
    mask = np.concatenate([one.mask for one in given.values()])
    tree = None if mask.all() else cKDTree(mask_place)
    parts, keeps, faces = [], [], []
    n_sources, n_vertices, mesh_faces = 0, 0, []
    for piece in pieces:
        surface = piece.surface
        areas = lump_areas(surface)
        if surface.vertices is not piece.fine.vertices:
            areas = areas * (lump_areas(piece.fine).sum() / areas.sum())
        normals = _normals(piece)
        keep = (areas > 0) & (np.linalg.norm(normals, axis=1) > 0.5)
        if tree is not None:
            keep &= mask[tree.query(surface.vertices)[1]]
        if not keep.any():
            raise FileError("cortex: each side must have vertices that the mask counts as cortex, but one has none.")
        side = np.full(len(areas), piece.side) if piece.side else np.where(surface.vertices[:, 0] < 0, -1, 1)
        parts.append((surface.vertices[keep], normals[keep], areas[keep], side[keep].astype(np.int8)))
        number = np.cumsum(keep) - 1 + n_sources
        faces.append(number[surface.faces[keep[surface.faces].all(axis=1)]])
        mesh_faces.append(surface.faces + n_vertices)
        keeps.append(keep)
        n_sources, n_vertices = n_sources + int(keep.sum()), n_vertices + len(areas)
    positions, normals, areas, side = (np.concatenate(column) for column in zip(*parts, strict=True))
    sources = Sources(positions, normals, areas, side, np.vstack(faces))
    mesh = Surface(np.vstack([piece.surface.vertices for piece in pieces]), np.vstack(mesh_faces))
    return sources, mesh, keeps


def _normals(piece: _Piece) -> np.ndarray:
    """Of the thinned vertices: those of the file's nearest vertex, so that a sample of normals stays unbiased."""
    own = _safe_normals(piece.surface)
    if piece.surface.vertices is piece.fine.vertices:
        return own
    fine = _safe_normals(piece.fine)
    return fine[nearest_alike(piece.surface.vertices, own, piece.fine.vertices, fine)]


def _safe_normals(surface: Surface) -> np.ndarray:
    """Vertex normals, zero where the faces around a vertex cancel."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.nan_to_num(surface.normals)


def _vertices(
    given: dict[str, GivenCortex], pieces: list[_Piece], sources: Sources, keeps: list[np.ndarray]
) -> CortexVertices:
    fine = np.vstack([piece.fine.vertices for piece in pieces])
    normals = np.vstack([_safe_normals(piece.fine) for piece in pieces])
    areas = np.concatenate([lump_areas(piece.fine) for piece in pieces])
    ends = np.cumsum([len(piece.fine.vertices) for piece in pieces])
    sources_of = np.cumsum([0] + [int(keep.sum()) for keep in keeps])
    owner = np.empty(len(fine), dtype=np.int64)
    for i, (piece, end) in enumerate(zip(pieces, ends, strict=True)):
        rows = slice(end - len(piece.fine.vertices), end)
        mine = slice(sources_of[i], sources_of[i + 1])
        owner[rows] = sources_of[i] + nearest_alike(
            fine[rows], normals[rows], sources.positions[mine], sources.normals[mine]
        )
    tree = cKDTree(fine)
    columns = []
    for where, one in given.items():
        away, nearest = tree.query(one.vertices)
        found = (away < LOST) & one.mask
        side = sources.side[owner[nearest]] if where == "both" else np.full(len(away), SIDES[where])
        columns.append(
            (
                one.vertices,
                np.where(found, areas[nearest], 0.0),
                side.astype(np.int8),
                np.arange(len(away)),
                np.where(found, owner[nearest], -1),
            )
        )
    return CortexVertices(*(np.concatenate(column) for column in zip(*columns, strict=True)), one_file="both" in given)
