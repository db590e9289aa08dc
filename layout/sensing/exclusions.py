"""Which sensors exclude each other: same place, spacing, footprints; and what is said of housings that would meet."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.spatial import cKDTree
from scipy.spatial.distance import cdist

from layout.brief.objects_stock import HOUSED
from layout.sensing.axis_options import can_be_turned, quarter_turned
from layout.sensing.candidates import Sites
from layout.sensing.footprints import footprints_overlap, near_pairs
from layout.sensing.overlap import boxes_overlap
from layout.sensing.spots import Spots
from layout.sensing.zones import SAME_PLACE


@dataclass(frozen=True)
class Exclusions:
    """What excludes what: symmetric bool tables (n_spots, n_spots) over the spots of all entries, diagonals false."""

    same_place: np.ndarray
    spacing: np.ndarray
    footprint: np.ndarray

    @property
    def any(self) -> np.ndarray:
        """Which spots exclude each other, for whatever reason."""
        return self.same_place | self.spacing | self.footprint

    def take(self, keep: np.ndarray) -> Exclusions:
        """The tables of the spots whose entry in `keep` (n_spots,) bool is true."""
        both = np.ix_(keep, keep)
        return Exclusions(self.same_place[both], self.spacing[both], self.footprint[both])

    def reasons(self, spots: np.ndarray) -> str:
        """Why some of the given spots exclude each other, in the words of the brief."""
        both = np.ix_(spots, spots)
        words = {"spacing_mm": self.spacing, "footprint": self.footprint, "one sensor per place": self.same_place}
        return " and ".join(word for word, table in words.items() if table[both].any())


def spot_exclusions(spots: list[Spots], sites: Sites) -> Exclusions:
    """Exclusions among the spots of all entries.

    Spacing is the straight distance between sensitive centres, and of two entries the larger one counts. Footprints are
    compared where both entries have one; a sensor without takes no room.
    """
    sensors = np.concatenate([part.sensors for part in spots])
    on_scalp = sites.positions[np.concatenate([part.site for part in spots])]
    kind = np.repeat(np.arange(len(spots)), [len(part.site) for part in spots])
    spacing = np.array([part.entry.spacing for part in spots])[kind]
    same = cdist(on_scalp, on_scalp) < SAME_PLACE
    near = cdist(sensors, sensors) < np.maximum.outer(spacing, spacing) - 1e-9
    overlap = np.zeros_like(same)
    footprints = [part.entry.footprint for part in spots]
    if any(one is not None for one in footprints):
        clearances = np.array([part.entry.clearance for part in spots])
        faces = np.concatenate([part.faces for part in spots])
        frames = np.concatenate([part.frames for part in spots])
        pairs = near_pairs(kind, footprints, clearances, faces)
        turned = np.stack([frames[:, 0], frames[:, 2], -frames[:, 1]], axis=1)
        turned = np.where(_turnable(spots)[:, None, None], turned, frames)
        twice = [np.concatenate([one, one]) for one in (kind, faces)]
        meet = np.zeros(len(pairs), dtype=bool)
        for shift in _stances(spots, len(kind)):
            both = footprints_overlap(
                pairs + shift, twice[0], footprints, clearances, twice[1], np.concatenate([frames, turned])
            )
            meet |= both
        pairs = pairs[meet]
        overlap[pairs[:, 0], pairs[:, 1]] = overlap[pairs[:, 1], pairs[:, 0]] = True
    for table in (same, near):
        np.fill_diagonal(table, False)
    return Exclusions(same, near, overlap)


def _turnable(spots: list[Spots]) -> np.ndarray:
    """Whether the choice of axes may turn the housing at each spot (n_spots,)."""
    return np.repeat([can_be_turned(part.entry) for part in spots], [len(part.site) for part in spots])


def _stances(spots: list[Spots], n: int) -> list[np.ndarray]:
    """What to add to pairs of spots (m, 2) for every way that two housings can stand beside each other, where the n
    spots are followed by the same as they stand when turned.
    """
    if not _turnable(spots).any():
        return [np.array([0, 0])]
    return [np.array([first, second]) for first in (0, n) for second in (0, n)]


def housing_notes(spots: list[Spots], sites: Sites, excluded: np.ndarray) -> list[str]:
    """A warning where housings at two places that are allowed together would meet."""
    rows = [(part, i) for part in spots for i in range(len(part.site))]
    housed = np.array([part.entry.kind in HOUSED for part, _ in rows], dtype=bool)
    if housed.sum() < 2:
        return []
    frames = np.concatenate([part.poses for part in spots])
    sizes = np.array([part.entry.housing if part.entry.kind in HOUSED else (0, 0, 0) for part, _ in rows])
    centres = frames[:, :3, 3] + frames[:, :3, 2] * sizes[:, 2:3] / 2
    where = np.flatnonzero(housed)
    reach = np.linalg.norm(sizes, axis=1).max()
    pairs = where[cKDTree(centres[where]).query_pairs(reach, output_type="ndarray")]
    pairs = pairs[~excluded[pairs[:, 0], pairs[:, 1]]]
    if len(pairs) == 0:
        return []
    a, b = pairs.T
    turned = np.where(_turnable(spots)[:, None, None], quarter_turned(frames), frames)
    stands = np.concatenate([frames, turned])
    meet = np.zeros(len(pairs), dtype=bool)
    for shift in _stances(spots, len(frames)):
        meet |= boxes_overlap(stands[a + shift[0]], sizes[a], stands[b + shift[1]], sizes[b])
    pairs = pairs[meet]
    if len(pairs) == 0:
        return []
    sensors = np.concatenate([part.sensors for part in spots])
    distance = np.linalg.norm(sensors[pairs[:, 0]] - sensors[pairs[:, 1]], axis=1)
    order = np.lexsort((pairs[:, 1], pairs[:, 0], distance))
    a, b = pairs[order[0]]
    first, second = (sites.names[rows[row][0].site[rows[row][1]]] for row in (a, b))
    needed = np.ceil(distance.max() * 1e3 * 10) / 10
    return [
        f"housings would meet at {len(pairs)} pairs of sites that may be chosen together "
        f"(nearest: {first} and {second}, "
        f"{distance.min() * 1e3:.1f} mm apart); spacing_mm above {needed:.1f} excludes them all"
    ]
