"""Regions of interest: which sources are inside, by how much of their area, and the strength expected of each."""

from __future__ import annotations

import numpy as np

from layout.anatomy.cortex_distance import distances_along_cortex
from layout.anatomy.frame import apply
from layout.anatomy.head import Head, Region
from layout.anatomy.region_files import SIDES, shares_from_files, to_head_frame
from layout.brief.objects import RegionBrief
from layout.errors import BriefError
from layout.units import MM


def select_region(head: Head, brief: RegionBrief) -> Region:
    """The cortex a brief means, on the side asked for.

    A ball has a radius in the head's own size, straight or along the cortex from the source nearest to its centre. A
    source at the rim of a ball counts with the part of its area that lies inside, taken as a square cut across by the
    ball's surface: with sources simply in or out, a finer mesh would change the region by whole sources. Of labels,
    vertex lists, masks and parcels a source has the share of its area that they cover.

    Raises BriefError where a frame is asked for that the head does not have, where cortical normals are asked of a head
    without them, where a file does not fit the head's cortex, or where no source lies inside; FileError for a damaged
    file.
    """
    where = f'regions "{brief.name}"'
    if not head.normal_orientation and brief.orientation == "normal":
        raise BriefError(
            f'{where}: orientation must be "free" on a {head.name} head, which has no cortical normals, not "normal".'
        )
    eligible = np.isin(head.cortex.side, SIDES[brief.side])
    if brief.centre is not None:
        centre = apply(to_head_frame(head, brief.frame, where), np.array(brief.centre, dtype=float))
        inside = _in_ball(head, brief, centre, eligible, where)
    else:
        inside = np.where(eligible, shares_from_files(head, brief, where), 0.0)
        if not (inside > 0).any():
            raise BriefError(f"{where}: must cover cortex on {_side(brief)}, but it covers none.")
        centre = np.average(head.cortex.positions, axis=0, weights=inside * head.cortex.areas)
    members = np.flatnonzero(inside > 0)
    return Region(
        name=brief.name,
        members=members,
        areas=(inside * head.cortex.areas)[members],
        moment=brief.moment,
        coherent=brief.coherent,
        free_orientation=brief.orientation == "free",
        centre=centre,
    )


def _in_ball(head: Head, brief: RegionBrief, centre: np.ndarray, eligible: np.ndarray, where: str) -> np.ndarray:
    """Share (n_sources,) of each source's area inside the ball."""
    straight = np.where(eligible, np.linalg.norm(head.cortex.positions - centre, axis=1), np.inf)
    nearest = int(np.argmin(straight))
    if straight[nearest] > brief.radius:
        raise BriefError(
            f"{where}: radius_mm must reach at least one source of the cortex; the nearest on {_side(brief)} is"
            f" {straight[nearest] / MM:.1f} mm from centre_mm, not within {brief.radius / MM:g} mm."
        )
    rim = np.sqrt(head.cortex.areas)
    distance = straight
    if brief.along_cortex:
        reach = brief.radius + rim.max()
        distance = np.where(eligible, distances_along_cortex(head, nearest, reach), np.inf)
    return np.clip(0.5 + (brief.radius - distance) / rim, 0.0, 1.0)


def _side(brief: RegionBrief) -> str:
    return "either side" if brief.side == "both" else f"the {brief.side} side"


def region_strengths(areas: np.ndarray, moment: float) -> np.ndarray:
    """Standard deviations (n,) [A·m] of independent sources with areas (n,) [m²].

    moment [A·m] is the rms of their sum.

    Var(s_j) = moment² a_j / Σ a: cutting a source in two leaves the sum's variance as it was.
    """
    return moment * np.sqrt(areas / areas.sum())
