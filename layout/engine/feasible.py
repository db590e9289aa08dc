"""Which sets of candidates are allowed, and the linear programme over them."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from scipy import sparse
from scipy.optimize import LinearConstraint, linprog, milp

from layout.errors import InfeasibleError


@dataclass(frozen=True)
class Feasible:
    """Exactly counts[g] candidates of each group g, at most one of every clique, all of keep, and the `at_most` rules.

    group (n_candidates,) of 0..n_groups-1; counts (n_groups,); cliques: index arrays of candidates that exclude each
    other; keep: candidates that must be chosen; at_most: (members, limit) pairs, no more than `limit` of the members.
    """

    group: np.ndarray
    counts: np.ndarray
    cliques: tuple[np.ndarray, ...] = ()
    keep: tuple[int, ...] = ()
    at_most: tuple[tuple[np.ndarray, int], ...] = ()

    def __post_init__(self) -> None:
        sizes = np.bincount(self.group, minlength=len(self.counts))
        for g, (size, count) in enumerate(zip(sizes, self.counts, strict=True)):
            if count < 0 or size < count:
                raise InfeasibleError(f"Group {g} must give {count} sensors but has {size} candidates.")
        kept = np.bincount(self.group[list(self.keep)], minlength=len(self.counts))
        if (kept > self.counts).any():
            g = int(np.argmax(kept > self.counts))
            raise InfeasibleError(f"Group {g} must keep {kept[g]} sensors but may hold {self.counts[g]}.")
        for clique in self.cliques:
            if np.isin(clique, self.keep).sum() > 1:
                both = sorted(int(c) for c in clique if c in self.keep)
                raise InfeasibleError(f"Candidates {both[0]} and {both[1]} must both be kept but exclude each other.")

        for members, limit in self.at_most:
            if np.isin(self.keep, members).sum() > limit:
                raise InfeasibleError(
                    f"At most {limit} of {len(members)} candidates may be chosen, but more of them must be kept."
                )

    @property
    def n_candidates(self) -> int:
        """Number of candidates."""
        return len(self.group)

    @property
    def size(self) -> int:
        """Number of candidates in every allowed set."""
        return int(self.counts.sum())

    @cached_property
    def conflicts(self) -> np.ndarray:
        """Symmetric (n, n) bool: pairs that exclude each other."""
        table = np.zeros((self.n_candidates, self.n_candidates), dtype=bool)
        for clique in self.cliques:
            table[np.ix_(clique, clique)] = True
        np.fill_diagonal(table, False)
        return table

    @cached_property
    def cells(self) -> np.ndarray | None:
        """(n,) the cell of each candidate if the cliques split the candidates cleanly, each in one group; else None.

        Then the linear programme is: the best of each cell, the best cells of each group.
        """
        cell = np.full(self.n_candidates, -1)
        for number, clique in enumerate(self.cliques):
            if (cell[clique] >= 0).any() or len(np.unique(self.group[clique])) > 1:
                return None
            cell[clique] = number
        alone = cell < 0
        cell[alone] = len(self.cliques) + np.arange(alone.sum())
        return None if self.at_most else cell

    def given(self, chosen: np.ndarray, candidates: np.ndarray) -> Feasible:
        """The rules for the rest of a layout: `candidates` (sorted, each addable to `chosen`), numbered from 0."""
        number = np.full(self.n_candidates, -1)
        number[candidates] = np.arange(len(candidates))
        cliques = (number[clique] for clique in self.cliques)
        at_most = ((number[members], limit - int(np.isin(chosen, members).sum())) for members, limit in self.at_most)
        return Feasible(
            group=self.group[candidates],
            counts=self.counts - np.bincount(self.group[chosen], minlength=len(self.counts)),
            cliques=tuple(part[part >= 0] for part in cliques if (part >= 0).any()),
            keep=tuple(int(number[one]) for one in self.keep if number[one] >= 0),
            at_most=tuple((part[part >= 0], limit) for part, limit in at_most),
        )

    def with_at_most(self, members: np.ndarray, limit: int) -> Feasible:
        """The same rules and one more."""
        return replace(self, at_most=(*self.at_most, (members, limit)))

    def allows(self, chosen: np.ndarray) -> bool:
        """Whether a set keeps every rule."""
        chosen = np.asarray(chosen, dtype=int)
        return bool(
            len(np.unique(chosen)) == len(chosen)
            and (np.bincount(self.group[chosen], minlength=len(self.counts)) == self.counts).all()
            and not self.conflicts[np.ix_(chosen, chosen)].any()
            and np.isin(self.keep, chosen).all()
            and all(np.isin(chosen, members).sum() <= limit for members, limit in self.at_most)
        )

    def addable(self, chosen: np.ndarray) -> np.ndarray:
        """(n,) bool: candidates that can join the chosen ones."""
        chosen = np.asarray(chosen, dtype=int)
        held = np.bincount(self.group[chosen], minlength=len(self.counts))
        free = (held < self.counts)[self.group] & ~self.conflicts[chosen].any(axis=0)
        free[chosen] = False
        for members, limit in self.at_most:
            if np.isin(chosen, members).sum() >= limit:
                free[members] = False
        return free

    def swappable(self, chosen: np.ndarray) -> np.ndarray:
        """(k, n) bool: whether chosen[i] may give way to candidate j."""
        chosen = np.asarray(chosen, dtype=int)
        rows = self.conflicts[chosen]
        allowed = (rows.sum(axis=0)[None, :] - rows) == 0
        allowed &= self.group[chosen][:, None] == self.group[None, :]
        allowed[:, chosen] = False
        allowed[np.isin(chosen, self.keep)] = False
        for members, limit in self.at_most:
            inside = np.zeros(self.n_candidates, dtype=bool)
            inside[members] = True
            held = inside[chosen].sum()
            allowed &= held - inside[chosen][:, None] + inside[None, :] <= limit
        return allowed

    @cached_property
    def _rows(self) -> tuple[sparse.csr_array, np.ndarray, sparse.csr_array]:
        """Inequalities (rules, limits) and equalities (one row a group)."""
        rules = [(clique, 1) for clique in self.cliques if len(clique) > 1] + list(self.at_most)
        lengths = [len(members) for members, _ in rules]
        columns = np.concatenate([members for members, _ in rules]) if rules else np.zeros(0, dtype=int)
        shape = (len(rules), self.n_candidates)
        upper = sparse.csr_array((np.ones(len(columns)), columns, np.cumsum([0, *lengths])), shape=shape)
        group = sparse.csr_array(
            (np.ones(self.n_candidates), (self.group, np.arange(self.n_candidates))),
            shape=(len(self.counts), self.n_candidates),
        )
        return upper, np.array([limit for _, limit in rules], dtype=float), group

    @cached_property
    def _lower(self) -> np.ndarray:
        lower = np.zeros(self.n_candidates)
        lower[list(self.keep)] = 1.0
        return lower

    def best_linear(self, price: np.ndarray) -> tuple[float, np.ndarray]:
        """A certified upper limit of price · v over the relaxed rules, and a v (n,) that (nearly) reaches it.

        With clean cells the limit is exact. Otherwise it is rebuilt from the programme's dual values clipped to their
        sign, so that it is an upper limit whatever the solver's tolerance.
        """
        if self.cells is not None:
            return self._best_of_cells(price)
        limit, v, _ = self._solve(price)
        return limit, v

    def losses(self, price: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """(limit, loss_in, loss_out): how far the limit falls at least if a candidate must be in, or must be out.

        Both (n,) >= 0; from the reduced costs of the linear programme, or exactly where cells are clean.
        """
        if self.cells is not None:
            return self._losses_of_cells(price)
        limit, _, reduced = self._solve(price)
        return limit, *(np.where(self._lower > 0, 0.0, np.maximum(sign * reduced, 0.0)) for sign in (-1, 1))

    def _solve(self, price: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """Limit from clipped duals, a solution, and the reduced prices."""
        upper, limits, group = self._rows
        scale = float(np.abs(price).max()) or 1.0  # the solver's tolerances are absolute
        price = price / scale
        answer = linprog(
            -price,
            A_ub=upper if len(limits) else None,
            b_ub=limits if len(limits) else None,
            A_eq=group,
            b_eq=self.counts.astype(float),
            bounds=np.column_stack([self._lower, np.ones(self.n_candidates)]),
            method="highs",
        )
        if answer.status == 2:
            raise InfeasibleError(f"The rules must allow {self.size} sensors together, but no layout keeps them all.")
        if answer.status == 0:
            v = np.clip(answer.x, 0.0, 1.0)
            dual = np.maximum(-answer.ineqlin.marginals, 0.0) if len(limits) else np.zeros(0)
            free = -answer.eqlin.marginals
        else:  # the solver gave up: the groups' best candidates, whatever excludes them, are a limit all the same
            best = [np.flatnonzero(self.group == g) for g in range(len(self.counts))]
            best = [part[np.argsort(-price[part])][:count] for part, count in zip(best, self.counts, strict=True)]
            v = np.zeros(self.n_candidates)
            v[np.concatenate(best)] = 1.0
            dual, free = np.zeros(len(limits)), np.array([price[part].min(initial=0.0) for part in best])
        reduced = price - (upper.T @ dual if len(limits) else 0.0) - group.T @ free
        limit = dual @ limits + free @ self.counts + np.where(self._lower > 0, reduced, np.maximum(reduced, 0.0)).sum()
        return scale * float(limit), v, scale * reduced

    def _best_of_cells(self, price: np.ndarray) -> tuple[float, np.ndarray]:
        chosen = np.array(sorted(self.keep), dtype=int)
        open_cell = ~np.isin(self.cells, self.cells[chosen])
        order = np.flatnonzero(open_cell)[np.argsort(-price[open_cell], kind="stable")]
        order = order[np.sort(np.unique(self.cells[order], return_index=True)[1])]
        left = self.counts - np.bincount(self.group[chosen], minlength=len(self.counts))
        picked = [order[self.group[order] == g][:count] for g, count in enumerate(left)]
        chosen = np.concatenate([chosen, *picked])
        v = np.zeros(self.n_candidates)
        v[chosen] = 1.0
        if len(chosen) < self.size:
            raise InfeasibleError(f"The rules must allow {self.size} sensors together, but at most {len(chosen)} fit.")
        return float(price @ v), v

    def _losses_of_cells(self, price: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        limit, v = self._best_of_cells(price)
        picked = np.flatnonzero(v)
        n_cells = int(self.cells.max()) + 1
        best, second = np.full(n_cells, -np.inf), np.full(n_cells, -np.inf)
        np.maximum.at(best, self.cells, price)
        top = np.zeros(len(price), dtype=bool)
        top[picked] = True
        np.maximum.at(second, self.cells[~top], price[~top])
        taken = np.zeros(n_cells, dtype=bool)
        taken[self.cells[picked]] = True
        lowest, next_best = np.full(len(self.counts), np.inf), np.full(len(self.counts), -np.inf)
        free = picked[~np.isin(picked, self.keep)]
        np.minimum.at(lowest, self.group[free], price[free])
        idle = ~taken[self.cells]
        np.maximum.at(next_best, self.group[idle], price[idle])
        loss_in = np.where(idle, lowest[self.group], best[self.cells]) - price
        loss_in[np.isin(self.cells, self.cells[list(self.keep)])] = np.inf
        loss_in[picked] = 0.0
        loss_out = np.zeros(len(price))
        loss_out[free] = price[free] - np.maximum(second[self.cells[free]], next_best[self.group[free]])
        return limit, np.maximum(loss_in, 0.0), np.maximum(loss_out, 0.0)

    def any_set(self, price: np.ndarray) -> np.ndarray:
        """An allowed set of large total price, by mixed-integer programming; InfeasibleError if there is none."""
        upper, limits, group = self._rows
        rules = [LinearConstraint(group, self.counts, self.counts)]
        if len(limits):
            rules.append(LinearConstraint(upper, -np.inf, limits))
        answer = milp(
            -price,
            constraints=rules,
            integrality=np.ones(self.n_candidates),
            bounds=(self._lower, np.ones(self.n_candidates)),
            options={"mip_rel_gap": 0.05, "node_limit": 2000},
        )
        if answer.x is None:
            found = "no layout keeps them all" if answer.status == 2 else "none was found that keeps them all"
            raise InfeasibleError(f"The rules must allow {self.size} sensors together, but {found}.")
        return np.flatnonzero(answer.x > 0.5)
