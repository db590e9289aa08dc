"""The tree of a proof, kept so that a stranger can check that its parts cover every layout and every limit holds."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

OPEN, DROPPED, EMPTY, TRIED, SPLIT = range(5)


@dataclass(frozen=True)
class ProofTree:
    """All parts met, the root first; a part holds the layouts that contain `chosen` and else only candidates of `free`.

    parent (n,): -1 for the root. kind (n,): OPEN unexamined; DROPPED its limit is within the cut; EMPTY no layout keeps
    the rules; TRIED all its layouts were scored; SPLIT into children. limit (n,): no layout of the part scores more; it
    is that of the tangent at `weights` given `chosen`, or of the parent's where that is lower. Lists of candidates are
    padded with -1: chosen (n, k), weighted (n, m) with weights (n, m), and of a SPLIT part fixed_in (n, l), branches
    (n, b). free and given_up are bits (n, n_candidates / 8): given_up are candidates whose layouts were dropped at
    the split, as were those without all of fixed_in. Child i of a split holds chosen, fixed_in and branches[i] and
    lacks the earlier branches; the last child lacks all branches.
    """

    n_candidates: int
    parent: np.ndarray
    kind: np.ndarray
    limit: np.ndarray
    chosen: np.ndarray
    free: np.ndarray
    weighted: np.ndarray
    weights: np.ndarray
    fixed_in: np.ndarray
    given_up: np.ndarray
    branches: np.ndarray

    @property
    def leaves(self) -> np.ndarray:
        """Parts that are not split."""
        return np.flatnonzero(self.kind != SPLIT)

    def free_of(self, part: int) -> np.ndarray:
        """Candidates that may join in a part."""
        return unpacked(self.free[part], self.n_candidates)

    def given_up_of(self, part: int) -> np.ndarray:
        """Candidates given up at the split of a part."""
        return unpacked(self.given_up[part], self.n_candidates)


NONE = np.zeros(0, dtype=int)


def packed(candidates: np.ndarray, n_candidates: int) -> np.ndarray:
    """Candidates as bits (n_candidates / 8,)."""
    table = np.zeros(n_candidates, dtype=bool)
    table[candidates] = True
    return np.packbits(table)


def unpacked(bits: np.ndarray, n_candidates: int) -> np.ndarray:
    """Candidates from bits, sorted."""
    return np.flatnonzero(np.unpackbits(bits, count=n_candidates))


@dataclass
class Growing:
    """One part while the tree grows, in the words of `ProofTree`; start: what its ascent starts from."""

    number: int
    parent: int
    chosen: np.ndarray
    free: np.ndarray
    start: Any
    limit: float
    kind: int = OPEN
    weighted: np.ndarray = field(default_factory=lambda: NONE)
    weights: np.ndarray = field(default_factory=lambda: NONE)
    fixed_in: np.ndarray = field(default_factory=lambda: NONE)
    given_up: np.ndarray | None = None
    branches: np.ndarray = field(default_factory=lambda: NONE)


def frozen(parts: list[Growing], n_candidates: int) -> ProofTree:
    """The tree in arrays."""

    def padded(lists: list[np.ndarray], fill: float) -> np.ndarray:
        table = np.full((len(lists), max(map(len, lists))), fill)
        for line, one in zip(table, lists, strict=True):
            line[: len(one)] = one
        return table

    nothing = packed(NONE, n_candidates)
    return ProofTree(
        n_candidates,
        np.array([one.parent for one in parts], dtype=np.int32),
        np.array([one.kind for one in parts], dtype=np.int8),
        np.array([one.limit for one in parts]),
        padded([one.chosen for one in parts], -1).astype(np.int32),
        np.array([one.free for one in parts]),
        padded([one.weighted for one in parts], -1).astype(np.int32),
        padded([one.weights for one in parts], 0.0),
        padded([one.fixed_in for one in parts], -1).astype(np.int32),
        np.array([nothing if one.given_up is None else one.given_up for one in parts]),
        padded([one.branches for one in parts], -1).astype(np.int32),
    )
