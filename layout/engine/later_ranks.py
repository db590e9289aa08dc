"""The layouts after the first: each the best that differs from all before it."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from layout.engine.feasible import Feasible
from layout.engine.goal import Goal
from layout.engine.rules import Rule
from layout.engine.search import exchange, greedy, improves
from layout.errors import InfeasibleError

Scored = tuple[float, np.ndarray]


def settled_order(
    goal: Goal,
    feasible: Feasible,
    pool: list[Scored],
    places: np.ndarray,
    ranked: int,
    differ_by: int,
    progress: Callable[[str], None],
) -> tuple[list[Scored], list[Feasible], int]:
    """The ranked layouts with their scores, the rules that each was sought under, and the swaps spent.

    Where exchange under a later rank's extra rule beats an earlier rank, that layout joins the pool and ranking starts
    anew, so scores never rise with the rank.
    """
    found: list[Scored] = []
    rules = [feasible]
    swaps = 0
    while len(found) < ranked:
        progress(f"rank {len(found) + 1} of {ranked}")
        answer = _best_under(goal, rules[-1], pool, [chosen for _, chosen in found])
        if answer is None:
            break
        score, chosen, more = answer
        swaps += more
        if found and improves(score, found[-1][0]):
            pool.append((score, chosen))
            found, rules = [], [feasible]
            continue
        found.append((score, chosen))
        try:
            rules.append(differing(rules[-1], chosen, places, differ_by))
        except InfeasibleError:  # what must be kept leaves fewer sensors free than ranks must differ by
            break
    return found, rules[: len(found)], swaps


def differing(feasible: Feasible, chosen: np.ndarray, places: np.ndarray, differ_by: int) -> Feasible:
    """The same rules for layouts with at least `differ_by` sensors at no place of the chosen ones'."""
    taken = np.isin(places, places[chosen])
    if (feasible.least == feasible.counts).all() and (feasible.sensors == 1).all():
        return feasible.with_at_most(np.flatnonzero(taken), len(chosen) - differ_by)
    others = np.flatnonzero(~taken)
    return feasible.with_rule(Rule("differs from an earlier rank", others, feasible.sensors[others], low=differ_by))


def _best_under(
    goal: Goal, rules: Feasible, pool: list[Scored], earlier: list[np.ndarray]
) -> tuple[float, np.ndarray, int] | None:
    """The best allowed layout that exchange reaches from the pool and the earlier ranks; None if there is none."""
    allowed = [chosen for _, chosen in sorted(pool, key=lambda one: -one[0]) if rules.allows(chosen)]
    swaps = 0
    answers = []
    for start in [*allowed[:3], *(_thinned(goal, rules, chosen) for chosen in earlier), None]:
        if start is None and answers:
            break
        try:
            filled = _any_good(goal, rules) if start is None else greedy(goal, rules, start)
            found, score, more = exchange(goal, rules, filled)
        except InfeasibleError:
            continue
        swaps += more
        if rules.allows(found):
            answers.append((score, found))
    if not answers:
        return None
    score, chosen = max(answers, key=lambda one: one[0])
    return score, chosen, swaps


def _any_good(goal: Goal, rules: Feasible) -> np.ndarray:
    """An allowed layout of candidates that add much to the middle of the relaxed rules: where greedy cannot start."""
    even = np.full(rules.n_candidates, rules.size / rules.n_candidates)
    return rules.any_set(goal.tangent(even)[1])


def _thinned(goal: Goal, rules: Feasible, chosen: np.ndarray) -> np.ndarray:
    """An earlier layout less the sensors that matter least, until it breaks no upper limit."""
    while any(np.isin(chosen, members).sum() > limit for members, limit in rules.at_most):
        left = goal.priced(chosen).removals()
        left[np.isin(chosen, rules.keep)] = -np.inf
        chosen = np.delete(chosen, int(np.argmax(left)))
    return chosen
