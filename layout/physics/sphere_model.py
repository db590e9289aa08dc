"""The quick model of a head: concentric spheres, and how sources and sensors move onto them.

What is kept: a source's depth under the inner skull and its angle to the local skull normal; an electrode's
direction; a magnetometer's distance to the inner skull and its axis relative to the scalp normal. Directions
from the sphere's centre are kept throughout, so distances along the head change: `displacements` says by how
much.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import least_squares

from layout.anatomy.head import Head, Surface
from layout.errors import LayoutError
from layout.physics.nearest_point import nearest_on_surface
from layout.units import MM

UPPER_PART = 10 * MM  # the sphere is fitted to the skull at least this far above the fiducial plane
CSF_THICKNESS = 2 * MM  # four layers: the shell just inside the inner skull
BRAIN_MARGIN = 0.5 * MM  # sources stay this far under the brain's radius


@dataclass(frozen=True)
class SphereModel:
    """Concentric spheres in the head frame: centre (3,) [m], radii (L,) [m] and conductivities (L,) [S/m],
    innermost (brain) first.
    """

    centre: np.ndarray
    radii: np.ndarray
    conductivities: np.ndarray

    @property
    def brain_radius(self) -> float:
        """Radius of the shell that holds the sources [m]."""
        return float(self.radii[0])

    @property
    def inner_skull_radius(self) -> float:
        """Radius of the inner skull [m]: under a cerebrospinal layer from four layers on."""
        return float(self.radii[1] if len(self.radii) >= 4 else self.radii[0])

    @property
    def outer_radius(self) -> float:
        """Radius of the scalp [m]."""
        return float(self.radii[-1])


@dataclass(frozen=True)
class MappedSources:
    """Sources on the spheres. given (m, 3) [m]: where they are in the head; positions (m, 3) [m] and normals (m, 3) in
    the sphere, normals None for free moments; rotations (m, 3, 3): sphere moment = rotation @ head moment; held (m,)
    bool: pulled inward to stay in the brain shell.
    """

    given: np.ndarray
    positions: np.ndarray
    normals: np.ndarray | None
    rotations: np.ndarray
    held: np.ndarray

    @property
    def clipped(self) -> int:
        """How many sources were pulled inward."""
        return int(np.count_nonzero(self.held))

    def some(self, members: np.ndarray, free: bool) -> MappedSources:
        """The numbered ones, of free moments or along their normals."""
        normals = None if free else self.normals[members]
        return MappedSources(
            self.given[members], self.positions[members], normals, self.rotations[members], self.held[members]
        )


@dataclass(frozen=True)
class MappedCortex:
    """A head's whole cortex on its spheres, placed once for all lead fields."""

    sphere: SphereModel
    head: Head
    sources: MappedSources

    @property
    def conductivities(self) -> np.ndarray:
        """Of the spheres, brain first [S/m]."""
        return self.sphere.conductivities

    def with_conductivities(self, conductivities: np.ndarray) -> MappedCortex:
        """The same spheres and places with other conductivities [S/m], as many as before."""
        return replace(self, sphere=replace(self.sphere, conductivities=np.asarray(conductivities, float)))


@dataclass(frozen=True)
class Displacements:
    """How far the quick model moved things [m]: rms and largest, zero where there is nothing to move."""

    sources_rms: float
    sources_max: float
    electrodes_rms: float
    electrodes_max: float
    magnetometers_rms: float
    magnetometers_max: float
    sources_clipped: int = 0

    def summary(self) -> str:
        """Part of a printable sentence, in mm; kinds that nothing moved are left out."""
        parts = [
            f"{name} {rms / MM:.1f} mm (at most {largest / MM:.1f})"
            for name, rms, largest in (
                ("sources", self.sources_rms, self.sources_max),
                ("electrodes", self.electrodes_rms, self.electrodes_max),
                ("magnetometers", self.magnetometers_rms, self.magnetometers_max),
            )
            if largest > 0
        ]
        moved = f"to fit the model, positions move by (rms): {', '.join(parts)}" if parts else "no position moves"
        if not self.sources_clipped:
            return moved
        held = "source is" if self.sources_clipped == 1 else "sources are"
        return f"{moved}; {self.sources_clipped} {held} held inside the model's brain"


