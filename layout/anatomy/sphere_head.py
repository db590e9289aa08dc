"""A head that is a layered sphere: for quick studies and for tests against closed forms."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from layout.anatomy.head import Head, Landmarks, Sources, Surface
from layout.anatomy.mesh_graph import face_links, vertex_areas
from layout.anatomy.star_surface import icosphere
from layout.errors import BriefError
from layout.units import MM

SURFACE_SUBDIVISIONS = 5  # 10,242 vertices
SOURCE_SUBDIVISIONS = {"coarse": 4, "standard": 5, "fine": 5}
LOWEST = -0.3  # sources have z above this share of their shell's radius: a brain has no cortex at its base
EYE_AZIMUTH = np.radians(24.0)  # from the front, on the level of the nasion
EYE_DEPTH = 13.5 * MM  # a globe of 12 mm radius and its lid

NOTES = (
    "The head is a layered sphere: its sources sit on a smooth shell and have no cortical normals.",
    "The eyes of a sphere head lie at the level of the nasion, 13.5 mm under the scalp: a rough place only.",
)


def build_sphere_head(radii: Sequence[float], cortex_depth: float, source_mesh: str) -> Head:
    """A head of three or four concentric spheres about the origin of the head frame.

    radii [m] run from the brain outwards: (brain, skull, scalp) or (brain, fluid, skull, scalp); a layer's
    radius is its outer boundary. Sources fill the shell at radii[0] - cortex_depth above LOWEST, with radial
    normals; all densities have the exact area of that cap. Sources at x = 0 count as right. Raises BriefError
    where the radii do not increase, are not three or four, or the depth is not between 0 and radii[0].
    """
    radii = np.asarray(radii, dtype=float)
    said = ", ".join(f"{r / MM:g}" for r in radii)
    if len(radii) not in (3, 4) or radii[0] <= 0 or (np.diff(radii) <= 0).any():
        raise BriefError(f"head.radii_mm must be three or four increasing radii, not [{said}].")
    if not 0 < cortex_depth < radii[0]:
        raise BriefError(
            f"head.cortex_depth_mm must be between 0 and the innermost radius of {radii[0] / MM:g} mm,"
            f" not {cortex_depth / MM:g}."
        )
    inner, outer, scalp = radii[-3:]
    directions, faces = icosphere(SURFACE_SUBDIVISIONS)
    sin, cos = np.sin(EYE_AZIMUTH), np.cos(EYE_AZIMUTH)
    return Head(
        name="sphere",
        scalp=Surface(scalp * directions, faces),
        outer_skull=Surface(outer * directions, faces),
        inner_skull=Surface(inner * directions, faces),
        landmarks=Landmarks(
            nas=np.array([0.0, scalp, 0.0]),
            lpa=np.array([-scalp, 0.0, 0.0]),
            rpa=np.array([scalp, 0.0, 0.0]),
            inion=np.array([0.0, -scalp, 0.0]),
        ),
        cortex=_shell_sources(radii[0] - cortex_depth, source_mesh),
        eyes=(scalp - EYE_DEPTH) * np.array([[-sin, cos, 0.0], [sin, cos, 0.0]]),
        sphere=(np.zeros(3), radii),
        normal_orientation=False,
        notes=NOTES,
    )


def _shell_sources(radius: float, source_mesh: str) -> Sources:
    directions, faces = icosphere(SOURCE_SUBDIVISIONS[source_mesh])
    areas = vertex_areas(Surface(directions, faces))
    if source_mesh == "fine":
        tri = directions[faces]
        areas = np.linalg.norm(np.cross(tri[:, 1] - tri[:, 0], tri[:, 2] - tri[:, 0]), axis=1) / 2
        directions, faces = tri.mean(axis=1), face_links(faces)
        directions = directions / np.linalg.norm(directions, axis=1, keepdims=True)
    keep = directions[:, 2] > LOWEST
    number = np.cumsum(keep) - 1
    directions, areas = directions[keep], areas[keep]
    return Sources(
        positions=radius * directions,
        normals=directions,
        areas=areas * (2 * np.pi * radius**2 * (1 - LOWEST) / areas.sum()),
        side=np.where(directions[:, 0] < 0, -1, 1).astype(np.int8),
        faces=number[faces[keep[faces].all(axis=1)]],
    )
