"""Everything that can be chosen: the brief's stock at its sites, with poses, channels and conflicts."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout.anatomy.head import Head
from layout.anatomy.positions import canonical_name, earlobes, standard_positions
from layout.anatomy.scalp_points import dense_cloud
from layout.brief.objects import Brief
from layout.brief.objects_stock import HOUSED, StockBrief
from layout.errors import BriefError, InfeasibleError
from layout.sensing.assemble import assemble
from layout.sensing.candidates import Candidates, Sites
from layout.sensing.exclusions import housing_notes, spot_exclusions
from layout.sensing.existing import existing_singles
from layout.sensing.ground import clear_of_ground, ground_site
from layout.sensing.housing import CLOUD_EDGE, Footprint, face_radius
from layout.sensing.names import near_names, resolve_name, site_in
from layout.sensing.pairs import join_pairs
from layout.sensing.selection import only
from layout.sensing.sites import Places, describe, find_places
from layout.sensing.spots import Spots, lay_spots
from layout.sensing.zones import SAME_PLACE, allowed


def lay_candidates(head: Head, brief: Brief, standard: dict[str, np.ndarray] | None = None) -> Candidates:
    """All candidates of a brief on a head.

    standard: the head's 10-5 positions by name (3,) [m], computed when not given. Raises BriefError for
    unknown zones, positions, kept, forbidden or reference sites; FileError for damaged tables;
    InfeasibleError where an entry has fewer sites than sensors.
    """
    standard = dict(standard if standard is not None else standard_positions(head.scalp, head.landmarks))
    standard |= earlobes(head.scalp, head.landmarks)
    cloud = None
    if any(entry.kind in HOUSED for entry in brief.stock):
        cloud = dense_cloud(head.scalp, CLOUD_EDGE)
    footprints = [
        Footprint(cloud, face_radius(entry.housing)) if entry.kind in HOUSED else None for entry in brief.stock
    ]
    everywhere = [
        find_places(head, entry, standard, footprint) for entry, footprint in zip(brief.stock, footprints, strict=True)
    ]
    all_names = [name for places in everywhere for name in places.names]
    forbidden = {resolve_name(name, all_names, "places.forbid") for name in brief.places.forbid}

    usable, notes = [], []
    for index, (entry, places) in enumerate(zip(brief.stock, everywhere, strict=True)):
        left, said = _usable_places(head, brief, index, entry, places, standard, forbidden)
        usable.append(left)
        notes += said
    left = [name for places in usable for name in places.names]
    for key, name in _insisted(brief):
        if site_in(name, all_names, key) not in left:
            raise BriefError(f"{key}: must name a site that zones and forbid allow, but {name!r} was given")
    _check_positions_of_zones(brief, all_names, standard)

    sites, site_of = merge_places(head, brief, usable, standard)
    spots = [
        lay_spots(entry, places, sites, rows, footprint)
        for entry, places, rows, footprint in zip(brief.stock, usable, site_of, footprints, strict=True)
    ]
    ground = ground_site(head, brief, everywhere, standard)
    if ground is not None:
        spots, said = _around_ground(brief, ground, spots, sites)
        notes.append(said)
    exclusions = spot_exclusions(spots, sites)
    notes += housing_notes(spots, sites, exclusions.any)
    candidates = replace(assemble(head, sites, spots, exclusions, tuple(dict.fromkeys(notes))), ground=ground)
    if brief.existing is not None and brief.existing.use == "trim":
        keep = np.zeros(len(candidates), dtype=bool)
        keep[np.concatenate(list(existing_singles(brief, candidates).values()))] = True
        candidates = only(candidates, keep)
        _check_room(brief, candidates, "existing", "hold")
    if brief.places.left_right_pairs:
        candidates = join_pairs(head, brief, candidates)
        _check_room(brief, candidates, "places.left_right_pairs", "leave")
    return candidates


def _insisted(brief: Brief) -> list[tuple[str, str]]:
    """(key, name) of the sites that the brief insists on by name."""
    extended = brief.existing.sites if brief.existing is not None else ()
    return [("places.keep", name) for name in brief.places.keep] + [("existing.sites", name) for name in extended]


def _check_positions_of_zones(brief: Brief, all_names: list[str], standard: dict[str, np.ndarray]) -> None:
    for zone in brief.places.zones:
        for name in zone.positions:
            if name not in all_names and canonical_name(name) not in standard:
                raise BriefError(
                    f"places.zones {zone.name!r}: positions must name standard positions or sites of the stock, but "
                    f"{name!r} was given{near_names(name, [*standard, *all_names])}"
                )


def _around_ground(brief: Brief, ground: Sites, spots: list[Spots], sites: Sites) -> tuple[list[Spots], str]:
    """The spots that the ground leaves free, and what is said about it."""
    free = clear_of_ground(brief, ground, spots, sites)
    name = ground.names[0]
    for index, (part, mask, least) in enumerate(zip(spots, free, brief.least, strict=True)):
        if mask.sum() < max(least, 1):
            raise InfeasibleError(
                f"stock[{index}].count: must be at most the number of allowed sites that the ground at {name} leaves "
                f"free, {mask.sum()} of {len(mask)}, but {part.entry.count} was given"
            )
    left = [part.take(mask) for part, mask in zip(spots, free, strict=True)]
    there = {sites.names[row] for part in left for row in part.site}
    for key, wanted in _insisted(brief):
        if site_in(wanted, sites.names, key) not in there:
            raise BriefError(f"{key}: must name sites clear of the ground at {name}, but {wanted!r} was given")
    for index, part in enumerate(left):
        reference = getattr(part.entry, "reference", "any")
        if reference != "any" and reference not in {sites.names[row] for row in part.site}:
            own = [sites.names[row].removesuffix(f"@{part.entry.name}") for row in part.site]
            if canonical_name(reference) not in own and reference not in own:
                raise BriefError(
                    f"stock[{index}].reference: must name a site clear of the ground at {name}, but {reference!r} was "
                    "given"
                )
    lost = sum(int((~mask).sum()) for mask in free)
    return left, f"ground at {name}: {lost} places of the stock are taken by it or too near to it"


def _check_room(brief: Brief, candidates: Candidates, key: str, verb: str) -> None:
    """Raises InfeasibleError where an entry has fewer sites left than its least count."""
    for index, least in enumerate(brief.least):
        mine = candidates.single_sensors(np.flatnonzero(candidates.kind == index))
        n_sites = len(np.unique(candidates.singles.site[mine]))
        if n_sites < least:
            raise InfeasibleError(
                f"{key}: must {verb} at least as many sites as sensors of stock[{index}] are to be placed, {least}, "
                f"but there are {n_sites}"
            )


def _usable_places(
    head: Head,
    brief: Brief,
    index: int,
    entry: StockBrief,
    places: Places,
    standard: dict[str, np.ndarray],
    forbidden: set[str],
) -> tuple[Places, list[str]]:
    """The entry's places inside its zones and not forbidden, and what is said about it."""
    key = f"stock[{index}]"
    fine, lost = allowed(head, brief.places, entry, places.positions, standard, key, places.names)
    banned = np.array([name in forbidden for name in places.names], dtype=bool)
    lost["forbid"] = int(banned.sum())
    fine &= ~banned
    if entry.kind == "electrode" and places.travel_gap is not None:
        out_of_reach = places.travel_gap > SAME_PLACE
        lost["slot does not reach the scalp"] = int(out_of_reach.sum())
        fine &= ~out_of_reach
    losses = ", ".join(f"{rule} {count}" for rule, count in lost.items() if count)
    left = places.take(fine)
    if len(left.names) < max(brief.least[index], 1):
        raise InfeasibleError(
            f"{key}.count: must be at most the number of its allowed sites, "
            f"{len(left.names)} of {len(places.names)}"
            f"{f' (lost to {losses})' if losses else ''}, but {entry.count} was given"
        )
    named = entry.kind == "electrode" and entry.reference != "any"
    if named and resolve_name(entry.reference, places.names, f"{key}.reference") not in left.names:
        raise BriefError(
            f"{key}.reference: must name a site that zones and forbid allow, but {entry.reference!r} was given"
        )
    said = f"{entry.name}: {len(left.names)} of {len(places.names)} sites allowed"
    notes = [said + (f" (taken by {losses}; a site may be counted twice)" if losses else "")]
    return left, notes + [note for note in places.notes if "A1" not in note or {"A1", "A2"} & set(left.names)]


