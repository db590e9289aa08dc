"""The engine's public face: ranked layouts, each with its certified bound."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from threadpoolctl import threadpool_limits

from layout.engine.bound import Bound, certify, certify_by_rank, most_channels, tighten, tighten_by_rank
from layout.engine.branch import Proof, prove
from layout.engine.feasible import Feasible
from layout.engine.information import Conditioned
from layout.engine.model import LinearModel
from layout.engine.rank_aware import compressed
from layout.engine.remaining import remaining
from layout.engine.search import IMPROVEMENT, exchange, greedy, random_set
from layout.errors import InfeasibleError

PROVEN_PERCENT = 0.1  # a gap within this is called proven


@dataclass(frozen=True)
class Chosen:
    """One ranked layout. chosen (k,) sorted candidates; value and bound in bits.

    The bound covers all allowed layouts that keep `differ_by` from every earlier rank. gap_percent = 100 (bound -
    value) / bound. moved: sensors by which it differs from the nearest earlier rank (None for the first).
    """

    chosen: np.ndarray
    value: float
    bound: float
    moved: int | None

    @property
    def gap_percent(self) -> float:
        """Distance of the value to the bound in per cent of the bound."""
        return max(0.0, 100.0 * (self.bound - self.value) / self.bound) if self.bound > 0 else 0.0

    @property
    def proven(self) -> bool:
        """Whether the gap is within the printed tolerance."""
        return self.gap_percent <= PROVEN_PERCENT


@dataclass(frozen=True)
class Ranking:
    """layouts, best first, and what the search spent.

    root: the limit of the plain relaxation with the weights that certify it; by_rank: that of the rank-aware one, None
    where it cannot be lower; proof: what branch and bound gave, None where it was not needed or not asked for. The
    first layout's bound is the lowest of the three.
    """

    layouts: tuple[Chosen, ...]
    root: Bound
    by_rank: Bound | None
    proof: Proof | None
    differ_by: int
    starts: int
    swaps: int
    stopped_by_clock: bool


def rank_layouts(
    model: LinearModel,
    feasible: Feasible,
    *,
    places: np.ndarray | None = None,
    ranked: int = 1,
    differ_by: int = 1,
    starts: int = 20,
    seed: int = 1,
    parts: int = 0,
    time_allowance: float | None = None,
    tolerance: float = 2e-4,
    progress: Callable[[str], None] = lambda doing: None,
) -> Ranking:
    """Search for the `ranked` best allowed layouts that really differ, and bound what any other could reach.

    places (n_candidates,): which candidates share a place; two layouts differ by the sensors of one whose place is not
    among the other's (default: every candidate is a place of its own). parts: how many parts of the tree branch and
    bound may examine to narrow the first layout's gap (proven: within 0.1 %). The clock (`time_allowance` [s]) may cut
    starts and bound refinement short; every bound stays valid and the cut is recorded. Fewer layouts than asked come
    back only when no further allowed one exists.

    Raises InfeasibleError when the rules allow no layout at all.
    """
    with threadpool_limits(limits=1, user_api="blas"):  # small factorisations: threads cost more than they give
        return _ranked(
            model, feasible, places, ranked, differ_by, starts, seed, parts, time_allowance, tolerance, progress
        )


def _ranked(
    model: LinearModel,
    feasible: Feasible,
    places: np.ndarray | None,
    ranked: int,
    differ_by: int,
    starts: int,
    seed: int,
    parts: int,
    time_allowance: float | None,
    tolerance: float,
    progress: Callable[[str], None],
) -> Ranking:
    places = np.arange(feasible.n_candidates) if places is None else places
    deadline = None if time_allowance is None else time.monotonic() + time_allowance
    rng = np.random.default_rng(seed)
    progress("greedy start and exchange")
    best, value, swaps = exchange(model, feasible, greedy(model, feasible))
    progress("bounding every other layout")
    root = tighten(model, feasible, best, tolerance=tolerance, deadline=deadline)
    pool, tried = [(value, best)], 1
    for number in range(1, starts):
        if _late(deadline):
            break
        progress(f"exchange from start {number + 1} of {starts}")
        if number == 1:
            start = _rounded(feasible, root.weights)
        elif number % 4 == 2:
            start = random_set(feasible, rng)  # reaches candidates that the relaxation gives no weight
        elif number % 4:
            start = _drawn(feasible, root.weights, rng)
        else:
            start = _shaken(feasible, max(pool, key=lambda one: one[0])[1], rng)
        found, value, more = exchange(model, feasible, greedy(model, feasible, start))
        pool.append((value, found))
        swaps, tried = swaps + more, tried + 1
    value, best = max(pool, key=lambda one: one[0])
    progress("rank-aware bound")
    limits = _Limits(model, feasible)
    by_rank = limits.by_rank(feasible, root.weights)
    proof = None
    top = min(root.value, by_rank.value) if by_rank else root.value
    if parts and top > value * (1 + PROVEN_PERCENT / 100):
        proof = prove(
            model,
            feasible,
            best,
            value,
            top,
            root.weights,
            limits.target,
            tolerance=0.95 * PROVEN_PERCENT / 100,
            deadline=deadline,
            node_limit=parts,
            progress=progress,
        )
        pool.append((proof.value, proof.chosen))
        top = proof.bound
    found, rules, more = _settled_order(model, feasible, pool, places, ranked, differ_by, progress)
    layouts: list[Chosen] = []
    for (value, chosen), rule in zip(found, rules, strict=True):
        progress(f"bounding rank {len(layouts) + 1} of {len(found)}")
        limit = top if not layouts else limits.under(rule, chosen, root, deadline, tolerance)
        limit = min([limit, *(one.bound for one in layouts)])
        if value > limit + 1e-7 * (1.0 + abs(limit)):  # far above rounding
            raise ArithmeticError(f"A layout of {value} bits passed its certified bound of {limit} bits.")
        layouts.append(Chosen(chosen, value, limit, _moved(places, chosen, layouts)))
    swaps += more
    stopped = root.stopped_by_clock or _late(deadline)
    return Ranking(tuple(layouts), root, by_rank, proof, differ_by, tried, swaps, stopped)


def _late(deadline: float | None) -> bool:
    return deadline is not None and time.monotonic() > deadline


def _rounded(feasible: Feasible, weights: np.ndarray) -> np.ndarray:
    """The candidates that the relaxation is sure of: more than half a sensor, heaviest first, where rules allow."""
    chosen = np.array(sorted(feasible.keep), dtype=int)
    for candidate in np.argsort(-weights, kind="stable"):
        if weights[candidate] <= 0.5 or len(chosen) == feasible.size:
            break
        if feasible.addable(chosen)[candidate]:
            chosen = np.append(chosen, candidate)
    return chosen


def _drawn(feasible: Feasible, weights: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Candidates drawn without replacement in proportion to their relaxed weights, as far as the rules go.

    The relaxation spreads its weight over the places that good layouts use, so exchange ends higher from here than from
    uniform draws, and in a third of the time (Gumbel's trick draws them all at once).
    """
    key = np.log(np.maximum(weights, 1e-300)) + rng.gumbel(size=len(weights))
    chosen = np.array(sorted(feasible.keep), dtype=int)
    for candidate in np.argsort(-key, kind="stable"):
        if weights[candidate] <= 0 or len(chosen) == feasible.size:
            break
        if feasible.addable(chosen)[candidate]:
            chosen = np.append(chosen, candidate)
    return chosen


