"""Shapes of curves with a known knee, and layouts grown and shrunk along them."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.model import LinearModel
from layout.engine.rules import Budget
from layout.errors import InfeasibleError
from layout.evidence.curve import first_to_reach, grown, knee, next_sensor, of_budget, of_count, shrunk


def goal_of(n=12, seed=3):
    rng = np.random.default_rng(seed)
    rows = rng.normal(size=(n, 4)), rng.normal(size=(n, 3))
    return InformationGoal(LinearModel(*rows, np.zeros(n), np.arange(n)))


@given(st.integers(2, 9), st.floats(0.05, 0.8), st.floats(0.1, 50), st.floats(-5, 5))
def test_the_corner_of_two_straight_lines_is_the_knee(corner, slope, scale, base):
    x = np.arange(1, 12)
    place = corner - 1
    y = base + scale * np.where(x <= corner, x, corner + slope * (x - corner))
    assert knee(x, y) == place


def test_the_knee_of_a_square_root_is_at_a_quarter():
    x = np.linspace(0, 1, 101)
    assert x[knee(x, np.sqrt(x))] == pytest.approx(0.25)  # the slope of sqrt is 1, that of the chord, at 1/4


@pytest.mark.parametrize("y", [[1, 2, 3, 4], [1, 2.01, 3, 4], [4, 3, 2, 1], [1, 1.1, 1.5, 4]])
def test_no_knee_on_straight_falling_and_convex_curves(y):
    assert knee([1, 2, 3, 4], y) is None
    assert knee([1, 2], [1, 2]) is None


def test_the_first_point_that_reaches_a_share():
    assert first_to_reach([50, 80, 79, 95], 80) == 1
    assert first_to_reach([50, 80, 79, 94], 95) is None


def test_grown_layouts_hold_the_smaller_and_shrunk_ones_keep_the_rules():
    goal = goal_of()
    rules = Feasible(np.zeros(12, dtype=int), np.array([3]), cliques=(np.array([0, 1, 2]), np.array([4, 5])))
    small = grown(goal, of_count(rules, 3), np.zeros(0, dtype=int), nested=False)
    nested = grown(goal, of_count(rules, 6), small.chosen, nested=True)
    free = grown(goal, of_count(rules, 6), small.chosen, nested=False)
    assert set(small.chosen) < set(nested.chosen)
    assert small.score < nested.score <= free.score + 1e-12
    poor = np.array([one for one in range(12) if one not in free.chosen][:2])
    if rules.conflicts[np.ix_(poor, poor)].any():
        poor = poor[:1]
    held = grown(goal, of_count(rules, 6), poor, nested=True)
    assert set(poor) < set(held.chosen)
    assert held.score < grown(goal, of_count(rules, 6), poor, nested=False).score
    back = shrunk(goal, of_count(rules, 3), free.chosen)
    assert of_count(rules, 3).allows(back.chosen)
    for one in (small, nested, free, held, back):
        assert one.score == pytest.approx(goal.score(one.chosen), rel=1e-9)


def test_counts_over_several_groups_leave_the_mix_free():
    rules = Feasible(np.repeat([0, 1], 6), np.array([2, 3]))
    for count in (1, 4, 5):
        some = of_count(rules, count)
        assert not some.allows(np.arange(count + 1))
        chosen = some.any_set(np.arange(12.0))
        assert len(chosen) == count
        assert (np.bincount(rules.group[chosen], minlength=2) <= [2, 3]).all()
    with pytest.raises(InfeasibleError, match=r"--counts.*no layout of 6"):
        of_count(rules, 6)


def test_a_budget_that_pays_for_nothing_is_refused():
    budget = Budget(np.full(4, 5.0), np.ones(4), 100.0, None, 0.0)
    rules = Feasible(np.zeros(4, dtype=int), np.array([4]), least=np.array([2]), budget=budget)
    assert of_budget(rules, 10).cost(of_budget(rules, 10).any_set(np.ones(4))) == 10
    with pytest.raises(InfeasibleError, match=r"--budgets.*9 does not"):
        of_budget(rules, 9)


def test_the_next_sensor_is_the_best_of_all_that_the_rules_leave():
    goal = goal_of()
    rules = of_count(Feasible(np.zeros(12, dtype=int), np.array([3]), cliques=(np.array([0, 7, 8]),)), 3)
    chosen = np.array([0, 3, 4])
    allowed = [one for one in range(12) if one not in (0, 3, 4, 7, 8)]
    scores = {one: goal.score(np.append(chosen, one)) for one in allowed}
    score, number = next_sensor(goal, rules, chosen)
    assert number == max(scores, key=scores.get)
    assert score == pytest.approx(max(scores.values()), rel=1e-9)
