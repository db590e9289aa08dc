"""Which sets of candidates are allowed, and the linear programme over them."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from functools import cached_property

import numpy as np

from layout.engine.cells import best_of_cells, clean_cells, losses_of_cells
from layout.engine.pricing import LinearProgramme
from layout.engine.rows import Rows, integer_set, rows_of_rules
from layout.engine.rules import Budget, Rule
from layout.errors import InfeasibleError


@dataclass(frozen=True)
class Feasible:
    """The sets of candidates that keep every rule.

    group (n,) of 0..n_groups-1; counts (n_groups,): most sensors of each group; least (n_groups,): fewest (default:
    counts, so exactly that many); sensors (n,) whole numbers >= 1: as how many sensors of its group a candidate counts
    (default: 1); cliques: index arrays of candidates that exclude each other; keep: candidates that must be chosen;
    forbid: that must not; at_most: (members, limit) pairs, no more than `limit` of the members; rules: weighted sums;
    budget: prices.

    group_names and clique_names say what a count or a clique is called when rules clash. Rules that contradict each
    other plainly raise InfeasibleError here, unless checked is False (to ask which rules clash).
    """

    group: np.ndarray
    counts: np.ndarray
    cliques: tuple[np.ndarray, ...] = ()
    keep: tuple[int, ...] = ()
    at_most: tuple[tuple[np.ndarray, int], ...] = ()
    least: np.ndarray | None = None
    sensors: np.ndarray | None = None
    rules: tuple[Rule, ...] = ()
    budget: Budget | None = None
    forbid: tuple[int, ...] = ()
    group_names: tuple[str, ...] = ()
    clique_names: tuple[str, ...] = ()
    checked: bool = True

    def __post_init__(self) -> None:
        defaults = {
            "counts": np.asarray(self.counts, dtype=int),
            "least": np.asarray(self.counts if self.least is None else self.least, dtype=int),
            "sensors": np.ones(len(self.group), dtype=int) if self.sensors is None else np.asarray(self.sensors),
            "group_names": self.group_names or tuple(f"count of group {g}" for g in range(len(self.counts))),
            "clique_names": self.clique_names or ("spacing",) * len(self.cliques),
        }
        for name, value in defaults.items():
            object.__setattr__(self, name, value)
        if self.checked:
            self._check()

    def _check(self) -> None:
        usable = np.ones(self.n_candidates, dtype=bool)
        usable[list(self.forbid)] = False
        room = self._per_group(np.flatnonzero(usable))
        kept = self._per_group(np.array(self.keep, dtype=int))
        for g, (least, count) in enumerate(zip(self.least, self.counts, strict=True)):
            if count < 0 or room[g] < least or least > count:
                asked = f"{count}" if least == count else f"{least} to {count}"
                raise InfeasibleError(f"Group {g} must give {asked} sensors but has {room[g]} candidates.")
            if kept[g] > count:
                raise InfeasibleError(f"Group {g} must keep {kept[g]} sensors but may hold {count}.")
        if not usable[list(self.keep)].all():
            both = next(one for one in self.keep if not usable[one])
            raise InfeasibleError(f"Candidate {both} must be kept but is forbidden.")
        for clique in self.cliques if len(self.keep) > 1 else ():
            if self.lower[clique].sum() > 1:
                both = sorted(int(c) for c in clique if c in self.keep)
                raise InfeasibleError(f"Candidates {both[0]} and {both[1]} must both be kept but exclude each other.")
        keep = np.array(self.keep, dtype=int)
        for rule in self.sums[len(self.counts) :]:
            held, most = rule.total(keep), rule.weights.sum()
            if held > rule.high + rule.slack:
                raise InfeasibleError(f"{rule.name}: at most {rule.high:g} allowed, but {held:g} must be kept.")
            if most < rule.low - rule.slack:
                raise InfeasibleError(f"{rule.name}: at least {rule.low:g} asked, but at most {most:g} fit.")
        if self.budget is not None and self.cost(keep) > self.budget.total + self.budget.slack:
            cost, total = self.cost(keep), self.budget.total
            raise InfeasibleError(f"budget: must be at least {cost:g} for what is kept, but {total:g} is given.")

    @property
    def n_candidates(self) -> int:
        """Number of candidates."""
        return len(self.group)

    @cached_property
    def size(self) -> int:
        """Most candidates that a set may hold by the counts; every allowed set holds so many where counts are exact."""
        if (self.sensors == 1).all():
            return int(self.counts.sum())
        total = 0
        for g, count in enumerate(self.counts):
            total += int((np.cumsum(np.sort(self.sensors[self.group == g])) <= count).sum())
        return total

    @cached_property
    def sums(self) -> tuple[Rule, ...]:
        """All weighted sums: one a group, then `at_most`, then `rules`."""
        groups = []
        for g, name in enumerate(self.group_names):
            members = np.flatnonzero(self.group == g)
            groups.append(Rule(name, members, self.sensors[members], self.least[g], self.counts[g]))
        limits = [Rule(f"at most {limit}", members, high=limit) for members, limit in self.at_most]
        return (*groups, *limits, *self.rules)

    @cached_property
    def _table(self) -> np.ndarray:
        """(n_sums, n) weights of every sum."""
        table = np.zeros((len(self.sums), self.n_candidates))
        for row, rule in zip(table, self.sums, strict=True):
            row[rule.members] = rule.weights
        return table

    @cached_property
    def _limits(self) -> tuple[np.ndarray, np.ndarray]:
        """(n_sums,) lower and upper limits with their slack."""
        low = np.array([rule.low - rule.slack for rule in self.sums])
        return low, np.array([rule.high + rule.slack for rule in self.sums])

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
        """(n,) the cell of each candidate if cliques are the only rule but exact counts and split cleanly; else None.

        Then the linear programme is: the best of each cell, the best cells of each group.
        """
        if self.at_most or self.rules or self.forbid or self.budget is not None:
            return None
        if (self.least < self.counts).any() or (self.sensors != 1).any():
            return None
        return clean_cells(self.group, self.cliques)

    def given(self, chosen: np.ndarray, candidates: np.ndarray) -> Feasible:
        """The rules for the rest of a layout: `candidates` (sorted, each addable to `chosen`), numbered from 0."""
        chosen = np.asarray(chosen, dtype=int)
        number = np.full(self.n_candidates, -1)
        number[candidates] = np.arange(len(candidates))
        held = self._per_group(chosen)
        cliques = [(number[clique], name) for clique, name in zip(self.cliques, self.clique_names, strict=True)]
        cliques = [(part[part >= 0], name) for part, name in cliques]
        cliques = [(part, name) for part, name in cliques if len(part) > 1]
        at_most = ((number[members], limit - int(np.isin(chosen, members).sum())) for members, limit in self.at_most)
        return replace(
            self,
            group=self.group[candidates],
            counts=self.counts - held,
            least=np.maximum(self.least - held, 0),
            sensors=self.sensors[candidates],
            cliques=tuple(part for part, _ in cliques),
            clique_names=tuple(name for _, name in cliques),
            keep=tuple(int(number[one]) for one in self.keep if number[one] >= 0),
            forbid=tuple(int(number[one]) for one in self.forbid if number[one] >= 0),
            at_most=tuple((part[part >= 0], limit) for part, limit in at_most),
            rules=tuple(rule.rest(chosen, number) for rule in self.rules),
            budget=None if self.budget is None else self.budget.rest(chosen, candidates),
        )

    def with_at_most(self, members: np.ndarray, limit: int) -> Feasible:
        """The same rules and one more."""
        return replace(self, at_most=(*self.at_most, (members, limit)))

    def with_rule(self, rule: Rule) -> Feasible:
        """The same rules and one more."""
        return replace(self, rules=(*self.rules, rule))

    def cost(self, chosen: np.ndarray) -> float:
        """What a set costs, every started block included; 0 without a budget."""
        return 0.0 if self.budget is None else self.budget.cost(chosen)

    def allows(self, chosen: np.ndarray) -> bool:
        """Whether a set keeps every rule."""
        chosen = np.asarray(chosen, dtype=int)
        low, high = self._limits
        held = self._table[:, chosen].sum(axis=1)
        return bool(
            len(np.unique(chosen)) == len(chosen)
            and (held >= low).all()
            and (held <= high).all()
            and not self.conflicts[np.ix_(chosen, chosen)].any()
            and np.isin(self.keep, chosen).all()
            and not np.isin(self.forbid, chosen).any()
            and (self.budget is None or self.cost(chosen) <= self.budget.total + self.budget.slack)
        )

    def addable(self, chosen: np.ndarray) -> np.ndarray:
        """(n,) bool: candidates that can join the chosen ones and break no upper limit (lower ones are not asked)."""
        chosen = np.asarray(chosen, dtype=int)
        held = self._table[:, chosen].sum(axis=1)
        grown = held[:, None] + self._table
        free = ((self._table == 0) | (grown <= self._limits[1][:, None])).all(axis=0)
        free &= ~self.conflicts[chosen].any(axis=0)
        if self.budget is not None:
            price, channels = self.budget.price, self.budget.channels
            free &= self.budget.fits(price[chosen].sum() + price, channels[chosen].sum() + channels)
        free[chosen] = False
        free[list(self.forbid)] = False
        return free

    def droppable(self, chosen: np.ndarray) -> np.ndarray:
        """(k,) bool: whether the set without chosen[i] keeps every rule, the set itself keeping them."""
        chosen = np.asarray(chosen, dtype=int)
        low, high = self._limits
        weights = self._table[:, chosen]
        left = weights.sum(axis=1)[:, None] - weights
        return ((left >= low[:, None]) & (left <= high[:, None])).all(axis=0) & ~np.isin(chosen, self.keep)

    def swappable(self, chosen: np.ndarray) -> np.ndarray:
        """(k, n) bool: whether the set keeps every rule once chosen[i] gives way to candidate j."""
        chosen = np.asarray(chosen, dtype=int)
        rows = self.conflicts[chosen]
        allowed = (rows.sum(axis=0)[None, :] - rows) == 0
        allowed[:, chosen] = False
        allowed[:, list(self.forbid)] = False
        allowed[np.isin(chosen, self.keep)] = False
        for weights, low, high in zip(self._table, *self._limits, strict=True):
            held = weights[chosen].sum()
            if weights.min() == weights.max():  # any swap leaves the sum as it is
                allowed &= bool(low <= held <= high)
                continue
            swapped = held - weights[chosen][:, None] + weights[None, :]
            allowed &= (swapped >= low) & (swapped <= high)
        if self.budget is not None:
            spent, taken = (
                amounts[chosen].sum() - amounts[chosen][:, None] + amounts[None, :]
                for amounts in (self.budget.price, self.budget.channels)
            )
            allowed &= self.budget.fits(spent, taken)
        return allowed

    @cached_property
    def lower(self) -> np.ndarray:
        """(n,) 1 for what must be chosen."""
        lower = np.zeros(self.n_candidates)
        lower[list(self.keep)] = 1.0
        return lower

    @cached_property
    def upper(self) -> np.ndarray:
        """(n,) 0 for what must not be chosen."""
        upper = np.ones(self.n_candidates)
        upper[list(self.forbid)] = 0.0
        return upper

    @cached_property
    def rows(self) -> Rows:
        """The rules as rows of a matrix."""
        return rows_of_rules(self)

    @cached_property
    def programme(self) -> LinearProgramme:
        """The linear programme over these rules; one warm solver for all its calls."""
        return LinearProgramme(self)

    def __getstate__(self) -> dict:
        """Copies and other processes get the rules, not the solver."""
        return {one.name: getattr(self, one.name) for one in fields(self)}

    def best_linear(self, price: np.ndarray) -> tuple[float, np.ndarray]:
        """A certified upper limit of price · v over the relaxed rules, and a v (n,) that (nearly) reaches it.

        With clean cells the limit is exact; else `LinearProgramme.best` says why it is an upper limit.
        """
        if self.cells is not None:
            return best_of_cells(self, price)
        priced = self.programme.best(price)
        return priced.limit, priced.vertex

    def losses(self, price: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """(limit, loss_in, loss_out): how far the limit falls at least if a candidate must be in, or must be out.

        Both (n,) >= 0; from the reduced costs of the linear programme, or exactly where cells are clean.
        """
        if self.cells is not None:
            return losses_of_cells(self, price)
        priced = self.programme.best(price, sharp_losses=True)
        return priced.limit, priced.loss_in, priced.loss_out

    def any_set(self, price: np.ndarray) -> np.ndarray:
        """An allowed set of large total price, by mixed-integer programming; InfeasibleError if there is none."""
        barred: list[np.ndarray] = []
        while True:
            found, certain = integer_set(self, price, barred=barred)
            if found is None and not certain:  # any set at all is easier to find than a good one
                found, certain = integer_set(self, np.zeros(self.n_candidates), barred=barred, node_limit=100_000)
            if found is None:
                why = "no layout keeps them all" if certain else "none was found that keeps them all"
                raise InfeasibleError(f"The rules must allow {self.size} sensors together, but {why}.")
            if self.allows(found):
                return found
            barred.append(found)  # over a limit by less than the solver's tolerance

    def complete(self, chosen: np.ndarray, price: np.ndarray | None = None) -> np.ndarray:
        """An allowed set that holds all of `chosen`, of large total price (n,) where given; InfeasibleError if none."""
        keep = tuple(int(one) for one in np.union1d(np.array(self.keep, dtype=int), chosen))
        return replace(self, keep=keep).any_set(np.zeros(self.n_candidates) if price is None else price)

    def _per_group(self, chosen: np.ndarray) -> np.ndarray:
        """(n_groups,) sensors that a set brings to each group."""
        held = np.zeros(len(self.counts), dtype=int)
        np.add.at(held, self.group[chosen], self.sensors[chosen])
        return held
