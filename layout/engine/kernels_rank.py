"""Compiled kernels of the rank-aware relaxation: conditioning, value, gradient and a Newton metric on a small pool.

Formulas as in `rank_aware` and `remaining`; here they work on plain arrays without the interpreter's lock, so that
parts of the tree can be bounded side by side. All values are in nats times 2: multiply by `BITS`.
"""

from __future__ import annotations

import numba
import numpy as np


@numba.njit(cache=True, nogil=True)
def forward(lower: np.ndarray, right: np.ndarray) -> None:
    """Solve lower @ x = right (n, m) in place, row by row."""
    for i in range(len(right)):
        for j in range(i):
            pull = lower[i, j]
            for c in range(right.shape[1]):
                right[i, c] -= pull * right[j, c]
        scale = 1.0 / lower[i, i]
        for c in range(right.shape[1]):
            right[i, c] *= scale


@numba.njit(cache=True, nogil=True)
def backward(lower: np.ndarray, right: np.ndarray) -> None:
    """Solve lower.T @ x = right (n, m) in place."""
    for i in range(len(right) - 1, -1, -1):
        scale = 1.0 / lower[i, i]
        for c in range(right.shape[1]):
            right[i, c] *= scale
        for j in range(i):
            pull = lower[i, j]
            for c in range(right.shape[1]):
                right[j, c] -= pull * right[i, c]


@numba.njit(cache=True, nogil=True)
def condition(
    gram: np.ndarray, target: np.ndarray, offset: np.ndarray, rows: np.ndarray, left: np.ndarray, flat: float
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """(pull, extra, rest): what the channels `left` (m,) have left, given the channels `rows` (c,).

    gram (n, n) = B Bᵀ; target (n, p); offset (n,). The conditional nuisance Gram is
    gram[left, left] - pullᵀ pull + extra extraᵀ, pull (c, m); extra (m,) is what the offset leaves unknown, or the
    offset itself with variance `flat` while no chosen channel sees it; rest (m, p): the conditional target rows.
    """
    c, m, p = len(rows), len(left), target.shape[1]
    rest = np.empty((m, p))
    extra = np.empty(m)
    for i in range(m):
        rest[i] = target[left[i]]
        extra[i] = offset[left[i]]
    pull = np.empty((c, m))
    seen = False
    if c > 0:
        inner = np.empty((c, c))
        mine = np.empty((c, p + 1))
        for a in range(c):
            for b in range(c):
                inner[a, b] = gram[rows[a], rows[b]]
            inner[a, a] += 1.0
            for i in range(m):
                pull[a, i] = gram[rows[a], left[i]]
            mine[a, :p] = target[rows[a]]
            mine[a, p] = offset[rows[a]]
            seen = seen or offset[rows[a]] != 0.0
        lower = np.linalg.cholesky(inner)
        forward(lower, pull)
        forward(lower, mine)
        known = np.ascontiguousarray(mine[:, :p])
        rest -= pull.T @ known
        spread = known.T @ known
        for a in range(p):
            spread[a, a] += 1.0
        if seen:
            of_offset = np.ascontiguousarray(mine[:, p])
            size = np.sqrt((of_offset * of_offset).sum())
            extra = (extra - pull.T @ of_offset) / size
            along = (known.T @ of_offset) / size
            for i in range(m):
                for a in range(p):
                    rest[i, a] -= extra[i] * along[a]
            for a in range(p):
                for b in range(p):
                    spread[a, b] -= along[a] * along[b]
        lower = np.linalg.cholesky(spread)
        turned = np.ascontiguousarray(rest.T)
        forward(lower, turned)
        rest = np.ascontiguousarray(turned.T)
    if not seen:
        extra *= np.sqrt(flat)
    return pull, extra, rest


@numba.njit(cache=True, nogil=True)
def split_strength(strength: np.ndarray, channels: int) -> tuple[int, float]:
    """(ι, λ̄) for eigenvalues in falling order: `rank_aware.split`, compiled."""
    tail = strength.sum()
    for whole in range(min(channels, len(strength) + 1)):
        mean = max(tail, 0.0) / (channels - whole)
        if whole == len(strength) or strength[whole] <= mean:
            return whole, mean
        tail = strength[whole + 1 :].sum()
    return channels, 0.0


@numba.njit(cache=True, nogil=True)
def second_order(
    nuisance: np.ndarray, target: np.ndarray, weights: np.ndarray, channels: int
) -> tuple[float, np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Value, prices (q,), metric (q, q), and what `prices` needs, at channel weights (q,) > 0.

    nuisance (q, q): conditional B Bᵀ; target (q, p). The metric is minus the Hessian but for the turning between the
    eigenvectors that stand for themselves and the others, where it takes λ̄ for each of the others' eigenvalues; it is
    positive semidefinite. Returns (value, price, metric, known (q, p), directions (p, p) scaled): a channel with
    nuisance row r (q,) against the pool and target row a has price |(a - r · known) @ directions|².
    """
    q, p = target.shape
    root = np.sqrt(weights)
    inner = np.empty((q, q))
    pull = np.empty((q, q + p))
    for i in range(q):
        for j in range(q):
            inner[i, j] = root[i] * nuisance[i, j] * root[j]
            pull[i, j] = root[i] * nuisance[i, j]
        inner[i, i] += 1.0
        for j in range(p):
            pull[i, q + j] = root[i] * target[i, j]
    lower = np.linalg.cholesky(inner)
    forward(lower, pull)
    seen = np.ascontiguousarray(pull[:, q:])
    known = seen.copy()
    backward(lower, known)
    for i in range(q):
        for j in range(p):
            known[i, j] *= root[i]
    pull = np.ascontiguousarray(pull[:, :q])
    left = nuisance - pull.T @ pull
    strength, directions = np.linalg.eigh(seen.T @ seen)
    strength = np.maximum(strength[::-1].copy(), 0.0)
    directions = np.ascontiguousarray(directions[:, ::-1])
    whole, rest = split_strength(strength, channels)
    value = (channels - whole) * np.log1p(rest)
    for i in range(whole):
        value += np.log1p(strength[i])
    turned = (target - nuisance @ known) @ directions
    scaled = np.empty((q, p))
    for a in range(p):
        factor = 1.0 / np.sqrt(1.0 + (strength[a] if a < whole else rest))
        for i in range(q):
            scaled[i, a] = turned[i, a] * factor
    for a in range(p):
        factor = 1.0 / np.sqrt(1.0 + (strength[a] if a < whole else rest))
        for b in range(p):
            directions[b, a] *= factor
    tail = np.ascontiguousarray(scaled[:, whole:])
    shared = scaled @ scaled.T
    of_tail = tail @ tail.T
    price = np.empty(q)
    for i in range(q):
        price[i] = shared[i, i]
    metric = np.empty((q, q))
    places = max(channels - whole, 1)
    for i in range(q):
        for j in range(q):
            metric[i, j] = (
                2.0 * left[i, j] * shared[i, j]
                + shared[i, j] * shared[i, j]
                - of_tail[i, j] * of_tail[i, j]
                + of_tail[i, i] * of_tail[j, j] / places
            )
    return value, price, metric, known, directions
