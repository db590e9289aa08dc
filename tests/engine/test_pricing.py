"""The linear programme against scipy, one solve for each number of blocks, and against trying every set."""

import pickle

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from rule_instances import allowed_table, random_case, relaxed_best

from layout.engine.feasible import Feasible
from layout.engine.pricing import LinearProgramme
from layout.engine.rules import Budget, Rule
from layout.errors import InfeasibleError

SEEDS = given(st.integers(0, 2**32 - 1))
MANY = settings(max_examples=25, deadline=None, derandomize=True)


def _limit(programme, price, chosen=None, closed=None):
    try:
        return programme.best(price, chosen, closed)
    except InfeasibleError:
        return None


@MANY
@SEEDS
def test_the_limit_is_that_of_a_general_solver_for_the_best_number_of_blocks(seed):
    """One warm programme, a row of prices and fixings; scipy starts anew each time."""
    case = random_case(seed)
    programme = LinearProgramme(case.feasible(checked=False))
    rng = np.random.default_rng(seed)
    n = len(case.group)
    chosen, closed = rng.random(n) < 0.1, rng.random(n) < 0.2
    fixings = ((None, None), (chosen, None), (None, closed), (chosen, closed & ~chosen))
    for scale, fixing in zip((1.0, 1e-12, 1e9, 1.0), fixings, strict=True):
        price = rng.standard_normal(n)
        priced, expected = _limit(programme, scale * price, *fixing), relaxed_best(case, price, *fixing)
        assert (priced is None) == (expected is None)
        if priced is None:
            continue
        size = np.abs(price).sum()
        assert priced.limit / scale == pytest.approx(expected, abs=1e-8 * size)
        assert price @ priced.vertex == pytest.approx(expected, abs=1e-6 * size)
        assert priced.vertex.min() >= 0
        assert priced.vertex.max() <= 1
        if fixing[0] is not None:
            assert (priced.vertex[fixing[0]] == 1).all()
        if fixing[1] is not None:
            assert (priced.vertex[fixing[1]] == 0).all()


@MANY
@SEEDS
def test_no_allowed_set_passes_the_limit_nor_the_limit_less_its_losses(seed):
    case = random_case(seed)
    sets = allowed_table(case)
    assume(len(sets))
    rng = np.random.default_rng(seed)
    feasible = case.feasible()
    for price in (rng.standard_normal(len(case.group)), rng.exponential(size=len(case.group)) * 1e6):
        totals = sets @ price
        hair = 1e-9 * np.abs(price).sum()  # sums of decimals may pass a limit by rounding
        limit, loss_in, loss_out = feasible.losses(price)
        assert limit == pytest.approx(feasible.best_linear(price)[0], rel=1e-9, abs=hair)
        assert totals.max() <= limit + hair
        assert loss_in.min() >= 0
        assert loss_out.min() >= 0
        for j in range(len(price)):
            assert totals[sets[:, j]].max(initial=-np.inf) <= limit - loss_in[j] + hair
            assert totals[~sets[:, j]].max(initial=-np.inf) <= limit - loss_out[j] + hair


def test_losses_count_the_price_of_another_number_of_blocks():
    """One block leaves money for a sensor worth 10 or 9, two only for the wide one worth 1: having that costs 9.

    Dual values may put the loss with one block anywhere from 8 (the second best less the wide one) on.
    """
    budget = Budget(np.array([4.0, 4.0, 0.0]), np.array([1, 1, 10]), 10.0, block_size=5, block_price=5.0)
    feasible = Feasible(np.zeros(3, dtype=int), np.array([1]), budget=budget)
    limit, loss_in, _ = feasible.losses(np.array([10.0, 9.0, 1.0]))
    assert limit == pytest.approx(10.0, abs=1e-9)
    assert 8 - 1e-9 <= loss_in[2] <= 9 + 1e-9


def test_a_price_that_is_not_a_number_is_refused():
    with pytest.raises(ArithmeticError):
        _ring(5, 2).best_linear(np.array([1.0, np.nan, 0, 0, 0]))