def fit_sphere_model(head: Head, conductivities: np.ndarray) -> SphereModel:
    """Spheres for a head: its own if it is a layered sphere, else fitted to its surfaces.

    The inner skull's radius and the centre are the least-squares sphere (distances, area-weighted) of the
    inner skull above the fiducial plane + 10 mm; outer skull and scalp add the mean gap to the next surface
    over the same part. conductivities [S/m]: three (brain, skull, scalp) or four (brain, cerebrospinal fluid,
    skull, scalp; that fluid's shell is the 2 mm inside the inner skull); for a sphere, as many as it has
    radii.

    Raises LayoutError for any other number, or a skull with too few vertices in the upper part.
    """
    conductivities = np.asarray(conductivities, float)
    if head.sphere is not None:
        centre, radii = (np.asarray(part, float) for part in head.sphere)
        if len(radii) != len(conductivities):
            raise LayoutError(
                f"conductivities: a sphere of {len(radii)} radii needs as many values, got {len(conductivities)}"
            )
        return SphereModel(centre, radii, conductivities)
    if len(conductivities) not in (3, 4):
        raise LayoutError(
            f"conductivities: need 3 (brain, skull, scalp) or 4 (brain, fluid, skull, scalp), got {len(conductivities)}"
        )
    upper, areas = _upper_part(head.inner_skull)
    centre, inner = _fit_sphere(upper, areas)
    outer = inner + _mean_gap(upper, areas, head.outer_skull)
    scalp = outer + _mean_gap(*_upper_part(head.outer_skull), head.scalp)
    radii = [inner, outer, scalp] if len(conductivities) == 3 else [inner - CSF_THICKNESS, inner, outer, scalp]
    return SphereModel(centre, np.array(radii), conductivities)


def map_sources(model: SphereModel, head: Head, positions: np.ndarray, normals: np.ndarray | None) -> MappedSources:
    """Sources (m, 3) [m] in the sphere: same depth under the inner skull, same angle to its local normal.

    New position = centre + (inner skull radius - depth) u, u the source's direction from the centre; moments
    turn with the smallest rotation that takes the skull's normal at the nearest point to u. Sources that
    would come closer than 0.5 mm to the brain's radius are held there and counted. A head that is a sphere is
    left as it is.
    """
    positions = np.asarray(positions, float).reshape(-1, 3)
    if head.sphere is not None:
        same = np.broadcast_to(np.eye(3), (len(positions), 3, 3))
        return MappedSources(positions, positions, normals, same, np.zeros(len(positions), dtype=bool))
    near = nearest_on_surface(head.inner_skull, positions)
    u = _directions(positions - model.centre)
    wanted = model.inner_skull_radius - near.inside_depth
    radius = np.clip(wanted, 0.0, model.brain_radius - BRAIN_MARGIN)
    rotations = smallest_rotations(near.normals, u)
    turned = None if normals is None else np.einsum("mij,mj->mi", rotations, np.asarray(normals, float))
    return MappedSources(positions, model.centre + radius[:, None] * u, turned, rotations, wanted > radius)


def map_cortex(model: SphereModel, head: Head) -> MappedCortex:
    """All sources of the head's cortex, with their normals, placed as by `map_sources`."""
    return MappedCortex(model, head, map_sources(model, head, head.cortex.positions, head.cortex.normals))


def map_electrodes(model: SphereModel, positions: np.ndarray) -> np.ndarray:
    """Electrodes (n, 3) [m] projected from the centre onto the outer radius."""
    return model.centre + model.outer_radius * _directions(np.asarray(positions, float) - model.centre)


