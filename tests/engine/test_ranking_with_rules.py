"""Ranking under every sort of rule at once: allowed layouts, bounds above the exhaustive optimum, ranks that differ."""

import numpy as np
import pytest
from engine_instances import contrast_information, random_model
from rule_instances import allowed_table, random_case

from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.model import LinearModel
from layout.engine.ranking import rank_layouts
from layout.engine.rules import Budget
from layout.engine.search import exchange, greedy
from layout.errors import InfeasibleError


def _checked(seed, parts):
    case = random_case(seed, most=9)
    rng = np.random.default_rng([seed, 1])
    n = len(case.group)
    model = random_model(rng, rng.integers(1, 3, n), range(0, n, 2) if seed % 3 == 0 else ())
    allowed = allowed_table(case)
    if not allowed.any():
        return None
    values = np.array([contrast_information(model, np.flatnonzero(subset)) for subset in allowed])
    feasible = case.feasible()
    ranking = rank_layouts(model, feasible, starts=6, ranked=2, parts=parts, proven_ranks=2)
    first = ranking.layouts[0]
    for one in ranking.layouts:
        assert feasible.allows(one.chosen)
        assert one.value == pytest.approx(contrast_information(model, one.chosen), abs=1e-9)
    assert first.value <= values.max() + 1e-9
    assert first.bound >= values.max() - 1e-9
    if len(ranking.layouts) > 1:
        second = ranking.layouts[1]
        new = ~np.isin(np.arange(n), first.chosen)
        differing = [
            value for subset, value in zip(allowed, values, strict=True) if case.sensors[subset & new].sum() >= 1
        ]
        assert second.moved >= 1
        assert second.value <= max(differing) + 1e-9
        assert second.bound >= max(differing) - 1e-9
    return first.value, values.max(), first.proven


@pytest.mark.parametrize("seed", range(0, 24))
def test_ranks_under_mixed_rules_are_covered_by_their_bounds(seed):
    _checked(seed, parts=0)


@pytest.mark.slow
def test_branch_and_bound_closes_mixed_rules_at_the_exhaustive_optimum():
    reached = [answer for answer in (_checked(seed, parts=500) for seed in range(100, 200)) if answer is not None]
    assert len(reached) > 30
    for value, best, proven in reached:
        assert proven
        assert value >= best * (1 - 1e-3) - 1e-9


def test_exchange_adds_drops_and_respends():
    """A budget that greedy spends badly: one dear channel is worth less than three cheap ones."""
    rng = np.random.default_rng(2)
    model = random_model(rng, [1] * 8, n_target=8, n_nuisance=1)
    strength = np.array([3.0, 2.6, 2.6, 2.6, 0.1, 0.1, 0.1, 0.1])
    model = LinearModel(np.diag(strength), 0.01 * model.nuisance, np.zeros(8), np.arange(8))
    price = np.array([6.0, 2.0, 2.0, 2.0, 1.0, 1.0, 1.0, 1.0])
    feasible = Feasible(
        np.zeros(8, dtype=int), np.array([8]), least=np.array([0]), budget=Budget(price, np.ones(8, dtype=int), 6.0)
    )
    goal = InformationGoal(model)
    start = greedy(goal, feasible)
    assert 0 in start
    found, value, _ = exchange(goal, feasible, start)
    assert set(found) == {1, 2, 3}
    assert value > goal.score(start)


def test_rules_that_allow_nothing_are_one_sentence():
    case = next(one for one in (random_case(seed, most=8) for seed in range(200)) if not len(allowed_table(one)))
    model = random_model(np.random.default_rng(0), [1] * len(case.group))
    with pytest.raises(InfeasibleError):
        rank_layouts(model, case.feasible(checked=False), starts=2)
