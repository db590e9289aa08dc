"""A head's whole cortex in its boundary elements: the counterpart of `sphere_model.MappedCortex`."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from layout.anatomy.head import Head
from layout.physics.boundary_cache import load_or_compute
from layout.physics.boundary_elements import SOURCES_AT_ONCE, primary_field
from layout.physics.boundary_integrals import dipole_terms
from layout.physics.boundary_model import NODES, BoundaryHead, PlacedSources, Transfers, boundary_head
from layout.physics.differences import LeadFieldDerivatives
from layout.physics.sphere_model import Displacements

REMEMBERED = 4  # sets of channels whose transfers are kept: the cortex is read in pieces


@dataclass(frozen=True)
class BoundaryCortex:
    """A head, its conductivities [S/m] (brain, skull, scalp) and the nodes wanted of each surface."""

    head: Head
    conductivities: np.ndarray
    nodes: int = NODES
    _transfers: dict[str, Transfers] = field(default_factory=dict, compare=False, repr=False)

    @cached_property
    def boundary(self) -> BoundaryHead:
        """The solved boundary elements; from the cache where they were solved before."""
        return boundary_head(self.head, self.conductivities, self.nodes)

    @cached_property
    def placed(self) -> PlacedSources:
        """The cortex's sources in the model."""
        return self.boundary.place_sources(self.head.cortex.positions)

    @cached_property
    def terms(self) -> np.ndarray:
        """What each source along its normal gives the inner skull's nodes (n_nodes, n_sources); whatever conducts.

        From the cache where they were computed before: they are most of the work, and every set of channels needs them.
        """
        surface = self.boundary.model.surfaces[0]
        placed, normals = self.placed.positions, self.head.cortex.normals

        def compute() -> np.ndarray:
            elements = self.boundary.model.elements[0]
            out = np.empty((len(surface.vertices), len(placed)))
            for first in range(0, len(placed), SOURCES_AT_ONCE):
                part = slice(first, first + SOURCES_AT_ONCE)
                out[:, part] = np.einsum("mnj,mj->nm", dipole_terms(placed[part], elements), normals[part])
            return out

        return load_or_compute((surface.vertices, surface.faces, placed, normals), compute)

    def with_conductivities(self, conductivities: np.ndarray) -> BoundaryCortex:
        """The same surfaces with other conductivities [S/m]."""
        return replace(self, conductivities=np.asarray(conductivities, float), _transfers={})

    def gain(
        self, positions: np.ndarray, axes: np.ndarray, is_electrode: np.ndarray, members: np.ndarray, free: bool
    ) -> np.ndarray:
        """Gain (n, m) along the normals, or (n, m, 3) free, of point channels (n) to the numbered sources (m)."""
        if free:
            return self.gain_at(positions, axes, is_electrode, self.head.cortex.positions[members], None)
        transfers = self._read_by(positions, axes, is_electrode)
        placed, normals = self.placed.positions[members], self.head.cortex.normals[members]
        terms = self.terms[:, members]
        gain = np.empty((len(is_electrode), len(members)))
        gain[is_electrode] = transfers.electrodes.inside @ terms
        coils = transfers.magnetometers
        gain[~is_electrode] = coils.inside @ terms + primary_field(coils.points, coils.axes, placed, normals)
        return gain

    def gain_at(
        self,
        positions: np.ndarray,
        axes: np.ndarray,
        is_electrode: np.ndarray,
        sources: np.ndarray,
        normals: np.ndarray | None,
    ) -> np.ndarray:
        """The same for sources (m, 3) [m] anywhere in the brain; normals (m, 3), None for free moments."""
        return self.boundary.read(self._read_by(positions, axes, is_electrode), sources, normals)

    def derivatives(
        self,
        positions: np.ndarray,
        axes: np.ndarray,
        is_electrode: np.ndarray,
        members: np.ndarray,
        moments: np.ndarray,
    ) -> LeadFieldDerivatives:
        """Gain and its derivatives of point channels at the numbered sources, moments (m, 3) [A·m]."""
        transfers = self._read_by(positions, axes, is_electrode)
        return self.boundary.derivatives(transfers, self.head.cortex.positions[members], moments)

    def displacements(self, positions: np.ndarray, is_electrode: np.ndarray) -> Displacements:
        """How far electrodes and sources are moved; magnetometers stay."""
        moved = np.linalg.norm(self.placed.positions - self.head.cortex.positions, axis=1)
        away = self.boundary.electrode_moves(positions[is_electrode]) if is_electrode.any() else np.zeros(1)
        return Displacements(
            _rms(moved), float(moved.max()), _rms(away), float(away.max()), 0.0, 0.0, int(self.placed.held.sum())
        )

    def note(self) -> str:
        """What to know about the model, in one sentence."""
        nodes = [len(surface.vertices) for surface in self.boundary.model.surfaces]
        near = 100.0 * self.placed.near.mean()
        return (
            f"Boundary elements of {', '.join(map(str, nodes))} nodes (inner skull, outer skull, scalp): {near:.0f} % "
            "of the cortex lies nearer to the inner skull than half an edge of its mesh, where fields are least exact"
        )

    def _read_by(self, positions: np.ndarray, axes: np.ndarray, is_electrode: np.ndarray) -> Transfers:
        digest = hashlib.sha256()
        for array in (positions, axes, is_electrode):
            digest.update(np.ascontiguousarray(array).data)
        key = digest.hexdigest()
        if key not in self._transfers:
            while len(self._transfers) >= REMEMBERED:
                self._transfers.pop(next(iter(self._transfers)))
            self._transfers[key] = self.boundary.transfers(positions, axes, is_electrode)
        return self._transfers[key]


def _rms(distances: np.ndarray) -> float:
    return float(np.sqrt((distances**2).mean())) if len(distances) else 0.0
