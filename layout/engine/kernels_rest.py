"""Trying every way to finish a nearly full layout, by growing two small Cholesky factors candidate by candidate."""

from __future__ import annotations

import numba
import numpy as np

SLACK = 1e-7  # shares of a rule are whole numbers, or at most 1


@numba.njit(cache=True, nogil=True)
def _change(
    low: np.ndarray, high: np.ndarray, row: np.ndarray, share: np.ndarray, begin: int, end: int, sign: float
) -> int:
    """A candidate joins (sign 1) or leaves (-1); how many more rules are broken then."""
    more = 0
    for e in range(begin, end):
        r = row[e]
        more -= (low[r] > SLACK) + (high[r] < -SLACK)
        low[r] -= sign * share[e]
        high[r] -= sign * share[e]
        more += (low[r] > SLACK) + (high[r] < -SLACK)
    return more


@numba.njit(cache=True, nogil=True)
def best_rest(
    nuisance: np.ndarray,
    target: np.ndarray,
    place: np.ndarray,
    numbers: np.ndarray,
    start: np.ndarray,
    row: np.ndarray,
    share: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
    must: np.ndarray,
    most: int,
) -> tuple[float, np.ndarray]:
    """(2 nats, places in `numbers`) of the best set of at most `most` candidates within the rules; (-inf, -) if none.

    nuisance (q, q) = conditional B Bᵀ and target (q, p) of the channels left; candidate i has channels place[i] to
    place[i + 1]; numbers (m,): their numbers in the rules' columns; low, high: the rules left; must (m,) bool: those
    that every set holds.
    """
    m = len(numbers)
    both = target @ target.T
    widest = 0
    for i in range(m):
        widest = max(widest, place[i + 1] - place[i])
    size = most * widest
    factors = np.zeros((2, size, size))
    channel = np.zeros(size, np.int64)
    gain = np.zeros(most + 1)
    pick = np.full(most, -1)
    filled = np.zeros(most + 1, np.int64)
    low, high = low.copy(), high.copy()
    needed = must.sum()
    held = 0
    signed = (share < 0.0).any()
    broken = np.int64(0)  # rules that the set at hand does not keep
    for r in range(len(low)):
        broken += (low[r] > SLACK) + (high[r] < -SLACK)
    best, best_pick = -np.inf, np.zeros(0, np.int64)
    if needed == 0 and broken == 0:
        best = 0.0
    depth, candidate = 0, 0
    while True:
        if depth == most or candidate == m:
            if depth == 0:
                break
            depth -= 1
            candidate = pick[depth]
            broken += _change(low, high, row, share, start[numbers[candidate]], start[numbers[candidate] + 1], -1.0)
            held -= 1 if must[candidate] else 0
            candidate += 1
            continue
        fits = True
        for e in range(start[numbers[candidate]], start[numbers[candidate] + 1]):
            if share[e] > high[row[e]] + SLACK and share[e] > 0.0 and not signed:
                fits = False
        if fits:
            at = filled[depth]
            total = gain[depth]
            for c in range(place[candidate], place[candidate + 1]):
                channel[at] = c
                for side in range(2):
                    factor = factors[side]
                    for b in range(at + 1):
                        entry = nuisance[c, channel[b]] + (1.0 if b == at else 0.0)
                        if side == 0:
                            entry += both[c, channel[b]]
                        for a in range(b):
                            entry -= factor[at, a] * factor[b, a]
                        if b < at:
                            factor[at, b] = entry / factor[b, b]
                        else:
                            factor[at, at] = np.sqrt(max(entry, 1e-300))
                    total += (2.0 if side == 0 else -2.0) * np.log(factor[at, at])
                at += 1
            pick[depth] = candidate
            broken += _change(low, high, row, share, start[numbers[candidate]], start[numbers[candidate] + 1], 1.0)
            held += 1 if must[candidate] else 0
            depth += 1
            gain[depth], filled[depth] = total, at
            if total > best and held == needed and broken == 0:
                best, best_pick = total, pick[:depth].copy()
        candidate += 1
    return best, best_pick
