"""Which goal the greedy starts follow."""

from __future__ import annotations

from dataclasses import replace

from layout.engine.combined_limits import Limited
from layout.engine.combined_loss import AnyOneLost
from layout.engine.goal import Goal


def guide_of(goal: Goal) -> Goal:
    """The goal itself, or the one without losses: where one may be lost, the first candidate alone gains nothing."""
    if isinstance(goal, AnyOneLost):
        return goal.goal
    if isinstance(goal, Limited):
        return replace(goal, goal=guide_of(goal.goal))
    return goal
