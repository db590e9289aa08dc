"""Branch and bound of the information: shrinks a gap, to nothing where time allows, by splitting the choice."""

from __future__ import annotations

from collections.abc import Callable
from math import comb

import numpy as np

from layout.engine.branch_loop import Outcome, Proof, close
from layout.engine.branch_rules import ROUNDING, ColumnRules, branches_on, cliques_of, column_rules, what_is_left
from layout.engine.branch_tree import DROPPED, EMPTY, NONE, SPLIT, TRIED, Growing, unpacked
from layout.engine.feasible import Feasible
from layout.engine.information import BITS, information
from layout.engine.information_goal import InformationGoal
from layout.engine.kernels_rank import condition
from layout.engine.kernels_rest import best_rest
from layout.engine.model import LinearModel
from layout.engine.node_ascent import bound_part, pool_problem
from layout.engine.rank_aware import FLAT, compressed

LIVE = 1e-3  # a weight above this takes part in a branching
TRIED_AT_ONCE = 30_000  # most sets that are scored one by one instead of branching on
STEPS = 60  # most barrier steps for one part
TOLERANCE = 1e-4  # relative accuracy of a limit that stays above the cut
LOOSE = 0.2  # share of the distance to the cut that a hopeless limit may be off
SPARE = 0.01  # share of the tolerance that a shorter target may cost


def prove(
    model: LinearModel,
    feasible: Feasible,
    chosen: np.ndarray,
    value: float,
    root_limit: float,
    root_weights: np.ndarray,
    target: tuple[np.ndarray, float] | None = None,
    *,
    tolerance: float = 1e-3,
    deadline: float | None = None,
    node_limit: int = 100_000,
    progress: Callable[[str], None] = lambda doing: None,
) -> Proof:
    """Best-first branch and bound from a layout of information `value` and a root limit [bits].

    target: what `compressed` gave for the model and its rules, if it is known. A part of the tree is dropped when its
    limit is within `tolerance` (relative) of the best layout. In every part that stays, candidates whose presence (or
    absence) would push the limit that low are fixed out (in). Parts are examined in batches of fixed size on as many
    threads as there are cores, so the same input gives the same proof anywhere. Anytime: when the deadline or node
    limit strikes, `bound` is the highest limit still open.
    """
    problem = _Problem(model, feasible, target, SPARE * tolerance * abs(value))
    free = np.flatnonzero(~problem.rules.barred)
    return close(
        problem,
        free,
        (free, root_weights[free]),
        chosen,
        value,
        root_limit,
        tolerance=tolerance,
        deadline=deadline,
        node_limit=node_limit,
        progress=progress,
    )


