"""The rules of a feasible set against trying every set."""

import numpy as np
import pytest
from engine_instances import KINDS, allowed_subsets, cells_of, random_instance, spacing_pairs

from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.search import greedy, random_set
from layout.errors import InfeasibleError

KIND = pytest.mark.parametrize("kind", KINDS)


def _one_group(n, k, **rules):
    return Feasible(np.zeros(n, dtype=int), np.array([k]), **rules)


def _best(feasible, price):
    return price[allowed_subsets(feasible)].sum(axis=1).max()


@KIND
@pytest.mark.parametrize("seed", range(3))
def test_the_linear_limit_covers_every_allowed_set(kind, seed):
    _, feasible, _ = random_instance(kind, seed)
    rng = np.random.default_rng(seed)
    for price in (rng.standard_normal(feasible.n_candidates), rng.exponential(size=feasible.n_candidates) * 1e6):
        limit, vertex = feasible.best_linear(price)
        best = _best(feasible, price)
        size = np.abs(price).sum()
        assert limit >= best - 1e-12 * size
        assert price @ vertex == pytest.approx(limit, abs=1e-7 * size)
        _check_relaxed_rules(feasible, vertex)
        if feasible.cells is not None:
            assert limit == pytest.approx(best, abs=1e-12 * size)


def _check_relaxed_rules(feasible, vertex):
    slack = 1e-6
    assert vertex.min() >= 0
    assert vertex.max() <= 1
    totals = np.bincount(feasible.group, weights=vertex, minlength=len(feasible.counts))
    np.testing.assert_allclose(totals, feasible.counts, atol=slack)
    assert (vertex[list(feasible.keep)] >= 1 - slack).all()
    assert all(vertex[clique].sum() <= 1 + slack for clique in feasible.cliques)
    assert all(vertex[members].sum() <= limit + slack for members, limit in feasible.at_most)


def test_the_linear_limit_is_the_best_layout_for_cells_in_groups_with_kept_candidates():
    rng = np.random.default_rng(0)
    group = np.repeat([0, 1], [9, 6])
    feasible = Feasible(group, np.array([2, 1]), cells_of(5, 3), keep=(4,))
    assert feasible.cells is not None
    for _ in range(30):
        price = rng.standard_normal(15)
        limit, vertex = feasible.best_linear(price)
        assert limit == pytest.approx(_best(feasible, price), abs=1e-12)
        assert feasible.allows(np.flatnonzero(vertex))


def test_the_linear_limit_never_falls_short_when_dual_values_are_rough():
    """Odd rings of exclusions make the programme fractional, so the limit rests on its dual values alone."""
    ring = tuple(np.array([i, (i + 1) % 7]) for i in range(7))
    feasible = _one_group(9, 4, cliques=ring)
    rng = np.random.default_rng(1)
    for exponent in (-9, 0, 9):
        price = 10.0**exponent * rng.random(9)
        assert feasible.best_linear(price)[0] >= _best(feasible, price) * (1 - 1e-12)


def _is_part_of_a_permitted_set(feasible, chosen):
    """Whether a partial set breaks no upper rule."""
    held = np.bincount(feasible.group[chosen], minlength=len(feasible.counts))
    return (
        len(set(chosen)) == len(chosen)
        and (held <= feasible.counts).all()
        and all(np.isin(chosen, clique).sum() <= 1 for clique in feasible.cliques)
        and all(np.isin(chosen, members).sum() <= limit for members, limit in feasible.at_most)
    )


@KIND
@pytest.mark.parametrize("seed", range(2))
def test_allowed_additions_and_swaps_against_trying_each(kind, seed):
    _, feasible, _ = random_instance(kind, seed)
    rng = np.random.default_rng(seed)
    sets = allowed_subsets(feasible)
    known = {tuple(s) for s in sets}
    n = feasible.n_candidates
    for chosen in sets[rng.integers(len(sets), size=5)]:
        chosen = rng.permutation(chosen)
        assert feasible.allows(chosen)
        table = feasible.swappable(chosen)
        for i in range(len(chosen)):
            for j in range(n):
                if chosen[i] in feasible.keep or j in chosen:
                    assert not table[i, j]
                    continue
                swapped = np.append(np.delete(chosen, i), j)
                assert table[i, j] == (tuple(np.sort(swapped)) in known)
        part = chosen[: rng.integers(len(chosen) + 1)]
        free = feasible.addable(part)
        for j in range(n):
            assert free[j] == _is_part_of_a_permitted_set(feasible, np.append(part, j))


@KIND
def test_allows_accepts_exactly_the_allowed_sets(kind):
    _, feasible, _ = random_instance(kind, 0)
    rng = np.random.default_rng(0)
    known = {tuple(s) for s in allowed_subsets(feasible)}
    for _ in range(300):
        chosen = rng.permutation(feasible.n_candidates)[: feasible.size]
        assert feasible.allows(chosen) == (tuple(np.sort(chosen)) in known)
    assert not feasible.allows(np.zeros(feasible.size, dtype=int))
    assert not feasible.allows(next(iter(known))[:-1])


