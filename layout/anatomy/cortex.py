"""Sources on the cortex: positions halfway through its thickness, normals and areas from that middle surface.

Three densities of one cortex, with one total area:

standard  the mesh's vertices; a vertex has a third of each face around it and the area-weighted normal of
          those faces.
coarse    the vertices of the parent icosahedral mesh (the first 2,562 a side), each with the area of the
          standard vertices nearest to it along the mesh. Its normal is the standard vertex's own, not the
          mean over its cell: what is summed over sources is quadratic in the normal, so a sample is unbiased
          where a mean over a fold would turn everything towards the scalp.
fine      one source a face, twice as many: the face's area, and the vertices' positions and normals
          interpolated at its middle. So fine samples the same surface and the same normals as standard, twice
          as densely, and a comparison of the two says what the sampling costs; the faces' own flat normals
          would be another, rougher cortex.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse.csgraph import connected_components, dijkstra

from layout.anatomy.cortex_files import Hemisphere
from layout.anatomy.frame import apply
from layout.anatomy.head import CortexVertices, Sources, Surface
from layout.anatomy.mesh_graph import (
    at_face_centres,
    edges,
    face_links,
    face_vectors,
    parent_faces,
    vertex_areas,
)
from layout.anatomy.nearest_alike import nearest_alike
from layout.units import MM

PARENT_VERTICES = 2562
NOT_CORTEX_BELOW = 1.0  # [mm]
NOT_CORTEX_RINGS = 2


def cortex_sources(hemispheres: tuple[Hemisphere, ...], file_to_head: np.ndarray, density: str) -> Sources:
    """Both sides as one set of sources in the head frame.

    file_to_head (4, 4): from the files' frame, in metres, to the head frame; density: see the module's text.
    """
    build = {"coarse": _coarse, "standard": _standard, "fine": _fine}[density]
    parts = []
    for side in hemispheres:
        middle = apply(file_to_head, (side.outer + side.inner) / 2 * MM)
        surface = Surface(middle, side.faces)
        parts.append((side.side, *build(surface, ~not_cortex(side))))
    sides, positions, normals, areas, faces = zip(*parts, strict=True)
    starts = np.cumsum([0] + [len(a) for a in areas[:-1]])
    return Sources(
        positions=np.vstack(positions),
        normals=np.vstack(normals),
        areas=np.concatenate(areas),
        side=np.concatenate([np.full(len(a), s, dtype=np.int8) for s, a in zip(sides, areas, strict=True)]),
        faces=np.vstack([f + start for f, start in zip(faces, starts, strict=True)]),
    )


def cortex_mesh(hemispheres: tuple[Hemisphere, ...], file_to_head: np.ndarray) -> Surface:
    """The closed middle surfaces of both sides in the head frame, wall between the hemispheres included."""
    vertices = [apply(file_to_head, (side.outer + side.inner) / 2 * MM) for side in hemispheres]
    starts = np.cumsum([0] + [len(part) for part in vertices[:-1]])
    faces = [side.faces + start for side, start in zip(hemispheres, starts, strict=True)]
    return Surface(np.vstack(vertices), np.vstack(faces))


def cortex_vertices(hemispheres: tuple[Hemisphere, ...], mesh: Surface, sources: Sources) -> CortexVertices:
    """The files' vertices with the sources that stand for them; mesh: from `cortex_mesh`."""
    wall = np.concatenate([not_cortex(side) for side in hemispheres])
    side = np.concatenate([np.full(len(one.outer), one.side, dtype=np.int8) for one in hemispheres])
    source = np.full(len(wall), -1)
    for one in hemispheres:
        asked, known = np.flatnonzero((side == one.side) & ~wall), np.flatnonzero(sources.side == one.side)
        nearest = nearest_alike(
            mesh.vertices[asked], mesh.normals[asked], sources.positions[known], sources.normals[known]
        )
        source[asked] = known[nearest]
    number = np.concatenate([np.arange(len(one.outer)) for one in hemispheres])
    return CortexVertices(mesh.vertices, vertex_areas(mesh), side, number, source, one_file=False)


def not_cortex(side: Hemisphere) -> np.ndarray:
    """True (n_vertices,) on the wall between the hemispheres, where the closed mesh runs over no cortex.

    Cortex is nowhere thinner than 1 mm, while over the wall the outer and inner surfaces run together: the
    largest connected set of vertices thinner than that, widened by two rings of neighbours because the
    thickness is smoothed over the border.
    """
    neighbours = edges(side.faces, len(side.outer))
    thin = np.flatnonzero(side.thickness < NOT_CORTEX_BELOW)
    _, label = connected_components(neighbours[thin][:, thin], directed=False)
    wall = np.zeros(len(side.outer), dtype=bool)
    wall[thin[label == np.bincount(label).argmax()]] = True
    for _ in range(NOT_CORTEX_RINGS):
        wall |= neighbours @ wall > 0
    return wall


def _standard(surface: Surface, keep: np.ndarray) -> tuple[np.ndarray, ...]:
    return (
        surface.vertices[keep],
        surface.normals[keep],
        vertex_areas(surface)[keep],
        _renumber(surface.faces, keep),
    )


def _coarse(surface: Surface, keep: np.ndarray) -> tuple[np.ndarray, ...]:
    chosen = np.flatnonzero(keep[:PARENT_VERTICES])
    graph = edges(surface.faces, len(surface.vertices), surface.vertices)
    _, _, nearest = dijkstra(graph, indices=chosen, min_only=True, return_predecessors=True)
    areas = np.bincount(nearest[keep], vertex_areas(surface)[keep], minlength=len(keep))[chosen]
    parents = parent_faces(surface.faces, PARENT_VERTICES)
    return (
        surface.vertices[chosen],
        surface.normals[chosen],
        areas,
        _renumber(parents, keep[:PARENT_VERTICES]),
    )


def _fine(surface: Surface, keep: np.ndarray) -> tuple[np.ndarray, ...]:
    _, areas = face_vectors(surface)
    share = keep[surface.faces].sum(axis=1) / 3  # of a face on the border only its kept corners count
    chosen = share > 0
    positions = at_face_centres(surface.vertices, surface.faces)[chosen]
    normals = at_face_centres(surface.normals, surface.faces)[chosen]
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    return positions, normals, (areas * share)[chosen], _renumber(face_links(surface.faces), chosen)


def _renumber(faces: np.ndarray, keep: np.ndarray) -> np.ndarray:
    number = np.cumsum(keep) - 1
    return number[faces[keep[faces].all(axis=1)]]
