"""Random rule sets of every sort at once, and every subset judged by the rules' own words."""

import math
from dataclasses import dataclass

import numpy as np
from scipy.optimize import linprog

from layout.engine.feasible import Feasible
from layout.engine.rules import Budget, Rule


@dataclass(frozen=True)
class Case:
    """The parts that a Feasible is made of."""

    group: np.ndarray
    counts: np.ndarray
    least: np.ndarray
    sensors: np.ndarray
    cliques: tuple
    keep: tuple
    forbid: tuple
    at_most: tuple
    rules: tuple  # (name, members, weights, low, high)
    budget: dict | None

    def feasible(self, checked=True):
        return Feasible(
            self.group,
            self.counts,
            self.cliques,
            self.keep,
            self.at_most,
            least=self.least,
            sensors=self.sensors,
            rules=tuple(Rule(*rule) for rule in self.rules),
            budget=None if self.budget is None else Budget(**self.budget),
            forbid=self.forbid,
            checked=checked,
        )


def random_case(seed, most=11):
    """Any mixture of rules on at most `most` candidates; many allow something, some nothing."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(5, most + 1))
    n_groups = int(rng.integers(1, 3))
    group = np.sort(rng.integers(n_groups, size=n))
    counts = rng.integers(1, 5, size=n_groups)
    least = counts - rng.integers(0, 3, size=n_groups) if rng.random() < 0.6 else counts
    sensors = rng.integers(1, 3, size=n) if rng.random() < 0.4 else np.ones(n, dtype=int)
    cliques = tuple(np.sort(rng.choice(n, int(rng.integers(2, 4)), replace=False)) for _ in range(rng.integers(0, 4)))
    keep = tuple(rng.choice(n, int(rng.random() < 0.3), replace=False).tolist())
    forbid = tuple(rng.choice(n, int(rng.random() < 0.3), replace=False).tolist())
    at_most = tuple((rng.choice(n, 4, replace=False), int(rng.integers(1, 3))) for _ in range(rng.integers(0, 2)))
    rules = []
    for number in range(rng.integers(0, 3)):
        members = np.sort(rng.choice(n, int(rng.integers(3, n)), replace=False))
        weights = np.ones(len(members)) if rng.random() < 0.5 else rng.uniform(0, 2, len(members)).round(1)
        low = float(rng.integers(0, 3)) if rng.random() < 0.7 else 0.0
        high = low + float(rng.integers(0, 3)) if rng.random() < 0.6 else math.inf
        rules.append((f"zone {number}", members, weights, low, high))
    budget = None
    if rng.random() < 0.7:
        price = rng.uniform(0, 3, n).round(1)
        budget = {"price": price, "channels": rng.integers(0, 4, n), "total": round(rng.uniform(1, 14), 1)}
        if rng.random() < 0.7:
            budget |= {"block_size": int(rng.integers(1, 5)), "block_price": round(rng.uniform(0, 3), 1)}
    return Case(group, counts, np.maximum(least, 0), sensors, cliques, keep, forbid, at_most, tuple(rules), budget)


def subsets_of(n):
    """(2^n, n) bool: every subset."""
    return (np.arange(2**n)[:, None] >> np.arange(n)) & 1 == 1


def cost_of(budget, subset):
    """What a subset (n,) bool costs, by its own words."""
    channels = int(budget["channels"][subset].sum())
    blocks = math.ceil(channels / budget["block_size"]) if "block_size" in budget else 0
    return math.fsum(budget["price"][subset]) + budget.get("block_price", 0.0) * blocks


def keeps_upper_rules(case, subset):
    """Whether a subset (n,) bool breaks no upper limit; sums of decimals are compared to 1e-7."""
    return (
        all(case.sensors[subset & (case.group == g)].sum() <= count for g, count in enumerate(case.counts))
        and all(subset[clique].sum() <= 1 for clique in case.cliques)
        and all(subset[members].sum() <= limit for members, limit in case.at_most)
        and not subset[list(case.forbid)].any()
        and all(weights[subset[members]].sum() <= high + 1e-7 for _, members, weights, _, high in case.rules)
        and (case.budget is None or cost_of(case.budget, subset) <= case.budget["total"] + 1e-7)
    )


def keeps_rules(case, subset):
    """Whether a subset (n,) bool keeps every rule."""
    return (
        keeps_upper_rules(case, subset)
        and all(case.sensors[subset & (case.group == g)].sum() >= least for g, least in enumerate(case.least))
        and all(weights[subset[members]].sum() >= low - 1e-7 for _, members, weights, low, _ in case.rules)
        and subset[list(case.keep)].all()
    )


def allowed_table(case):
    """(n_sets, n) bool: every allowed set."""
    subsets = subsets_of(len(case.group))
    return subsets[[keeps_rules(case, subset) for subset in subsets]]


def relaxed_best(case, price, chosen=None, closed=None):
    """Largest price · v over the relaxed rules for the best number of blocks, by scipy; None where nothing is left."""
    n = len(case.group)
    upper, limits = [], []

    def at_most(row, limit):
        upper.append(row)
        limits.append(limit)

    def member_row(members, weights=1.0):
        row = np.zeros(n)
        row[members] = weights
        return row

    for g, (least, count) in enumerate(zip(case.least, case.counts, strict=True)):
        row = np.where(case.group == g, case.sensors, 0.0)
        at_most(row, count)
        at_most(-row, -least)
    for clique in case.cliques:
        at_most(member_row(clique), 1)
    for members, limit in case.at_most:
        at_most(member_row(members), limit)
    for _, members, weights, low, high in case.rules:
        row = member_row(members, weights)
        at_most(-row, -low)
        if math.isfinite(high):
            at_most(row, high)
    inside, outside = np.zeros(n, dtype=bool), np.zeros(n, dtype=bool)
    inside[list(case.keep)], outside[list(case.forbid)] = True, True
    inside |= False if chosen is None else chosen
    outside |= False if closed is None else closed
    bounds = [(float(i), float(not o)) for i, o in zip(inside, outside, strict=True)]
    if any(low > high for low, high in bounds):
        return None
    tops = []
    budget = case.budget
    size = budget.get("block_size") if budget else None
    for blocks in range(math.ceil(budget["channels"].sum() / size) + 1) if size else (0,):
        rows, ends = list(upper), list(limits)
        if budget:
            rows.append(budget["price"])
            ends.append(budget["total"] - blocks * budget.get("block_price", 0.0))
        if size:
            rows.append(budget["channels"])
            ends.append(blocks * size)
        answer = linprog(-price, A_ub=np.array(rows), b_ub=ends, bounds=bounds, method="highs")
        if answer.status == 0:
            tops.append(-answer.fun)
    return max(tops, default=None)
