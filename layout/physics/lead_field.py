"""The lead field of electrodes and magnetometers on a head, by its quick sphere model."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import NamedTuple

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
    smallest_rotations,
)
from layout.sensing.pickup import Pickup
from layout.units import MM

EYE_DEPTH = 10 * MM  # an eyeball's centre is at least this far under the scalp sphere
EYE_CLIP = 0.9  # of the inner skull's radius, where a magnetometer would be inside the eye's radius
ROWS_AT_ONCE = 64
POINT_GAIN_AT_ONCE = 16_000_000  # numbers: keeps the lead field of all integration points out of memory at once


@dataclass(frozen=True)
class LeadField:
    """gain (n_channels, n_sources) for fixed moments, (n_channels, n_sources, 3) for free ones (head frame).

    Rows of electrodes [V/(A·m)], potential with zero mean over the outer sphere; rows of magnetometers
    [T/(A·m)].
    """

    gain: np.ndarray
    displacements: Displacements


class PlacedPoints(NamedTuple):
    """The integration points of channels on the spheres, in their order: is_electrode (n_points,) bool; electrodes
    (n_electrode_points, 3) [m]; coils (n_coil_points, 3) [m] and their unit axes (n_coil_points, 3).
    """

    is_electrode: np.ndarray
    electrodes: np.ndarray
    coils: np.ndarray
    axes: np.ndarray


def compute_lead_field(
    model: SphereModel,
    head: Head,
    positions: np.ndarray,
    axes: np.ndarray,
    is_electrode: np.ndarray,
    normals: np.ndarray,
    sources: MappedSources,
    pickup: Pickup | None = None,
) -> LeadField:
    """Gain of each channel for a unit dipole at each source, channels and free moments in the head frame.

    Channels (n): positions (n, 3) [m], unit axes (n, 3) (ignored for electrodes), is_electrode (n,) bool,
    normals (n, 3) of the scalp at the site. Sources (m): as `map_sources` places them on this model, with normals for
    fixed orientation, without for free. pickup: the integration points of the channels, None where each is a point.

    A sensor moves onto the spheres as a rigid body: its centre as `map_magnetometers` places it, the points about it
    turned with its site's normal, so baselines and parallel coils stay what they are. Points of an electrode are
    projected each.

    Raises LayoutError where a sensor cannot be placed on the spheres.
    """
    is_electrode = np.asarray(is_electrode, bool)
    positions = np.asarray(positions, float).reshape(-1, 3)
    placed = place_channels(model, head, positions, axes, is_electrode, normals)
    if pickup is None:
        gain = _point_gain(model, placed, sources)
    else:
        points = place_pickup(model, head, positions, normals, placed, pickup)
        gain = _combined_gain(model, points, sources, pickup)
    if sources.normals is None and head.sphere is None:
        for first in range(0, len(gain), ROWS_AT_ONCE):
            rows = slice(first, first + ROWS_AT_ONCE)
            gain[rows] = np.einsum("nmj,mjk->nmk", gain[rows], sources.rotations)
    return LeadField(gain, _displacements(sources, positions, placed))


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
    placed = place_channels(model, head, positions, axes, is_electrode, normals)
    return _displacements(sources, positions, placed)


def _displacements(sources: MappedSources, positions: np.ndarray, placed: PlacedPoints) -> Displacements:
    return displacements(
        (sources.given, sources.positions),
        (positions[placed.is_electrode], placed.electrodes),
        (positions[~placed.is_electrode], placed.coils),
        sources.clipped,
    )


def eye_field(
    model: SphereModel,
    head: Head,
    positions: np.ndarray,
    axes: np.ndarray,
    is_electrode: np.ndarray,
    normals: np.ndarray,
    pickup: Pickup | None = None,
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
    placed = place_channels(model, head, positions, axes, is_electrode, normals)
    if pickup is not None:
        placed = place_pickup(model, head, positions, normals, placed, pickup)
    eyes = np.asarray(head.eyes, float) - model.centre
    distance = np.linalg.norm(eyes, axis=1, keepdims=True)
    if head.sphere is None:
        depth = nearest_on_surface(head.scalp, head.eyes).inside_depth[:, None]
    else:
        depth = model.outer_radius - distance
    radius = model.outer_radius - np.maximum(depth, EYE_DEPTH)
    eyes = eyes / distance * radius
    electrodes, coils = placed.electrodes - model.centre, placed.coils - model.centre
    electric = electric_lead_field(electrodes, eyes, model.radii[-1:], model.conductivities[-1:])
    if len(coils) and radius.max() >= np.linalg.norm(coils, axis=1).min():
        eyes = eyes * np.minimum(1.0, EYE_CLIP * model.inner_skull_radius / radius)
    gain = _interleave(placed.is_electrode, electric, magnetic_lead_field(coils, placed.axes, eyes))
    return gain if pickup is None else pickup.combine(gain)


def place_channels(
    model: SphereModel,
    head: Head,
    positions: np.ndarray,
    axes: np.ndarray,
    is_electrode: np.ndarray,
    normals: np.ndarray,
) -> PlacedPoints:
    """Channels that are points, on the spheres; arguments as in `compute_lead_field`."""
    coils = ~is_electrode
    points, turned = map_magnetometers(
        model, head, positions[coils], np.asarray(axes)[coils], np.asarray(normals)[coils]
    )
    return PlacedPoints(is_electrode, map_electrodes(model, positions[is_electrode]), points, turned)


def place_pickup(
    model: SphereModel,
    head: Head,
    positions: np.ndarray,
    normals: np.ndarray,
    placed: PlacedPoints,
    pickup: Pickup,
) -> PlacedPoints:
    """All integration points of channels on the spheres, given their centres there, `placed`; see `compute_lead_field`.

    positions, normals (n, 3): of the channels in the head.
    """
    is_electrode = placed.is_electrode[pickup.channel]
    electrodes = map_electrodes(model, pickup.positions[is_electrode])
    if head.sphere is not None:
        return PlacedPoints(is_electrode, electrodes, pickup.positions[~is_electrode], pickup.axes[~is_electrode])
    outward = placed.coils - model.centre
    outward /= np.linalg.norm(outward, axis=1, keepdims=True)
    coils = ~placed.is_electrode
    owner = (np.cumsum(coils) - 1)[pickup.channel[~is_electrode]]
    turns = smallest_rotations(normals[coils], outward)[owner]
    away = pickup.positions[~is_electrode] - positions[coils][owner]
    points = placed.coils[owner] + np.einsum("pij,pj->pi", turns, away)
    return PlacedPoints(is_electrode, electrodes, points, np.einsum("pij,pj->pi", turns, pickup.axes[~is_electrode]))


def _point_gain(model: SphereModel, placed: PlacedPoints, sources: MappedSources) -> np.ndarray:
    """Gain of each point, for moments in the frame of the spheres."""
    centred = sources.positions - model.centre
    electric = electric_lead_field(
        placed.electrodes - model.centre, centred, model.radii, model.conductivities, moments=sources.normals
    )
    magnetic = magnetic_lead_field(placed.coils - model.centre, placed.axes, centred, moments=sources.normals)
    return _interleave(placed.is_electrode, electric, magnetic)


def _combined_gain(model: SphereModel, points: PlacedPoints, sources: MappedSources, pickup: Pickup) -> np.ndarray:
    """Gain of each channel from that of its points, some channels at a time."""
    per_point = len(sources.positions) * (3 if sources.normals is None else 1)
    edges = pickup.blocks(max(1, POINT_GAIN_AT_ONCE // max(1, per_point)))
    # how many points before each one lie on electrodes
    before = np.concatenate([[0], np.cumsum(points.is_electrode)])
    parts = []
    for first, last in pairwise(edges):
        start, stop = pickup.starts[[first, last]]
        on_scalp = slice(before[start], before[stop])
        off_scalp = slice(start - before[start], stop - before[stop])
        some = PlacedPoints(
            points.is_electrode[start:stop],
            points.electrodes[on_scalp],
            points.coils[off_scalp],
            points.axes[off_scalp],
        )
        parts.append(pickup.combine(_point_gain(model, some, sources), first, last))
    return np.concatenate(parts)


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
