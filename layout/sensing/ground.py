"""The ground: a site that an electrode takes without being measured, and the places it leaves to the others."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head
from layout.anatomy.positions import canonical_name
from layout.brief.objects import Brief
from layout.errors import BriefError
from layout.sensing.candidates import Sites
from layout.sensing.exclusions import spot_exclusions
from layout.sensing.names import near_names
from layout.sensing.sites import Places, describe
from layout.sensing.spots import Spots


def ground_site(head: Head, brief: Brief, everywhere: list[Places], standard: dict[str, np.ndarray]) -> Sites | None:
    """The site of the ground, a table of one row; None where the brief names none.

    Raises BriefError for a name that is neither a standard position nor a site of the stock.
    """
    name = brief.places.ground
    if name is None:
        return None
    known = dict(standard)
    for places in everywhere:
        known |= dict(zip(places.names, places.positions, strict=True))
    present = name if name in known else canonical_name(name)
    if present not in known:
        raise BriefError(
            f"places.ground: must name a standard position or a site of the stock, but {name!r} was given"
            f"{near_names(name, list(known))}"
        )
    return describe(head, (present,), known[present][None], standard, np.full((1, 3), np.nan), np.zeros(1))


def clear_of_ground(brief: Brief, ground: Sites, spots: list[Spots], sites: Sites) -> list[np.ndarray]:
    """Which spots of each entry the ground leaves free (n_spots,) bool.

    The ground is an electrode of the first entry of electrodes: its spacing, footprint and clearance hold for it too.
    """
    entry = next(one for one in brief.stock if one.kind == "electrode")
    row = len(sites)
    frames = np.concatenate([ground.normals[:, None], ground.tangents], axis=1)
    there = Spots(entry, np.array([row]), ground.positions, frames, ground.positions, np.eye(4)[None])
    together = _with_positions(sites, ground)
    excluded = spot_exclusions([*spots, there], together).any[-1, :-1]
    ends = np.cumsum([len(part.site) for part in spots])
    return [~mine for mine in np.split(excluded, ends[:-1])]


def _with_positions(sites: Sites, ground: Sites) -> Sites:
    """The sites with the ground's row behind them."""
    return Sites(
        sites.names + ground.names,
        *(
            np.concatenate([getattr(sites, name), getattr(ground, name)])
            for name in ("positions", "normals", "tangents")
        ),
        sites.nearest_name + ground.nearest_name,
        *(
            np.concatenate([getattr(sites, name), getattr(ground, name)])
            for name in ("nearest_offset", "landmark_distance", "arc_fractions", "travel_gap", "slot_axes")
        ),
    )
