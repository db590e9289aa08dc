"""Some of the candidates, and the rows of some channels, with everything that belongs to them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout.sensing.candidates import Candidates
from layout.sensing.pickup import Pickup


def only(candidates: Candidates, keep: np.ndarray) -> Candidates:
    """The candidates whose entry in `keep` (n,) bool is true, numbered anew; the table of sites stays as it is."""
    number = np.where(keep, np.cumsum(keep) - 1, -1)
    rows = np.flatnonzero(keep[candidates.candidate_of_channel])
    cliques, names = renumbered(candidates.cliques, candidates.clique_names, number)
    return replace(
        candidates,
        kind=candidates.kind[keep],
        site=candidates.site[keep],
        axis_name=tuple(name for name, kept in zip(candidates.axis_name, keep, strict=True) if kept),
        names=tuple(name for name, kept in zip(candidates.names, keep, strict=True) if kept),
        candidate_of_channel=number[candidates.candidate_of_channel[rows]],
        housing_pose=candidates.housing_pose[keep],
        cliques=cliques,
        clique_names=names,
        free_axes=None if candidates.free_axes is None else candidates.free_axes[keep],
        tilt_limit=None if candidates.tilt_limit is None else candidates.tilt_limit[keep],
        **channel_rows(candidates, rows),
    )


def channel_rows(candidates: Candidates, rows: np.ndarray) -> dict[str, np.ndarray | Pickup | None]:
    """The fields of the given channels (n,), in the given order."""
    return {
        "positions": candidates.positions[rows],
        "axes": candidates.axes[rows],
        "is_electrode": candidates.is_electrode[rows],
        "baselines": None if candidates.baselines is None else candidates.baselines[rows],
        "pickup": None if candidates.pickup is None else _pickup_rows(candidates.pickup, rows),
    }


def renumbered(
    cliques: tuple[np.ndarray, ...], names: tuple[str, ...], number: np.ndarray
) -> tuple[tuple[np.ndarray, ...], tuple[str, ...]]:
    """Cliques in new numbers (n,) (-1: gone), and their names; those that exclude nothing any more are dropped."""
    left = [np.unique(number[clique][number[clique] >= 0]) for clique in cliques]
    stays = [len(clique) > 1 for clique in left]
    return (
        tuple(clique for clique, kept in zip(left, stays, strict=True) if kept),
        tuple(name for name, kept in zip(names, stays, strict=True) if kept),
    )


def _pickup_rows(pickup: Pickup, rows: np.ndarray) -> Pickup:
    first, last = pickup.starts[rows], pickup.starts[rows + 1]
    points = np.concatenate([np.arange(a, b) for a, b in zip(first, last, strict=True)]).astype(int)
    return Pickup(
        pickup.positions[points],
        pickup.axes[points],
        pickup.weights[points],
        np.repeat(np.arange(len(rows)), last - first),
    )
