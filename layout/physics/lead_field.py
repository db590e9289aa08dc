"""The lead field of electrodes and magnetometers on a head, by its quick sphere model."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Head
from layout.physics.layered_sphere import electric_lead_field
from layout.physics.nearest_point import nearest_on_surface
from layout.physics.sarvas import magnetic_lead_field
from layout.physics.sphere_model import (
    Displacements,
    MappedSources,
    SphereModel,
    displacements,
    map_electrodes,
    map_magnetometers,
)
from layout.units import MM

EYE_DEPTH = 10 * MM  # an eyeball's centre is at least this far under the scalp sphere
EYE_CLIP = 0.9  # of the inner skull's radius, where a magnetometer would be inside the eye's radius
ROWS_AT_ONCE = 64


@dataclass(frozen=True)
class LeadField:
    """gain (n_channels, n_sources) for fixed moments, (n_channels, n_sources, 3) for free ones (head frame).

    Rows of electrodes [V/(A·m)], potential with zero mean over the outer sphere; rows of magnetometers
    [T/(A·m)].
    """

    gain: np.ndarray
    displacements: Displacements


def compute_lead_field(
    model: SphereModel,
    head: Head,
    positions: np.ndarray,
    axes: np.ndarray,
    is_electrode: np.ndarray,
    normals: np.ndarray,
    sources: MappedSources,
) -> LeadField:
    """Gain of each channel for a unit dipole at each source, channels and free moments in the head frame.

    Channels (n): positions (n, 3) [m], unit axes (n, 3) (ignored for electrodes), is_electrode (n,) bool,
    normals (n, 3) of the scalp at the site. Sources (m): as `map_sources` places them on this model, with normals for
    fixed orientation, without for free.

    Raises LayoutError where a sensor cannot be placed on the spheres.
    """
    is_electrode = np.asarray(is_electrode, bool)
    positions = np.asarray(positions, float).reshape(-1, 3)
    electrodes, points, turned_axes = _map_channels(model, head, positions, axes, is_electrode, normals)
    centred = sources.positions - model.centre
    electric = electric_lead_field(
        electrodes - model.centre, centred, model.radii, model.conductivities, moments=sources.normals
    )
    magnetic = magnetic_lead_field(points - model.centre, turned_axes, centred, moments=sources.normals)
    gain = _interleave(is_electrode, electric, magnetic)
    if sources.normals is None and head.sphere is None:
        for first in range(0, len(gain), ROWS_AT_ONCE):
            rows = slice(first, first + ROWS_AT_ONCE)
            gain[rows] = np.einsum("nmj,mjk->nmk", gain[rows], sources.rotations)
    return LeadField(gain, _displacements(sources, positions, is_electrode, electrodes, points))


def moved_onto_spheres(
    model: SphereModel,
    head: Head,
    positions: np.ndarray,
    axes: np.ndarray,
    is_electrode: np.ndarray,
    normals: np.ndarray,
    sources: MappedSources,
) -> Displacements:
    """How far the model moves these channels and sources; arguments as in `compute_lead_field`."""
    electrodes, points, _ = _map_channels(model, head, positions, axes, is_electrode, normals)
    return _displacements(sources, positions, is_electrode, electrodes, points)


def _displacements(
    sources: MappedSources,
    positions: np.ndarray,
    is_electrode: np.ndarray,
    electrodes: np.ndarray,
    points: np.ndarray,
) -> Displacements:
    return displacements(
        (sources.given, sources.positions),
        (positions[is_electrode], electrodes),
        (positions[~is_electrode], points),
        sources.clipped,
    )


def eye_field(
    model: SphereModel,
    head: Head,
    positions: np.ndarray,
    axes: np.ndarray,
    is_electrode: np.ndarray,
    normals: np.ndarray,
) -> np.ndarray:
    """Gain (n_channels, 2, 3) of a dipole (head frame) at the left and the right eyeball's centre.

    The eyes lie outside the brain shell and in front of the skull. Electrodes therefore see a homogeneous
    sphere of the outer radius with the scalp's conductivity [V/(A·m)]; the eye keeps its direction from the
    centre and its depth under the scalp (nearest distance, at least 10 mm). Magnetometers use the spherical
    formula with the eye at the same place [T/(A·m)]; if that is not inside the radius of every magnetometer,
    the eye's radius is clipped to 0.9 of the inner skull's for the magnetic rows. Moments are not turned: the
    eye's forward direction is the head's. Channels as in `compute_lead_field`.
    """
    is_electrode = np.asarray(is_electrode, bool)
    positions = np.asarray(positions, float).reshape(-1, 3)
    electrodes, points, turned_axes = _map_channels(model, head, positions, axes, is_electrode, normals)
    eyes = np.asarray(head.eyes, float) - model.centre
    distance = np.linalg.norm(eyes, axis=1, keepdims=True)
    if head.sphere is None:
        depth = nearest_on_surface(head.scalp, head.eyes).inside_depth[:, None]
    else:
        depth = model.outer_radius - distance
    radius = model.outer_radius - np.maximum(depth, EYE_DEPTH)
    eyes = eyes / distance * radius
    electric = electric_lead_field(electrodes - model.centre, eyes, model.radii[-1:], model.conductivities[-1:])
    points = points - model.centre
    if len(points) and radius.max() >= np.linalg.norm(points, axis=1).min():
        eyes = eyes * np.minimum(1.0, EYE_CLIP * model.inner_skull_radius / radius)
    return _interleave(is_electrode, electric, magnetic_lead_field(points, turned_axes, eyes))


def _map_channels(
    model: SphereModel,
    head: Head,
    positions: np.ndarray,
    axes: np.ndarray,
    is_electrode: np.ndarray,
    normals: np.ndarray,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Positions of the electrodes, positions and axes of the magnetometers, on the spheres."""
    coils = ~is_electrode
    points, turned = map_magnetometers(
        model, head, positions[coils], np.asarray(axes)[coils], np.asarray(normals)[coils]
    )
    return map_electrodes(model, positions[is_electrode]), points, turned


def _interleave(is_electrode: np.ndarray, electric: np.ndarray, magnetic: np.ndarray) -> np.ndarray:
    """Rows back in the order of the channels; no copy where all are of one kind."""
    if is_electrode.all():
        return electric
    if not is_electrode.any():
        return magnetic
    gain = np.empty((len(is_electrode), *electric.shape[1:]))
    gain[is_electrode] = electric
    gain[~is_electrode] = magnetic
    return gain
