"""A head's surfaces with few enough nodes for boundary elements."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head, Surface
from layout.anatomy.mesh_repair import decimate
from layout.anatomy.star_surface import icosphere, radius_along
from layout.errors import LayoutError
from layout.physics.nearest_point import nearest_on_surface
from layout.units import MM

LEAST_GAP = 2 * MM  # between neighbouring surfaces: nearer ones need triangles smaller than 1,000 nodes allow


def geodesic_sphere(frequency: int) -> Surface:
    """Unit sphere of 10 f² + 2 nodes: each edge of the icosahedron in f parts, pushed out to the sphere."""
    corners, faces = icosphere(0)
    f, points, triangles = frequency, [], []
    numbers: dict[tuple, int] = {}

    def node(face: np.ndarray, i: int, j: int) -> int:
        counts = zip(face, (f - i - j, i, j), strict=True)
        place = tuple(
            sorted((int(corner), count) for corner, count in counts if count)
        )  # alike on both sides of an edge
        if place not in numbers:
            numbers[place] = len(points)
            points.append(sum(corners[corner] * count for corner, count in place))
        return numbers[place]

    for face in faces:
        for i in range(f):
            for j in range(f - i):
                triangles.append((node(face, i, j), node(face, i + 1, j), node(face, i, j + 1)))
                if i + j < f - 1:
                    triangles.append((node(face, i + 1, j), node(face, i + 1, j + 1), node(face, i, j + 1)))
    points = np.array(points)
    return Surface(points / np.linalg.norm(points, axis=1, keepdims=True), np.array(triangles))


def volume(surface: Surface) -> float:
    """Volume inside a closed, outward-oriented surface [m³]."""
    a, b, c = np.moveaxis(surface.vertices[surface.faces] - surface.vertices.mean(axis=0), 1, 0)
    return float(np.einsum("fi,fi->", a, np.cross(b, c)) / 6)


def boundary_surfaces(head: Head, nodes: int) -> tuple[Surface, Surface, Surface]:
    """Inner skull, outer skull and scalp of the head with some `nodes` nodes each.

    Where all three are star-shaped about the inner skull's centre they are read along the directions of a geodesic
    sphere, the same for all; others are decimated. Flat faces between points of a rounded surface lie inside it: each
    surface is moved out along its normals till its volume is the original's, which takes the first-order error of
    flat faces away. Raises LayoutError for surfaces that come within LEAST_GAP of each other.
    """
    originals = (head.inner_skull, head.outer_skull, head.scalp)
    try:
        found = _along_rays(originals, max(4, round(np.sqrt((nodes - 2) / 10))))
    except ValueError:  # not star-shaped
        found = [
            Surface(*decimate(np.asarray(surface.vertices), np.asarray(surface.faces), nodes)) for surface in originals
        ]
    found = [_with_volume(few, volume(many)) for few, many in zip(found, originals, strict=True)]
    for inner, outer, name in zip(found, found[1:], ("inner and outer skull", "outer skull and scalp"), strict=False):
        gap = nearest_on_surface(outer, inner.vertices).inside_depth.min()
        if gap < LEAST_GAP:
            raise LayoutError(
                f"surfaces: {name} must stay {LEAST_GAP / MM:g} mm apart at {nodes} nodes each, got {gap / MM:.2f} mm"
            )
    return tuple(found)


def _along_rays(surfaces: tuple[Surface, ...], frequency: int) -> list[Surface]:
    centre = surfaces[0].vertices.mean(axis=0)
    if not all(_is_star_shaped(surface, centre) for surface in surfaces):
        raise ValueError("a surface is not star-shaped about the inner skull's centre")
    sphere = geodesic_sphere(frequency)
    return [
        Surface(
            centre
            + radius_along(surface.vertices - centre, surface.faces, sphere.vertices)[0][:, None] * sphere.vertices,
            sphere.faces,
        )
        for surface in surfaces
    ]


def _is_star_shaped(surface: Surface, centre: np.ndarray) -> bool:
    """Whether every face turns its inner side to the centre."""
    a, b, c = np.moveaxis(surface.vertices[surface.faces] - centre, 1, 0)
    return bool((np.einsum("fi,fi->f", a, np.cross(b, c)) > 0).all())


def _with_volume(surface: Surface, wanted: float) -> Surface:
    """Moved along the vertex normals, by one distance everywhere, till the volume is the wanted one."""
    for _ in range(4):
        tri = surface.vertices[surface.faces]
        area = np.linalg.norm(np.cross(tri[:, 1] - tri[:, 0], tri[:, 2] - tri[:, 0]), axis=1).sum() / 2
        step = (wanted - volume(surface)) / area
        surface = Surface(surface.vertices + step * surface.normals, surface.faces)
    return surface
