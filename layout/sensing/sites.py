"""From a brief's `sites` to places on the scalp with everything that is told about them."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.arcs import arc_fractions
from layout.anatomy.geodesics import great_circle_distances, landmark_distances
from layout.anatomy.head import Head
from layout.anatomy.positions import EARLOBE_NOTE, family_names
from layout.anatomy.scalp_points import first_hit, normals_at, project, tangents_at
from layout.brief.objects_stock import StockBrief
from layout.errors import FileError
from layout.sensing.candidates import Sites
from layout.sensing.electrodes_file import read_electrodes
from layout.sensing.grid import even_grid
from layout.sensing.housing import Footprint
from layout.sensing.slots import read_slots

FARTHEST_OFF_SCALP = 30e-3  # [m] a listed position farther off is an error of frame or units
_GRID_BOTTOM = -62e-3  # [m] z; the scalp below is always in the neck zone


@dataclass(frozen=True)
class Places:
    """Sites of one stock entry before zones: names, positions (n, 3) [m] on the scalp, and for helmet slots
    the outward axes (n, 3) and travel gaps (n,) [m] (None elsewhere).
    """

    names: tuple[str, ...]
    positions: np.ndarray
    slot_axes: np.ndarray | None = None
    travel_gap: np.ndarray | None = None
    notes: tuple[str, ...] = ()

    def take(self, keep: np.ndarray) -> Places:
        """The places whose entry in `keep` (n,) bool is true."""
        return Places(
            tuple(name for name, kept in zip(self.names, keep, strict=True) if kept),
            self.positions[keep],
            None if self.slot_axes is None else self.slot_axes[keep],
            None if self.travel_gap is None else self.travel_gap[keep],
            self.notes,
        )


def find_places(
    head: Head,
    entry: StockBrief,
    standard: dict[str, np.ndarray],
    footprint: Footprint | None,
) -> Places:
    """All places of a stock entry, zones not yet applied.

    standard: the 10-5 positions and A1, A2. footprint: of the entry's housing, None for electrodes. Raises
    FileError for a damaged table, a listed position more than 30 mm off the scalp, a slot that points past
    the scalp or starts inside it.
    """
    sites = entry.sites
    if sites.family is not None:
        names = family_names(sites.family)
        notes = (EARLOBE_NOTE,) if "A1" in names else ()
        return Places(names, np.array([standard[name] for name in names]), notes=notes)
    if sites.grid_pitch is not None:
        positions = even_grid(head.scalp, sites.grid_pitch, bottom=_GRID_BOTTOM)
        return Places(tuple(f"S{i:03d}" for i in range(1, len(positions) + 1)), positions)
    if sites.electrodes_tsv is not None:
        return _listed_places(head, sites.electrodes_tsv)
    hair = 0.0 if entry.kind == "electrode" else entry.hair
    return _slot_places(head, sites.slots_csv, footprint, hair)


def describe(
    head: Head,
    names: tuple[str, ...],
    positions: np.ndarray,
    standard: dict[str, np.ndarray],
    slot_axes: np.ndarray,
    travel_gap: np.ndarray,
) -> Sites:
    """Sites with normals, tangents, nearest standard position, landmark distances and arc fractions.

    positions (n, 3) [m] on the scalp; slot_axes (n, 3), nan rows where there is no slot; travel_gap (n,) [m].
    """
    where = project(head.scalp, positions)
    normals = normals_at(head.scalp, where)
    # A1 and A2 only stand for earlobes: they are no scalp positions to name a site after.
    labels = [name for name in standard if name not in ("A1", "A2")]
    offset, nearest = cKDTree(np.array([standard[name] for name in labels])).query(where.positions)
    return Sites(
        names=names,
        positions=where.positions,
        normals=normals,
        tangents=tangents_at(normals),
        nearest_name=tuple(labels[i] for i in nearest),
        nearest_offset=np.where(offset < 1e-9, 0.0, offset),
        landmark_distance=_landmark_distances(head, where.positions),
        arc_fractions=arc_fractions(head.scalp, head.landmarks, where.positions),
        travel_gap=travel_gap,
        slot_axes=np.where(np.isnan(slot_axes), normals, slot_axes),
    )


def _landmark_distances(head: Head, points: np.ndarray) -> np.ndarray:
    if head.sphere is not None:
        return great_circle_distances(head.sphere[0], head.landmarks, points)
    return landmark_distances(head.scalp, head.landmarks, points)


def _listed_places(head: Head, path: Path) -> Places:
    names, points = read_electrodes(path)
    on_scalp = project(head.scalp, points).positions
    off = np.linalg.norm(on_scalp - points, axis=1)
    worst = int(np.argmax(off))
    if off[worst] > FARTHEST_OFF_SCALP:
        raise FileError(
            f"{path}: positions must lie within 30 mm of the scalp (head frame; mm unless the "
            f"coordinate-system file says otherwise), but {names[worst]!r} is {off[worst] * 1e3:.0f} mm off"
        )
    note = (
        f"{path.name}: positions moved onto the scalp by {off.mean() * 1e3:.1f} mm on average, "
        f"{off[worst] * 1e3:.1f} at most"
    )
    return Places(names, on_scalp, notes=(note,))


def _slot_places(head: Head, path: Path, footprint: Footprint | None, hair: float) -> Places:
    slots = read_slots(path)
    hits = first_hit(head.scalp, slots.faces, -slots.axes)
    missed = np.isnan(hits).any(axis=1)
    if missed.any():
        name = slots.names[int(np.argmax(missed))]
        raise FileError(
            f"{path}: a slot's axis must meet the scalp inwards from its face, but that of {name!r} misses it"
        )
    height = np.einsum("nd,nd->n", slots.faces - hits, slots.axes)
    touching = hair + (0.0 if footprint is None else footprint.clearance(hits, slots.axes))
    # A ray from a face inside the head leaves it on the far side: its axis then points inwards there.
    inside = np.einsum("nd,nd->n", normals_at(head.scalp, project(head.scalp, hits)), slots.axes) <= 0
    bad = inside | (height < touching - 1e-6)
    if bad.any():
        name = slots.names[int(np.argmax(bad))]
        raise FileError(
            f"{path}: a fully withdrawn housing must stand clear of the scalp (and hair), "
            f"but slot {name!r} starts inside"
        )
    return Places(slots.names, hits, slots.axes, np.maximum(height - slots.travel - touching, 0.0))
