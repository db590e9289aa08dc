"""The cortex cut into connected patches of roughly one area, in which background activity is coherent."""

from __future__ import annotations

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import dijkstra
from scipy.spatial import cKDTree

from layout.anatomy.head import Sources
from layout.anatomy.mesh_graph import edges

SETTLING_STEPS = 8


def cortex_patches(standard: Sources, patch_area: float) -> np.ndarray:
    """Patch number (n_sources,), from 0, of each source of the standard mesh, for patches of patch_area [m²].

    On each side, seeds are put farthest from each other along the mesh, every source goes to the nearest seed
    along the mesh (so patches are connected and none spans both sides), and seeds move to the middle of their
    patch a few times (Lloyd 1982, IEEE Trans Inf Theory 28:129-137; from memory). Nothing is drawn at random.
    """
    graph = edges(standard.faces, len(standard), standard.positions)
    labels = np.empty(len(standard), dtype=np.int64)
    n_before = 0
    for side in np.unique(standard.side):
        members = np.flatnonzero(standard.side == side)
        areas = standard.areas[members]
        n_patches = min(max(1, round(areas.sum() / patch_area)), len(members))
        part = _cut(graph[members][:, members], standard.positions[members], areas, n_patches)
        labels[members] = part + n_before
        n_before += n_patches
    return labels


def patches_of(sources: Sources, standard: Sources, labels: np.ndarray) -> np.ndarray:
    """Patch number (n_sources,) of sources of any density: that of the nearest standard source on their side.

    standard and labels (n_standard,) as for `cortex_patches`: patches stay where they are when the density
    changes.
    """
    moved = np.empty(len(sources), dtype=np.int64)
    for side in np.unique(sources.side):
        known, asked = np.flatnonzero(standard.side == side), np.flatnonzero(sources.side == side)
        _, nearest = cKDTree(standard.positions[known]).query(sources.positions[asked])
        moved[asked] = labels[known[nearest]]
    return moved


def _cut(graph: csr_array, positions: np.ndarray, areas: np.ndarray, n_patches: int) -> np.ndarray:
    """Patch number (n,) in one side's graph (n, n) [m]."""
    seeds = _spread_seeds(graph, n_patches)
    label = _nearest_seed(graph, positions, seeds)
    for _ in range(SETTLING_STEPS):
        weight = np.bincount(label, areas, minlength=n_patches)
        middle = np.stack([np.bincount(label, areas * x, minlength=n_patches) / weight for x in positions.T], axis=1)
        away = np.linalg.norm(positions - middle[label], axis=1)
        order = np.lexsort((away, label))
        seeds = order[np.searchsorted(label[order], np.arange(n_patches))]  # the member nearest to the middle
        label = _nearest_seed(graph, positions, seeds)
    return label


def _spread_seeds(graph: csr_array, count: int) -> np.ndarray:
    """Members of the graph, each the farthest from all before it."""
    seeds = [0]
    distance = dijkstra(graph, indices=0)
    while len(seeds) < count:
        seeds.append(int(np.argmax(distance)))
        distance = np.minimum(distance, dijkstra(graph, indices=seeds[-1], limit=distance.max()))
    return np.array(seeds)


def _nearest_seed(graph: csr_array, positions: np.ndarray, seeds: np.ndarray) -> np.ndarray:
    distance, _, source = dijkstra(graph, indices=seeds, min_only=True, return_predecessors=True)
    number = np.full(graph.shape[0], -1)
    number[seeds] = np.arange(len(seeds))
    cut_off = ~np.isfinite(distance)  # members that no face ties to the others
    source = source.copy()
    source[cut_off] = seeds[cKDTree(positions[seeds]).query(positions[cut_off])[1]]
    return number[source]
