"""The certified limit over all allowed layouts and all axes: pools of axes that grow by the best-priced ones."""

from __future__ import annotations

import time
from dataclasses import dataclass, replace

import numpy as np

from layout.engine.axis_ascent import Cells, newton_in_cells
from layout.engine.axis_freedom import Turning
from layout.engine.axis_prices import best_frames
from layout.engine.axis_relaxation import (
    Atoms,
    ByRank,
    PooledAxes,
    merged,
    rank_aware_value_and_blocks,
    value_and_blocks,
)
from layout.engine.feasible import Feasible

SETTLED = 1e-6  # an atom or vertex below this weight leaves the pool


@dataclass(frozen=True)
class AxisRules:
    """The allowed sets of one part of the search: `feasible` with some candidates forced in and some out (n,) bool."""

    feasible: Feasible
    forced: np.ndarray
    closed: np.ndarray

    @property
    def alive(self) -> np.ndarray:
        """Candidates that may be chosen (a,), sorted."""
        return np.flatnonzero(~self.closed)

    def priced(self, price: np.ndarray):
        """The linear programme's answer (pricing.Priced) at prices (n,)."""
        return self.feasible.programme.best(price, self.forced, self.closed)


def whole(feasible: Feasible) -> AxisRules:
    """All allowed sets."""
    return AxisRules(feasible, feasible.lower > 0, feasible.upper <= 0)


@dataclass(frozen=True)
class AxisTangent:
    """limit [bits] that the tangent at the atoms' W puts on every allowed layout; value: f there.

    price, loss_in, loss_out (n,): each candidate's price at its best axis, and what the limit loses at least if the
    candidate must be in or out.
    """

    limit: float
    value: float
    atoms: Atoms
    price: np.ndarray
    loss_in: np.ndarray
    loss_out: np.ndarray
    rounds: int = 0
    stopped_by_clock: bool = False


def certify_axes(
    turning: Turning, feasible: Feasible, weights: np.ndarray, by_rank: ByRank | None = None
) -> tuple[float, float]:
    """(limit, f(W)) [bits] at blocks W (n, m, m), recomputed in source space, rank-aware where `by_rank` is given."""
    if by_rank is None:
        value, blocks = value_and_blocks(turning, weights)
    else:
        value, blocks = rank_aware_value_and_blocks(turning, weights, by_rank)
    price, _ = best_frames(turning, np.arange(turning.n_candidates), blocks)
    limit = value - float((blocks * weights).sum()) + feasible.best_linear(price)[0]
    return limit + (by_rank.residual if by_rank else 0.0), value


def tighten_axes(
    turning: Turning,
    rules: AxisRules,
    atoms: Atoms,
    by_rank: ByRank | None = None,
    *,
    cut: float | None = None,
    tolerance: float = 1e-3,
    rounds: int = 40,
    deadline: float | None = None,
) -> AxisTangent:
    """The best tangent found from the atoms on.

    With a `cut` the ascent also ends as soon as the limit is below it, or f itself so far above it that no tangent can
    be below. Raises InfeasibleError where the rules leave nothing.
    """
    ascent = _Ascent(turning, rules, atoms, by_rank)
    best: AxisTangent | None = None
    done = 0
    while True:
        value, frames, vertex, tangent = ascent.tangent()
        done += 1
        late = deadline is not None and time.monotonic() > deadline
        if best is None or tangent.limit < best.limit:
            best = tangent
        settled = tangent.limit - value <= tolerance * max(abs(value), 1e-12)
        decided = cut is not None and (tangent.limit <= cut or (done > 1 and value - cut > tangent.limit - value))
        if settled or decided or late or done >= rounds:
            return replace(best, rounds=done, stopped_by_clock=late and not settled)
        ascent.advance(frames, vertex, tangent.price, tolerance)


