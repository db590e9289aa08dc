"""Conflicts as cliques: few large groups of which at most one member can be chosen, instead of many pairs."""

from __future__ import annotations

import numpy as np


def clique_cover(conflict: np.ndarray) -> list[np.ndarray]:
    """Maximal cliques (sorted index arrays) that cover every edge of a graph given as a symmetric bool
    matrix (n, n).

    Greedy edge clique cover: each uncovered edge, in order, is grown by the common neighbour that covers
    most uncovered edges, then by any common neighbour until the clique is maximal; ties go to the lowest
    index. The diagonal is ignored.
    """
    conflict = conflict & ~np.eye(len(conflict), dtype=bool)
    uncovered = conflict.copy()
    cliques = []
    for first in range(len(conflict)):
        while uncovered[first].any():
            members = [first, int(np.argmax(uncovered[first]))]
            common = np.flatnonzero(conflict[first] & conflict[members[1]])
            gain = uncovered[common][:, members].sum(axis=1)
            while len(common):
                member = int(common[np.argmax(gain)])
                members.append(member)
                stays = conflict[member, common]
                common, gain = common[stays], gain[stays] + uncovered[member, common[stays]]
            clique = np.sort(members)
            uncovered[np.ix_(clique, clique)] = False
            cliques.append(clique)
    return cliques
