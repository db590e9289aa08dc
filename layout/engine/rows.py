"""The rules as rows of a matrix, for the linear and the integer programme."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import highspy
import numpy as np
from scipy import sparse

from layout.engine.solver import INFEASIBLE, loaded, set_prices

if TYPE_CHECKING:
    from layout.engine.feasible import Feasible

BUDGET, KEEP, FORBID = "budget", "keep", "forbid"  # what these rules are called when rules clash


@dataclass(frozen=True)
class Rows:
    """low <= matrix @ v <= highs[variant], for at least one variant of the upper limits (numbers of blocks).

    matrix (n_rows, n_candidates), amounts in units that make them whole numbers, or at most 1; low (n_rows,); highs
    (n_variants, n_rows); names: the rule each row belongs to.
    """

    matrix: sparse.csr_array
    low: np.ndarray
    highs: np.ndarray
    names: tuple[str, ...]


def rows_of_rules(feasible: Feasible) -> Rows:
    """Cliques, weighted sums (groups among them) and last the budget: prices, then channels where blocks cost."""
    parts, low, high, names = [], [], [], []
    for clique, name in zip(feasible.cliques, feasible.clique_names, strict=True):
        if len(clique) > 1:
            parts.append((clique, np.ones(len(clique))))
            low.append(-np.inf)
            high.append(1.0)
            names.append(name)
    for rule in feasible.sums:
        scale = _Scale(rule.weights)
        parts.append((rule.members, scale.entries(rule.weights)))
        low.append(-scale.limit(-rule.low, rule.slack) if rule.low > 0 else -np.inf)
        high.append(scale.limit(rule.high, rule.slack))
        names.append(rule.name)
    highs = np.array(high)[None, :]
    if feasible.budget is not None:
        more, limits = _budget_rows(feasible)
        parts += more
        low += [-np.inf] * len(more)
        names += [BUDGET] * len(more)
        highs = np.hstack([np.repeat(highs, len(limits), axis=0), limits])
    columns = np.concatenate([members for members, _ in parts]).astype(np.int32)
    entries = np.concatenate([weights for _, weights in parts])
    starts = np.cumsum([0, *(len(members) for members, _ in parts)]).astype(np.int32)
    matrix = sparse.csr_array((entries, columns, starts), shape=(len(parts), feasible.n_candidates))
    return Rows(matrix, np.array(low), highs, tuple(names))


def _budget_rows(feasible: Feasible) -> tuple[list[tuple[np.ndarray, np.ndarray]], np.ndarray]:
    """Rows of prices and channels, and their upper limits for each number of blocks (n_variants, n_rows)."""
    budget, everything = feasible.budget, np.arange(feasible.n_candidates)
    scale = _Scale(budget.price, budget.block_price)
    blocks = np.array(budget.block_range(feasible.size))
    rows = [(everything, scale.entries(budget.price))]
    limits = [scale.limit(budget.total - budget.block_price * blocks, budget.slack)]
    if budget.has_blocks:
        rows.append((everything, budget.channels.astype(float)))
        limits.append(budget.block_size * blocks - float(budget.used))
    return rows, np.column_stack(limits)


class _Scale:
    """Decimal amounts become whole numbers, which the integer programme holds exactly; others at most 1."""

    def __init__(self, amounts: np.ndarray, *more: float) -> None:
        amounts = np.append(amounts, more)
        largest = float(amounts.max(initial=0.0)) or 1.0
        for factor in (1, 10, 100, 1000):
            if np.abs(factor * amounts - np.round(factor * amounts)).max(initial=0.0) <= 1e-13 * factor * largest:
                self.factor, self._whole = float(factor), True
                return
        self.factor, self._whole = 1.0 / largest, False

    def entries(self, amounts: np.ndarray) -> np.ndarray:
        scaled = self.factor * amounts
        return np.round(scaled) if self._whole else scaled

    def limit(self, limit: np.ndarray | float, slack: float) -> np.ndarray | float:
        """An upper limit with its slack."""
        scaled = self.factor * (limit + slack)
        return np.floor(scaled) if self._whole else scaled


def integer_set(
    feasible: Feasible,
    price: np.ndarray,
    *,
    keeps: Callable[[str], bool] = lambda name: True,
    barred: Sequence[np.ndarray] = (),
    node_limit: int = 2000,
) -> tuple[np.ndarray | None, bool]:
    """(a set of large total price within those rules that `keeps` names, whether the answer is certain).

    (None, True): there is none; (None, False): none was found in `node_limit` nodes. barred: sets that must not come
    back. Mixed-integer programming, with the number of blocks as one more whole number.
    """
    rows, budget, n = feasible.rows, feasible.budget, feasible.n_candidates
    held = np.array([keeps(name) for name in rows.names], dtype=bool)
    matrix, low, high = rows.matrix, rows.low, rows.highs[0]
    if n == 0:
        empty = (low[held] <= 0).all() and (high[held] >= 0).all() and not barred
        return (np.zeros(0, dtype=int) if empty else None), True
    lower = feasible.lower if keeps(KEEP) else np.zeros(n)
    upper = feasible.upper if keeps(FORBID) else np.ones(n)
    if budget is not None and budget.has_blocks:
        column = np.zeros((len(low), 1))
        factor = _Scale(budget.price, budget.block_price).factor
        column[-2:, 0] = factor * budget.block_price, -budget.block_size
        matrix = sparse.csr_array(sparse.hstack([matrix, column]))
        more = budget.blocks(int(budget.channels.sum())) - budget.blocks(0)
        price, lower, upper = np.append(price, 0.0), np.append(lower, 0.0), np.append(upper, more)
    matrix, low, high = matrix[held], low[held], high[held]
    for one in barred:
        cut = np.where(np.arange(len(lower)) < n, -1.0, 0.0)
        cut[one] = 1.0
        matrix = sparse.csr_array(sparse.vstack([matrix, cut[None, :]]))
        low, high = np.append(low, -np.inf), np.append(high, len(one) - 1.0)
    solver = loaded(matrix, low, high, lower, upper)
    columns, whole = np.arange(len(lower), dtype=np.int32), np.full(len(lower), int(highspy.HighsVarType.kInteger))
    solver.changeColsIntegrality(len(lower), columns, whole.astype(np.uint8))
    solver.setOptionValue("mip_rel_gap", 0.05)
    solver.setOptionValue("mip_max_nodes", node_limit)
    set_prices(solver, price)
    solver.run()
    if solver.getModelStatus() == INFEASIBLE:
        return None, True
    if solver.getInfo().primal_solution_status != highspy.SolutionStatus.kSolutionStatusFeasible:
        return None, False
    return np.flatnonzero(np.array(solver.getSolution().col_value)[:n] > 0.5), True
