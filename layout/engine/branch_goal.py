"""Branch and bound of any concave goal, by its own relaxation with what is chosen held at weight one."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from layout.engine.bound import FLOOR
from layout.engine.branch_loop import Outcome, Proof, close
from layout.engine.branch_rules import branches_on, cliques_of, column_rules, what_is_left
from layout.engine.branch_tree import DROPPED, EMPTY, NONE, SPLIT, TRIED, Growing, unpacked
from layout.engine.feasible import Feasible
from layout.engine.goal import Goal
from layout.engine.hull_ascent import HullAscent
from layout.engine.pricing import Priced
from layout.errors import InfeasibleError

LIVE = 1e-3  # a weight above this takes part in a branching
ROUNDS = 12  # most linear programmes for one part
TOLERANCE = 1e-4  # relative accuracy of a limit that stays above the cut
LOOSE = 0.3  # share of the distance to the cut that a hopeless limit may be off
HANDED_ON = 10  # points of the hull that children start from


def prove_goal(
    goal: Goal,
    feasible: Feasible,
    chosen: np.ndarray,
    score: float,
    root_limit: float,
    root_weights: np.ndarray,
    *,
    tolerance: float = 1e-3,
    deadline: float | None = None,
    node_limit: int = 100_000,
    progress: Callable[[str], None] = lambda doing: None,
) -> Proof:
    """Best-first branch and bound from a layout of score `score` and a root limit, as `branch.prove` for any goal.

    Slower: every part costs a few linear programmes and Newton ascents, and nothing is conditioned on what is chosen.
    """
    problem = _Problem(goal, feasible)
    free = np.flatnonzero(~problem.rules.barred)
    return close(
        problem,
        free,
        (np.arange(feasible.n_candidates), root_weights[None, :]),
        chosen,
        score,
        root_limit,
        tolerance=tolerance,
        deadline=deadline,
        node_limit=node_limit,
        progress=progress,
    )


class _Problem:
    """What all parts share. Not parallel: the parts share one warm linear programme."""

    parallel = False

    def __init__(self, goal: Goal, feasible: Feasible) -> None:
        self.goal, self.feasible = goal, feasible
        self.rules = column_rules(feasible)
        self._size = int(np.floor(feasible.programme.best(np.ones(feasible.n_candidates)).limit + 1e-6))
        self._cliques = cliques_of(feasible)

    def examine(self, part: Growing, cut: float) -> Outcome:
        """Bound a part, and drop, finish or split it."""
        n = self.feasible.n_candidates
        rest = what_is_left(self.rules, part.chosen, unpacked(part.free, n))
        if rest is None or len(part.chosen) > self._size:  # more than fit whatever the number of blocks
            return Outcome(EMPTY, part.limit)
        free = rest[0]
        left = self._size - len(part.chosen)
        if left == 0 or not len(free) or (left == 1 and self.rules.exact):
            return self._tried(part, free if left else NONE)
        inside, closed = np.zeros(n, dtype=bool), np.ones(n, dtype=bool)
        inside[part.chosen] = True
        closed[part.chosen] = closed[free] = False
        try:
            limit, weights, priced, points = self._bounded(part, inside, closed, cut)
        except InfeasibleError:
            return Outcome(EMPTY, part.limit)
        live = np.flatnonzero(weights > 0)
        kept = {"limit": min(limit, part.limit), "weighted": live, "weights": weights[live]}
        if kept["limit"] <= cut:
            return Outcome(DROPPED, dropped=kept["limit"], **kept)
        slack = limit - cut
        fixed = free[priced.loss_out[free] > slack]
        out = free[priced.loss_in[free] > slack]
        given_up = limit - min(priced.loss_in[out].min(initial=np.inf), priced.loss_out[fixed].min(initial=np.inf))
        kept |= {"fixed_in": fixed, "given_up": out, "dropped": given_up}
        chosen = np.concatenate([part.chosen, fixed])
        rest = what_is_left(self.rules, chosen, np.setdiff1d(free, np.union1d(fixed, out)))
        if rest is None:
            return Outcome(SPLIT, **kept)
        joining = rest[0]
        children = []
        branches = branches_on(self._cliques, joining, weights, LIVE)
        for j in branches:
            joining = joining[joining != j]
            children.append((np.append(chosen, j), joining))
        children.append((chosen, joining))
        stack = np.array(points[:HANDED_ON])
        pool = np.flatnonzero(stack.any(axis=0))
        return Outcome(SPLIT, branches=branches, children=tuple(children), start=(pool, stack[:, pool]), **kept)

    def _bounded(
        self, part: Growing, inside: np.ndarray, closed: np.ndarray, cut: float
    ) -> tuple[float, np.ndarray, Priced, list[np.ndarray]]:
        """(limit, weights, prices there, points of the hull): good enough to drop the part or to know none is."""
        programme = self.feasible.programme
        pool, handed = part.start
        points = np.zeros((len(handed), len(inside)))
        points[:, pool] = handed
        allowed = (points[:, inside] > 1 - 1e-9).all(axis=1) & (points[:, closed] < 1e-9).all(axis=1)
        start = list(points[allowed])
        if not start:
            around = np.where(closed, 0.0, np.where(inside, 1.0, points.mean(axis=0)))
            pool = np.flatnonzero(around)
            price = self.goal.relaxed(pool).gradient_everywhere(around[pool])
            start = [programme.best(price, inside, closed).vertex]
        ascent = HullAscent(self.goal.relaxed, start)
        best: tuple[float, np.ndarray, Priced] | None = None
        for done in range(ROUNDS):
            weights, value, gradient = ascent.advance(TOLERANCE)
            priced = programme.best(gradient, inside, closed)
            limit = value - float(gradient @ weights) + priced.limit
            if best is None or limit < best[0]:
                best = limit, weights, priced
            settled = limit - value <= TOLERANCE * max(abs(value), FLOOR)
            hopeless = value > cut and limit - value <= LOOSE * (value - cut)
            if best[0] <= cut or settled or hopeless or done == ROUNDS - 1:
                break
            ascent.grow(priced.vertex)
        return *best, ascent.points

    def _tried(self, part: Growing, free: np.ndarray) -> Outcome:
        """The best layout of a part that is full, or lacks one candidate."""
        found, score = None, -np.inf
        if self.feasible.allows(part.chosen):
            found, score = part.chosen, self.goal.score(part.chosen)
        if len(free):
            scores = self.goal.priced(part.chosen).additions()
            for j in free[np.argsort(-scores[free], kind="stable")]:
                layout = np.append(part.chosen, j)
                if scores[j] <= score:
                    break
                if self.feasible.allows(layout):
                    found, score = layout, self.goal.score(layout)
                    break
        if found is None:
            return Outcome(EMPTY, part.limit)
        return Outcome(TRIED, score, dropped=score, found=found, found_value=score)
