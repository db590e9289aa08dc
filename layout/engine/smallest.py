"""The fewest sensors that reach a target, and a certificate that fewer cannot."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from layout.engine.feasible import Feasible
from layout.engine.goal import Goal
from layout.engine.model import LinearModel
from layout.engine.ranking import Ranking, rank_layouts
from layout.errors import InfeasibleError


@dataclass(frozen=True)
class SmallestCount:
    """found: the fewest sensors with which a layout that reaches the target was met, None where even the most do not.

    too_few: the largest count that is certified not to reach it (least - 1 where none is). Between the two nothing is
    decided. values and limits: count -> best score met and its certified limit, for every count that was tried.
    """

    target: float
    found: int | None
    too_few: int
    values: dict[int, float]
    limits: dict[int, float]

    @property
    def proven(self) -> bool:
        """Whether no fewer sensors can reach the target."""
        return self.found is not None and self.found == self.too_few + 1


def smallest_count(
    goal: Goal | LinearModel,
    feasible: Feasible,
    target: float,
    least: int,
    *,
    starts: int = 20,
    seed: int = 1,
    parts: int = 100,
    progress: Callable[[str], None] = lambda doing: None,
) -> SmallestCount:
    """The fewest sensors of a one-group problem whose best layout scores `target` or more.

    The most is the group's count in `feasible`, the fewest tried is `least`. Best scores and limits rise with the
    count, so both are found by bisection; counts between them are then tried by branch and bound, `parts` each. Raises
    InfeasibleError where the rules allow no layout at any of the counts.
    """
    (most,) = feasible.counts
    tried: dict[int, Ranking] = {}

    def ranking(count: int, allowed_parts: int = 0) -> Ranking | None:
        known = tried.get(count)
        if known is None or (allowed_parts and known.proof is None):
            rules = replace(feasible, counts=np.array([count]), least=np.array([count]))
            progress(f"{count} sensors")
            try:
                tried[count] = rank_layouts(goal, rules, starts=starts, seed=seed, parts=allowed_parts)
            except InfeasibleError:
                return None
        return tried[count]

    def reached(count: int) -> bool:
        answer = ranking(count)
        return answer is not None and answer.layouts[0].value >= target

    def possible(count: int) -> bool:
        answer = ranking(count)
        return answer is not None and answer.layouts[0].bound >= target

    if ranking(int(most)) is None:
        raise InfeasibleError(f"The rules must allow {most} sensors together, but no layout keeps them all.")
    found = _first(reached, least, int(most))
    first_possible = _first(possible, least, int(most) if found is None else found)
    too_few = int(most) if first_possible is None else first_possible - 1
    while found is not None and found > too_few + 1 and parts:
        answer = ranking(found - 1, parts)
        if answer is None or answer.layouts[0].bound < target:
            too_few = found - 1
        elif answer.layouts[0].value >= target:
            found -= 1
        else:
            break
    values = {count: one.layouts[0].value for count, one in sorted(tried.items())}
    limits = {count: one.layouts[0].bound for count, one in sorted(tried.items())}
    return SmallestCount(target, found, too_few, values, limits)


def _first(holds: Callable[[int], bool], low: int, high: int) -> int | None:
    """The smallest count in [low, high] at which a statement holds that stays true from there on; None if at none."""
    if not holds(high):
        return None
    while low < high:
        middle = (low + high) // 2
        if holds(middle):
            high = middle
        else:
            low = middle + 1
    return high