class _Problem:
    """What all parts share: arrays for the kernels, rules in columns, the most sensors and channels."""

    parallel = True

    def __init__(
        self, model: LinearModel, feasible: Feasible, target: tuple[np.ndarray, float] | None, spare: float
    ) -> None:
        self.goal, self.model, self.feasible = InformationGoal(model), model, feasible
        self.rules: ColumnRules = column_rules(feasible)
        self._first = np.searchsorted(model.candidate_of_channel, np.arange(model.n_candidates + 1))
        self._widths = np.diff(self._first)
        self._size = _most(feasible, np.ones(feasible.n_candidates))
        self._channels = _most(feasible, self._widths.astype(float))
        rows, self._residual = target or compressed(model.target, self._channels)
        rows, more = compressed(rows, self._channels, spare)
        self._residual += more
        self._rows = np.ascontiguousarray(rows)
        self._gram = np.ascontiguousarray(model.nuisance_gram[:-1, :-1])
        self._gram[np.diag_indices_from(self._gram)] -= 1.0
        offset = model.offset[model.offset != 0]
        self._flat = FLAT / np.mean(offset**2) if len(offset) else 0.0
        self._cliques = cliques_of(feasible)

    def examine(self, part: Growing, cut: float) -> Outcome:
        """Bound a part, and drop, finish or split it."""
        rest = what_is_left(self.rules, part.chosen, unpacked(part.free, self.feasible.n_candidates))
        if rest is None or len(part.chosen) > self._size:  # more than fit whatever the number of blocks
            return Outcome(EMPTY, part.limit)
        free, low, high = rest
        value = information(self.model, part.chosen)
        if not len(free) or len(part.chosen) == self._size or self._few(part.chosen, free):
            return self._tried(part, value, free, low, high)
        heavy = np.zeros(self.feasible.n_candidates)
        heavy[part.start[0]] = part.start[1]
        limit, _, weights, reduced, loss_out, _, _ = bound_part(
            self._gram,
            self._rows,
            self.model.offset,
            self._flat,
            self._first,
            part.chosen,
            free,
            heavy[free],
            self.rules.start,
            self.rules.row,
            self.rules.share,
            np.where((low > ROUNDING) & (low < high - ROUNDING), low, -np.inf),
            high,
            self._channels_left(part.chosen),
            cut - value - self._residual,
            TOLERANCE,
            LOOSE,
            STEPS,
        )
        own = limit + value + self._residual
        live = np.flatnonzero(weights > 0)
        kept = {"limit": min(own, part.limit), "weighted": free[live], "weights": weights[live]}
        if kept["limit"] <= cut:
            return Outcome(DROPPED, dropped=kept["limit"], **kept)
        slack = own - cut
        inside = np.flatnonzero(loss_out > slack)
        loss_in = np.maximum(-reduced, 0.0)
        out = np.flatnonzero(loss_in > slack)
        given_up = own - min(loss_in[out].min(initial=np.inf), loss_out[inside].min(initial=np.inf))
        kept |= {"fixed_in": free[inside], "given_up": free[out], "dropped": given_up}
        alive = np.ones(len(free), dtype=bool)
        alive[inside] = alive[out] = False
        chosen = np.concatenate([part.chosen, free[inside]])
        rest = what_is_left(self.rules, chosen, free[alive])
        if rest is None:
            return Outcome(SPLIT, **kept)
        joining = rest[0]
        heavy[:] = 0.0
        heavy[free] = weights
        branches = NONE if self._few(chosen, joining) else branches_on(self._cliques, joining, heavy, LIVE)
        children = []
        for j in branches:
            joining = joining[joining != j]
            children.append((np.append(chosen, j), joining))
        children.append((chosen, joining))
        start = (kept["weighted"], kept["weights"])
        return Outcome(SPLIT, branches=branches, children=tuple(children), start=start, **kept)

    def _few(self, chosen: np.ndarray, free: np.ndarray) -> bool:
        """Whether so little is left to choose that every way to finish can be scored."""
        if not self.rules.exact or (self.model.has_offset[free].any() and not self.model.has_offset[chosen].any()):
            return False
        most = min(self._size - len(chosen), len(free))
        return sum(comb(len(free), size) for size in range(most + 1)) <= TRIED_AT_ONCE

    def _tried(self, part: Growing, value: float, free: np.ndarray, low: np.ndarray, high: np.ndarray) -> Outcome:
        """The best layout of a part in which every way to finish is scored."""
        most = min(self._size - len(part.chosen), len(free))
        if most == 0:
            layout = part.chosen
            if not self.feasible.allows(layout):
                return Outcome(EMPTY, part.limit)
            return Outcome(TRIED, value, dropped=value, found=layout, found_value=value)
        rows, left = self._channels_of(part.chosen), self._channels_of(free)
        pull, extra, target = condition(self._gram, self._rows, self.model.offset, rows, left, self._flat)
        nuisance, target = pool_problem(self._gram, pull, extra, target, left, np.arange(len(left)))
        place = np.concatenate([[0], np.cumsum(self._widths[free])])
        must = np.isin(free, self.rules.keep)
        columns = (self.rules.start, self.rules.row, self.rules.share)
        gain, picks = best_rest(nuisance, target, place, free, *columns, low, high, must, most)
        if not np.isfinite(gain):
            return Outcome(EMPTY, part.limit)
        layout = np.concatenate([part.chosen, free[picks]])
        limit = value + BITS * gain + self._residual
        if not self.feasible.allows(layout):  # within the rules but for rounding
            return Outcome(TRIED, limit, dropped=limit)
        return Outcome(TRIED, limit, dropped=limit, found=layout, found_value=information(self.model, layout))

    def _channels_of(self, candidates: np.ndarray) -> np.ndarray:
        return self.model.channels_of(candidates).astype(np.int64)

    def _channels_left(self, chosen: np.ndarray) -> int:
        return max(self._channels - int(self._widths[chosen].sum()), 1)


def _most(feasible: Feasible, share: np.ndarray) -> int:
    """The largest sum of whole shares of any allowed layout, by the linear programme."""
    return int(np.floor(feasible.programme.best(share).limit + 1e-6))