def _shaken(feasible: Feasible, leader: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """The leader with a quarter of its sensors dropped at random."""
    free = leader[~np.isin(leader, feasible.keep)]
    dropped = rng.choice(free, size=max(1, len(free) // 4), replace=False) if len(free) else free
    return leader[~np.isin(leader, dropped)]


def _settled_order(
    model: LinearModel,
    feasible: Feasible,
    pool: list[tuple[float, np.ndarray]],
    places: np.ndarray,
    ranked: int,
    differ_by: int,
    progress: Callable[[str], None],
) -> tuple[list[tuple[float, np.ndarray]], list[Feasible], int]:
    """The ranked layouts, the rules that each was sought under, and the swaps spent.

    Where exchange under a later rank's extra rule beats an earlier rank, that layout joins the pool and ranking starts
    anew, so values never rise with the rank.
    """
    found: list[tuple[float, np.ndarray]] = []
    rules = [feasible]
    swaps = 0
    while len(found) < ranked:
        progress(f"rank {len(found) + 1} of {ranked}")
        answer = _best_under(model, rules[-1], pool, [chosen for _, chosen in found])
        if answer is None:
            break
        value, chosen, more = answer
        swaps += more
        if found and value > found[-1][0] + IMPROVEMENT:
            pool.append((value, chosen))
            found, rules = [], [feasible]
            continue
        found.append((value, chosen))
        taken = np.flatnonzero(np.isin(places, places[chosen]))
        try:
            rules.append(rules[-1].with_at_most(taken, feasible.size - differ_by))
        except InfeasibleError:  # what must be kept leaves fewer sensors free than ranks must differ by
            break
    return found, rules[: len(found)], swaps


def _best_under(
    model: LinearModel, rules: Feasible, pool: list[tuple[float, np.ndarray]], earlier: list[np.ndarray]
) -> tuple[float, np.ndarray, int] | None:
    """The best allowed layout that exchange reaches from the pool and the earlier ranks; None if there is none."""
    allowed = [chosen for _, chosen in sorted(pool, key=lambda one: -one[0]) if rules.allows(chosen)]
    starts = allowed[:3] + [_thinned(model, rules, chosen) for chosen in earlier]
    swaps = 0
    answers = []
    for start in starts:
        try:
            found, value, more = exchange(model, rules, greedy(model, rules, start))
        except InfeasibleError:
            continue
        swaps += more
        if rules.allows(found):
            answers.append((value, found))
    if not answers:
        return None
    value, chosen = max(answers, key=lambda one: one[0])
    return value, chosen, swaps


def _thinned(model: LinearModel, rules: Feasible, chosen: np.ndarray) -> np.ndarray:
    """An earlier layout less the sensors that matter least, until it breaks no rule."""
    while any(np.isin(chosen, members).sum() > limit for members, limit in rules.at_most):
        left = Conditioned(model, chosen).removals()
        left[np.isin(chosen, rules.keep)] = -np.inf
        chosen = np.delete(chosen, int(np.argmax(left)))
    return chosen


class _Limits:
    """Limits under the rules of later ranks, and rank-aware ones, from one compressed target."""

    def __init__(self, model: LinearModel, feasible: Feasible) -> None:
        self._model = model
        self.target = rows, self._residual = compressed(model.target, most_channels(model, feasible))
        nothing, everything = np.zeros(0, dtype=int), np.arange(feasible.n_candidates)
        self._left = remaining(model, nothing, everything, rows)

    def by_rank(self, rules: Feasible, start: np.ndarray) -> Bound | None:
        """The rank-aware limit over the rules, computed anew in source space at the weights found; None if no lower."""
        tangent = tighten_by_rank(self._left, rules, start)
        if tangent is None:
            return None
        limit, relaxed = certify_by_rank(self._model, rules, tangent.weights, self._left.target)
        return Bound(limit + self._residual, relaxed, tangent.weights, tangent.rounds)

    def under(
        self, rules: Feasible, chosen: np.ndarray, root: Bound, deadline: float | None, tolerance: float
    ) -> float:
        """A later rank's limit: the root's tangent over the narrower rules, and short ascents under them."""
        tangent, _ = certify(self._model, rules, root.weights)
        own = tighten(self._model, rules, chosen, tolerance=tolerance, rounds=15, deadline=deadline)
        by_rank = self.by_rank(rules, own.weights)
        return min(tangent, own.value, by_rank.value if by_rank else np.inf)


def _moved(places: np.ndarray, chosen: np.ndarray, layouts: list[Chosen]) -> int | None:
    if not layouts:
        return None
    return min(int((~np.isin(places[chosen], places[one.chosen])).sum()) for one in layouts)