@KIND
@pytest.mark.parametrize("seed", range(3))
def test_sets_made_without_a_model_are_allowed(kind, seed):
    model, feasible, _ = random_instance(kind, seed)
    rng = np.random.default_rng(seed)
    price = rng.random(feasible.n_candidates)
    found = feasible.any_set(price)
    assert feasible.allows(found)
    assert price[found].sum() >= 0.9 * _best(feasible, price)
    assert feasible.allows(random_set(feasible, rng))
    assert feasible.allows(greedy(InformationGoal(model), feasible))


def test_a_dead_end_is_left_by_another_set():
    """Two far corners exclude all else: adding one by one from them runs aground, though a full set exists."""
    hub = tuple(np.array([0, j]) for j in range(1, 5))
    feasible = _one_group(5, 3, cliques=hub)
    for seed in range(10):
        drawn = random_set(feasible, np.random.default_rng(seed), start=np.array([], dtype=int))
        assert feasible.allows(drawn)


IMPOSSIBLE = {
    "too few in a group": lambda: _one_group(3, 4),
    "negative count": lambda: _one_group(3, -1),
    "more kept than counted": lambda: _one_group(4, 1, keep=(0, 2)),
    "kept ones exclude each other": lambda: _one_group(4, 3, cliques=(np.array([0, 2]),), keep=(0, 2)),
    "too few cells": lambda: _one_group(9, 4, cliques=cells_of(3, 3)).best_linear(np.ones(9)),
    "too few cells, by integers": lambda: _one_group(9, 4, cliques=cells_of(3, 3)).any_set(np.ones(9)),
    "ring of exclusions": lambda: _one_group(5, 3, cliques=tuple(np.array([i, (i + 1) % 5]) for i in range(5))).any_set(
        np.ones(5)
    ),
    "zone limit": lambda: _one_group(6, 4, at_most=((np.arange(5), 2),)).best_linear(np.ones(6)),
    "kept beyond a zone limit": lambda: _one_group(6, 3, keep=(0, 1), at_most=((np.arange(3), 1),)).any_set(np.ones(6)),
}


@pytest.mark.parametrize("case", sorted(IMPOSSIBLE))
def test_impossible_rules_are_reported_in_one_sentence(case):
    with pytest.raises(InfeasibleError) as caught:
        IMPOSSIBLE[case]()
    text = str(caught.value)
    assert text.endswith(".")
    assert "\n" not in text
    assert any(letter.isdigit() for letter in text)


def test_greedy_reports_kept_candidates_beyond_a_zone_limit():
    model, _, _ = random_instance("plain", 0)
    with pytest.raises(InfeasibleError):
        greedy(InformationGoal(model), _one_group(model.n_candidates, 2, keep=(0, 1), at_most=((np.arange(3), 1),)))


def test_spacing_as_cliques_or_as_pairs_is_the_same_rule():
    rng = np.random.default_rng(3)
    pairs = spacing_pairs(rng, 8, 0.4)
    triangle = (np.array([0, 1, 2]),)
    as_pairs = tuple(np.array(p) for p in ([0, 1], [0, 2], [1, 2]))
    one, other = (_one_group(8, 2, cliques=pairs + extra) for extra in (triangle, as_pairs))
    np.testing.assert_array_equal(one.conflicts, other.conflicts)
    np.testing.assert_array_equal(allowed_subsets(one), allowed_subsets(other))


@KIND
@pytest.mark.parametrize("seed", range(2))
def test_losses_never_cut_off_an_allowed_set(kind, seed):
    """The limit less a candidate's loss covers the best allowed set with it (in), or without it (out)."""
    _, feasible, _ = random_instance(kind, seed)
    price = np.random.default_rng(seed).exponential(size=feasible.n_candidates)
    limit, loss_in, loss_out = feasible.losses(price)
    assert limit == pytest.approx(feasible.best_linear(price)[0], rel=1e-12)
    sets = allowed_subsets(feasible)
    totals = price[sets].sum(axis=1)
    for j in range(feasible.n_candidates):
        inside = (sets == j).any(axis=1)
        assert loss_in[j] >= 0
        assert loss_out[j] >= 0
        assert totals[inside].max(initial=-np.inf) <= limit - loss_in[j] + 1e-9
        assert totals[~inside].max(initial=-np.inf) <= limit - loss_out[j] + 1e-9
    assert loss_in.max() > 0


@KIND
def test_rules_for_the_rest_of_a_layout(kind):
    """`given` leaves exactly the sets that complete what is chosen."""
    _, feasible, _ = random_instance(kind, 1)
    sets = allowed_subsets(feasible)
    chosen = sets[len(sets) // 2][:1]
    candidates = np.flatnonzero(feasible.addable(chosen))
    rest = candidates[allowed_subsets(feasible.given(chosen, candidates))]
    completed = {tuple(sorted((*chosen, *one))) for one in rest}
    assert completed == {tuple(s) for s in sets if chosen[0] in s}
