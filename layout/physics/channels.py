"""Channels on a head and their lead field, in the form that noise and design ask for."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np
from scipy.spatial.transform import Rotation

from layout.anatomy.head import Head
from layout.physics.boundary_cortex import BoundaryCortex
from layout.physics.lead_field import (
    LeadField,
    PlacedPoints,
    compute_lead_field,
    eye_field,
    moved_onto_spheres,
    place_channels,
    place_pickup,
)
from layout.physics.sphere_model import Displacements, MappedCortex, SphereModel, map_sources
from layout.sensing.candidates import Candidates
from layout.sensing.pickup import Pickup, point_pickup

CortexModel = MappedCortex | BoundaryCortex  # a head's cortex in the physical model that reads it


@dataclass(frozen=True)
class Channels:
    """n channels in the head frame: positions (n, 3) [m], unit axes (n, 3) (zeros: electrodes), is_electrode (n,),
    normals (n, 3) of the scalp at their site.

    pickup: the points of which each channel is a weighted sum, its position being their centre (axial gradiometers:
    that of the near coil); None where every channel is a point. Whatever is linear in the field is computed for
    `points` and then combined: combine(f(points)), for a lead field, a matrix on the sensors' side or a noise source.
    """

    positions: np.ndarray
    axes: np.ndarray
    is_electrode: np.ndarray
    normals: np.ndarray
    pickup: Pickup | None = None

    def __len__(self) -> int:
        return len(self.positions)

    @property
    def points(self) -> Channels:
        """The integration points of all channels, each as a channel of its own."""
        if self.pickup is None:
            return self
        owner = self.pickup.channel
        return Channels(self.pickup.positions, self.pickup.axes, self.is_electrode[owner], self.normals[owner])

    def combine(self, rows: np.ndarray) -> np.ndarray:
        """Readings (n, ...) of the channels from those of their `points` (n_points, ...)."""
        return rows if self.pickup is None else self.pickup.combine(rows)

    def moved(self, positions: np.ndarray, turns: np.ndarray, normals: np.ndarray) -> Channels:
        """The channels as rigid bodies at other positions (n, 3) [m], turned there about their own rotation vectors
        turns (n, 3) [rad]; normals (n, 3): of the scalp there.
        """
        rotations = Rotation.from_rotvec(turns).as_matrix()
        axes, pickup = np.einsum("nij,nj->ni", rotations, self.axes), self.pickup
        if pickup is not None:
            owner = pickup.channel
            away = np.einsum("pij,pj->pi", rotations[owner], pickup.positions - self.positions[owner])
            turned = np.einsum("pij,pj->pi", rotations[owner], pickup.axes)
            pickup = replace(pickup, positions=positions[owner] + away, axes=turned)
        return Channels(positions, axes, self.is_electrode, normals, pickup)

    def on_spheres(self, sphere: SphereModel, head: Head) -> PlacedPoints:
        """All integration points as the quick model places them."""
        placed = place_channels(sphere, head, self.positions, self.axes, self.is_electrode, self.normals)
        if self.pickup is None:
            return placed
        return place_pickup(sphere, head, self.positions, self.normals, placed, self.pickup)

    def lead_field(self, cortex: CortexModel, sources: np.ndarray, free: bool) -> LeadField:
        """Lead field to the numbered sources of the cortex, along their normals or free."""
        if isinstance(cortex, BoundaryCortex):
            points = self.points
            gain = cortex.gain(points.positions, points.axes, points.is_electrode, sources, free)
            return LeadField(self.combine(gain), self.displacements(cortex))
        return compute_lead_field(
            cortex.sphere,
            cortex.head,
            self.positions,
            self.axes,
            self.is_electrode,
            self.normals,
            cortex.sources.some(sources, free),
            self.pickup,
        )

    def lead_field_at(self, cortex: CortexModel, positions: np.ndarray, normals: np.ndarray | None) -> np.ndarray:
        """Gain (n, m) along normals (m, 3), or (n, m, 3) of free moments, to sources (m, 3) [m] in the brain."""
        if isinstance(cortex, BoundaryCortex):
            points = self.points
            return self.combine(cortex.gain_at(points.positions, points.axes, points.is_electrode, positions, normals))
        sources = map_sources(cortex.sphere, cortex.head, positions, normals)
        return compute_lead_field(
            cortex.sphere,
            cortex.head,
            self.positions,
            self.axes,
            self.is_electrode,
            self.normals,
            sources,
            self.pickup,
        ).gain

    def displacements(self, cortex: CortexModel) -> Displacements:
        """How far the model moves these channels and the whole cortex."""
        if isinstance(cortex, BoundaryCortex):
            return cortex.displacements(self.positions, self.is_electrode)
        return moved_onto_spheres(
            cortex.sphere,
            cortex.head,
            self.positions,
            self.axes,
            self.is_electrode,
            self.normals,
            cortex.sources,
        )

    def eye_gain(self, cortex: CortexModel) -> np.ndarray:
        """Gain (n, 2, 3) [V or T per A·m] to a free dipole at each eye."""
        if isinstance(cortex, BoundaryCortex):
            points = self.points
            return self.combine(cortex.boundary.eye_gain(points.positions, points.axes, points.is_electrode))
        return eye_field(
            cortex.sphere, cortex.head, self.positions, self.axes, self.is_electrode, self.normals, self.pickup
        )


def candidate_channels(candidates: Candidates) -> Channels:
    """The channels of all candidates."""
    normals = candidates.sites.normals[candidates.site_of_channel]
    return Channels(candidates.positions, candidates.axes, candidates.is_electrode, normals, candidates.pickup)


def electrodes_at(positions: np.ndarray) -> Channels:
    """One electrode at each scalp point (n, 3) [m]."""
    nothing = np.zeros_like(positions)
    return Channels(positions, nothing, np.ones(len(positions), dtype=bool), nothing)


def normal_magnetometers_above(positions: np.ndarray, normals: np.ndarray, gap: float) -> Channels:
    """One magnetometer along the scalp normal, `gap` [m] above each scalp point (n, 3) [m]."""
    return Channels(positions + gap * normals, normals, np.zeros(len(positions), dtype=bool), normals)


def joined(*parts: Channels) -> Channels:
    """The channels of all parts, one after the other."""
    arrays = ("positions", "axes", "is_electrode", "normals")
    together = Channels(*(np.concatenate([getattr(part, name) for part in parts]) for name in arrays))
    if all(part.pickup is None for part in parts):
        return together
    pickups = [part.pickup or point_pickup(part.positions, part.axes) for part in parts]
    first = np.cumsum([0, *(len(part) for part in parts[:-1])])
    shifted = [replace(pickup, channel=pickup.channel + start) for pickup, start in zip(pickups, first, strict=True)]
    columns = (np.concatenate([getattr(one, field.name) for one in shifted]) for field in fields(Pickup))
    return replace(together, pickup=Pickup(*columns))
