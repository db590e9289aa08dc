"""Channels on a head and their lead field, in the form that noise and design ask for."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Head
from layout.physics.lead_field import LeadField, compute_lead_field, eye_field, moved_onto_spheres
from layout.physics.sphere_model import Displacements, MappedCortex, SphereModel
from layout.sensing.candidates import Candidates


@dataclass(frozen=True)
class Channels:
    """n channels in the head frame: positions (n, 3) [m], unit axes (n, 3) (zeros: electrodes), is_electrode (n,),
    normals (n, 3) of the scalp at their site."""

    positions: np.ndarray
    axes: np.ndarray
    is_electrode: np.ndarray
    normals: np.ndarray

    def __len__(self) -> int:
        return len(self.positions)

    def lead_field(self, cortex: MappedCortex, sources: np.ndarray, free: bool) -> LeadField:
        """Lead field to the numbered sources of the cortex, along their normals or free."""
        return compute_lead_field(
            cortex.sphere,
            cortex.head,
            self.positions,
            self.axes,
            self.is_electrode,
            self.normals,
            cortex.sources.some(sources, free),
        )

    def displacements(self, cortex: MappedCortex) -> Displacements:
        """How far the quick model moves these channels and the whole cortex."""
        return moved_onto_spheres(
            cortex.sphere,
            cortex.head,
            self.positions,
            self.axes,
            self.is_electrode,
            self.normals,
            cortex.sources,
        )

    def eye_gain(self, sphere: SphereModel, head: Head) -> np.ndarray:
        """Gain (n, 2, 3) [V or T per A·m] to a free dipole at each eye."""
        return eye_field(sphere, head, self.positions, self.axes, self.is_electrode, self.normals)


def candidate_channels(candidates: Candidates) -> Channels:
    """The channels of all candidates."""
    normals = candidates.sites.normals[candidates.site[candidates.candidate_of_channel]]
    return Channels(candidates.positions, candidates.axes, candidates.is_electrode, normals)


def electrodes_at(positions: np.ndarray) -> Channels:
    """One electrode at each scalp point (n, 3) [m]."""
    nothing = np.zeros_like(positions)
    return Channels(positions, nothing, np.ones(len(positions), dtype=bool), nothing)


def normal_magnetometers_above(positions: np.ndarray, normals: np.ndarray, gap: float) -> Channels:
    """One magnetometer along the scalp normal, `gap` [m] above each scalp point (n, 3) [m]."""
    return Channels(positions + gap * normals, normals, np.zeros(len(positions), dtype=bool), normals)


def joined(*parts: Channels) -> Channels:
    """The channels of all parts, one after the other."""
    return Channels(*(np.concatenate([vars(part)[name] for part in parts]) for name in vars(parts[0])))
