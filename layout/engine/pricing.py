"""The linear programme over the relaxed rules, kept warm in one solver between prices."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from layout.engine.solver import INFEASIBLE, OPTIMAL, loaded, set_prices
from layout.errors import InfeasibleError

if TYPE_CHECKING:
    from layout.engine.feasible import Feasible


@dataclass(frozen=True)
class Priced:
    """limit: no v within the relaxed rules has a larger price · v; vertex (n,): one that (nearly) reaches it.

    reduced (n,): the prices less what the rules charge for each candidate, for the number of amplifier blocks that sets
    the limit. loss_in and loss_out (n,) >= 0: how far the limit falls at least if a candidate must be in, or must be
    out, whatever the number of blocks; 0 for what is forced already.
    """

    limit: float
    vertex: np.ndarray
    reduced: np.ndarray
    loss_in: np.ndarray
    loss_out: np.ndarray


class LinearProgramme:
    """max price · v over the relaxed rules of a `Feasible`, solved again and again by the simplex method (HiGHS).

    Every call starts from the basis of the one before. Rows may have variants of their upper limits (one for each
    number of amplifier blocks); the answer is the best over all of them, exact for the hull of their union.
    """

    def __init__(self, feasible: Feasible) -> None:
        rows = feasible.rows
        self._size = feasible.size
        self._low, self._highs = rows.low, rows.highs
        self._transposed = rows.matrix.T.tocsr()
        self._lower, self._upper = feasible.lower, feasible.upper
        self._columns = np.arange(feasible.n_candidates, dtype=np.int32)
        self._loaded = 0
        self._solver = loaded(rows.matrix, self._low, self._highs[0], self._lower, self._upper)
        self._solver.setOptionValue("presolve", "off")  # it would throw the last basis away
        self._solver.setOptionValue("solver", "simplex")
        self._solver.setOptionValue("dual_feasibility_tolerance", 1e-9)  # the certified limit is as tight as the duals

    def best(
        self,
        price: np.ndarray,
        chosen: np.ndarray | None = None,
        closed: np.ndarray | None = None,
        *,
        sharp_losses: bool = False,
    ) -> Priced:
        """The largest price · v with the candidates `chosen` (n,) bool forced in and `closed` (n,) bool forced out.

        The limit is rebuilt from dual values clipped to their sign, so it is an upper limit whatever the solver's
        tolerance (Neumaier and Shcherbina 2004, Math. Program. 99:283; from memory). A number of blocks that the dual
        values of another rule out is not solved, which leaves losses valid but small; sharp_losses: solve for every
        number. Raises InfeasibleError when the relaxed rules leave nothing.
        """
        lower = self._lower if chosen is None else np.where(chosen, 1.0, self._lower)
        upper = self._upper if closed is None else np.where(closed, 0.0, self._upper)
        if (lower > upper).any():
            raise InfeasibleError(f"Candidate {int(np.argmax(lower > upper))} must be chosen but is closed.")
        scale = float(np.abs(price).max(initial=0.0)) or 1.0  # the solver's tolerances are absolute
        if not np.isfinite(scale):
            raise ArithmeticError("The linear programme over the rules was given a price that is not a number.")
        price = price / scale
        set_prices(self._solver, price)
        self._solver.changeColsBounds(len(price), self._columns, lower, upper)
        limits = np.full(len(self._highs), np.inf)
        reduced = np.zeros((len(self._highs), len(price)))
        top, vertex, variant = -np.inf, None, self._loaded
        unsolved = np.ones(len(limits), dtype=bool)
        while unsolved[variant] and (sharp_losses or limits[variant] > top):
            answer = self._solved(variant)
            unsolved[variant] = False
            if answer is None:
                limits[variant] = -np.inf
            else:
                bounds, priced = self._certified(price, answer[1], lower, upper)
                better = bounds < limits
                limits[better], reduced[better] = bounds[better], priced
                if limits[variant] > top:
                    top, vertex, winner = limits[variant], np.clip(answer[0], lower, upper), variant
            variant = int(np.argmax(np.where(unsolved, limits, -np.inf)))
        if vertex is None:
            raise InfeasibleError(f"The rules must allow {self._size} sensors together, but no layout keeps them all.")
        self._load(winner)
        top = limits.max()  # the dual values of a later variant may have lowered it
        real = np.isfinite(limits)
        short, fixed = (top - limits[real])[:, None], lower == upper
        loss_in, loss_out = (
            np.where(fixed, 0.0, scale * (short + np.maximum(sign * reduced[real], 0.0)).min(axis=0))
            for sign in (-1, 1)
        )
        return Priced(scale * float(top), vertex, scale * reduced[winner], loss_in, loss_out)

    def _load(self, variant: int) -> None:
        if variant == self._loaded:
            return
        for row in np.flatnonzero(self._highs[variant] != self._highs[self._loaded]):
            self._solver.changeRowBounds(int(row), self._low[row], self._highs[variant, row])
        self._loaded = variant

    def _solved(self, variant: int) -> tuple[np.ndarray, np.ndarray] | None:
        """A vertex (n,) and dual values (n_rows,) of one variant; None where it leaves nothing."""
        self._load(variant)
        if not len(self._columns):  # the solver would not look at the rows
            met = ((self._low <= 0) & (self._highs[variant] >= 0)).all()
            return (np.zeros(0), np.zeros(len(self._low))) if met else None
        for _ in range(2):
            self._solver.run()
            status = self._solver.getModelStatus()
            if status == OPTIMAL:
                solution = self._solver.getSolution()
                return np.array(solution.col_value), -np.array(solution.row_dual)
            if status == INFEASIBLE:
                return None
            self._solver.clearSolver()  # a basis gone bad: once more from scratch
        raise ArithmeticError(f"The linear programme over the rules ended with status {status}.")

    def _certified(
        self, price: np.ndarray, dual: np.ndarray, lower: np.ndarray, upper: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray]:
        """What one set of dual values proves for every variant: limits (n_variants,), and reduced prices (n,).

        For any v within the rules, price · v = (price - A^T y) · v + y · A v, each part at most its largest.
        """
        dual = np.where(np.isfinite(self._low), dual, np.maximum(dual, 0.0))
        dual = np.where(np.isfinite(self._highs[0]), dual, np.minimum(dual, 0.0))
        falling, rising = dual < 0, dual > 0
        of_rows = self._highs[:, rising] @ dual[rising] + self._low[falling] @ dual[falling]
        reduced = price - self._transposed @ dual
        return of_rows + np.where(reduced > 0, upper, lower) @ reduced, reduced
