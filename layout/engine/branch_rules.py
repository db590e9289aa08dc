"""The rules as plain arrays, and what they leave once some candidates are chosen and others closed."""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np
from scipy import sparse

from layout.engine.feasible import Feasible

ROUNDING = 1e-7  # shares of a rule are whole numbers, or at most 1


@dataclass(frozen=True)
class ColumnRules:
    """low <= sum of shares <= high (n_rules,), in compressed columns: start (n_candidates + 1,), row and share.

    Where a `Feasible` has variants of its upper limits, high is the loosest of each: a set that breaks it breaks all.
    keep: candidates that must be chosen; barred (n_candidates,) bool: those that must not.
    """

    start: np.ndarray
    row: np.ndarray
    share: np.ndarray
    low: np.ndarray
    high: np.ndarray
    keep: np.ndarray
    barred: np.ndarray
    exact: bool


def column_rules(feasible: Feasible) -> ColumnRules:
    """The rules of a `Feasible`; exact: keeping them is being allowed."""
    rows = feasible.rows
    columns = rows.matrix.tocsc()
    return ColumnRules(
        columns.indptr.astype(np.int64),
        columns.indices.astype(np.int64),
        columns.data.astype(float),
        rows.low.astype(float),
        rows.highs.max(axis=0).astype(float),
        np.flatnonzero(feasible.lower > 0),
        feasible.upper <= 0,
        len(rows.highs) == 1,
    )


def what_is_left(
    rules: ColumnRules, chosen: np.ndarray, free: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray] | None:
    """(candidates of `free` that can still join, low, high of the rest); None where the rules leave nothing."""
    low, high, joins, possible = _left(rules.start, rules.row, rules.share, rules.low, rules.high, chosen, free)
    free = free[joins]
    if not possible or not np.isin(rules.keep, np.concatenate([chosen, free])).all():
        return None
    return free, low, high


@numba.njit(cache=True, nogil=True)
def _left(
    start: np.ndarray,
    row: np.ndarray,
    share: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
    chosen: np.ndarray,
    free: np.ndarray,
) -> tuple[np.ndarray, np.ndarray, np.ndarray, bool]:
    low, high = low.copy(), high.copy()
    for j in chosen:
        for e in range(start[j], start[j + 1]):
            low[row[e]] -= share[e]
            high[row[e]] -= share[e]
    joins = np.ones(len(free), np.bool_)
    most = np.zeros(len(low))
    least = np.zeros(len(low))
    for j in free:
        for e in range(start[j], start[j + 1]):
            least[row[e]] += min(share[e], 0.0)
    for i in range(len(free)):
        for e in range(start[free[i]], start[free[i] + 1]):
            if share[e] > 0.0 and share[e] + least[row[e]] > high[row[e]] + ROUNDING:
                joins[i] = False
        if joins[i]:
            for e in range(start[free[i]], start[free[i] + 1]):
                most[row[e]] += max(share[e], 0.0)
    possible = True
    for r in range(len(low)):
        if most[r] < low[r] - ROUNDING or least[r] > high[r] + ROUNDING:
            possible = False
    return low, high, joins, possible


def cliques_of(feasible: Feasible) -> sparse.csr_array:
    """Rules of which at most one member can hold (n_cliques, n_candidates)."""
    matrix, high = feasible.rows.matrix, feasible.rows.highs.max(axis=0)
    owner = np.repeat(np.arange(matrix.shape[0]), np.diff(matrix.indptr))
    uneven = np.bincount(owner, matrix.data != 1.0, matrix.shape[0])
    return matrix[np.flatnonzero((high == 1.0) & (uneven == 0) & (np.diff(matrix.indptr) > 1))]


def branches_on(cliques: sparse.csr_array, joining: np.ndarray, heavy: np.ndarray, live: float) -> np.ndarray:
    """Live members of the clique of largest weight, heaviest first; one candidate where no clique has weight.

    joining: candidates that may still join; heavy (n_candidates,): weights.
    """
    if not len(joining):
        return joining
    weight = np.zeros(len(heavy))
    weight[joining] = heavy[joining]
    heaviest = joining[np.argmax(weight[joining])]
    members = np.array([heaviest])
    totals = cliques @ weight
    if len(totals) and totals.max() > weight[heaviest] + 1e-9:
        top = int(np.argmax(totals))
        clique = cliques.indices[cliques.indptr[top] : cliques.indptr[top + 1]]
        members = clique[weight[clique] > live]
    return members[np.argsort(-weight[members], kind="stable")].astype(int)
