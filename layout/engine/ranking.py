"""The engine's public face: ranked layouts, each with its certified bound."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from threadpoolctl import threadpool_limits

from layout.engine.bound import Bound, tighten, tighten_to
from layout.engine.branch import Proof
from layout.engine.combined_limits import BROKEN, Limited, with_multipliers
from layout.engine.feasible import Feasible
from layout.engine.goal import Goal
from layout.engine.guide import guide_of
from layout.engine.information_goal import InformationGoal
from layout.engine.later_ranks import settled_order
from layout.engine.limits import limits_for
from layout.engine.model import LinearModel
from layout.engine.search import exchange, greedy, improves, random_set
from layout.engine.starts import drawn, rounded, shaken

ROOT_SHARE = 0.25  # of the time allowance that is always left for the root's limit
PROVEN_PERCENT = 0.1  # a gap within this is called proven


@dataclass(frozen=True)
class Chosen:
    """One ranked layout. chosen (k,) sorted candidates; value and bound: scores [bits, or minus metres].

    The bound covers all allowed layouts that keep `differ_by` from every earlier rank. moved: sensors by which it
    differs from the nearest earlier rank (None for the first). proof: what branch and bound gave for it, None where it
    was not needed or not asked for.
    """

    chosen: np.ndarray
    value: float
    bound: float
    moved: int | None
    proof: Proof | None = None

    @property
    def gap_percent(self) -> float:
        """Distance of the value to the bound in per cent: of the bound for bits, of the value for an error."""
        whole = -self.value if self.value < 0 else self.bound
        return max(0.0, 100.0 * (self.bound - self.value) / whole) if whole > 0 else 0.0

    @property
    def proven(self) -> bool:
        """Whether the gap is within the printed tolerance."""
        return self.gap_percent <= PROVEN_PERCENT


@dataclass(frozen=True)
class Ranking:
    """layouts, best first, and what the search spent.

    root: the limit of the plain relaxation with the weights that certify it; by_rank: that of the rank-aware one, None
    where it cannot be lower. The first layout's bound is the lowest of these and of its proof.
    """

    layouts: tuple[Chosen, ...]
    root: Bound
    by_rank: Bound | None
    differ_by: int
    starts: int
    swaps: int
    stopped_by_clock: bool

    @property
    def proof(self) -> Proof | None:
        """What branch and bound gave for the first layout."""
        return self.layouts[0].proof


def rank_layouts(
    goal: Goal | LinearModel,
    feasible: Feasible,
    *,
    places: np.ndarray | None = None,
    ranked: int = 1,
    differ_by: int = 1,
    starts: int = 20,
    seed: int = 1,
    parts: int = 0,
    proven_ranks: int = 1,
    time_allowance: float | None = None,
    tolerance: float = 2e-4,
    progress: Callable[[str], None] = lambda doing: None,
) -> Ranking:
    """Search for the `ranked` best allowed layouts that really differ, and bound what any other could reach.

    goal: what to make large; a LinearModel stands for the information about its target. places (n_candidates,): which
    candidates share a place; two layouts differ by the sensors of one whose place is not among the other's (default:
    every candidate is a place of its own). parts: how many parts of the tree branch and bound may examine to narrow the
    gap of each of the first `proven_ranks` layouts (proven: within 0.1 %). The clock (`time_allowance` [s]) may cut
    starts and bound refinement short; every bound stays valid and the cut is recorded. Fewer layouts than asked come
    back only when no further allowed one exists.

    Raises InfeasibleError when the rules allow no layout at all.
    """
    search = _Search(
        InformationGoal(goal) if isinstance(goal, LinearModel) else goal,
        feasible,
        np.arange(feasible.n_candidates) if places is None else places,
        time_allowance,
        tolerance,
        progress,
    )
    with threadpool_limits(limits=1, user_api="blas"):  # small factorisations: threads cost more than they give
        search.explore(starts, np.random.default_rng(seed))
        return search.ranked(ranked, differ_by, parts, proven_ranks)


class _Search:
    """One search under way: the pool of good layouts met so far and the limits known."""

    def __init__(
        self,
        goal: Goal,
        feasible: Feasible,
        places: np.ndarray,
        allowance: float | None,
        tolerance: float,
        progress: Callable[[str], None],
    ) -> None:
        self._goal, self._feasible, self._places = goal, feasible, places
        self._allowance, self._tolerance, self._progress = allowance, tolerance, progress
        self._deadline = None if allowance is None else time.monotonic() + allowance
        self._pool: list[tuple[float, np.ndarray]] = []
        self._swaps = 0

    def _deadline_of_root(self) -> float | None:
        """The root's limit gets a part of the time allowance even where the first layout took all of it."""
        if self._deadline is None:
            return None
        return max(self._deadline, time.monotonic() + ROOT_SHARE * self._allowance)

    def _late(self) -> bool:
        return self._deadline is not None and time.monotonic() > self._deadline

    def _settle(self, start: np.ndarray | None, *, per_cost: bool = False) -> None:
        """Fill a start greedily, exchange, and pool what comes out."""
        layout = greedy(guide_of(self._goal), self._feasible, start, per_cost=per_cost)
        found, score, swaps = exchange(self._goal, self._feasible, layout, self._late)
        self._pool.append((score, found))
        self._swaps += swaps

    def _leader(self) -> tuple[float, np.ndarray]:
        return max(self._pool, key=lambda one: one[0])

    def explore(self, starts: int, rng: np.random.Generator) -> None:
        """Greedy and exchange from many starts; the relaxation's limit on the way, as the starts are drawn from it."""
        self._progress("greedy start and exchange")
        self._settle(None)
        if self._feasible.budget is not None:
            self._settle(None, per_cost=True)
        self._progress("bounding every other layout")
        leader = self._leader()[1]
        if isinstance(self._goal, Limited):
            self._goal = self._with_multipliers(self._goal, leader)
        self._root = tighten(
            self._goal, self._feasible, leader, tolerance=self._tolerance, deadline=self._deadline_of_root()
        )
        for number in range(1, starts):
            if self._late():
                break
            self._progress(f"exchange from start {number + 1} of {starts}")
            if number == 1:
                self._settle(rounded(self._feasible, self._root.weights))
            elif number % 4 == 2:
                self._settle(random_set(self._feasible, rng))  # reaches what the relaxation gives no weight
            elif number % 4:
                self._settle(drawn(self._feasible, self._root.weights, rng))
            else:
                self._settle(shaken(self._feasible, self._leader()[1], rng))
        self._tried = len(self._pool)

    def _with_multipliers(self, limited: Limited, leader: np.ndarray) -> Limited:
        """The goal with the multipliers of the lowest limit found; the search's scores are as before."""
        start = np.zeros(self._feasible.n_candidates)
        start[leader] = 1.0

        def limit(goal: Goal, weights: np.ndarray | None) -> tuple[float, np.ndarray]:
            tangent = tighten_to(
                goal.relaxed,
                self._feasible,
                start if weights is None else weights,
                tolerance=self._tolerance,
                deadline=self._deadline,
            )
            return tangent.limit, tangent.weights

        return with_multipliers(limited, limit)[0]

    def ranked(self, ranked: int, differ_by: int, parts: int, proven_ranks: int) -> Ranking:
        """The best layouts in order, each with its limit."""
        self._progress("rank-aware bound")
        limits = limits_for(self._goal, self._feasible, self._root, self._deadline, self._tolerance, self._progress)
        by_rank = limits.by_rank()
        top = min(self._root.value, by_rank.value if by_rank else np.inf, self._goal.highest)
        proofs: list[Proof] = []
        while True:
            found, rules, more = settled_order(
                self._goal, self._feasible, self._pool, self._places, ranked, differ_by, self._progress
            )
            self._swaps += more
            rank = len(proofs)
            if not parts or rank >= min(proven_ranks, len(found)):
                break
            score, chosen = found[rank]
            limit = top if rank == 0 else limits.under(rules[rank], chosen)
            proof = limits.proof(rules[rank], chosen, score, limit, PROVEN_PERCENT / 100, parts)
            if proof is not None and improves(proof.value, score):
                self._pool.append((proof.value, proof.chosen))
                if rank and improves(proof.value, found[rank - 1][0]):
                    proofs = []  # an earlier rank's proof was cut short, and this layout belongs before it
                    continue
            proofs.append(proof)
        layouts: list[Chosen] = []
        for rank, ((score, chosen), rule) in enumerate(zip(found, rules, strict=True)):
            self._progress(f"bounding rank {rank + 1} of {len(found)}")
            proof = proofs[rank] if rank < len(proofs) else None
            limit = top if rank == 0 else limits.under(rule, chosen)
            if proof is not None:
                limit = min(limit, proof.bound)
            limit = min([limit, *(one.bound for one in layouts)])
            if isinstance(self._goal, Limited) and score <= -BROKEN:
                limit = max(limit, score)  # it breaks the limits on errors, and the bound covers what keeps them
            if score > limit + 1e-7 * max(abs(limit), 1e-3):  # far above rounding
                raise ArithmeticError(f"A layout of score {score} passed its certified bound of {limit}.")
            layouts.append(Chosen(chosen, score, limit, _moved(self._places, chosen, layouts), proof))
        stopped = self._root.stopped_by_clock or self._late()
        return Ranking(tuple(layouts), self._root, by_rank, differ_by, self._tried, self._swaps, stopped)


def _moved(places: np.ndarray, chosen: np.ndarray, layouts: list[Chosen]) -> int | None:
    if not layouts:
        return None
    return min(int((~np.isin(places[chosen], places[one.chosen])).sum()) for one in layouts)
