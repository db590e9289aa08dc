"""Branch and bound with free axes: over who is in and who is out while axes stay matrix weights, then over cones."""

from __future__ import annotations

import heapq
import time
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from layout.engine.axis_bound import AxisRules, AxisTangent, tighten_axes, whole
from layout.engine.axis_cones import cones_over, most_mixed
from layout.engine.axis_freedom import Turning
from layout.engine.axis_relaxation import Atoms, ByRank
from layout.engine.axis_search import Turned, exchange_axes, greedy_axes, start_frames, turn
from layout.engine.feasible import Feasible
from layout.errors import InfeasibleError

LIVE = 1e-6  # a weight above this takes part in a branching
PROMISING = 0.97  # a rounded layout this near the best is worth an exchange


@dataclass(order=True)
class _Node:
    """An open part of the tree: the layouts that hold `forced`, nothing `closed` (n,) bool, axes as `turning` allows.

    Highest limit first.
    """

    key: float
    number: int
    forced: np.ndarray = field(compare=False)
    closed: np.ndarray = field(compare=False)
    atoms: Atoms = field(compare=False)
    turning: Turning = field(compare=False)


@dataclass(frozen=True)
class AxisProof:
    """bound [bits]: no allowed layout of any axes passes it; best: the best layout met; nodes: parts examined.

    open_parts: parts left unexamined. Where all sites are settled, a part is split by cones of one axis; two axes at a
    site and axes within a tilt limit of their own are not split, and what they leave open stays in the bound.
    """

    bound: float
    best: Turned
    nodes: int
    open_parts: int
    stopped_by_clock: bool


def prove_axes(
    turning: Turning,
    feasible: Feasible,
    best: Turned,
    root: AxisTangent,
    by_rank: ByRank | None,
    *,
    tolerance: float = 1e-3,
    deadline: float | None = None,
    node_limit: int = 100_000,
    progress: Callable[[str], None] = lambda doing: None,
) -> AxisProof:
    """Best-first from a layout and the root's tangent; by_rank: the relaxation that the root's tangent was of.

    A part is dropped when its limit is within `tolerance` (relative) of the best layout. Anytime: when the deadline or
    node limit strikes, `bound` is the highest limit still open.
    """
    start = whole(feasible)
    heap = [_Node(-root.limit, 0, start.forced, start.closed, root.atoms, turning)]
    search = _Incumbent(turning, feasible, best)
    number = nodes = 0
    dropped, stopped = best.value, False
    while heap and -heap[0].key > search.cut(tolerance):
        stopped = deadline is not None and time.monotonic() > deadline
        if stopped or nodes >= node_limit:
            break
        node = heapq.heappop(heap)
        nodes += 1
        rules = AxisRules(feasible, node.forced, node.closed)
        try:
            tangent = tighten_axes(
                node.turning,
                rules,
                _restricted(node.turning, rules, node.atoms),
                by_rank,
                cut=search.cut(tolerance),
                tolerance=max(1e-3, 0.2 * tolerance),
                rounds=8 if nodes > 1 else 40,
                deadline=deadline,
            )
        except InfeasibleError:
            continue
        search.offer(tangent.atoms)
        limit, cut = min(-node.key, tangent.limit), search.cut(tolerance)
        if nodes % 20 == 0:
            gap = 100 * (limit - search.best.value) / limit
            progress(f"proof: {nodes} of at most {node_limit} parts, gap {gap:.2f} %")
        forced, closed, given_up = _fixed(rules, tangent, cut)
        dropped = max(dropped, given_up)
        if limit <= cut:
            dropped = max(dropped, limit)
            continue
        children = _children(node.turning, turning.limited, feasible, tangent, forced, closed)
        if not children:
            dropped = max(dropped, limit)
        for taken, shut, own in children:
            number += 1
            heapq.heappush(heap, _Node(-limit, number, taken, shut, tangent.atoms, own))
    left = len(heap) if heap and -heap[0].key > search.cut(tolerance) else 0
    bound = max(-heap[0].key if heap else 0.0, dropped, search.best.value)
    return AxisProof(min(bound, max(root.limit, search.best.value)), search.best, nodes, left, stopped)


class _Incumbent:
    """The best layout so far, and attempts to round a part's weights into a better one."""

    def __init__(self, turning: Turning, feasible: Feasible, best: Turned) -> None:
        self._turning, self._feasible, self.best = turning, feasible, best
        self._tried: set[tuple[int, ...]] = {tuple(best.chosen)}

    def cut(self, tolerance: float) -> float:
        return self.best.value * (1.0 + tolerance)

    def offer(self, atoms: Atoms) -> None:
        rounded = rounded_layout(self._turning, self._feasible, atoms)
        name = tuple(rounded.chosen)
        if name in self._tried or not self._feasible.allows(rounded.chosen):
            return
        self._tried.add(name)
        if rounded.value > PROMISING * self.best.value:
            better = exchange_axes(self._turning, self._feasible, rounded)
            self._tried.add(tuple(better.chosen))
            if better.value > self.best.value:
                self.best = better


