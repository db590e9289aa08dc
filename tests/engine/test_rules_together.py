"""Every sort of rule at once (counts that may vary, pairs, zones, budget with blocks) against trying every set."""

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from rule_instances import allowed_table, cost_of, keeps_rules, keeps_upper_rules, random_case, subsets_of

from layout.engine.feasible import Feasible
from layout.engine.rules import Budget, Rule
from layout.errors import InfeasibleError

SEEDS = given(st.integers(0, 2**32 - 1))
MANY = settings(max_examples=40, deadline=None, derandomize=True)


def _as_set(n, members):
    subset = np.zeros(n, dtype=bool)
    subset[members] = True
    return subset


@MANY
@SEEDS
def test_a_set_is_allowed_where_it_keeps_each_rule_by_its_own_words(seed):
    case = random_case(seed, most=8)
    feasible = case.feasible(checked=False)
    for subset in subsets_of(len(case.group)):
        assert feasible.allows(np.flatnonzero(subset)) == keeps_rules(case, subset)
    if case.budget is not None:
        subset = np.random.default_rng(seed).random(len(case.group)) < 0.5
        assert feasible.cost(np.flatnonzero(subset)) == pytest.approx(cost_of(case.budget, subset), rel=1e-12)


@MANY
@SEEDS
def test_steps_lead_to_allowed_sets_and_only_there(seed):
    case = random_case(seed, most=9)
    n = len(case.group)
    sets = allowed_table(case)
    assume(len(sets))
    rng = np.random.default_rng(seed)
    feasible = case.feasible()
    assert max(sets.sum(axis=1)) <= feasible.size
    for subset in sets[rng.integers(len(sets), size=4)]:
        chosen = rng.permutation(np.flatnonzero(subset))
        swappable, droppable = feasible.swappable(chosen), feasible.droppable(chosen)
        assert swappable.shape == (len(chosen), n)
        for i, leaving in enumerate(chosen):
            without = _as_set(n, np.delete(chosen, i))
            assert droppable[i] == keeps_rules(case, without)
            for j in range(n):
                moved = without.copy()
                moved[j] = True
                assert swappable[i, j] == (not subset[j] and leaving != j and keeps_rules(case, moved))
        part = chosen[: rng.integers(len(chosen) + 1)]
        addable = feasible.addable(part)
        for j in range(n):
            assert addable[j] == (j not in part and keeps_upper_rules(case, _as_set(n, [*part, j])))


@MANY
@SEEDS
def test_a_set_is_found_exactly_where_there_is_one(seed):
    case = random_case(seed)
    n = len(case.group)
    sets = allowed_table(case)
    price = np.random.default_rng(seed).standard_normal(n)
    if not len(sets):
        with pytest.raises(InfeasibleError, match=r"\.$"):
            case.feasible().any_set(price)
        return
    found = case.feasible().any_set(price)
    assert keeps_rules(case, _as_set(n, found))
    best = (sets @ price).max()
    assert price[found].sum() >= best - 0.05 * abs(best) - 1e-9


@MANY
@SEEDS
def test_a_part_is_completed_exactly_where_it_can_be(seed):
    case = random_case(seed)
    n = len(case.group)
    sets = allowed_table(case)
    assume(len(sets))
    rng = np.random.default_rng(seed)
    part = rng.choice(n, 2, replace=False)
    possible = sets[:, part].all(axis=1).any()
    if not possible:
        with pytest.raises(InfeasibleError):
            case.feasible().complete(part)
        return
    found = case.feasible().complete(part)
    assert np.isin(part, found).all()
    assert keeps_rules(case, _as_set(n, found))


@MANY
@SEEDS
def test_the_rules_for_the_rest_leave_exactly_the_sets_that_hold_what_is_chosen(seed):
    case = random_case(seed, most=9)
    n = len(case.group)
    sets = allowed_table(case)
    assume(len(sets))
    rng = np.random.default_rng(seed)
    feasible = case.feasible()
    chosen = np.flatnonzero(sets[rng.integers(len(sets))])[:2]
    candidates = np.flatnonzero(feasible.addable(chosen))
    expected = {tuple(np.flatnonzero(one)) for one in sets if one[chosen].all()}
    try:
        rest = feasible.given(chosen, candidates)
    except InfeasibleError:
        assert not expected
        return
    parts = (np.flatnonzero(part) for part in subsets_of(len(candidates)))
    found = {tuple(np.union1d(chosen, candidates[part])) for part in parts if rest.allows(part)}
    if np.isin(case.keep, [*chosen, *candidates]).all():
        assert found == expected
    for part in (np.array(one) for one in expected):
        assert rest.cost(np.searchsorted(candidates, np.setdiff1d(part, chosen))) == pytest.approx(
            feasible.cost(part) - (feasible.budget.price[chosen].sum() if feasible.budget else 0.0), abs=1e-9
        )
    if not expected:
        return
    price = rng.standard_normal(n)
    fixed = [_as_set(n, chosen), ~_as_set(n, [*chosen, *candidates])]
    limit = feasible.programme.best(price, *fixed).limit - price[chosen].sum()
    assert rest.best_linear(price[candidates])[0] == pytest.approx(limit, abs=1e-7)


