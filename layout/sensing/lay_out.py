"""Everything that can be chosen: the brief's stock at its sites, with poses, channels and conflicts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.spatial import cKDTree
from scipy.spatial.distance import cdist

from layout.anatomy.head import Head
from layout.anatomy.positions import canonical_name, earlobes, standard_positions
from layout.anatomy.scalp_points import dense_cloud, tangents_at
from layout.brief.objects import Brief, ElectrodeBrief, MagnetometerBrief
from layout.errors import BriefError, InfeasibleError
from layout.sensing.candidates import Candidates, Sites
from layout.sensing.cliques import clique_cover
from layout.sensing.housing import CLOUD_EDGE, Footprint, face_radius, poses, rest_in_slots, rest_on_scalp
from layout.sensing.overlap import boxes_overlap
from layout.sensing.sites import Places, describe, find_places
from layout.sensing.zones import allowed, near_names

SAME_PLACE = 1e-3  # [m] sites nearer than this cannot both hold a sensor

# Per axes option: the candidates at a site, each the rows of (normal, tangent 1, tangent 2) it measures.
_AXES = {
    "normal": (("normal", (0,)),),
    "tangents": (("tangent1", (1,)), ("tangent2", (2,))),
    "any_of_three": (("normal", (0,)), ("tangent1", (1,)), ("tangent2", (2,))),
    "two_axis": (("normal+tangent1", (0, 1)), ("normal+tangent2", (0, 2))),
    "three_axis": (("three axes", (0, 1, 2)),),
}


@dataclass(frozen=True)
class _Spots:
    """One stock entry at its sites, n_spots rows: site (index), sensors (n, 3) [m], frames (n, 3, 3) rows
    normal, tangent 1, tangent 2, poses (n, 4, 4).
    """

    entry: ElectrodeBrief | MagnetometerBrief
    site: np.ndarray
    sensors: np.ndarray
    frames: np.ndarray
    poses: np.ndarray

    @property
    def options(self) -> tuple[tuple[str, tuple[int, ...]], ...]:
        return (("", (0,)),) if self.entry.kind == "electrode" else _AXES[self.entry.axes]


def lay_candidates(head: Head, brief: Brief, standard: dict[str, np.ndarray] | None = None) -> Candidates:
    """All candidates of a brief on a head.

    standard: the head's 10-5 positions by name (3,) [m], computed when not given. Raises BriefError for
    unknown zones, positions, kept, forbidden or reference sites; FileError for damaged tables;
    InfeasibleError where an entry has fewer sites than sensors.
    """
    standard = dict(standard if standard is not None else standard_positions(head.scalp, head.landmarks))
    standard |= earlobes(head.scalp, head.landmarks)
    cloud = None
    if any(entry.kind == "magnetometer" for entry in brief.stock):
        cloud = dense_cloud(head.scalp, CLOUD_EDGE)
    footprints = [
        Footprint(cloud, face_radius(entry.housing)) if entry.kind == "magnetometer" else None for entry in brief.stock
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
    _check_kept(brief, usable, all_names)

    sites, site_of = _merge(head, brief, usable, standard)
    spots = [
        _spots(entry, places, sites, rows, footprint)
        for entry, places, rows, footprint in zip(brief.stock, usable, site_of, footprints, strict=True)
    ]
    conflict = _spot_conflicts(spots, sites)
    notes += _overlap_notes(spots, sites, conflict)
    return _assemble(sites, spots, conflict, tuple(dict.fromkeys(notes)))


def resolve_name(name: str, names: list[str] | tuple[str, ...], key: str) -> str:
    """The site that a brief's `key` means by `name`: itself, or the present name of T3, T4, T5, T6.

    Raises BriefError, with near names, where there is no such site.
    """
    for candidate in (name, canonical_name(name)):
        if candidate in names:
            return candidate
    raise BriefError(f"{key}: must name a site of the stock, but {name!r} was given{near_names(name, names)}")


def _usable_places(
    head: Head,
    brief: Brief,
    index: int,
    entry: ElectrodeBrief | MagnetometerBrief,
    places: Places,
    standard: dict[str, np.ndarray],
    forbidden: set[str],
) -> tuple[Places, list[str]]:
    """The entry's places inside its zones and not forbidden, and what is said about it."""
    key = f"stock[{index}]"
    fine, lost = allowed(head, brief.places, entry, places.positions, standard, key)
    banned = np.array([name in forbidden for name in places.names], dtype=bool)
    lost["forbid"] = int(banned.sum())
    fine &= ~banned
    if entry.kind == "electrode" and places.travel_gap is not None:
        out_of_reach = places.travel_gap > SAME_PLACE
        lost["slot does not reach the scalp"] = int(out_of_reach.sum())
        fine &= ~out_of_reach
    losses = ", ".join(f"{rule} {count}" for rule, count in lost.items() if count)
    left = places.take(fine)
    if len(left.names) < entry.count:
        raise InfeasibleError(
            f"{key}.count: must be at most the number of its allowed sites, "
            f"{len(left.names)} of {len(places.names)}"
            f"{f' (lost to {losses})' if losses else ''}, but {entry.count} was given"
        )
    if entry.kind == "electrode" and entry.reference != "any":
        resolve_name(entry.reference, left.names, f"{key}.reference")
    said = f"{entry.name}: {len(left.names)} of {len(places.names)} sites allowed"
    notes = [said + (f" (taken by {losses}; a site may be counted twice)" if losses else "")]
    return left, notes + [note for note in places.notes if "A1" not in note or {"A1", "A2"} & set(left.names)]


