"""Branch and bound: shrinks the gap of a layout, to nothing where time allows, by splitting what is left to choose."""

from __future__ import annotations

import heapq
import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from layout.engine.bound import Tangent, most_channels, tighten_by_rank, tighten_to
from layout.engine.feasible import Feasible
from layout.engine.information import Conditioned
from layout.engine.model import LinearModel
from layout.engine.rank_aware import compressed
from layout.engine.remaining import Remaining, remaining
from layout.engine.search import exchange, greedy
from layout.errors import InfeasibleError

LIVE = 1e-6  # a weight above this takes part in a branching
EXCHANGE_EVERY = 12  # nodes between two attempts to round a node's weights into a better layout


@dataclass(order=True)
class _Node:
    """An open part of the tree: every layout that holds `chosen` and else only `candidates`; highest limit first."""

    key: float
    number: int
    limit: float = field(compare=False)
    chosen: np.ndarray = field(compare=False)
    candidates: np.ndarray = field(compare=False)
    weights: np.ndarray = field(compare=False)


@dataclass(frozen=True)
class Proof:
    """bound [bits]: no allowed layout passes it; chosen and value: the best layout met; nodes: parts examined.

    open_parts: parts left unexamined (0: closed within the tolerance asked for).
    """

    bound: float
    chosen: np.ndarray
    value: float
    nodes: int
    open_parts: int
    stopped_by_clock: bool


def prove(
    model: LinearModel,
    feasible: Feasible,
    chosen: np.ndarray,
    value: float,
    root_limit: float,
    root_weights: np.ndarray,
    *,
    tolerance: float = 1e-3,
    deadline: float | None = None,
    node_limit: int = 100_000,
    progress: Callable[[str], None] = lambda doing: None,
) -> Proof:
    """Best-first branch and bound from a layout of information `value` and a root limit [bits].

    A part of the tree is dropped when its limit is within `tolerance` (relative) of the best layout. In every part that
    stays, candidates whose presence (or absence) would push the limit that low are fixed out (in). Anytime: when the
    deadline or node limit strikes, `bound` is the highest limit still open.
    """
    best, best_value = np.sort(chosen), value
    everything = np.arange(feasible.n_candidates)
    start = np.array(sorted(feasible.keep), dtype=int)
    free = everything[feasible.addable(start)]
    heap = [_Node(-root_limit, 0, root_limit, start, free, root_weights[free])]
    number = nodes = 0
    target = compressed(model.target, most_channels(model, feasible))
    dropped = value
    stopped = False
    while heap:
        cut = best_value * (1 + tolerance)
        if -heap[0].key <= cut:
            break
        stopped = deadline is not None and time.monotonic() > deadline
        if stopped or nodes >= node_limit:
            break
        node = heapq.heappop(heap)
        nodes += 1
        if nodes % 50 == 0:
            progress(f"proof: {nodes} parts, gap {100 * (node.limit - best_value) / node.limit:.2f} %")
        part = _Part(model, feasible, target, node)
        if part.infeasible:
            continue
        if part.size <= 1:
            found, found_value = part.finish()
            if found_value > best_value:
                best, best_value = found, found_value
            continue
        tangent = part.bounded(cut)
        if tangent is None:
            continue
        if nodes % EXCHANGE_EVERY == 1:
            found, found_value, _ = exchange(model, feasible, greedy(model, feasible, part.rounded(tangent)))
            if found_value > best_value:
                best, best_value = found, found_value
                cut = best_value * (1 + tolerance)
        limit = min(node.limit, tangent.limit)
        if limit <= cut:
            dropped = max(dropped, limit)
            continue
        for child_chosen, child_free, child_weights in part.children(tangent, cut):
            number += 1
            heapq.heappush(heap, _Node(-limit, number, limit, child_chosen, child_free, child_weights))
    open_limit = -heap[0].key if heap else 0.0
    bound = max(open_limit, dropped, best_value)
    left = len(heap) if open_limit > best_value * (1 + tolerance) else 0
    return Proof(min(bound, root_limit), best, best_value, nodes, left, stopped)