def merge_places(
    head: Head, brief: Brief, usable: list[Places], standard: dict[str, np.ndarray]
) -> tuple[Sites, list[np.ndarray]]:
    """One table of sites for all entries and, per entry, the row of each of its places.

    Places of equal name within 1 mm are one site; a name already taken by another place gets "@" and the
    entry's name.
    """
    row_of: dict[str, int] = {}
    names: list[str] = []
    positions: list[np.ndarray] = []
    axes: list[np.ndarray] = []
    gaps: list[float] = []
    site_of = []
    no_slot = np.full(3, np.nan)
    for entry, places in zip(brief.stock, usable, strict=True):
        rows = []
        for i, name in enumerate(places.names):
            axis = no_slot if places.slot_axes is None else places.slot_axes[i]
            gap = 0.0 if places.travel_gap is None else float(places.travel_gap[i])
            row = row_of.get(name)
            if row is not None:
                same = np.linalg.norm(positions[row] - places.positions[i]) < SAME_PLACE and gap == gaps[row]
                if same and np.array_equal(axis, axes[row], equal_nan=True):
                    rows.append(row)
                    continue
                name = f"{name}@{entry.name}"
            row_of[name] = len(names)
            rows.append(len(names))
            names.append(name)
            positions.append(places.positions[i])
            axes.append(axis)
            gaps.append(gap)
        site_of.append(np.array(rows, dtype=int))
    sites = describe(head, tuple(names), np.array(positions), standard, np.array(axes), np.array(gaps))
    return sites, site_of
