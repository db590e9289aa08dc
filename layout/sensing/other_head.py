"""The same candidates on another head: caps by arc fractions, helmets by pose and that head's gap."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout.anatomy.head import Head
from layout.anatomy.positions import earlobes
from layout.anatomy.scalp_points import dense_cloud
from layout.anatomy.transfer import same_sites
from layout.brief.objects import Brief
from layout.brief.objects_stock import HOUSED
from layout.sensing.assemble import assemble
from layout.sensing.candidates import Candidates, Sites
from layout.sensing.exclusions import spot_exclusions
from layout.sensing.housing import CLOUD_EDGE, Footprint, face_radius
from layout.sensing.lay_out import merge_places
from layout.sensing.selection import channel_rows
from layout.sensing.sites import Places, find_places
from layout.sensing.spots import lay_spots


def on_other_head(
    from_head: Head, candidates: Candidates, to_head: Head, brief: Brief, standard: dict[str, np.ndarray]
) -> Candidates:
    """The candidates, number for number, as they sit on another head; rules stay those of the first head.

    standard: the other head's 10-5 positions by name (3,) [m]. Zones are not asked again: a hole of the cap is where it
    is. Raises FileError where the other head does not fit into a helmet's slots.
    """
    singles = candidates.singles
    standard = dict(standard) | earlobes(to_head.scalp, to_head.landmarks)
    cloud = dense_cloud(to_head.scalp, CLOUD_EDGE) if any(entry.kind in HOUSED for entry in brief.stock) else None
    footprints = [
        Footprint(cloud, face_radius(entry.housing)) if entry.kind in HOUSED else None for entry in brief.stock
    ]
    places = [
        _places_there(from_head, singles, index, to_head, brief, standard, footprint)
        for index, footprint in enumerate(footprints)
    ]
    sites, site_of = merge_places(to_head, brief, places, standard)
    spots = [
        lay_spots(entry, there, sites, rows, footprint)
        for entry, there, rows, footprint in zip(brief.stock, places, site_of, footprints, strict=True)
    ]
    laid = assemble(to_head, sites, spots, spot_exclusions(spots, sites), ())
    return _in_the_order_of(candidates, laid, sites)


def _places_there(
    from_head: Head,
    singles: Candidates,
    index: int,
    to_head: Head,
    brief: Brief,
    standard: dict[str, np.ndarray],
    footprint: Footprint | None,
) -> Places:
    """The places of one stock entry on the other head, in the order of their sites on the first."""
    entry = brief.stock[index]
    rows = np.unique(singles.site[singles.kind == index])
    if entry.sites.slots_csv is not None:
        every = find_places(to_head, entry, standard, footprint)
        names = [singles.sites.names[row].removesuffix(f"@{entry.name}") for row in rows]
        keep = np.isin(every.names, names)
        return every.take(keep)
    points = same_sites(from_head, singles.sites.positions[rows], to_head)
    return Places(tuple(singles.sites.names[row] for row in rows), points)


def _in_the_order_of(candidates: Candidates, laid: Candidates, sites: Sites) -> Candidates:
    """The laid candidates with the numbers that they have on the first head, pairs joined as there."""
    singles = candidates.singles
    number = {name: one for one, name in enumerate(laid.names)}
    order = np.array([number[name] for name in singles.names])
    starts = np.searchsorted(laid.candidate_of_channel, np.arange(len(laid) + 1))
    rows = np.concatenate([np.arange(starts[one], starts[one + 1]) for one in order]).astype(int)
    there = replace(
        singles, sites=sites, site=laid.site[order], housing_pose=laid.housing_pose[order], **channel_rows(laid, rows)
    )
    if candidates.pairs is None:
        return there
    pairs = replace(candidates.pairs, singles=there)
    first = pairs.members[:, 0]
    return replace(
        candidates,
        sites=sites,
        site=there.site[first],
        housing_pose=there.housing_pose[first],
        pairs=pairs,
        **channel_rows(there, pairs.rows),
    )