class _Part:
    """One open part with its reduced problem."""

    def __init__(self, model: LinearModel, feasible: Feasible, target: tuple[np.ndarray, float], node: _Node) -> None:
        self._feasible, self._node = feasible, node
        rows, self._residual = target
        try:
            self._rules = feasible.given(node.chosen, node.candidates)
            self.infeasible = False
        except InfeasibleError:
            self.infeasible = True
            return
        self.size = self._rules.size
        self._left: Remaining = remaining(model, node.chosen, node.candidates, rows)

    def finish(self) -> tuple[np.ndarray, float]:
        """The best layout of a part in which at most one candidate is still to be chosen."""
        if self.size == 0:
            return np.sort(self._node.chosen), self._left.value
        gains = np.where(
            self._rules.addable(np.zeros(0, dtype=int)),
            Conditioned(self._left, np.zeros(0, dtype=int)).additions(),
            -np.inf,
        )
        last = int(np.argmax(gains))
        return np.sort(np.append(self._node.chosen, self._node.candidates[last])), self._left.value + float(gains[last])

    def bounded(self, cut: float) -> Tangent | None:
        """A tangent good enough to drop the part at `cut` or to know that none is; None where no layout is left.

        Limits are of whole layouts [bits].
        """
        start = self._node.weights.copy()
        held = np.bincount(self._rules.group, weights=start, minlength=len(self._rules.counts))
        shrink = np.minimum(1.0, self._rules.counts / np.maximum(held, 1e-12))
        start *= shrink[self._rules.group]
        target = cut - self._left.value
        try:
            tangent = tighten_to(self._left, self._rules, start, target=target, tolerance=1e-3, rounds=12)
            if tangent.limit > target:
                by_rank = tighten_by_rank(self._left, self._rules, tangent.weights, target=target, rounds=6)
                if by_rank is not None and by_rank.limit + self._residual < tangent.limit:
                    tangent = replace(by_rank, limit=by_rank.limit + self._residual)
        except InfeasibleError:
            return None
        return replace(tangent, limit=tangent.limit + self._left.value)

    def rounded(self, tangent: Tangent) -> np.ndarray:
        """The part's chosen candidates and the heaviest others, as far as the rules go."""
        chosen = self._node.chosen
        for local in np.argsort(-tangent.weights, kind="stable"):
            if tangent.weights[local] < 0.3 or len(chosen) == self._feasible.size:
                break
            candidate = self._node.candidates[local]
            if self._feasible.addable(chosen)[candidate]:
                chosen = np.append(chosen, candidate)
        return chosen

    def children(self, tangent: Tangent, cut: float) -> list[tuple[np.ndarray, np.ndarray, np.ndarray]]:
        """(chosen, candidates, weights) of each part that this one splits into, after fixing by reduced cost.

        The split is on the place of largest weight: one child for each of its live members, without the ones before it,
        and a last child without any of them.
        """
        slack = tangent.limit - cut
        _, loss_in, loss_out = self._rules.losses(tangent.gradient)
        inside = np.flatnonzero(loss_out > slack)
        alive = loss_in <= slack
        chosen = np.concatenate([self._node.chosen, self._node.candidates[inside]])
        alive[inside] = False
        if len(inside):
            alive &= self._feasible.addable(chosen)[self._node.candidates]
        out = []
        branch = self._split_on(alive, tangent)
        for local in branch:
            alive = alive.copy()
            alive[local] = False
            taken = np.append(chosen, self._node.candidates[local])
            free = alive & self._feasible.addable(taken)[self._node.candidates]
            out.append((taken, self._node.candidates[free], tangent.weights[free]))
        out.append((chosen, self._node.candidates[alive], tangent.weights[alive]))
        return out

    def _split_on(self, alive: np.ndarray, tangent: Tangent) -> np.ndarray:
        """Live members of the clique of largest weight, heaviest first; one candidate where no clique has weight."""
        weights = np.where(alive, tangent.weights, 0.0)
        places = np.flatnonzero(alive)
        if not len(places):
            return places
        heaviest = places[np.lexsort((-tangent.gradient[places], -weights[places]))[0]]
        best, members = weights[heaviest], np.array([heaviest])
        for clique in self._rules.cliques:
            total = weights[clique].sum()
            if total > best + 1e-9:
                best, members = total, clique[weights[clique] > LIVE]
        return members[np.argsort(-weights[members], kind="stable")]
