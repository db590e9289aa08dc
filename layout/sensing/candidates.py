"""Sites, candidates and their channels: what can be chosen, as arrays."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Sites:
    """Places on the scalp, n_sites rows each.

    names; positions (n, 3) [m] on the scalp; normals (n, 3) outward unit; tangents (n, 2, 3): unit, the first towards
    the front as nearly as the scalp allows, the second = normal × first; nearest_name and nearest_offset [m]: nearest
    standard 10-5 position and the straight distance to it; landmark_distance (n, 4) [m]: geodesic distance to NAS,
    LPA, RPA, inion; arc_fractions (n, 2): see anatomy.arcs; the site's identity on other heads. travel_gap (n,) [m]:
    for helmet slots, the gap between scalp and housing that the insertion travel leaves (0 where the housing can
    touch); slot_axes (n, 3): the slot's outward axis, the normal elsewhere.
    """

    names: tuple[str, ...]
    positions: np.ndarray
    normals: np.ndarray
    tangents: np.ndarray
    nearest_name: tuple[str, ...]
    nearest_offset: np.ndarray
    landmark_distance: np.ndarray
    arc_fractions: np.ndarray
    travel_gap: np.ndarray
    slot_axes: np.ndarray

    def __len__(self) -> int:
        return len(self.names)


@dataclass(frozen=True)
class Candidates:
    """Everything that can be chosen.

    Per candidate (n_candidates): kind (index into the brief's stock), site (index into `sites`), axis_name, name
    (unique, for tables). Per channel (n_channels), ordered by candidate: candidate_of_channel, positions (n, 3) [m] of
    the sensitive centre (on the scalp for electrodes), axes (n, 3) unit (zeros for electrodes), is_electrode (n,) bool.
    housing_pose (n_candidates, 4, 4): housing frame to head frame (z outward, origin at the centre of the face),
    identity for electrodes. conflicts: cliques of candidates of which at most one can be chosen (same site, spacing).
    """

    sites: Sites
    kind: np.ndarray
    site: np.ndarray
    axis_name: tuple[str, ...]
    names: tuple[str, ...]
    candidate_of_channel: np.ndarray
    positions: np.ndarray
    axes: np.ndarray
    is_electrode: np.ndarray
    housing_pose: np.ndarray
    cliques: tuple[np.ndarray, ...]
    notes: tuple[str, ...] = ()

    def __len__(self) -> int:
        return len(self.kind)