class _Ascent:
    """Ascent over convex combinations of layouts (site weights), with the atoms of every site re-weighed in between.

    The layouts come from the linear programme (simplicial decomposition, von Hohenbalken 1977, Math. Program. 13:49);
    where cliques split the candidates cleanly, sites and axes are ascended together instead.
    """

    def __init__(self, turning: Turning, rules: AxisRules, atoms: Atoms, by_rank: ByRank | None) -> None:
        self._turning, self._rules, self._by_rank = turning, rules, by_rank
        self._n = turning.n_candidates
        self._alive = rules.alive
        self._atoms = atoms
        self._vertices = [atoms.totals(self._n)]
        self._mix = np.ones(1)
        self._pooled = PooledAxes(turning, atoms, by_rank)

    def tangent(self) -> tuple[float, np.ndarray, np.ndarray, AxisTangent]:
        atoms = self._atoms
        value, blocks = self._pooled.gradient(atoms.weights, self._alive)
        own, frames = best_frames(self._turning, self._alive, blocks)
        price = np.zeros(self._n)
        price[self._alive] = own
        place = np.searchsorted(self._alive, atoms.owners)
        used = np.einsum("akl,akr,alr->a", blocks[place], atoms.frames, atoms.frames) @ atoms.weights
        priced = self._rules.priced(price)
        residual = self._by_rank.residual if self._by_rank else 0.0
        limit = value - float(used) + priced.limit + residual
        return (
            value,
            frames,
            priced.vertex,
            AxisTangent(limit, value, atoms, price, priced.loss_in, priced.loss_out),
        )

    def advance(self, frames: np.ndarray, vertex: np.ndarray, price: np.ndarray, tolerance: float) -> None:
        cells = self._rules.feasible.cells
        live = self._atoms.weights > SETTLED
        atoms = merged(self._turning, self._atoms.kept(live))
        entering = (vertex > SETTLED) | (atoms.totals(self._n) > 0)
        if cells is not None:
            level = price[vertex > 0.5].min(initial=np.inf)
            rivals = np.flatnonzero((price > 0.98 * level) & ~self._rules.closed & ~entering)
            entering[rivals[np.argsort(-price[rivals], kind="stable")][: self._rules.feasible.size]] = True
        entering = np.flatnonzero(entering[self._alive])
        atoms = atoms.joined(self._alive[entering], frames[entering])
        if cells is not None:
            self._set(atoms)
            self._reweigh_cells(cells, tolerance)
        else:
            share = self._shares(atoms)
            self._set(atoms)
            self._vertices.append(vertex)
            self._mix = np.append(self._mix, 0.0)
            self._reweigh_sites(share, tolerance)
            self._reweigh_axes(tolerance)

    def _set(self, atoms: Atoms) -> None:
        self._atoms = atoms
        self._pooled = PooledAxes(self._turning, atoms, self._by_rank)

    def _shares(self, atoms: Atoms) -> np.ndarray:
        """Each atom's part of its site's weight (a,); the newest atom has all of a site without weight."""
        total = atoms.totals(self._n)[atoms.owners]
        share = np.divide(atoms.weights, total, out=np.zeros(len(total)), where=total > 0)
        last = np.append(atoms.owners[1:] != atoms.owners[:-1], True)
        share[last & (total <= 0)] = 1.0
        return share

    def _reweigh_sites(self, share: np.ndarray, tolerance: float) -> None:
        stack = np.column_stack(self._vertices)[self._atoms.owners] * share[:, None]

        def second_order(mix: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
            height, slope, curvature = self._pooled.second_order(stack @ mix)
            return height, stack.T @ slope, stack.T @ curvature @ stack

        def settled(mix: np.ndarray, height: float, slope: np.ndarray) -> bool:
            return slope.max() - slope @ mix <= 0.2 * tolerance * abs(height)

        simplex = Cells.of_totals(np.array([0, len(self._mix)]), np.ones(1))
        mix = newton_in_cells(lambda mix: self._pooled.value(stack @ mix), second_order, self._mix, simplex, 8, settled)
        held = mix > SETTLED
        self._mix = mix[held] / mix[held].sum()
        self._vertices = [one for one, live in zip(self._vertices, held, strict=True) if live]
        self._atoms = self._atoms.weighing(stack[:, held] @ self._mix)

    def _reweigh_axes(self, tolerance: float) -> None:
        atoms = self._atoms
        total = atoms.totals(self._n)
        inside = total[atoms.owners] > SETTLED
        if not inside.all():
            self._set(atoms.kept(inside))
            atoms = self._atoms
        first, site = _runs(atoms.owners)
        counts = total[atoms.owners[first[:-1]]]

        def settled(weights: np.ndarray, height: float, slope: np.ndarray) -> bool:
            best = np.full(len(counts), -np.inf)
            np.maximum.at(best, site, slope)
            return counts @ best - slope @ weights <= 0.2 * tolerance * abs(height)

        cells = Cells.of_totals(first, counts)
        weights = newton_in_cells(self._pooled.value, self._pooled.second_order, atoms.weights, cells, 4, settled)
        self._atoms = atoms.weighing(weights)

    def _reweigh_cells(self, cells: np.ndarray, tolerance: float) -> None:
        """Sites and axes together: at most one sensor in each cell, as many as asked in each group."""
        atoms, rules = self._atoms, self._rules
        feasible = rules.feasible
        order = np.argsort(cells[atoms.owners], kind="stable")
        first, _ = _runs(cells[atoms.owners[order]])
        one = atoms.owners[order[first[:-1]]]
        forced = np.isin(cells[one], cells[rules.forced])
        kept = np.bincount(feasible.group[rules.forced], minlength=len(feasible.counts))
        kinds = Cells(
            first,
            np.ones(len(one)),
            np.where(forced, -1, feasible.group[one]),
            (feasible.counts - kept).astype(float),
        )

        def settled(weights: np.ndarray, height: float, slope: np.ndarray) -> bool:
            price = np.zeros(self._n)
            raised = slope - slope.min() + 1.0  # a constant changes no gap; keeps the pool ahead
            np.maximum.at(price, atoms.owners[order], raised)
            return rules.priced(price).limit - raised @ weights <= 0.3 * tolerance * abs(height)

        def everywhere(weights: np.ndarray) -> np.ndarray:
            out = np.empty(len(order))
            out[order] = weights
            return out

        def second_order(weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
            height, slope, curvature = self._pooled.second_order(everywhere(weights))
            return height, slope[order], curvature[np.ix_(order, order)]

        weights = newton_in_cells(
            lambda weights: self._pooled.value(everywhere(weights)),
            second_order,
            atoms.weights[order],
            kinds,
            8,
            settled,
        )
        self._atoms = atoms.weighing(everywhere(weights))


def _runs(keys: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Where each run of equal keys starts, and the end (n_runs + 1,); the run of each key (n,)."""
    new = np.append(True, keys[1:] != keys[:-1])
    return np.append(np.flatnonzero(new), len(keys)), np.cumsum(new) - 1