def map_magnetometers(
    model: SphereModel, head: Head, positions: np.ndarray, axes: np.ndarray, site_normals: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Magnetometer channels on the sphere: positions (n, 3) [m] and unit axes (n, 3).

    A channel keeps its distance to the inner skull, along its direction from the centre, so it is always
    outside; axes turn with the smallest rotation that takes the site's normal to that direction: a normal
    axis becomes radial. A head that is a sphere is left as it is. Raises LayoutError for a channel inside the
    inner skull.
    """
    positions = np.asarray(positions, float).reshape(-1, 3)
    axes = np.asarray(axes, float).reshape(-1, 3)
    if head.sphere is not None:
        return positions, axes
    gap = -nearest_on_surface(head.inner_skull, positions).inside_depth
    if not np.all(gap > 0):
        raise LayoutError(
            f"magnetometer position: must be outside the inner skull, got {-gap.min() / MM:.2f} mm inside"
        )
    u = _directions(positions - model.centre)
    turned = np.einsum("nij,nj->ni", smallest_rotations(np.asarray(site_normals, float), u), axes)
    return model.centre + (model.inner_skull_radius + gap)[:, None] * u, turned


def displacements(
    sources: tuple[np.ndarray, np.ndarray],
    electrodes: tuple[np.ndarray, np.ndarray],
    magnetometers: tuple[np.ndarray, np.ndarray],
    clipped: int = 0,
) -> Displacements:
    """The report from three pairs of positions (before, after), each (n, 3) [m]."""
    figures: list[float] = []
    for before, after in (sources, electrodes, magnetometers):
        moved = np.linalg.norm(np.asarray(after) - np.asarray(before), axis=1)
        figures += [float(np.sqrt(np.mean(moved**2))), float(moved.max())] if len(moved) else [0.0, 0.0]
    return Displacements(*figures, sources_clipped=clipped)


def smallest_rotations(start: np.ndarray, end: np.ndarray) -> np.ndarray:
    """Rotation matrices (n, 3, 3) of the smallest angle with R start = end, for unit vectors (n, 3) each.

    Half a turn about start, then half a turn about the midline m of the two: R = (2 m m^T - I)(2 s s^T - I),
    a rotation in the plane of the two vectors. Exactly opposite vectors have no plane; any axis across them
    serves as m.
    """
    start, end = (np.asarray(part, float).reshape(-1, 3) for part in (start, end))
    turned = _turn(start, end)
    # nearly opposite vectors leave few digits in their sum: a second, tiny turn restores R start = end
    return _turn(np.einsum("nij,nj->ni", turned, start), end) @ turned


def _turn(start: np.ndarray, end: np.ndarray) -> np.ndarray:
    middle = start + end
    opposite = np.linalg.norm(middle, axis=1) < 1e-12
    if opposite.any():
        middle[opposite] = np.cross(start[opposite], np.eye(3)[np.argmin(np.abs(start[opposite]), axis=1)])
    middle /= np.linalg.norm(middle, axis=1, keepdims=True)
    return _half_turns(middle) @ _half_turns(start)


def _half_turns(axes: np.ndarray) -> np.ndarray:
    return 2 * axes[:, :, None] * axes[:, None, :] - np.eye(3)


def _directions(vectors: np.ndarray) -> np.ndarray:
    """Unit vectors; the centre itself gets +z, where any direction will do."""
    lengths = np.linalg.norm(vectors, axis=1, keepdims=True)
    return np.where(lengths > 0, vectors, [0.0, 0.0, 1.0]) / np.where(lengths > 0, lengths, 1.0)


def _upper_part(surface: Surface) -> tuple[np.ndarray, np.ndarray]:
    """Vertices above the fiducial plane + 10 mm and the area each stands for [m²]."""
    triangles = surface.vertices[surface.faces]
    across = np.cross(triangles[:, 1] - triangles[:, 0], triangles[:, 2] - triangles[:, 0])
    thirds = np.linalg.norm(across, axis=1) / 6
    areas = np.bincount(surface.faces.ravel(), np.repeat(thirds, 3), len(surface.vertices))
    upper = surface.vertices[:, 2] > UPPER_PART
    if np.count_nonzero(upper) < 12:
        raise LayoutError(
            f"skull surface: needs at least 12 vertices {UPPER_PART / MM:.0f} mm above the fiducial plane, "
            f"got {np.count_nonzero(upper)}"
        )
    return surface.vertices[upper], areas[upper]


def _fit_sphere(points: np.ndarray, weights: np.ndarray) -> tuple[np.ndarray, float]:
    """Centre and radius with the least weighted squared distances to the points."""
    root = np.sqrt(weights / weights.sum())
    middle = points.mean(axis=0)
    size = np.linalg.norm(points - middle, axis=1).mean()

    def residuals(unknown: np.ndarray) -> np.ndarray:
        return root * (np.linalg.norm(points - unknown[:3], axis=1) - unknown[3]) / size

    found = least_squares(residuals, [*middle, size], x_scale=size, xtol=1e-14, ftol=1e-14, gtol=1e-14).x
    return found[:3], float(found[3])


def _mean_gap(points: np.ndarray, weights: np.ndarray, surface: Surface) -> float:
    """Weighted mean distance from the points to the surface around them [m]."""
    return float(np.average(nearest_on_surface(surface, points).inside_depth, weights=weights))
