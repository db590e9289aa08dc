"""Ranked layouts of sensors whose axes are free, with a certified bound over all sites and all axes."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from threadpoolctl import threadpool_limits

from layout.engine.axis_bound import AxisTangent, certify_axes, tighten_axes, whole
from layout.engine.axis_branch import AxisProof, prove_axes, rounded_layout
from layout.engine.axis_freedom import FreeAxes, Turning
from layout.engine.axis_gains import TurnedSet
from layout.engine.axis_relaxation import Atoms, ByRank
from layout.engine.axis_search import Turned, exchange_axes, greedy_axes
from layout.engine.feasible import Feasible
from layout.engine.model import LinearModel
from layout.engine.search import improves
from layout.errors import InfeasibleError

__all__ = ["AxisCertificate", "FreeAxes", "FreeRanking", "TurnedLayout", "rank_free_axes", "with_axes"]

PROVEN_PERCENT = 0.1  # a gap within this is called proven


@dataclass(frozen=True)
class TurnedLayout:
    """One ranked layout. chosen (k,) sorted candidates; value and bound in bits.

    axes (k, 3): unit axis in the candidate's component coordinates, second_axes (k, 3): the other one of a sensor of
    two; zeros where there is none (all of an ordinary candidate). frames (k, m, m): the same as columns, what
    `with_axes` takes. The bound covers every allowed layout of any axes that keeps `differ_by` from every earlier rank.
    """

    chosen: np.ndarray
    axes: np.ndarray
    second_axes: np.ndarray
    frames: np.ndarray
    value: float
    bound: float

    @property
    def gap_percent(self) -> float:
        """Distance of the value to the bound in per cent of the bound."""
        return max(0.0, 100.0 * (self.bound - self.value) / self.bound) if self.bound > 0 else 0.0

    @property
    def proven(self) -> bool:
        """Whether the gap is within the printed tolerance."""
        return self.gap_percent <= PROVEN_PERCENT


@dataclass(frozen=True)
class AxisCertificate:
    """limit [bits] recomputed in source space at W: candidates (a,) and their blocks (a, m, m); all others are 0.

    relaxed: f(W), or f_k(W) for the rank-aware one; residual: bits in the limit for target columns left out of f_k.
    """

    limit: float
    relaxed: float
    candidates: np.ndarray
    blocks: np.ndarray
    residual: float = 0.0


@dataclass(frozen=True)
class FreeRanking:
    """layouts, best first. root, by_rank: certificates of the plain and the rank-aware relaxation (None where it cannot
    be lower); proof: what branch and bound gave, None where it was not asked for or needed.
    """

    layouts: tuple[TurnedLayout, ...]
    root: AxisCertificate
    by_rank: AxisCertificate | None
    proof: AxisProof | None
    differ_by: int
    starts: int
    stopped_by_clock: bool


def with_axes(model: LinearModel, axes: FreeAxes, chosen: np.ndarray, frames: np.ndarray) -> LinearModel:
    """The ordinary model of a fixed choice of axes: chosen (k,) candidates in frames (k, m, m).

    Candidates keep their numbers. A free candidate that is not chosen gets the axis that is best beside the chosen.
    """
    turning = Turning(model, axes)
    everything = TurnedSet(turning, chosen, frames).additions()[1]
    everything[chosen] = frames
    turned = {}
    held = (everything != 0).any(axis=1)
    for name in ("target", "nuisance", "offset"):
        rows = getattr(model, name)
        rows = turning.padded(rows if rows.ndim == 2 else rows[:, None])
        turned[name] = (np.swapaxes(everything, 1, 2) @ rows)[held]
    return LinearModel(turned["target"], turned["nuisance"], turned["offset"][:, 0], np.nonzero(held)[0])


def rank_free_axes(
    model: LinearModel,
    feasible: Feasible,
    axes: FreeAxes,
    *,
    places: np.ndarray | None = None,
    ranked: int = 1,
    differ_by: int = 1,
    starts: int = 12,
    seed: int = 1,
    parts: int = 0,
    time_allowance: float | None = None,
    tolerance: float = 1e-3,
    progress: Callable[[str], None] = lambda doing: None,
) -> FreeRanking:
    """Search for the `ranked` best allowed layouts with their axes, and bound what any other of any axes could reach.

    model: three rows of equal noise for a free candidate, as `axes` says; others as they are. places (n_candidates,):
    two layouts differ by the sensors of one whose place is not among the other's (default: each its own). parts: how
    many parts of the tree branch and bound may examine; tolerance: the relative gap at which bound and proof stop. The
    clock (`time_allowance` [s]) may cut starts and bounds short; every bound stays valid and the cut is recorded.

    Raises InfeasibleError when the rules allow no layout at all, LayoutError where axes do not fit the model.
    """
    with threadpool_limits(limits=1, user_api="blas"):
        deadline = None if time_allowance is None else time.monotonic() + time_allowance
        run = _Run(Turning(model, axes), feasible, deadline, tolerance, progress)
        places = np.arange(feasible.n_candidates) if places is None else places
        return run.ranking(places, ranked, differ_by, starts, np.random.default_rng(seed), parts)


class _Run:
    """One ranking under way."""

    def __init__(
        self, turning: Turning, feasible: Feasible, deadline: float | None, tolerance: float, progress: Callable
    ) -> None:
        self.turning, self.feasible, self.deadline = turning, feasible, deadline
        self.tolerance, self.progress = tolerance, progress
        widest = np.where(turning.free, turning.count, (turning.own != 0).any(axis=1).sum(axis=1))
        channels = np.zeros(len(feasible.counts), dtype=int)
        np.maximum.at(channels, feasible.group, widest)
        self._by_rank = ByRank(turning, feasible.size, int(channels @ feasible.counts))

    def ranking(
        self, places: np.ndarray, ranked: int, differ_by: int, starts: int, rng: np.random.Generator, parts: int
    ) -> FreeRanking:
        self.progress("greedy start and exchange")
        pool = [self._climbed(self.feasible, *self._nothing())]
        self.progress("bounding every other layout")
        plain = self._tightened(self.feasible, _atoms_of(pool[0]), None)
        root = self._certificate(plain.atoms, None)
        tried = 1
        for number in range(1, starts):
            if self._late():
                break
            self.progress(f"exchange from start {number + 1} of {starts}")
            pool.append(self._another(number, max(pool, key=lambda one: one.value), plain.atoms, rng))
            tried += 1
        lead, by_rank, rule = plain, None, None
        if self._by_rank.helps:
            self.progress("rank-aware bound")
            ranked_tangent = self._tightened(self.feasible, plain.atoms, self._by_rank)
            by_rank = self._certificate(ranked_tangent.atoms, self._by_rank)
            if by_rank.limit < root.limit:
                lead, rule = ranked_tangent, self._by_rank
        top = min(root.limit, by_rank.limit if by_rank else np.inf)
        best, proof = max(pool, key=lambda one: one.value), None
        if parts and top > best.value * (1 + self.tolerance):
            proof = prove_axes(
                self.turning,
                self.feasible,
                best,
                replace(lead, limit=top),
                rule,
                tolerance=self.tolerance,
                deadline=self.deadline,
                node_limit=parts,
                progress=self.progress,
            )
            pool.append(proof.best)
            top = proof.bound
        layouts = []
        for layout, rules in self._settled_order(pool, places, ranked, differ_by):
            limit = top if not layouts else self._limit_under(rules, layout, lead.atoms, rule)
            limit = min([limit, *(one.bound for one in layouts)])
            if layout.value > limit + 1e-7 * (1.0 + abs(limit)):  # far above rounding
                raise ArithmeticError(f"A layout of {layout.value} bits passed its certified bound of {limit} bits.")
            layouts.append(self._finished(layout, max(limit, layout.value)))
        stopped = plain.stopped_by_clock or self._late()
        return FreeRanking(tuple(layouts), root, by_rank, proof, differ_by, tried, stopped)

    def _late(self) -> bool:
        return self.deadline is not None and time.monotonic() > self.deadline

    def _nothing(self) -> tuple[np.ndarray, np.ndarray]:
        """The kept candidates, each at its best axis."""
        m = self.turning.width
        chosen, frames = np.zeros(0, dtype=int), np.zeros((0, m, m))
        for one in sorted(self.feasible.keep):
            best = TurnedSet(self.turning, chosen, frames).additions()[1][one]
            chosen, frames = np.append(chosen, one), np.concatenate([frames, best[None]])
        return chosen, frames

    def _climbed(self, rules: Feasible, chosen: np.ndarray, frames: np.ndarray) -> Turned:
        return exchange_axes(self.turning, rules, greedy_axes(self.turning, rules, chosen, frames))

    def _another(self, number: int, leader: Turned, atoms: Atoms, rng: np.random.Generator) -> Turned:
        """Exchange from the rounded relaxation, then by turns from the leader shaken and from part of a random set."""
        if number == 1:
            return exchange_axes(self.turning, self.feasible, rounded_layout(self.turning, self.feasible, atoms))
        kept = np.isin(leader.chosen, self.feasible.keep)
        if number % 2:
            left = kept | (rng.random(len(kept)) > 0.4)
            return self._climbed(self.feasible, leader.chosen[left], leader.frames[left])
        weights = atoms.totals(self.turning.n_candidates)
        key = np.log(np.maximum(weights, 1e-6)) + rng.gumbel(size=len(weights))
        chosen, frames = leader.chosen[kept], leader.frames[kept]
        for candidate in np.argsort(-key, kind="stable"):
            if 2 * len(chosen) >= self.feasible.size:
                break
            if self.feasible.addable(chosen)[candidate]:
                best = TurnedSet(self.turning, chosen, frames).additions()[1][candidate]
                chosen, frames = np.append(chosen, candidate), np.concatenate([frames, best[None]])
        return self._climbed(self.feasible, chosen, frames)

    def _tightened(self, rules: Feasible, atoms: Atoms, rule: ByRank | None, rounds: int = 40) -> AxisTangent:
        return tighten_axes(
            self.turning, whole(rules), atoms, rule, tolerance=self.tolerance, rounds=rounds, deadline=self.deadline
        )

    def _certificate(self, atoms: Atoms, rule: ByRank | None) -> AxisCertificate:
        blocks = atoms.blocks(self.turning.n_candidates)
        limit, relaxed = certify_axes(self.turning, self.feasible, blocks, rule)
        held = np.unique(atoms.owners[atoms.weights > 0])
        return AxisCertificate(limit, relaxed, held, blocks[held], rule.residual if rule else 0.0)

    def _limit_under(self, rules: Feasible, layout: Turned, atoms: Atoms, rule: ByRank | None) -> float:
        """A later rank's limit: the root's tangent over the narrower rules, and a short ascent under them."""
        limits = []
        own = self._tightened(rules, _atoms_of(layout), rule, rounds=12)
        for one in (atoms, own.atoms):
            limits.append(certify_axes(self.turning, rules, one.blocks(self.turning.n_candidates), rule)[0])
        return min(limits)

    def _settled_order(
        self, pool: list[Turned], places: np.ndarray, ranked: int, differ_by: int
    ) -> list[tuple[Turned, Feasible]]:
        """The ranked layouts and the rules that each was sought under.

        Where exchange under a later rank's rule beats an earlier rank, it joins the pool and ranking starts anew.
        """
        found: list[tuple[Turned, Feasible]] = []
        rules = self.feasible
        while len(found) < ranked:
            self.progress(f"rank {len(found) + 1} of {ranked}")
            layout = self._best_under(rules, pool, [one for one, _ in found])
            if layout is None:
                break
            if found and improves(layout.value, found[-1][0].value):
                pool.append(layout)
                found, rules = [], self.feasible
                continue
            found.append((layout, rules))
            taken = np.flatnonzero(np.isin(places, places[layout.chosen]))
            try:
                rules = rules.with_at_most(taken, rules.size - differ_by)
            except InfeasibleError:  # what must be kept leaves fewer sensors free than ranks must differ by
                break
        return found

    def _best_under(self, rules: Feasible, pool: list[Turned], earlier: list[Turned]) -> Turned | None:
        allowed = [one for one in sorted(pool, key=lambda one: -one.value) if rules.allows(one.chosen)]
        answers = allowed[:1] if not earlier else [exchange_axes(self.turning, rules, one) for one in allowed[:2]]
        for layout in earlier:
            try:
                answers.append(self._climbed(rules, *self._thinned(rules, layout)))
            except InfeasibleError:
                continue
        answers = [one for one in answers if rules.allows(one.chosen)]
        return max(answers, key=lambda one: one.value) if answers else None

    def _thinned(self, rules: Feasible, layout: Turned) -> tuple[np.ndarray, np.ndarray]:
        """A layout less the sensors that matter least, until it breaks no limit."""
        chosen, frames = layout.chosen, layout.frames
        while any(np.isin(chosen, members).sum() > limit for members, limit in rules.at_most):
            places = [one for one in range(len(chosen)) if chosen[one] not in rules.keep]
            values = [
                TurnedSet(self.turning, np.delete(chosen, one), np.delete(frames, one, axis=0)).value for one in places
            ]
            drop = places[int(np.argmax(values))]
            chosen, frames = np.delete(chosen, drop), np.delete(frames, drop, axis=0)
        return chosen, frames

    def _finished(self, layout: Turned, bound: float) -> TurnedLayout:
        free = self.turning.free[layout.chosen]
        frames = layout.frames.copy()
        first = frames[:, :3, 0] if self.turning.width >= 3 else np.zeros((len(free), 3))
        along = np.einsum("ki,ki->k", first, self.turning.normal[layout.chosen])
        largest = np.take_along_axis(first, np.abs(first).argmax(axis=1)[:, None], axis=1)[:, 0]
        sign = np.where(np.where(along != 0, along, largest) < 0, -1.0, 1.0)
        frames[free] *= sign[free, None, None]
        axes = [np.where(free[:, None], frames[:, :3, place], 0.0) for place in (0, 1)] if free.any() else None
        axes = axes or [np.zeros((len(free), 3))] * 2
        return TurnedLayout(layout.chosen, *axes, frames, layout.value, bound)


def _atoms_of(layout: Turned) -> Atoms:
    return Atoms(layout.chosen, layout.frames, np.ones(len(layout.chosen)))
