"""The stock at its sites: where each sensor ends up and how it stands."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from layout.anatomy.scalp_points import tangents_at
from layout.brief.objects_stock import StockBrief
from layout.sensing.candidates import Sites
from layout.sensing.housing import Footprint, poses, rest_in_slots, rest_on_scalp
from layout.sensing.sites import Places


@dataclass(frozen=True)
class Spots:
    """One stock entry at its sites, n_spots rows.

    site: row of the sites; sensors (n, 3) [m]: sensitive centres; frames (n, 3, 3): rows normal, tangent 1, tangent 2;
    faces (n, 3) [m]: where the sensor meets the scalp or hair, the middle of its footprint; poses (n, 4, 4) of the
    housings, identity for electrodes.
    """

    entry: StockBrief
    site: np.ndarray
    sensors: np.ndarray
    frames: np.ndarray
    faces: np.ndarray
    poses: np.ndarray

    def take(self, keep: np.ndarray) -> Spots:
        """The spots whose entry in `keep` (n,) bool is true."""
        rows = ("site", "sensors", "frames", "faces", "poses")
        return replace(self, **{name: getattr(self, name)[keep] for name in rows})


def lay_spots(entry: StockBrief, places: Places, sites: Sites, rows: np.ndarray, footprint: Footprint | None) -> Spots:
    """The entry at the given rows of the sites: electrodes on the scalp, others `standoff` above their housing's face.

    footprint: the scalp under the housing, None for electrodes.
    """
    positions = sites.positions[rows]
    if footprint is None:
        identity = np.tile(np.eye(4), (len(rows), 1, 1))
        frames = np.concatenate([sites.normals[rows][:, None], sites.tangents[rows]], axis=1)
        return Spots(entry, rows, positions, frames, positions, identity)
    if places.slot_axes is None:
        rest = rest_on_scalp(footprint, positions, entry.hair)
    else:
        rest = rest_in_slots(footprint, positions, places.slot_axes, sites.travel_gap[rows], entry.hair)
    frames = np.concatenate([rest.axes[:, None], tangents_at(rest.axes)], axis=1)
    return Spots(entry, rows, rest.faces + entry.standoff * rest.axes, frames, rest.faces, poses(rest))
