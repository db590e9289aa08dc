"""Places beside the sensors of a layout, for sliding them along the scalp off the grid of sites."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Head
from layout.anatomy.positions import earlobes
from layout.anatomy.scalp_points import dense_cloud, project
from layout.brief.objects import Brief
from layout.brief.objects_stock import HOUSED
from layout.sensing.assemble import assemble
from layout.sensing.candidates import Candidates
from layout.sensing.exclusions import spot_exclusions
from layout.sensing.ground import clear_of_ground
from layout.sensing.housing import CLOUD_EDGE, Footprint, face_radius
from layout.sensing.lay_out import merge_places
from layout.sensing.selection import only
from layout.sensing.sites import Places
from layout.sensing.spots import lay_spots
from layout.sensing.zones import allowed


@dataclass(frozen=True)
class Slid:
    """Candidates beside the sensors of a layout.

    origin (n_candidates,): which sensor each comes from; step (n_candidates,): row of the steps, 0 for the sensor's own
    place; site_origin (n_sites,): the sensor that each site comes from.
    """

    candidates: Candidates
    origin: np.ndarray
    step: np.ndarray
    site_origin: np.ndarray


class Slider:
    """Lays the sensors of a layout at and around given places; what depends on the head alone is kept."""

    def __init__(self, head: Head, brief: Brief, standard: dict[str, np.ndarray]) -> None:
        self._head, self._brief = head, brief
        self._standard = dict(standard) | earlobes(head.scalp, head.landmarks)
        housed = [entry.kind in HOUSED for entry in brief.stock]
        cloud = dense_cloud(head.scalp, CLOUD_EDGE) if any(housed) else None
        self._footprints = [
            Footprint(cloud, face_radius(entry.housing)) if has else None
            for entry, has in zip(brief.stock, housed, strict=True)
        ]

    def around(
        self, layout: Candidates, chosen: np.ndarray, positions: np.ndarray, steps: np.ndarray, fixed: np.ndarray
    ) -> Slid:
        """The chosen single sensors (k,), now at positions (k, 3) [m], at every step (s, 2) [m] along the scalp's
        tangents from there, the first step being none; those that are `fixed` (k,) bool do not move.

        Places outside the brief's zones, or too near the ground, are left out; each keeps its axis option.
        """
        rows = np.array([(one, step) for one in range(len(chosen)) for step in range(1 if fixed[one] else len(steps))])
        site = layout.site[chosen][rows[:, 0]]
        where = positions[rows[:, 0]] + np.einsum("pk,pkd->pd", steps[rows[:, 1]], layout.sites.tangents[site])
        moving = rows[:, 1] > 0
        if moving.any():
            where[moving] = project(self._head.scalp, where[moving]).positions
        name_of = [f"{layout.sites.names[at]}~{one}~{step}" for at, (one, step) in zip(site, rows, strict=True)]
        kind = layout.kind[chosen][rows[:, 0]]
        usable = []
        for index, entry in enumerate(self._brief.stock):
            mine = np.flatnonzero(kind == index)
            fine, _ = allowed(
                self._head,
                self._brief.places,
                entry,
                where[mine],
                self._standard,
                f"stock[{index}]",
                tuple(name_of[one] for one in mine),
            )
            mine = mine[fine | (rows[mine, 1] == 0)]
            usable.append(self._places(layout, chosen, where, rows, name_of, mine))
        sites, site_of = merge_places(self._head, self._brief, usable, self._standard)
        spots = [
            lay_spots(entry, places, sites, row, footprint)
            for entry, places, row, footprint in zip(self._brief.stock, usable, site_of, self._footprints, strict=True)
        ]
        if layout.ground is not None:
            free = clear_of_ground(self._brief, layout.ground, spots, sites)
            spots = [part.take(mask) for part, mask in zip(spots, free, strict=True)]
        candidates = assemble(self._head, sites, spots, spot_exclusions(spots, sites), ())
        numbers = np.array([(int(name.split("~")[1]), int(name.split("~")[2])) for name in sites.names])
        origin, step = numbers[candidates.site].T
        wanted = np.array(layout.axis_name, dtype=object)[chosen][origin] == np.array(
            candidates.axis_name, dtype=object
        )
        return Slid(only(candidates, wanted), origin[wanted], step[wanted], numbers[:, 0])

    @staticmethod
    def _places(
        layout: Candidates, chosen: np.ndarray, where: np.ndarray, rows: np.ndarray, names: list[str], mine: np.ndarray
    ) -> Places:
        """The places (n,) of one stock entry; sensors in slots keep their slot's axis and gap."""
        sites, site = layout.sites, layout.site[chosen][rows[mine, 0]]
        slotted = bool(len(mine)) and bool((np.abs(sites.slot_axes[site] - sites.normals[site]) > 1e-9).any())
        return Places(
            tuple(names[one] for one in mine),
            where[mine],
            sites.slot_axes[site] if slotted else None,
            sites.travel_gap[site] if slotted else None,
        )
