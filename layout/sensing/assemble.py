"""Candidates and their channels from spots: every choice of axes at every spot, as arrays."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head
from layout.sensing.axis_options import axis_options, quarter_turned
from layout.sensing.candidates import Candidates, Sites
from layout.sensing.cliques import clique_cover
from layout.sensing.exclusions import Exclusions
from layout.sensing.pickup import sensor_pickup
from layout.sensing.spots import Spots

_NAMES_SHOWN = 4


def assemble(
    head: Head, sites: Sites, spots: list[Spots], exclusions: Exclusions, notes: tuple[str, ...]
) -> Candidates:
    """Candidates ordered by entry, spot, axis; channels in the same order."""
    kind, site, axis_name, names, pose, spot = [], [], [], [], [], []
    free, tilt = [], []
    owner, position, axis, baseline = [], [], [], []
    taken: set[str] = set()
    n_candidates = n_spots = 0
    for index, part in enumerate(spots):
        options = axis_options(part.entry)
        n, per_spot = len(part.site), len(options)
        axis_name += [option.name for option in options] * n
        for row in part.site:
            for option in options:
                name = f"{sites.names[row]} {option.name}".strip()
                names.append(f"{name} ({part.entry.name})" if name in taken else name)
                taken.add(names[-1])
        kind.append(np.full(n * per_spot, index))
        site.append(np.repeat(part.site, per_spot))
        turned = np.tile([option.turned for option in options], n)
        stands = np.repeat(part.poses, per_spot, axis=0)
        pose.append(np.where(turned[:, None, None], quarter_turned(stands), stands))
        spot.append(np.repeat(n_spots + np.arange(n), per_spot))
        free_axes = getattr(part.entry, "free_axes", 0)
        limit = getattr(part.entry, "tilt_limit", None)
        free.append(np.full(n * per_spot, free_axes))
        tilt.append(np.full(n * per_spot, np.inf if limit is None else limit))
        option_of_row = np.repeat(np.arange(per_spot), [len(option.axes) for option in options])
        owner.append((n_candidates + per_spot * np.arange(n)[:, None] + option_of_row).ravel())
        position.append(np.repeat(part.sensors, len(option_of_row), axis=0))
        for components, into in (("axes", axis), ("baselines", baseline)):
            rows = np.concatenate([getattr(option, components) for option in options])
            into.append(np.einsum("mk,nkd->nmd", rows, part.frames).reshape(-1, 3))
        n_candidates += n * per_spot
        n_spots += n
    kind, site, pose, owner = (np.concatenate(parts) for parts in (kind, site, pose, owner))
    position, axis, baseline = (np.concatenate(parts) + 0.0 for parts in (position, axis, baseline))
    cliques, clique_names = _cliques(np.concatenate(spot), sites, spots, exclusions)
    pickup = sensor_pickup(
        [part.entry for part in spots],
        kind[owner],
        position,
        axis,
        pose[owner, :3, :3],
        baseline,
        sites.normals[site[owner]],
        head.scalp,
    )
    return Candidates(
        sites=sites,
        kind=kind,
        site=site,
        axis_name=tuple(axis_name),
        names=tuple(names),
        candidate_of_channel=owner,
        positions=position,
        axes=axis,
        is_electrode=np.array([part.entry.kind == "electrode" for part in spots])[kind[owner]],
        housing_pose=pose,
        cliques=cliques,
        notes=notes,
        baselines=baseline if baseline.any() else None,
        pickup=pickup,
        clique_names=clique_names,
        free_axes=np.concatenate(free),
        tilt_limit=np.concatenate(tilt),
    )


def _cliques(
    spot: np.ndarray, sites: Sites, spots: list[Spots], exclusions: Exclusions
) -> tuple[tuple[np.ndarray, ...], tuple[str, ...]]:
    """Cliques of candidates, from those of their spots (`spot` (n_candidates,)), and what each is called."""
    labels = [sites.names[row] for part in spots for row in part.site]
    groups = clique_cover(exclusions.any)
    names = [_clique_name(exclusions.reasons(group), [labels[one] for one in group]) for group in groups]
    grouped = np.zeros(len(labels), dtype=bool)
    for group in groups:
        grouped[group] = True
    several = np.bincount(spot, minlength=len(labels)) > 1
    alone = np.flatnonzero(several & ~grouped)
    groups += [np.array([one]) for one in alone]
    names += [f"one axis at {labels[one]}" for one in alone]
    # spot is ascending: each has a run of candidates
    starts = np.searchsorted(spot, np.arange(len(labels) + 1))
    members = tuple(
        np.concatenate([np.arange(starts[one], starts[one + 1]) for one in np.sort(group)]) for group in groups
    )
    return members, tuple(names)


def _clique_name(reasons: str, labels: list[str]) -> str:
    shown = list(dict.fromkeys(labels))
    more = f" and {len(shown) - _NAMES_SHOWN} more" if len(shown) > _NAMES_SHOWN else ""
    return f"{reasons} ({', '.join(shown[:_NAMES_SHOWN])}{more})"