def test_blocks_are_paid_as_they_are_started():
    """Three channels each in blocks of 8 for 100: 8 channels need one block, 9 need two."""
    budget = Budget(np.full(6, 10.0), np.full(6, 3), 230.0, block_size=8, block_price=100.0)
    costs = [budget.cost(np.arange(k)) for k in range(7)]
    assert costs == [0, 110, 120, 230, 240, 250, 360]
    feasible = Feasible(np.zeros(6, dtype=int), np.array([6]), least=np.array([0]), budget=budget)
    assert [feasible.allows(np.arange(k)) for k in range(7)] == [True, True, True, True, False, False, False]
    assert not feasible.addable(np.arange(3)).any()
    rest = feasible.given(np.array([0]), np.arange(1, 6))
    assert rest.cost(np.zeros(0, dtype=int)) == 100.0
    assert rest.allows(np.arange(2))
    assert not rest.allows(np.arange(3))


def test_channels_used_already_fill_their_block_in_the_relaxation():
    """Three of the 8 channels of the only block that can be paid are taken: 5 / 3 sensors more, not 2."""
    budget = Budget(np.full(6, 10.0), np.full(6, 3), 130.0, block_size=8, block_price=100.0)
    feasible = Feasible(np.zeros(6, dtype=int), np.array([6]), least=np.array([0]), budget=budget)
    rest = feasible.given(np.array([0]), np.arange(1, 6))
    assert rest.best_linear(np.ones(5))[0] == pytest.approx(5 / 3, rel=1e-9)


def test_prices_in_decimals_add_up_to_their_total():
    """0.1 + 0.1 + 0.1 is more than 0.3 in binary; the budget is not."""
    budget = Budget(np.full(4, 0.1), np.zeros(4, dtype=int), 0.3)
    feasible = Feasible(np.zeros(4, dtype=int), np.array([3]), budget=budget)
    assert math.fsum([0.1] * 3) > 0.3
    assert feasible.allows(np.arange(3))
    assert feasible.given(np.arange(2), np.arange(2, 4)).allows(np.array([0]))
    assert len(feasible.any_set(np.ones(4))) == 3


@pytest.mark.parametrize("short", [1e-6, 1e-7, 1e-8])
def test_a_set_over_the_budget_by_less_than_the_solver_sees_is_not_taken(short):
    """The best set costs a hair too much, less than the integer programme's tolerance."""
    for seed in range(5):
        rng = np.random.default_rng(seed)
        cost, gain = rng.uniform(1, 2, 12), rng.random(12)
        best = np.argsort(-gain)[:5]
        budget = Budget(cost, np.zeros(12, dtype=int), cost[best].sum() * (1 - short))
        feasible = Feasible(np.zeros(12, dtype=int), np.array([5]), budget=budget)
        found = feasible.any_set(gain)
        assert math.fsum(cost[found]) <= budget.total
        assert len(found) == 5


def test_steps_from_a_set_that_breaks_a_rule():
    """A rule already over its limit bars its own members only; a set short of its count has no swap."""
    feasible = Feasible(np.zeros(6, dtype=int), np.array([4]), at_most=((np.arange(3), 1),))
    assert feasible.addable(np.array([0, 1])).tolist() == [False, False, False, True, True, True]
    assert not feasible.swappable(np.array([3, 4])).any()
    assert feasible.swappable(np.array([0, 3, 4, 5])).sum() == 2


def test_a_left_right_pair_counts_as_two():
    """Candidates 0 and 1 are pairs, 2 to 4 single sensors; five sensors are two pairs and one, or a pair and three."""
    feasible = Feasible(np.zeros(5, dtype=int), np.array([5]), sensors=np.array([2, 2, 1, 1, 1]))
    assert feasible.size == 4
    allowed = [tuple(np.flatnonzero(s)) for s in subsets_of(5) if feasible.allows(np.flatnonzero(s))]
    assert sorted(allowed) == [(0, 1, 2), (0, 1, 3), (0, 1, 4), (0, 2, 3, 4), (1, 2, 3, 4)]
    assert feasible.addable(np.array([0, 1])).tolist() == [False, False, True, True, True]
    assert feasible.addable(np.array([0, 2, 3])).tolist() == [False, False, False, False, True]


IMPOSSIBLE = {
    "forbidden leave too few": {"forbid": (0, 1)},
    "kept and forbidden": {"keep": (2,), "forbid": (2,)},
    "zone must hold more than it has": {"rules": (Rule("front", np.arange(2), low=3),)},
    "kept beyond a zone": {"keep": (0, 1), "rules": (Rule("front", np.arange(2), high=1),)},
    "kept beyond the budget": {"keep": (0, 1), "budget": Budget(np.full(4, 5.0), np.zeros(4, dtype=int), 9.0)},
    "least above most": {"least": np.array([4])},
}


@pytest.mark.parametrize("case", sorted(IMPOSSIBLE))
def test_plain_contradictions_are_reported_in_one_sentence(case):
    with pytest.raises(InfeasibleError) as caught:
        Feasible(np.zeros(4, dtype=int), np.array([3]), **IMPOSSIBLE[case])
    text = str(caught.value)
    assert text.endswith(".")
    assert any(letter.isdigit() for letter in text)


def test_cells_keep_their_closed_form_only_where_counts_are_exact():
    cells = (np.array([0, 1]), np.array([2, 3]))
    group = np.zeros(6, dtype=int)
    assert Feasible(group, np.array([2]), cells).cells is not None
    for rules in (
        {"least": np.array([1])},
        {"sensors": np.array([2, 1, 1, 1, 1, 1])},
        {"rules": (Rule("zone", np.arange(2), high=1),)},
        {"forbid": (0,)},
        {"budget": Budget(np.ones(6), np.ones(6, dtype=int), 3.0)},
    ):
        assert Feasible(group, np.array([2]), cells, **rules).cells is None
