"""Every certified limit of a ranking: of later ranks, rank-aware, and by branch and bound."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from layout.engine.bound import Bound, certify, certify_by_rank, most_channels, tighten, tighten_by_rank
from layout.engine.branch import Proof, prove
from layout.engine.branch_goal import prove_goal
from layout.engine.feasible import Feasible
from layout.engine.goal import Goal
from layout.engine.information_goal import InformationGoal
from layout.engine.rank_aware import compressed
from layout.engine.remaining import remaining

ROUNDS_OF_LATER_RANKS = 15
PROOF_MARGIN = 0.95  # the proof aims a little under the tolerance, so that rounding cannot spoil "proven"


def limits_for(
    goal: Goal,
    feasible: Feasible,
    root: Bound,
    deadline: float | None,
    tolerance: float,
    progress: Callable[[str], None],
) -> Limits:
    """The limits that a goal offers."""
    kind = InformationLimits if isinstance(goal, InformationGoal) else Limits
    return kind(goal, feasible, root, deadline, tolerance, progress)


class Limits:
    """Limits that any goal has."""

    def __init__(
        self,
        goal: Goal,
        feasible: Feasible,
        root: Bound,
        deadline: float | None,
        tolerance: float,
        progress: Callable[[str], None],
    ) -> None:
        self._goal, self._feasible, self._root = goal, feasible, root
        self._deadline, self._tolerance, self._progress = deadline, tolerance, progress

    def by_rank(self) -> Bound | None:
        """A tighter limit for few channels; None where there is none."""
        return None

    def under(self, rules: Feasible, chosen: np.ndarray) -> float:
        """A later rank's limit: the root's tangent over the narrower rules, and a short ascent under them."""
        tangent, _ = certify(self._goal, rules, self._root.weights)
        return min(tangent, self._ascended(rules, chosen).value)

    def proof(
        self, rules: Feasible, chosen: np.ndarray, score: float, limit: float, tolerance: float, parts: int
    ) -> Proof | None:
        """Branch and bound under the rules from a layout and a limit; None where the gap is closed already."""
        if limit <= score + tolerance * abs(score):
            return None
        return prove_goal(
            self._goal,
            rules,
            chosen,
            score,
            limit,
            self._root.weights,
            tolerance=PROOF_MARGIN * tolerance,
            deadline=self._deadline,
            node_limit=parts,
            progress=self._progress,
        )

    def _ascended(self, rules: Feasible, chosen: np.ndarray) -> Bound:
        return tighten(
            self._goal,
            rules,
            chosen,
            tolerance=self._tolerance,
            rounds=ROUNDS_OF_LATER_RANKS,
            deadline=self._deadline,
        )


class InformationLimits(Limits):
    """Limits of the information: also rank-aware, from one compressed target, and by branch and bound."""

    def __init__(
        self,
        goal: InformationGoal,
        feasible: Feasible,
        root: Bound,
        deadline: float | None,
        tolerance: float,
        progress: Callable[[str], None],
    ) -> None:
        super().__init__(goal, feasible, root, deadline, tolerance, progress)
        self._target = rows, self._residual = compressed(goal.model.target, most_channels(goal.model, feasible))
        nothing, everything = np.zeros(0, dtype=int), np.arange(feasible.n_candidates)
        self._left = remaining(goal.model, nothing, everything, rows)

    def by_rank(self) -> Bound | None:
        """The rank-aware limit, computed anew in source space at the weights found; None if it can be no lower."""
        return self._by_rank_under(self._feasible, self._root.weights)

    def _by_rank_under(self, rules: Feasible, start: np.ndarray) -> Bound | None:
        tangent = tighten_by_rank(self._left, rules, start)
        if tangent is None:
            return None
        limit, relaxed = certify_by_rank(self._goal.model, rules, tangent.weights, self._left.target)
        return Bound(limit + self._residual, relaxed, tangent.weights, tangent.rounds)

    def under(self, rules: Feasible, chosen: np.ndarray) -> float:
        """A later rank's limit, the rank-aware one among them."""
        tangent, _ = certify(self._goal, rules, self._root.weights)
        own = self._ascended(rules, chosen)
        by_rank = self._by_rank_under(rules, own.weights)
        return min(tangent, own.value, by_rank.value if by_rank else np.inf)

    def proof(
        self, rules: Feasible, chosen: np.ndarray, score: float, limit: float, tolerance: float, parts: int
    ) -> Proof | None:
        """Branch and bound under the rules from a layout and a limit; None where the gap is closed already."""
        if limit <= score + tolerance * abs(score):
            return None
        return prove(
            self._goal.model,
            rules,
            chosen,
            score,
            limit,
            self._root.weights,
            self._target,
            tolerance=PROOF_MARGIN * tolerance,
            deadline=self._deadline,
            node_limit=parts,
            progress=self._progress,
        )
