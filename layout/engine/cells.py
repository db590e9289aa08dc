"""The linear programme in closed form where cliques split the candidates into cells, each in one group."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from layout.errors import InfeasibleError

if TYPE_CHECKING:
    from layout.engine.feasible import Feasible


def clean_cells(group: np.ndarray, cliques: tuple[np.ndarray, ...]) -> np.ndarray | None:
    """(n,) the cell of each candidate if no two cliques meet and none spans two groups; else None."""
    cell = np.full(len(group), -1)
    for number, clique in enumerate(cliques):
        if (cell[clique] >= 0).any() or len(np.unique(group[clique])) > 1:
            return None
        cell[clique] = number
    alone = cell < 0
    cell[alone] = len(cliques) + np.arange(alone.sum())
    return cell


def best_of_cells(feasible: Feasible, price: np.ndarray) -> tuple[float, np.ndarray]:
    """The largest price · v and a v (n,) that reaches it: the best of each cell, the best cells of each group."""
    chosen = np.array(sorted(feasible.keep), dtype=int)
    open_cell = ~np.isin(feasible.cells, feasible.cells[chosen])
    order = np.flatnonzero(open_cell)[np.argsort(-price[open_cell], kind="stable")]
    order = order[np.sort(np.unique(feasible.cells[order], return_index=True)[1])]
    left = feasible.counts - np.bincount(feasible.group[chosen], minlength=len(feasible.counts))
    picked = [order[feasible.group[order] == g][:count] for g, count in enumerate(left)]
    chosen = np.concatenate([chosen, *picked])
    v = np.zeros(feasible.n_candidates)
    v[chosen] = 1.0
    if len(chosen) < feasible.size:
        raise InfeasibleError(f"The rules must allow {feasible.size} sensors together, but at most {len(chosen)} fit.")
    return float(price @ v), v


def losses_of_cells(feasible: Feasible, price: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
    """The largest price · v and by how much it falls if a candidate must be in, or must be out (n,) each, exactly."""
    limit, v = best_of_cells(feasible, price)
    picked = np.flatnonzero(v)
    n_cells = int(feasible.cells.max()) + 1
    best, second = np.full(n_cells, -np.inf), np.full(n_cells, -np.inf)
    np.maximum.at(best, feasible.cells, price)
    top = np.zeros(len(price), dtype=bool)
    top[picked] = True
    np.maximum.at(second, feasible.cells[~top], price[~top])
    taken = np.zeros(n_cells, dtype=bool)
    taken[feasible.cells[picked]] = True
    lowest, next_best = np.full(len(feasible.counts), np.inf), np.full(len(feasible.counts), -np.inf)
    free = picked[~np.isin(picked, feasible.keep)]
    np.minimum.at(lowest, feasible.group[free], price[free])
    idle = ~taken[feasible.cells]
    np.maximum.at(next_best, feasible.group[idle], price[idle])
    loss_in = np.where(idle, lowest[feasible.group], best[feasible.cells]) - price
    loss_in[np.isin(feasible.cells, feasible.cells[list(feasible.keep)])] = np.inf
    loss_in[picked] = 0.0
    loss_out = np.zeros(len(price))
    loss_out[free] = price[free] - np.maximum(second[feasible.cells[free]], next_best[feasible.group[free]])
    return limit, np.maximum(loss_in, 0.0), np.maximum(loss_out, 0.0)
