"""The loop of a branch and bound: best parts first, in batches of fixed size, on as many threads as there are cores."""

from __future__ import annotations

import heapq
import os
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from typing import Any, Protocol

import numpy as np
from threadpoolctl import threadpool_limits

from layout.engine.branch_tree import NONE, Growing, ProofTree, frozen, packed
from layout.engine.feasible import Feasible
from layout.engine.goal import Goal
from layout.engine.search import exchange, greedy
from layout.errors import InfeasibleError

BATCH = 4  # parts examined side by side; fixed, so that the proof is the same on any number of cores
EXCHANGE_EVERY = 50  # batches between two attempts to round a part's weights into a better layout
SURE = 0.3  # a weight above this is rounded up


@dataclass(frozen=True)
class Proof:
    """bound: no allowed layout scores more; chosen and value: the best layout met; nodes: parts examined.

    open_parts: parts left unexamined (0: closed within the tolerance asked for). tree: every part with its limit and
    the weights that certify it.
    """

    bound: float
    chosen: np.ndarray
    value: float
    nodes: int
    open_parts: int
    stopped_by_clock: bool
    tree: ProofTree


def _none() -> np.ndarray:
    return NONE


@dataclass(frozen=True)
class Outcome:
    """What examining a part gave, in the words of `ProofTree`.

    dropped: highest limit of the layouts that are given up; children: (chosen, free) of each; start: what their ascents
    start from; found: a layout met on the way and its score.
    """

    kind: int
    limit: float
    weighted: np.ndarray = field(default_factory=_none)
    weights: np.ndarray = field(default_factory=_none)
    fixed_in: np.ndarray = field(default_factory=_none)
    given_up: np.ndarray = field(default_factory=_none)
    branches: np.ndarray = field(default_factory=_none)
    dropped: float = -np.inf
    children: tuple[tuple[np.ndarray, np.ndarray], ...] = ()
    start: Any = None
    found: np.ndarray | None = None
    found_value: float = -np.inf


class Problem(Protocol):
    """How parts are examined; `parallel`: whether side by side."""

    goal: Goal
    feasible: Feasible
    parallel: bool

    def examine(self, part: Growing, cut: float) -> Outcome:
        """Bound a part, and drop, finish or split it; depends on nothing else."""


def close(
    problem: Problem,
    free: np.ndarray,
    start: Any,
    chosen: np.ndarray,
    value: float,
    root_limit: float,
    *,
    tolerance: float,
    deadline: float | None,
    node_limit: int,
    progress: Callable[[str], None],
) -> Proof:
    """Examine the best open parts until none passes the best layout by more than `tolerance`, or until stopped.

    free: candidates that may join in the root; start: what its ascent starts from.
    """
    best, best_value = np.sort(chosen), value
    dropped = value
    n = problem.feasible.n_candidates
    parts = [Growing(0, -1, NONE, packed(free, n), start, root_limit)]
    heap = [(-root_limit, 0)]
    nodes = batches = 0
    stopped = False
    workers = min(BATCH, os.cpu_count() or 1) if problem.parallel else 1
    with threadpool_limits(limits=1, user_api="blas"), ThreadPoolExecutor(workers) as pool:
        while heap and -heap[0][0] > best_value + tolerance * abs(best_value):
            stopped = deadline is not None and time.monotonic() > deadline
            if stopped or nodes >= node_limit:
                break
            cut = best_value + tolerance * abs(best_value)
            batch = []
            while heap and len(batch) < min(BATCH, node_limit - nodes) and -heap[0][0] > cut:
                batch.append(parts[heapq.heappop(heap)[1]])
            nodes += len(batch)
            batches += 1
            for part, outcome in zip(batch, pool.map(problem.examine, batch, [cut] * len(batch)), strict=True):
                part.start = None
                part.kind, part.limit = outcome.kind, outcome.limit
                part.weighted, part.weights = outcome.weighted, outcome.weights
                part.fixed_in, part.branches = outcome.fixed_in, outcome.branches
                part.given_up = packed(outcome.given_up, n)
                dropped = max(dropped, outcome.dropped)
                if outcome.found is not None and outcome.found_value > best_value:
                    best, best_value = np.sort(outcome.found), outcome.found_value
                for inside, candidates in outcome.children:
                    bits = packed(candidates, n)
                    parts.append(Growing(len(parts), part.number, inside, bits, outcome.start, outcome.limit))
                    heapq.heappush(heap, (-outcome.limit, len(parts) - 1))
            if batches % EXCHANGE_EVERY == 1:
                found, found_value = _rounded(problem, batch[0])
                if found_value > best_value:
                    best, best_value = found, found_value
                top = max(-heap[0][0] if heap else dropped, best_value)
                gap = 100 * (top - best_value) / max(abs(top), 1e-12)
                progress(f"proof: {nodes} of at most {node_limit} parts, gap {gap:.2f} %")
    open_limit = -heap[0][0] if heap else -np.inf
    bound = max(open_limit, dropped, best_value)
    left = len(heap) if open_limit > best_value + tolerance * abs(best_value) else 0
    tree = frozen(parts, n)
    return Proof(min(bound, root_limit), best, best_value, nodes, left, stopped, tree)


def _rounded(problem: Problem, part: Growing) -> tuple[np.ndarray, float]:
    """The layout that exchange reaches from a part's chosen candidates and its heaviest others; (-, -inf) if none."""
    inside = part.chosen
    for place in np.argsort(-part.weights, kind="stable"):
        if part.weights[place] < SURE:
            break
        candidate = part.weighted[place]
        if candidate not in inside and problem.feasible.addable(inside)[candidate]:
            inside = np.append(inside, candidate)
    try:
        found, value, _ = exchange(problem.goal, problem.feasible, greedy(problem.goal, problem.feasible, inside))
    except InfeasibleError:
        return inside, -np.inf
    return (found, value) if problem.feasible.allows(found) else (inside, -np.inf)
