"""Value and bound against what is spent: the shape of the curve, and layouts grown and shrunk along it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from layout.engine.clash import clashing_rules
from layout.engine.feasible import Feasible
from layout.engine.goal import Goal
from layout.engine.rules import Rule
from layout.engine.search import exchange, greedy, improves
from layout.errors import InfeasibleError

IN_ALL = "sensors in all"
CLEAR = 0.01  # a knee stands out from the chord by at least this share of the curve's height


def knee(spent: Sequence[float], scores: Sequence[float]) -> int | None:
    """The place in the curve of its knee; None where there are fewer than three points or none stands out.

    Rule: both axes scaled to run from 0 to 1 between the first and the last point, the point farthest above the
    straight line between the two (the discrete form of Satopää, Albrecht, Irwin & Raghavan 2011, ICDCS Workshops 166,
    from memory); none if it is less than a hundredth above. The knee depends on where the curve ends.
    """
    x, y = np.asarray(spent, float), np.asarray(scores, float)
    if len(x) < 3 or x[-1] <= x[0] or y[-1] <= y[0]:
        return None
    above = (y - y[0]) / (y[-1] - y[0]) - (x - x[0]) / (x[-1] - x[0])
    best = int(np.argmax(np.round(above, 12)))
    return best if above[best] >= CLEAR else None


def first_to_reach(shares: Sequence[float], wanted: float) -> int | None:
    """The place of the first point with at least the wanted share; None if none has."""
    return next((place for place, share in enumerate(shares) if share >= wanted - 1e-12), None)


def of_count(feasible: Feasible, count: int) -> Feasible:
    """The rules for exactly `count` sensors in all, every other rule kept.

    Of one group, more than its own count may be asked for; of several, each keeps its count as the most and the mix is
    free. Raises InfeasibleError where no layout of so many sensors keeps the rules.
    """
    if len(feasible.counts) == 1:
        asked = {"counts": np.array([count]), "least": np.array([count])}
    else:
        members = np.arange(feasible.n_candidates)
        whole = Rule(IN_ALL, members, feasible.sensors, low=count, high=count)
        asked = {"least": np.zeros_like(feasible.counts), "rules": (*feasible.rules, whole)}
    try:
        rules = replace(feasible, **asked)
        rules.any_set(np.zeros(rules.n_candidates))
    except InfeasibleError:
        names = clashing_rules(replace(feasible, checked=False, **asked))
        listed = ", ".join(name for name in names if name != IN_ALL)
        raise InfeasibleError(
            f"--counts: must be numbers of sensors that the brief's other rules allow, but no layout of {count} keeps "
            f"them all{f' (in the way: {listed})' if listed else ''}"
        ) from None
    return rules


def of_budget(feasible: Feasible, total: float) -> Feasible:
    """The rules for so much money. Raises InfeasibleError where it does not pay for what must be there."""
    try:
        rules = replace(feasible, budget=replace(feasible.budget, total=total))
        rules.any_set(np.zeros(rules.n_candidates))
    except InfeasibleError:
        raise InfeasibleError(
            f"--budgets: must pay for a layout under the brief's other rules, but {total:g} does not"
        ) from None
    return rules


@dataclass(frozen=True)
class Grown:
    """A layout and its score."""

    chosen: np.ndarray
    score: float


def holding(feasible: Feasible, kept: np.ndarray) -> Feasible:
    """The same rules for layouts that hold all of `kept`."""
    return replace(feasible, keep=tuple(int(one) for one in np.union1d(np.array(feasible.keep, dtype=int), kept)))


def grown(goal: Goal, feasible: Feasible, smaller: np.ndarray, *, nested: bool) -> Grown | None:
    """The best layout met from a smaller one: greedy additions, then exchange; nested: of the added sensors only.

    None where the rules leave no way from there.
    """
    try:
        rules = holding(feasible, smaller) if nested else feasible
        filled = greedy(goal, rules, smaller)
        found, score, _ = exchange(goal, rules, filled)
    except InfeasibleError:
        return None
    return Grown(found, score) if rules.allows(found) else None


def shrunk(goal: Goal, feasible: Feasible, larger: np.ndarray) -> Grown | None:
    """The best layout met from a larger one: what matters least is dropped until the rules hold, then exchange."""
    chosen = larger
    while not feasible.allows(chosen):
        left = goal.priced(chosen).removals()
        left[np.isin(chosen, feasible.keep)] = -np.inf
        if len(chosen) < 2 or not np.isfinite(left).any():
            return None
        chosen = np.delete(chosen, int(np.argmax(left)))
    found, score, _ = exchange(goal, feasible, chosen)
    return Grown(found, score)


def better(one: Grown, other: Grown | None) -> Grown:
    """The better of the two, the first where they tie."""
    return other if other is not None and improves(other.score, one.score) else one


def next_sensor(goal: Goal, feasible: Feasible, chosen: np.ndarray) -> tuple[float, int] | None:
    """(score, candidate) of the best single addition, counts and money aside; None where the rules leave no place."""
    room = replace(
        feasible,
        counts=feasible.counts + feasible.sensors.max(),
        rules=tuple(one for one in feasible.rules if one.name != "sensors in all"),
        budget=None,
    )
    allowed = room.addable(chosen)
    if not allowed.any():
        return None
    scores = np.where(allowed, goal.priced(chosen).additions(), -np.inf)
    best = int(np.argmax(scores))
    return float(scores[best]), best
