"""Left-right pairs: a site and its mirror image become one candidate, chosen together or not at all."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.head import Head
from layout.anatomy.scalp_points import project
from layout.brief.objects import Brief
from layout.sensing.axis_options import axis_options
from layout.sensing.candidates import Candidates, Pairs, Sites
from layout.sensing.selection import channel_rows, renumbered

FARTHEST_MIRROR = 5e-3  # [m] a site farther from the mirror image of another is not its partner
MIDLINE = 3e-3  # [m] sites nearer to the median plane are their own mirror image
_NAMES_SHOWN = 8


def join_pairs(head: Head, brief: Brief, candidates: Candidates) -> Candidates:
    """Candidates of two mirrored sensors each, and single ones on the midline; `pairs` of the result holds the rest.

    The mirror image of a site is the nearest site of the same stock entry to the point reflected in the median plane
    x = 0 and laid on the scalp; both must be each other's, within 5 mm. Its axis is the mirror image too, up to sign.
    Sites within 3 mm of the median plane stand alone; all others without a partner are left out, and a note says so, as
    are pairs whose two sensors exclude each other.
    """
    partner = _partners(head, brief, candidates)
    numbers = np.arange(len(candidates))
    exclude_each_other = np.zeros(len(candidates), dtype=bool)
    conflicts = _conflict_lists(candidates)
    for number in np.flatnonzero(partner > numbers):
        exclude_each_other[number] = partner[number] in conflicts[number]
    first = np.flatnonzero((partner >= numbers) & ~exclude_each_other)
    second = np.where(partner[first] == first, -1, partner[first])
    members = np.stack([first, second], axis=1)
    joined_of = np.full(len(candidates), -1)
    joined_of[first] = np.arange(len(first))
    joined_of[second[second >= 0]] = np.flatnonzero(second >= 0)

    sides = members.ravel()[members.ravel() >= 0]
    starts = np.searchsorted(candidates.candidate_of_channel, np.arange(len(candidates) + 1))
    rows = np.concatenate([np.arange(starts[one], starts[one + 1]) for one in sides]).astype(int)
    # Members of different joined candidates stay different, so that a clique of sensors is one of joined candidates.
    cliques, clique_names = renumbered(candidates.cliques, candidates.clique_names, joined_of)
    return replace(
        candidates,
        kind=candidates.kind[first],
        site=candidates.site[first],
        axis_name=tuple(candidates.axis_name[one] for one in first),
        names=tuple(_name(candidates, *pair) for pair in members),
        candidate_of_channel=joined_of[candidates.candidate_of_channel[rows]],
        housing_pose=candidates.housing_pose[first],
        cliques=cliques,
        clique_names=clique_names,
        free_axes=None if candidates.free_axes is None else candidates.free_axes[first],
        tilt_limit=None if candidates.tilt_limit is None else candidates.tilt_limit[first],
        pairs=Pairs(candidates, members, rows),
        notes=(*candidates.notes, *_notes(brief, candidates, joined_of)),
        **channel_rows(candidates, rows),
    )


def mirror_sites(head: Head, sites: Sites, rows: np.ndarray) -> np.ndarray:
    """For each of the given sites (n,) the row of its mirror image among them: itself on the midline, -1 for none."""
    points = sites.positions[rows]
    reflected = project(head.scalp, points * [-1.0, 1.0, 1.0]).positions
    away, nearest = cKDTree(points).query(reflected)
    here = np.arange(len(rows))
    midline = np.abs(points[:, 0]) < MIDLINE
    mutual = (nearest[nearest] == here) & (nearest != here) & ~midline & ~midline[nearest]
    near = (away < FARTHEST_MIRROR) & (away[nearest] < FARTHEST_MIRROR)
    return np.where(midline, rows, np.where(mutual & near, rows[nearest], -1))


def _partners(head: Head, brief: Brief, candidates: Candidates) -> np.ndarray:
    """Number of each candidate's mirror image (n,), -1 without one.

    On the midline that is itself, or another axis of the same site, which excludes it.
    """
    partner = np.full(len(candidates), -1)
    for index, entry in enumerate(brief.stock):
        mine = np.flatnonzero(candidates.kind == index)
        if len(mine) == 0:
            continue
        options = axis_options(entry)
        option_names = [option.name for option in options]
        option = np.array([option_names.index(candidates.axis_name[one]) for one in mine])
        rows = np.unique(candidates.site[mine])
        mirror_row = np.full(len(candidates.sites), -1)
        mirror_row[rows] = mirror_sites(head, candidates.sites, rows)
        at = np.full((len(candidates.sites), len(options)), -1)
        at[candidates.site[mine], option] = mine
        row = mirror_row[candidates.site[mine]]
        mirror_option = np.array([one.mirror for one in options])[option]
        there = (row >= 0) & (mirror_option >= 0)
        partner[mine[there]] = at[row[there], mirror_option[there]]
    return partner


def _conflict_lists(candidates: Candidates) -> list[set[int]]:
    conflicts: list[set[int]] = [set() for _ in range(len(candidates))]
    for clique in candidates.cliques:
        members = clique.tolist()
        for one in members:
            conflicts[one].update(members)
    return conflicts


def _name(candidates: Candidates, first: int, second: int) -> str:
    if second < 0:
        return candidates.names[first]
    sites = candidates.sites.names
    pair = f"{sites[candidates.site[first]]}+{sites[candidates.site[second]]}"
    axes = list(dict.fromkeys([candidates.axis_name[first], candidates.axis_name[second]]))
    name = f"{pair} {'+'.join(axes)}".strip()
    ending = candidates.names[first].partition(" (")[2]
    return f"{name} ({ending}" if ending else name


def _notes(brief: Brief, candidates: Candidates, joined_of: np.ndarray) -> list[str]:
    notes = []
    for index, entry in enumerate(brief.stock):
        mine = candidates.kind == index
        used = set(candidates.site[mine & (joined_of >= 0)].tolist())
        lost = [row for row in dict.fromkeys(candidates.site[mine].tolist()) if row not in used]
        if lost:
            shown = ", ".join(candidates.sites.names[row] for row in lost[:_NAMES_SHOWN])
            more = f" and {len(lost) - _NAMES_SHOWN} more" if len(lost) > _NAMES_SHOWN else ""
            notes.append(
                f"{entry.name}: {len(lost)} sites without a mirror image within {FARTHEST_MIRROR * 1e3:g} mm are left "
                f"out for left_right_pairs ({shown}{more})"
            )
    return notes
