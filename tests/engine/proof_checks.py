"""What a stranger checks of a proof's tree: that its parts cover every layout, and that every limit holds."""

import numpy as np
from scipy.optimize import linprog

from layout.engine.branch_tree import DROPPED, EMPTY, OPEN, SPLIT, TRIED
from layout.engine.rank_aware import RankAwareRelaxation, flat_column
from layout.engine.remaining import remaining

ROUNDING = 1e-9  # bits


def listed(padded):
    """A list of candidates without its padding."""
    return padded[padded >= 0]


def membership(sets, n):
    """(n_sets, n) bool."""
    table = np.zeros((len(sets), n), dtype=bool)
    for row, one in zip(table, sets, strict=True):
        row[one] = True
    return table


def inside(tree, part, member):
    """(n_sets,) bool: the sets that a part holds."""
    chosen, free = listed(tree.chosen[part]), tree.free_of(part)
    others = np.ones(tree.n_candidates, dtype=bool)
    others[chosen] = others[free] = False
    return member[:, chosen].all(axis=1) & ~member[:, others].any(axis=1)


def check_cover(tree, member, scores, bound, value):
    """Every allowed set is in the root, and stays in one child or is given up within the bound; all limits hold.

    member (n_sets, n) bool and scores (n_sets,): every allowed set. Returns how many sets fixing gave up.
    """
    given_up = 0
    assert inside(tree, 0, member).all()
    assert tree.parent[0] == -1
    for part in range(len(tree.parent)):
        held = inside(tree, part, member)
        assert scores[held].max(initial=-np.inf) <= tree.limit[part] + ROUNDING
        children = np.flatnonzero(tree.parent == part)
        if tree.kind[part] != SPLIT:
            assert len(children) == 0
            assert tree.kind[part] in (OPEN, DROPPED, EMPTY, TRIED)
            assert tree.kind[part] != EMPTY or not held.any()
            assert tree.kind[part] != TRIED or scores[held].max() <= min(value, tree.limit[part]) + ROUNDING
            assert tree.kind[part] == EMPTY or tree.limit[part] <= bound + ROUNDING
            continue
        lost = held & (
            member[:, tree.given_up_of(part)].any(axis=1) | ~member[:, listed(tree.fixed_in[part])].all(axis=1)
        )
        assert scores[lost].max(initial=-np.inf) <= bound + ROUNDING
        times = np.sum([inside(tree, child, member) for child in children], axis=0, initial=0)
        np.testing.assert_array_equal(times, held & ~lost)
        given_up += lost.sum()
    return given_up


def check_limits(tree, model, feasible, bound, channels):
    """Every limit again: the rank-aware tangent at the part's weights, from the whole target, and scipy's programme.

    channels: the most that an allowed set brings. Returns the number of tangents checked.
    """
    checked = np.zeros(len(tree.parent))
    count = 0
    for part in range(len(tree.parent)):
        above = checked[tree.parent[part]] if part else tree.limit[0]
        weighted = listed(tree.weighted[part])
        if tree.kind[part] not in (DROPPED, SPLIT):
            checked[part] = above
            continue
        chosen, free = listed(tree.chosen[part]), tree.free_of(part)
        free = np.union1d(free[~feasible.conflicts[chosen].any(axis=0)[free]], weighted)
        left = remaining(model, np.sort(chosen), free, model.target)
        nuisance = left.nuisance_gram[:-1, :-1] - np.eye(left.n_channels)
        if left.offset.any():
            nuisance = nuisance + np.outer(flat_column(left.offset), flat_column(left.offset))
        still = channels - len(model.channels_of(chosen))
        relaxation = RankAwareRelaxation(left.target, nuisance, left.candidate_of_channel, still)
        weights = np.zeros(len(free))
        weights[np.searchsorted(free, weighted)] = tree.weights[part][: len(weighted)]
        value, gradient = relaxation.value_and_gradient(weights)
        price = np.zeros(tree.n_candidates)
        price[free] = gradient
        offer = left.value + value - gradient @ weights

        def limit(more=(), less=(), offer=offer, price=price, free=free, chosen=chosen):
            return offer + _programme(feasible, price, np.concatenate([chosen, more]).astype(int), free, less)

        checked[part] = min(above, limit())
        assert tree.limit[part] >= checked[part] - 1e-7
        for j in tree.given_up_of(part):
            assert limit(more=[j]) <= bound + 1e-7
        for j in listed(tree.fixed_in[part]):
            assert limit(less=[j]) <= bound + 1e-7
        count += 1
    return count


def _programme(feasible, price, chosen, free, less):
    """Largest price · v with v = 1 on chosen, v in [0, 1] on free and 0 elsewhere; -inf where nothing is left."""
    n = len(price)
    bounds = np.zeros((n, 2))
    bounds[free, 1] = 1.0
    bounds[list(less), 1] = 0.0
    bounds[chosen] = 1.0
    rows = [(np.isin(np.arange(n), clique).astype(float), 1.0) for clique in feasible.cliques]
    rows += [(np.isin(np.arange(n), members).astype(float), limit) for members, limit in feasible.at_most]
    groups = np.array([feasible.group == g for g in range(len(feasible.counts))], dtype=float)
    answer = linprog(
        -price,
        A_ub=np.array([row for row, _ in rows]) if rows else None,
        b_ub=np.array([limit for _, limit in rows]) if rows else None,
        A_eq=groups,
        b_eq=feasible.counts,
        bounds=bounds,
    )
    return -answer.fun if answer.status == 0 else -np.inf
