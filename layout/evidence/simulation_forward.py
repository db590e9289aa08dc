"""The whitened lead field of a layout's channels at any place in the brain, for fits that leave the grid."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout.evidence.dipole_fit import Forward
from layout.evidence.simulation_boundary import STEP, boundary_forward
from layout.physics.boundary_cortex import BoundaryCortex
from layout.physics.boundary_model import LEAST_DEPTH
from layout.physics.channels import Channels, CortexModel
from layout.physics.derivatives import lead_field_derivatives
from layout.physics.differences import LeadFieldDerivatives
from layout.physics.nearest_point import nearest_on_surface
from layout.physics.sphere_model import map_sources
from layout.units import MM

UNDER_SURFACE = 1 * MM  # of a fitted dipole under the brain's sphere


def some_channels(channels: Channels, rows: np.ndarray) -> Channels:
    """The numbered channels (k,), in that order, with their integration points."""
    pickup = channels.pickup
    if pickup is not None:
        spans = [np.arange(*pickup.starts[[row, row + 1]]) for row in rows]
        points = np.concatenate([*spans, np.zeros(0, dtype=int)])
        owner = np.repeat(np.arange(len(rows)), [len(span) for span in spans])
        pickup = replace(
            pickup,
            positions=pickup.positions[points],
            axes=pickup.axes[points],
            weights=pickup.weights[points],
            channel=owner,
        )
    arrays = (getattr(channels, name)[rows] for name in ("positions", "axes", "is_electrode", "normals"))
    return Channels(*arrays, pickup)


def forward_of(channels: Channels, cortex: CortexModel, whitener: np.ndarray) -> Forward:
    """The forward model of the channels, its rows whitened by `whitener` (n_rows, n_channels).

    Boundary elements are read by `BoundaryForward`, which trusts that places are in the brain, as `hold` has them.
    """
    if isinstance(cortex, BoundaryCortex):
        quick = boundary_forward(channels, cortex, whitener)
        return Forward(quick.gain, quick.slopes, lambda places: held_inside(cortex, places))

    def whitened(rows: np.ndarray) -> np.ndarray:
        return (whitener @ rows.reshape(len(rows), -1)).reshape(len(whitener), *rows.shape[1:])

    def gain(places: np.ndarray) -> np.ndarray:
        return whitened(channels.lead_field_at(cortex, places, None))

    def slopes(places: np.ndarray, moments: np.ndarray, gain_there: np.ndarray) -> np.ndarray:
        return whitened(fields_at(channels, cortex, places, moments).slopes)

    return Forward(gain, slopes, lambda places: held_inside(cortex, places))


def fields_at(channels: Channels, cortex: CortexModel, places: np.ndarray, moments: np.ndarray) -> LeadFieldDerivatives:
    """Gain and accurate slopes of the channels for moments (m, 3) [A·m] at places (m, 3) [m] from `held_inside`."""
    if isinstance(cortex, BoundaryCortex):
        return boundary_forward(channels, cortex, np.eye(len(channels))).derivatives(places, moments)
    moved = replace(cortex, sources=map_sources(cortex.sphere, cortex.head, places, None))
    return lead_field_derivatives(channels, moved, np.arange(len(places)), moments)


def fields_on(channels: Channels, cortex: CortexModel, grid: np.ndarray | None) -> np.ndarray:
    """Gain (n, m, 3) of the channels on a grid (m, 3) [m] from `volume_grid`, or of all sources of the cortex."""
    if isinstance(cortex, BoundaryCortex):
        places = cortex.placed.positions if grid is None else grid
        return boundary_forward(channels, cortex, np.eye(len(channels))).gain(places)
    return channels.lead_field_at(cortex, cortex.head.cortex.positions if grid is None else grid, None)


def held_inside(cortex: CortexModel, places: np.ndarray) -> np.ndarray:
    """The places (n, 3) [m], those outside the brain or too near to its surface for the model moved inward."""
    head = cortex.head
    if head.sphere is not None:
        away = places - cortex.sphere.centre
        distance = np.linalg.norm(away, axis=1, keepdims=True)
        most = cortex.sphere.brain_radius - UNDER_SURFACE
        return cortex.sphere.centre + away * np.minimum(1.0, most / np.maximum(distance, most))
    if isinstance(cortex, BoundaryCortex):
        surface, least = cortex.boundary.model.surfaces[0], LEAST_DEPTH + 2 * STEP
    else:
        surface = head.inner_skull
        least = cortex.sphere.inner_skull_radius - cortex.sphere.brain_radius + UNDER_SURFACE
    for _ in range(2):  # over a convex edge the nearest face may change on the way
        near = nearest_on_surface(surface, places)
        places = places - np.maximum(least - near.inside_depth, 0.0)[:, None] * near.normals
    return places


def volume_grid(cortex: CortexModel, spacing: float) -> np.ndarray:
    """A cubic lattice (m, 3) [m] of that spacing through the whole of the brain."""
    corners = cortex.head.inner_skull.vertices
    axes = [np.arange(low, high, spacing) for low, high in zip(corners.min(axis=0), corners.max(axis=0), strict=True)]
    points = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)
    held = held_inside(cortex, points)
    return points[np.linalg.norm(held - points, axis=1) < 1e-9]
