"""Branch and bound: shrinks the gap of a layout, to nothing where time allows, by splitting what is left to choose."""

from __future__ import annotations

import heapq
import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from layout.engine.bound import Tangent, most_channels, tighten_by_rank, tighten_to
from layout.engine.feasible import Feasible
from layout.engine.information import BITS, Conditioned
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
    absence) would push the limit that low are fixed out (in). Anytime: when the deadline or node limit strikes, `bound`
    is the highest limit still open.
    """
    best, best_value = np.sort(chosen), value
    everything = np.arange(feasible.n_candidates)
    start = np.array(sorted(feasible.keep), dtype=int)
    free = everything[feasible.addable(start)]
    heap = [_Node(-root_limit, 0, root_limit, start, free, root_weights[free])]
    number = nodes = 0
    target = target or compressed(model.target, most_channels(model, feasible))
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
        if part.finishes:
            found, found_value = part.finish()
            if found is not None and found_value > best_value:
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
        children, fixed_away = part.children(tangent, cut)
        dropped = max(dropped, fixed_away)
        for child_chosen, child_free, child_weights in children:
            number += 1
            heapq.heappush(heap, _Node(-limit, number, limit, child_chosen, child_free, child_weights))
    open_limit = -heap[0].key if heap else 0.0
    bound = max(open_limit, dropped, best_value)
    left = len(heap) if open_limit > best_value * (1 + tolerance) else 0
    return Proof(min(bound, root_limit), best, best_value, nodes, left, stopped)


def _pairs(left: Remaining) -> np.ndarray:
    """Information of every pair of single-channel candidates (n, n) [bits], by 2 x 2 determinants; no offset."""
    logs = []
    for gram in (left.both_gram, left.nuisance_gram):
        rows = left.channels[:, 0]
        block = gram[np.ix_(rows, rows)]
        own = np.diag(block)
        determinant = own[:, None] * own - block**2
        np.fill_diagonal(determinant, 1.0)
        logs.append(np.log(determinant))
    return BITS * (logs[0] - logs[1])


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

    @property
    def finishes(self) -> bool:
        """Whether so little is left to choose that all of it can be tried."""
        pairs = self.size == 2 and self._left.channels.shape[1] == 1 and not self._left.offset.any()
        return self.size <= 1 or pairs

    def finish(self) -> tuple[np.ndarray | None, float]:
        """The best layout of a part that `finishes`, and its information; (None, -inf) where no layout is allowed."""
        if self.size == 0:
            allowed = self._feasible.allows(self._node.chosen)
            return (np.sort(self._node.chosen), self._left.value) if allowed else (None, -np.inf)
        nothing = np.zeros(0, dtype=int)
        usable = self._rules.addable(nothing)
        if self.size == 1:
            if self._rules.keep:
                usable &= np.isin(np.arange(self._rules.n_candidates), self._rules.keep)
            table = np.where(usable, Conditioned(self._left, nothing).additions(), -np.inf)
        else:
            table = np.where(self._allowed_pairs(usable), _pairs(self._left), -np.inf)
        if not np.isfinite(table).any():
            return None, -np.inf
        last = np.unravel_index(int(np.argmax(table)), table.shape)
        layout = np.append(self._node.chosen, self._node.candidates[list(last)])
        return np.sort(layout), self._left.value + float(table[last])

    def _allowed_pairs(self, usable: np.ndarray) -> np.ndarray:
        """(n, n) bool: pairs of the remaining candidates that fill the layout within the rules."""
        rules = self._rules
        allowed = usable[:, None] & usable[None, :] & ~rules.conflicts
        np.fill_diagonal(allowed, False)
        same = rules.group[:, None] == rules.group[None, :]
        allowed &= ~same | (rules.counts >= 2)[rules.group][:, None]
        kept = np.isin(np.arange(rules.n_candidates), rules.keep).astype(int)
        allowed &= kept[:, None] + kept[None, :] >= len(rules.keep)
        for members, limit in rules.at_most:
            inside = np.isin(np.arange(rules.n_candidates), members).astype(int)
            allowed &= inside[:, None] + inside[None, :] <= limit
        return allowed

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

    def children(self, tangent: Tangent, cut: float) -> tuple[list[tuple[np.ndarray, np.ndarray, np.ndarray]], float]:
        """(chosen, candidates, weights) of each part that this one splits into, after fixing by reduced cost.

        The split is on the place of largest weight: one child for each of its live members, without the ones before it,
        and a last child without any of them. Second, the highest limit [bits] of the layouts that fixing gives up, all
        of them within the cut (-inf where it gives up none).
        """
        slack = tangent.limit - cut
        _, loss_in, loss_out = self._rules.losses(tangent.gradient)
        inside = np.flatnonzero(loss_out > slack)
        alive = loss_in <= slack
        fixed_away = loss_in[~alive].min(initial=np.inf)
        if len(inside):
            fixed_away = min(fixed_away, loss_out[inside].min())
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
        return out, tangent.limit - fixed_away

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
            live = clique[weights[clique] > LIVE]
            if total > best + 1e-9 and len(live):
                best, members = total, live
        return members[np.argsort(-weights[members], kind="stable")]
