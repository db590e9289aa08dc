"""Sites, candidates and their channels: what can be chosen, as arrays."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.sensing.pickup import Pickup


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
    baselines (n_channels, 3) [m]: of gradiometers, from the coil that counts negative to the one that counts positive,
    zeros elsewhere; None without gradiometers. pickup: see there; None where every channel is a single point.
    clique_names: what each clique stands for, for messages. free_axes (n_candidates,): how many axes of the sensor may
    point anywhere (1 or 2; 0: its axes are fixed); its channels are then the three components along normal, tangent 1
    and tangent 2. tilt_limit (n_candidates,) [rad]: the most that a free axis may lean from the normal, inf for any.
    pairs: what was joined into these candidates, None where each is one sensor. ground: the one site that carries the
    ground, None without one.
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
    baselines: np.ndarray | None = None
    pickup: Pickup | None = None
    clique_names: tuple[str, ...] = ()
    free_axes: np.ndarray | None = None
    tilt_limit: np.ndarray | None = None
    pairs: Pairs | None = None
    ground: Sites | None = None

    def __len__(self) -> int:
        return len(self.kind)

    @property
    def singles(self) -> Candidates:
        """One candidate per sensor: these, or what they were joined from."""
        return self if self.pairs is None else self.pairs.singles

    @property
    def sensors(self) -> np.ndarray:
        """Sensors that each candidate brings (n_candidates,): 1, or 2 for a left-right pair."""
        return np.ones(len(self), dtype=int) if self.pairs is None else (self.pairs.members >= 0).sum(axis=1)

    @property
    def site_of_channel(self) -> np.ndarray:
        """Row of `sites` under each channel (n_channels,)."""
        if self.pairs is None:
            return self.site[self.candidate_of_channel]
        return self.pairs.singles.site_of_channel[self.pairs.rows]

    def single_sensors(self, chosen: np.ndarray | tuple[int, ...]) -> np.ndarray:
        """The chosen candidates as numbers of `singles`, those of a pair one after the other."""
        chosen = np.asarray(chosen, dtype=int)
        if self.pairs is None:
            return chosen
        members = self.pairs.members[chosen].ravel()
        return members[members >= 0]

    def holding(self, single: int) -> int | None:
        """The candidate that brings this one of `singles`; None where a left-right pair could not be made of it."""
        if self.pairs is None:
            return single
        found = np.flatnonzero((self.pairs.members == single).any(axis=1))
        return int(found[0]) if len(found) else None


@dataclass(frozen=True)
class Pairs:
    """How left-right pairs were joined.

    singles: one candidate per sensor. members (n_candidates, 2): the singles of each joined candidate, the second -1 on
    the midline. rows (n_channels,): row of each channel among those of the singles.
    """

    singles: Candidates
    members: np.ndarray
    rows: np.ndarray