def _ring(n, k, **rules):
    """Odd rings of exclusions: the relaxation is fractional."""
    return Feasible(np.zeros(n, dtype=int), np.array([k]), tuple(np.array([i, (i + 1) % n]) for i in range(n)), **rules)


def test_reduced_prices_bound_what_each_candidate_can_bring():
    """Weak duality by hand: limit - price · v is at least the reduced price of what v has or lacks, for any v."""
    feasible = _ring(9, 3)
    rng = np.random.default_rng(0)
    for _ in range(20):
        price = rng.random(9)
        priced = feasible.programme.best(price)
        for start in range(9):
            v = np.zeros(9)
            v[[start, (start + 3) % 9, (start + 6) % 9]] = 1.0
            missed = np.where(priced.reduced > 0, 1 - v, v) @ np.abs(priced.reduced)
            assert price @ v <= priced.limit - missed + 1e-12


def test_warm_answers_equal_cold_ones():
    budget = Budget(np.linspace(1, 3, 31), np.full(31, 2), 22.5, block_size=4, block_price=1.5)
    feasible = _ring(31, 9, least=np.array([0]), budget=budget)
    warm = LinearProgramme(feasible)
    rng = np.random.default_rng(1)
    price = rng.exponential(size=31)
    for _ in range(25):
        price = price * (1 + 0.3 * rng.standard_normal(31))
        closed = rng.random(31) < 0.2
        one, other = warm.best(price, closed=closed), LinearProgramme(feasible).best(price, closed=closed)
        assert one.limit == pytest.approx(other.limit, rel=1e-9)


def test_the_same_calls_give_the_same_bytes():
    rng = np.random.default_rng(2)
    prices = rng.standard_normal((10, 15))
    one, other = LinearProgramme(_ring(15, 5)), LinearProgramme(_ring(15, 5))
    for price in prices:
        for a, b in zip(vars(one.best(price)).values(), vars(other.best(price)).values(), strict=True):
            np.testing.assert_array_equal(a, b)


def test_blocks_cost_whole_blocks_in_the_relaxation():
    """Two channels each, blocks of 8 for 10: half a block is not for sale, so 5 sensors cost 2 blocks."""
    n = 9
    budget = Budget(np.zeros(n), np.full(n, 2), 10.0, block_size=8, block_price=10.0)
    feasible = Feasible(np.zeros(n, dtype=int), np.array([9]), least=np.array([0]), budget=budget)
    limit, vertex = feasible.best_linear(np.ones(n))
    assert limit == pytest.approx(4.0, abs=1e-9)
    assert feasible.size == 9
    assert vertex.sum() == pytest.approx(4.0, abs=1e-9)


@pytest.mark.parametrize("rules", [{}, {"rules": (Rule("zone", np.arange(2), low=1),)}])
def test_copies_and_other_processes_get_the_rules_without_the_solver(rules):
    feasible = _ring(9, 3, **rules)
    price = np.arange(9.0)
    limit, _ = feasible.best_linear(price)
    copy = pickle.loads(pickle.dumps(feasible))
    assert copy.best_linear(price)[0] == limit
    assert copy.allows(np.array([0, 3, 6]))


def test_the_solver_says_nothing(capfd):
    feasible = _ring(9, 3)
    feasible.best_linear(np.arange(9.0))
    with pytest.raises(InfeasibleError):
        _ring(9, 5).best_linear(np.arange(9.0))
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize("count", [0, 1])
def test_nothing_to_choose_from(count):
    nothing = np.zeros(0, dtype=int)
    build = Feasible(nothing, np.array([count]), at_most=((nothing, 1),), checked=False)
    if count:
        with pytest.raises(InfeasibleError):
            build.best_linear(np.zeros(0))
        with pytest.raises(InfeasibleError):
            build.any_set(np.zeros(0))
    else:
        assert build.best_linear(np.zeros(0))[0] == 0.0
        assert len(build.any_set(np.zeros(0))) == 0