def rounded_layout(turning: Turning, feasible: Feasible, atoms: Atoms) -> Turned:
    """The heaviest candidates, as far as the rules go, from their heaviest frames; completed where places are left."""
    n = turning.n_candidates
    total, heaviest = atoms.totals(n), {}
    for place in np.argsort(atoms.weights, kind="stable"):
        heaviest[int(atoms.owners[place])] = atoms.frames[place]
    chosen = np.array(sorted(feasible.keep), dtype=int)
    for candidate in np.argsort(-total, kind="stable"):
        if total[candidate] < LIVE:
            break
        if feasible.addable(chosen)[candidate]:
            chosen = np.append(chosen, candidate)
    fresh = start_frames(turning, chosen)
    frames = [heaviest.get(int(one), new) for one, new in zip(chosen, fresh, strict=True)]
    layout = turn(turning, chosen, np.array(frames).reshape(-1, turning.width, turning.width), 1e-4)
    return layout if feasible.allows(layout.chosen) else greedy_axes(turning, feasible, layout.chosen, layout.frames)


def _children(
    turning: Turning,
    given: np.ndarray,
    feasible: Feasible,
    tangent: AxisTangent,
    forced: np.ndarray,
    closed: np.ndarray,
) -> list[tuple[np.ndarray, np.ndarray, Turning]]:
    """(forced, closed, turning) of the parts that a part splits into; none where it cannot be split.

    By sites: one part for each live member of a clique, without the ones before it, and a last one without any. With
    all sites settled: by cones of the most mixed axis that has no tilt limit of its own, `given` (n,) bool.
    """
    n = turning.n_candidates
    split = _split_on(feasible, tangent.atoms.totals(n), tangent.price, forced | closed)
    if not len(split):
        weights = tangent.atoms.blocks(n)[:, :3, :3]
        mixed = most_mixed(turning, forced & ~given, weights)
        cones = [] if mixed is None else cones_over(turning, mixed, weights[mixed])
        return [(forced, closed, own) for own in cones]
    out = []
    for child in split:
        taken = forced.copy()
        taken[child] = True
        out.append((taken, closed | (~feasible.addable(np.flatnonzero(taken)) & ~taken), turning))
        closed = closed.copy()
        closed[child] = True
    return [*out, (forced, closed, turning)]


def _restricted(turning: Turning, rules: AxisRules, atoms: Atoms) -> Atoms:
    """The parent's atoms without those closed or outside their cones, the forced candidates at their full weight."""
    along = np.abs(np.einsum("ai,ai->a", atoms.frames[:, :3, 0], turning.normal[atoms.owners, : turning.width]))
    outside = turning.limited[atoms.owners] & (along < turning.cosine[atoms.owners] * (1 - 1e-9))
    atoms = atoms.kept(~rules.closed[atoms.owners] & ~outside)
    total = atoms.totals(turning.n_candidates)
    missing = np.flatnonzero(rules.forced & (total < LIVE))
    atoms = atoms.kept(~np.isin(atoms.owners, missing)).joined(missing, start_frames(turning, missing))
    weights = np.where(np.isin(atoms.owners, missing), 1.0, atoms.weights)
    raised = rules.forced & (total >= LIVE)
    scale = np.where(raised, 1.0 / np.where(raised, total, 1.0), 1.0)
    group, counts = rules.feasible.group, rules.feasible.counts
    held = np.bincount(group[rules.forced], minlength=len(counts))
    rest = np.bincount(group, weights=np.where(rules.forced, 0.0, total), minlength=len(counts))
    room = np.minimum(1.0, (counts - held) / np.maximum(rest, 1e-12))
    scale = np.where(rules.forced, scale, np.maximum(room, 0.0)[group])
    return atoms.weighing(weights * scale[atoms.owners])


def _fixed(rules: AxisRules, tangent: AxisTangent, cut: float) -> tuple[np.ndarray, np.ndarray, float]:
    """forced and closed (n,) after fixing by reduced cost, and the highest limit [bits] of what that gives up."""
    slack = tangent.limit - cut
    forced, closed = rules.forced, rules.closed
    if slack <= 0:
        return forced, closed, -np.inf
    settled = forced | closed
    inside = ~settled & (tangent.loss_out > slack)
    outside = ~settled & ~inside & (tangent.loss_in > slack)
    lost = np.concatenate([tangent.loss_out[inside], tangent.loss_in[outside]])
    forced = forced | inside
    closed = closed | outside
    closed = closed | (~rules.feasible.addable(np.flatnonzero(forced)) & ~forced)
    return forced, closed, tangent.limit - lost.min(initial=np.inf)


def _split_on(feasible: Feasible, weights: np.ndarray, price: np.ndarray, settled: np.ndarray) -> np.ndarray:
    """Live members of the clique of largest weight, heaviest first; one candidate where no clique has weight."""
    open_ones = np.flatnonzero(~settled)
    if not len(open_ones):
        return open_ones
    weights = np.where(settled, 0.0, weights)
    heaviest = open_ones[np.lexsort((-price[open_ones], -weights[open_ones]))[0]]
    best, members = weights[heaviest], np.array([heaviest])
    for clique in feasible.cliques:
        total, live = weights[clique].sum(), clique[weights[clique] > LIVE]
        if total > best + 1e-9 and len(live):
            best, members = total, live
    return members[np.argsort(-weights[members], kind="stable")]
