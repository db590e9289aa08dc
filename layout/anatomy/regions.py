"""Regions of interest: the sources inside a ball, and the strength expected of each."""

from __future__ import annotations

import numpy as np

from layout.anatomy.frame import apply
from layout.anatomy.head import Head, Region
from layout.brief.objects import RegionBrief
from layout.errors import BriefError
from layout.units import MM

SIDES = {"left": (-1,), "right": (1,), "both": (-1, 1)}


def select_region(head: Head, brief: RegionBrief) -> Region:
    """The cortex within the ball's straight radius, in the head's own size, on the side asked for.

    A source at the rim counts with the part of its area that lies inside, taken as a square cut across by the ball's
    surface: with sources simply in or out, a finer mesh would change the region by whole sources.

    Raises BriefError where the centre is in MNI152 coordinates and the head has none, where cortical normals
    are asked of a head without them, or where no source lies inside.
    """
    where = f'regions "{brief.name}"'
    if not head.normal_orientation and brief.orientation == "normal":
        raise BriefError(
            f'{where}: orientation must be "free" on a {head.name} head, which has no cortical normals, not "normal".'
        )
    centre = np.array(brief.centre, dtype=float)
    if brief.frame == "mni152":
        if head.mni_to_head is None:
            raise BriefError(
                f'{where}: frame must be "head" on a {head.name} head, which has no template coordinates, not "mni152".'
            )
        centre = apply(head.mni_to_head, centre)
    eligible = np.flatnonzero(np.isin(head.cortex.side, SIDES[brief.side]))
    distance = np.linalg.norm(head.cortex.positions[eligible] - centre, axis=1)
    areas = head.cortex.areas[eligible]
    inside = np.clip(0.5 + (brief.radius - distance) / np.sqrt(areas), 0.0, 1.0)
    if not (distance <= brief.radius).any():
        side = "either side" if brief.side == "both" else f"the {brief.side} side"
        raise BriefError(
            f"{where}: radius_mm must reach at least one source of the cortex; the nearest on {side} is"
            f" {distance.min() / MM:.1f} mm from centre_mm, not within {brief.radius / MM:g} mm."
        )
    return Region(
        name=brief.name,
        members=eligible[inside > 0],
        areas=(inside * areas)[inside > 0],
        moment=brief.moment,
        coherent=brief.coherent,
        free_orientation=brief.orientation == "free",
        centre=centre,
    )


def region_strengths(areas: np.ndarray, moment: float) -> np.ndarray:
    """Standard deviations (n,) [A·m] of independent sources with areas (n,) [m²].

    moment [A·m] is the rms of their sum.

    Var(s_j) = moment² a_j / Σ a: cutting a source in two leaves the sum's variance as it was.
    """
    return moment * np.sqrt(areas / areas.sum())
