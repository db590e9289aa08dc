"""Greedy construction and exchange over allowed sets."""

from __future__ import annotations

import numpy as np

from layout.engine.feasible import Feasible
from layout.engine.information import Conditioned, pair_information
from layout.engine.model import LinearModel

IMPROVEMENT = 1e-10  # bits; smaller gains are rounding and would let exchange run in circles


def greedy(model: LinearModel, feasible: Feasible, start: np.ndarray | None = None) -> np.ndarray:
    """Add the candidate of largest gain until the layout is full; start (k0,) is taken as given (default: keep).

    Where the offset is unknown, the first electrode carries nothing, so electrodes enter by their best pair. No
    guarantee against the optimum is claimed: with correlated noise the information is not submodular.
    """
    chosen = np.array(sorted(feasible.keep), dtype=int) if start is None else np.asarray(start, dtype=int)
    if not model.has_offset[chosen].any():
        chosen = np.concatenate([chosen, _best_pair(model, feasible, chosen)])
    while len(chosen) < feasible.size:
        allowed = feasible.addable(chosen)
        if not allowed.any():
            return _completed(feasible, chosen)
        gain = np.where(allowed, Conditioned(model, chosen).additions(), -np.inf)
        chosen = np.append(chosen, int(np.argmax(gain)))
    return chosen


def _best_pair(model: LinearModel, feasible: Feasible, chosen: np.ndarray) -> np.ndarray:
    electrodes = np.flatnonzero(feasible.addable(chosen) & model.has_offset)
    room = feasible.counts - np.bincount(feasible.group[chosen], minlength=len(feasible.counts))
    if len(electrodes) < 2 or room[np.unique(feasible.group[electrodes])].sum() < 2:
        return np.zeros(0, dtype=int)
    table = pair_information(model, electrodes)
    table[feasible.conflicts[np.ix_(electrodes, electrodes)]] = -np.inf
    full = room[feasible.group[electrodes]] < 2
    table[np.ix_(full, full)] = np.where(
        feasible.group[electrodes[full]][:, None] == feasible.group[electrodes[full]][None, :],
        -np.inf,
        table[np.ix_(full, full)],
    )
    for members, limit in feasible.at_most:
        if limit - np.isin(chosen, members).sum() < 2:
            inside = np.isin(electrodes, members)
            table[np.ix_(inside, inside)] = -np.inf
    np.fill_diagonal(table, -np.inf)
    first, second = np.unravel_index(np.argmax(table), table.shape)
    if not np.isfinite(table[first, second]):
        return np.zeros(0, dtype=int)
    return electrodes[[first, second]]


def _completed(feasible: Feasible, chosen: np.ndarray) -> np.ndarray:
    """A full layout that keeps as many of the chosen as the rules permit, when adding one by one has run aground."""
    price = np.zeros(feasible.n_candidates)
    price[chosen] = 1.0
    return feasible.any_set(price)


def random_set(feasible: Feasible, rng: np.random.Generator, start: np.ndarray | None = None) -> np.ndarray:
    """An allowed set drawn candidate by candidate, each uniform over those still allowed; keeps `start`."""
    chosen = np.array(sorted(feasible.keep) if start is None else start, dtype=int)
    while len(chosen) < feasible.size:
        allowed = np.flatnonzero(feasible.addable(chosen))
        if not len(allowed):
            return feasible.any_set(rng.random(feasible.n_candidates))
        chosen = np.append(chosen, rng.choice(allowed))
    return chosen


def exchange(model: LinearModel, feasible: Feasible, chosen: np.ndarray) -> tuple[np.ndarray, float, int]:
    """Swap the best pair (one out, one in) until no swap gains (Fedorov 1972, Theory of Optimal Experiments).

    Returns the set, its information [bits] and the number of swaps. Every pass prices all k (n - k) swaps at once.
    """
    chosen = np.array(chosen, dtype=int)
    state = Conditioned(model, chosen)
    value, swaps = state.value, 0
    while len(chosen):
        table = np.where(feasible.swappable(chosen), state.swaps(), -np.inf)
        place, arriving = np.unravel_index(np.argmax(table), table.shape)
        if not table[place, arriving] > value + IMPROVEMENT:
            return np.sort(chosen), value, swaps
        leaving, chosen[place] = chosen[place], arriving
        state = Conditioned(model, chosen)
        if not state.value > value + IMPROVEMENT:  # the table promised less than its rounding
            chosen[place] = leaving
            return np.sort(chosen), value, swaps
        value, swaps = state.value, swaps + 1
    return chosen, value, swaps
