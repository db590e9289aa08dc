"""A head's lead fields by boundary elements, for the channels and sources that the quick sphere model also serves.

Nothing is mapped: sources and magnetometers stay where they are in the head; electrodes go to the nearest point of the
model's scalp, some tenths of a millimetre away. Sources that the coarser inner skull leaves outside, or nearer to it
than LEAST_DEPTH, are moved inward to that depth.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np

from layout.anatomy.head import Head
from layout.errors import LayoutError
from layout.physics.boundary_elements import BoundaryModel, Transfer, nearer_than_half_an_edge
from layout.physics.boundary_meshes import boundary_surfaces
from layout.physics.differences import STEP, LeadFieldDerivatives, central_differences
from layout.physics.nearest_point import nearest_on_surface
from layout.units import MM

NODES = 1000  # of each surface, roughly
LEAST_DEPTH = 1 * MM  # of a source under the model's inner skull
LEAST_EYE_DEPTH = 10 * MM  # of an eyeball's centre under the model's scalp
# So far from the outer skull too: a dipole between the two has no closed neighbour to be wrong about at that distance.
LEAST_EYE_GAP = 5 * MM


class PlacedSources(NamedTuple):
    """positions (m, 3) [m] of sources in the model; held (m,) bool: moved inward; near (m,) bool: nearer to the inner
    skull than half an edge of its mesh, where the lead field is least exact.
    """

    positions: np.ndarray
    held: np.ndarray
    near: np.ndarray


@dataclass(frozen=True)
class BoundaryHead:
    """A head and its boundary elements; `boundary_head` makes it."""

    head: Head
    model: BoundaryModel

    def lead_field(
        self,
        positions: np.ndarray,
        axes: np.ndarray,
        is_electrode: np.ndarray,
        sources: np.ndarray,
        normals: np.ndarray | None = None,
    ) -> np.ndarray:
        """Gain (n, m) of dipoles along normals (m, 3) at sources (m, 3) [m], or (n, m, 3) of free ones, head frame.

        Channels (n): positions (n, 3) [m], axes (n, 3) (ignored for electrodes), is_electrode (n,) bool. Rows of
        electrodes [V/(A·m)] have zero mean over the scalp, rows of magnetometers are in T/(A·m). Raises LayoutError for
        a magnetometer inside the scalp.
        """
        return self.read(self.transfers(positions, axes, is_electrode), sources, normals)

    def transfers(self, positions: np.ndarray, axes: np.ndarray, is_electrode: np.ndarray) -> Transfers:
        """What the channels read, ready for any sources: the part of `lead_field` that is worth keeping."""
        is_electrode = np.asarray(is_electrode, bool)
        positions, axes = np.asarray(positions, float).reshape(-1, 3), np.asarray(axes, float).reshape(-1, 3)
        return Transfers(
            is_electrode,
            self.model.potentials_transfer(positions[is_electrode]),
            self.model.field_transfer(positions[~is_electrode], axes[~is_electrode]),
        )

    def read(self, transfers: Transfers, sources: np.ndarray, normals: np.ndarray | None = None) -> np.ndarray:
        """The lead field of prepared channels; see `lead_field`."""
        placed = self.place_sources(sources).positions
        gain = np.empty((len(transfers.is_electrode), len(placed), *(() if normals is not None else (3,))))
        gain[transfers.is_electrode] = self.model.lead_field(transfers.electrodes, placed, normals)
        gain[~transfers.is_electrode] = self.model.lead_field(transfers.magnetometers, placed, normals)
        return gain

    def place_sources(self, sources: np.ndarray) -> PlacedSources:
        """Sources (m, 3) [m], those too near to the model's inner skull or outside it moved inward along its normal."""
        sources = np.asarray(sources, float).reshape(-1, 3)
        inner = self.model.surfaces[0]
        near = nearest_on_surface(inner, sources)
        held = near.inside_depth < LEAST_DEPTH
        # twice: over a convex edge the nearest face may change on the way
        placed = sources
        for _ in range(2):
            short = np.maximum(LEAST_DEPTH - near.inside_depth, 0)
            placed = placed - short[:, None] * near.normals
            near = nearest_on_surface(inner, placed)
        return PlacedSources(placed, held, nearer_than_half_an_edge(inner, placed))

    def electrode_moves(self, positions: np.ndarray) -> np.ndarray:
        """Distance (n,) [m] of electrodes to the model's scalp, where they are read."""
        return np.abs(nearest_on_surface(self.model.surfaces[-1], positions).inside_depth)

    @cached_property
    def eyes(self) -> np.ndarray:
        """Where the eyes (2, 3) [m] stand in the model: in its scalp compartment, in front of the skull.

        At least LEAST_EYE_DEPTH under the scalp, but never nearer to the outer skull than LEAST_EYE_GAP: where the
        template's front has no room for both, halfway.
        """
        eyes = np.asarray(self.head.eyes, float).copy()
        skull, scalp = self.model.surfaces[-2], self.model.surfaces[-1]
        for _ in range(20):
            under, above = nearest_on_surface(scalp, eyes), nearest_on_surface(skull, eyes)
            depth, gap = under.inside_depth[:, None], -above.inside_depth[:, None]
            outward = np.maximum(LEAST_EYE_GAP - gap, 0)
            inward = np.where(outward > 0, 0, np.minimum(np.maximum(LEAST_EYE_DEPTH - depth, 0), gap - LEAST_EYE_GAP))
            if max(outward.max(), inward.max()) < 0.01 * MM:
                return eyes
            eyes += outward * above.normals - inward * under.normals
        return eyes

    def eye_gain(self, positions: np.ndarray, axes: np.ndarray, is_electrode: np.ndarray) -> np.ndarray:
        """Gain (n, 2, 3) of a dipole at each eye, in the scalp compartment: skull and all."""
        transfers = self.transfers(positions, axes, is_electrode)
        gain = np.empty((len(transfers.is_electrode), len(self.eyes), 3))
        gain[transfers.is_electrode] = self.model.lead_field_anywhere(transfers.electrodes, self.eyes)
        gain[~transfers.is_electrode] = self.model.lead_field_anywhere(transfers.magnetometers, self.eyes)
        return gain

    def derivatives(
        self, transfers: Transfers, sources: np.ndarray, moments: np.ndarray, step: float = STEP
    ) -> LeadFieldDerivatives:
        """Gain (n, m, 3) and d(L q)/dr (n, m, 3) at sources (m, 3) [m], moments (m, 3) [A·m].

        Central differences of the dipole terms alone, which are exact in the position; sources nearer to the inner
        skull than LEAST_DEPTH and 2 steps are differentiated there.
        """
        placed = self.place_sources(sources).positions
        near = nearest_on_surface(self.model.surfaces[0], placed)
        moved = placed - np.maximum(LEAST_DEPTH + 2 * step - near.inside_depth, 0)[:, None] * near.normals

        def along(positions: np.ndarray, q: np.ndarray | None = None) -> np.ndarray:
            return self.read(transfers, positions, q)

        return LeadFieldDerivatives(along(placed), central_differences(along, moved, moments, step))


@dataclass(frozen=True)
class Transfers:
    """What n channels read: is_electrode (n,) bool and the transfer of each kind, in the channels' order."""

    is_electrode: np.ndarray
    electrodes: Transfer
    magnetometers: Transfer


def boundary_head(head: Head, conductivities: np.ndarray, nodes: int = NODES) -> BoundaryHead:
    """The head with boundary elements of some `nodes` nodes on each of its three surfaces.

    conductivities [S/m]: brain (all inside the skull), skull, scalp. Raises LayoutError for another number of them, or
    surfaces that cannot be used.
    """
    conductivities = np.asarray(conductivities, float)
    if len(conductivities) != 3:
        raise LayoutError(f"conductivities: boundary elements need 3 (brain, skull, scalp), got {len(conductivities)}")
    return BoundaryHead(head, BoundaryModel(boundary_surfaces(head, nodes), tuple(map(float, conductivities))))
