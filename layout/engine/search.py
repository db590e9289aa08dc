"""Greedy construction and exchange over allowed sets, for any goal."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from layout.engine.feasible import Feasible
from layout.engine.goal import Goal, Pricing

RESOLUTION = 1e-10  # relative; smaller gains are rounding and would let exchange run in circles
SMALLEST_SCALE = 1e-3  # scores (bits or metres) below this are not resolved any finer


def improves(score: float, known: float) -> bool:
    """Whether a score passes a known one by more than rounding."""
    return bool(score > known + RESOLUTION * max(abs(known), SMALLEST_SCALE))


def greedy(
    goal: Goal,
    feasible: Feasible,
    start: np.ndarray | None = None,
    *,
    per_cost: bool = False,
    barred: int | None = None,
) -> np.ndarray:
    """Add the candidate of largest gain until nothing can join; start (k0,) is taken as given (default: keep).

    Where the offset is unknown, the first electrode carries nothing, so electrodes enter by their best pair. per_cost:
    by gain per price, for rules with a budget. barred: a candidate that must not join. No guarantee against the optimum
    is claimed: with correlated noise the information is not submodular.
    """
    chosen = np.array(sorted(feasible.keep), dtype=int) if start is None else np.asarray(start, dtype=int)
    if not goal.has_offset[chosen].any():
        chosen = np.concatenate([chosen, _best_pair(goal, feasible, chosen)])
    while True:
        allowed = feasible.addable(chosen)
        if barred is not None:
            allowed[barred] = False
        if not allowed.any():
            return chosen if feasible.allows(chosen) else _completed(feasible, chosen)
        state = goal.priced(chosen)
        gain = state.additions()
        if per_cost and feasible.budget is not None:
            price = feasible.budget.price
            gain = (gain - state.value) / np.maximum(price, price[price > 0].min(initial=1.0))
        chosen = np.append(chosen, int(np.argmax(np.where(allowed, gain, -np.inf))))


def _best_pair(goal: Goal, feasible: Feasible, chosen: np.ndarray) -> np.ndarray:
    electrodes = np.flatnonzero(feasible.addable(chosen) & goal.has_offset)
    if len(electrodes) < 2:
        return np.zeros(0, dtype=int)
    table = goal.pairs(electrodes)
    best, pair = -np.inf, np.zeros(0, dtype=int)
    # Row by row in falling order of promise: few rows are ever looked at, and `addable` knows every rule.
    np.fill_diagonal(table, -np.inf)
    for row in np.argsort(-table.max(axis=1), kind="stable"):
        if table[row].max() <= best:
            break
        partner = np.where(feasible.addable(np.append(chosen, electrodes[row]))[electrodes], table[row], -np.inf)
        if partner.max() > best:
            best, pair = float(partner.max()), electrodes[[row, int(np.argmax(partner))]]
    return pair


def _completed(feasible: Feasible, chosen: np.ndarray) -> np.ndarray:
    """An allowed layout that keeps as many of the chosen as the rules permit, when adding one by one ran aground."""
    price = np.zeros(feasible.n_candidates)
    price[chosen] = 1.0
    return feasible.any_set(price)


def random_set(feasible: Feasible, rng: np.random.Generator, start: np.ndarray | None = None) -> np.ndarray:
    """An allowed set drawn candidate by candidate, each uniform over those still allowed; keeps `start`."""
    chosen = np.array(sorted(feasible.keep) if start is None else start, dtype=int)
    while (allowed := feasible.addable(chosen)).any():
        chosen = np.append(chosen, rng.choice(np.flatnonzero(allowed)))
    return chosen if feasible.allows(chosen) else feasible.any_set(rng.random(feasible.n_candidates))


def exchange(
    goal: Goal, feasible: Feasible, chosen: np.ndarray, late: Callable[[], bool] = lambda: False
) -> tuple[np.ndarray, float, int]:
    """Swap the best pair (one out, one in) until no swap gains (Fedorov 1972, Theory of Optimal Experiments).

    Returns the set, its score and the number of changes. Every pass prices all k (n - k) swaps at once. Where the
    number of sensors is free, sensors are also added, and each is tried without, its place and money spent anew. Ends
    before its time once `late` says so.
    """
    chosen = np.array(chosen, dtype=int)
    state, changes = goal.priced(chosen), 0
    while True:
        better = None if late() else _swapped(goal, feasible, state)
        if better is None and not late() and (feasible.budget is not None or (feasible.least < feasible.counts).any()):
            better = _respent(goal, feasible, state)
        if better is None:
            return np.sort(state.chosen), state.value, changes
        state, changes = better, changes + 1


def _swapped(goal: Goal, feasible: Feasible, state: Pricing) -> Pricing | None:
    """The best allowed swap, None where none gains."""
    if not len(state.chosen):
        return None
    table = np.where(feasible.swappable(state.chosen), state.swaps(), -np.inf)
    place, arriving = np.unravel_index(np.argmax(table), table.shape)
    if not improves(table[place, arriving], state.value):
        return None
    changed = state.chosen.copy()
    changed[place] = arriving
    return _if_better(goal, changed, state)


def _respent(goal: Goal, feasible: Feasible, state: Pricing) -> Pricing | None:
    """The layout with a sensor more, or with one dropped and what it cost spent greedily; None where nothing gains."""
    grown = greedy(goal, feasible, state.chosen)
    better = _if_better(goal, grown, state) if len(grown) > len(state.chosen) else None
    if better is not None:
        return better
    for place in np.flatnonzero(feasible.droppable(state.chosen)):
        left = np.delete(state.chosen, place)
        for per_cost in (False, True):
            respent = greedy(goal, feasible, left, per_cost=per_cost, barred=state.chosen[place])
            better = _if_better(goal, respent, state)
            if better is not None:
                return better
    return None


def _if_better(goal: Goal, chosen: np.ndarray, state: Pricing) -> Pricing | None:
    """The set priced anew, None where the table promised less than its rounding."""
    changed = goal.priced(chosen)
    return changed if improves(changed.value, state.value) else None