def _check_kept(brief: Brief, usable: list[Places], all_names: list[str]) -> None:
    left = {name for places in usable for name in places.names}
    for name in brief.places.keep:
        kept = resolve_name(name, all_names, "places.keep")
        if kept not in left:
            raise BriefError(f"places.keep: must name a site that zones and forbid allow, but {name!r} was given")


def _merge(
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


def _spots(
    entry: ElectrodeBrief | MagnetometerBrief,
    places: Places,
    sites: Sites,
    rows: np.ndarray,
    footprint: Footprint | None,
) -> _Spots:
    """Where the entry's sensors end up: electrodes on the scalp, magnetometers at `standoff` above the
    housing's face.
    """
    positions = sites.positions[rows]
    if footprint is None:
        identity = np.tile(np.eye(4), (len(rows), 1, 1))
        return _Spots(entry, rows, positions, np.zeros((len(rows), 3, 3)), identity)
    if places.slot_axes is None:
        rest = rest_on_scalp(footprint, positions, entry.hair)
    else:
        rest = rest_in_slots(footprint, positions, places.slot_axes, sites.travel_gap[rows], entry.hair)
    frames = np.concatenate([rest.axes[:, None], tangents_at(rest.axes)], axis=1)
    return _Spots(entry, rows, rest.faces + entry.standoff * rest.axes, frames, poses(rest))


def _spot_conflicts(spots: list[_Spots], sites: Sites) -> np.ndarray:
    """Which spots of all entries exclude each other (n_spots, n_spots) bool: same place, or nearer than the
    spacing.

    The spacing of two entries is the larger of theirs; it is the straight distance between sensitive centres.
    """
    sensors = np.concatenate([part.sensors for part in spots])
    on_scalp = sites.positions[np.concatenate([part.site for part in spots])]
    spacing = np.concatenate([np.full(len(part.site), part.entry.spacing) for part in spots])
    conflict = cdist(sensors, sensors) < np.maximum.outer(spacing, spacing) - 1e-9
    conflict |= cdist(on_scalp, on_scalp) < SAME_PLACE
    np.fill_diagonal(conflict, False)
    return conflict


def _overlap_notes(spots: list[_Spots], sites: Sites, conflict: np.ndarray) -> list[str]:
    """A warning where housings at two places that are allowed together would meet."""
    rows = [(part, i) for part in spots for i in range(len(part.site))]
    housed = np.array([part.entry.kind == "magnetometer" for part, _ in rows], dtype=bool)
    if housed.sum() < 2:
        return []
    frames = np.concatenate([part.poses for part in spots])
    sizes = np.array([part.entry.housing if part.entry.kind == "magnetometer" else (0, 0, 0) for part, _ in rows])
    centres = frames[:, :3, 3] + frames[:, :3, 2] * sizes[:, 2:3] / 2
    where = np.flatnonzero(housed)
    reach = np.linalg.norm(sizes, axis=1).max()
    pairs = where[cKDTree(centres[where]).query_pairs(reach, output_type="ndarray")]
    pairs = pairs[~conflict[pairs[:, 0], pairs[:, 1]]]
    if len(pairs) == 0:
        return []
    a, b = pairs.T
    pairs = pairs[boxes_overlap(frames[a], sizes[a], frames[b], sizes[b])]
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


def _assemble(sites: Sites, spots: list[_Spots], conflict: np.ndarray, notes: tuple[str, ...]) -> Candidates:
    """Candidates and channels from spots, ordered by entry, site, axis."""
    kind, site, axis_names, names, pose = [], [], [], [], []
    channel_candidate, channel_position, channel_axis, is_electrode = [], [], [], []
    members: list[list[int]] = []
    taken: set[str] = set()
    for index, part in enumerate(spots):
        for i, row in enumerate(part.site):
            members.append([])
            for axis_name, measured in part.options:
                name = f"{sites.names[row]} {axis_name}".strip()
                if name in taken:
                    name = f"{name} ({part.entry.name})"
                taken.add(name)
                members[-1].append(len(names))
                channel_candidate += [len(names)] * len(measured)
                channel_position += [part.sensors[i]] * len(measured)
                channel_axis += [part.frames[i, m] for m in measured]
                is_electrode += [part.entry.kind == "electrode"] * len(measured)
                kind.append(index)
                site.append(row)
                axis_names.append(axis_name)
                names.append(name)
                pose.append(part.poses[i])
    groups = clique_cover(conflict)
    grouped = {int(spot) for group in groups for spot in group}
    groups += [np.array([spot]) for spot, own in enumerate(members) if len(own) > 1 and spot not in grouped]
    cliques = tuple(np.array(sorted(c for spot in group for c in members[spot])) for group in groups)
    return Candidates(
        sites=sites,
        kind=np.array(kind),
        site=np.array(site),
        axis_name=tuple(axis_names),
        names=tuple(names),
        candidate_of_channel=np.array(channel_candidate),
        positions=np.array(channel_position),
        axes=np.array(channel_axis),
        is_electrode=np.array(is_electrode),
        housing_pose=np.array(pose),
        cliques=cliques,
        notes=notes,
    )
