"""Expected losses against enumeration and against each other."""

from itertools import combinations

import numpy as np
import pytest

from layout.engine.information_goal import InformationGoal
from layout.engine.model import LinearModel
from layout.evidence.dropout import loss_of, losses_of_each, random_failures, random_misplacement

N = 14


@pytest.fixture(scope="module")
def goal():
    rng = np.random.default_rng(8)
    return InformationGoal(LinearModel(rng.normal(size=(N, 5)), rng.normal(size=(N, 3)), np.ones(N), np.arange(N)))


CHOSEN = np.arange(1, 12)


@pytest.mark.parametrize("failing", [1, 2, 3])
def test_enumeration_goes_through_every_case_once(goal, failing):
    found = random_failures(goal, CHOSEN, failing, np.random.default_rng(0))
    left = [goal.score(np.array(one)) for one in combinations(CHOSEN, len(CHOSEN) - failing)]
    losses = goal.score(CHOSEN) - np.array(left)
    assert found.exact
    assert found.cases == len(losses)
    assert found.mean == pytest.approx(losses.mean(), rel=1e-9)
    assert found.worst == pytest.approx(losses.max(), rel=1e-9)
    assert (losses <= found.tail + 1e-12).mean() >= 0.95
    assert found.low == found.mean == found.high


def test_drawn_failures_agree_with_enumeration(goal):
    """The 95 % interval holds the exact mean in about 95 of 100 seeds: at least 88 (1 in 500 by chance)."""
    exact = random_failures(goal, CHOSEN, 3, np.random.default_rng(0))
    held = 0
    for seed in range(100):
        drawn = random_failures(goal, CHOSEN, 3, np.random.default_rng(seed), draws=60)
        assert not drawn.exact
        assert drawn.cases == 60
        held += drawn.low <= exact.mean <= drawn.high
    assert held >= 88
    again = [random_failures(goal, CHOSEN, 3, np.random.default_rng(4), draws=60) for _ in range(2)]
    assert again[0] == again[1]


def test_losing_one_is_the_mean_of_each_loss(goal):
    each = losses_of_each(goal, CHOSEN)
    expected = [goal.score(CHOSEN) - goal.score(np.delete(CHOSEN, one)) for one in range(len(CHOSEN))]
    np.testing.assert_allclose(each, expected, rtol=1e-8)
    assert random_failures(goal, CHOSEN, 1, np.random.default_rng(0)).mean == pytest.approx(each.mean(), rel=1e-8)


def test_misplacement_asks_for_every_draw_once():
    asked = []

    def scores(count):
        asked.append(count)
        return 3.0 - np.arange(sum(asked) - count, sum(asked)) / 10

    found = random_misplacement(scores, 3.0, 25, 10)
    assert asked == [10, 10, 5]
    assert found.cases == 25
    assert found.mean == pytest.approx(1.2)
    assert found.worst == pytest.approx(2.4)


def test_interval_of_a_known_sample():
    found = loss_of(np.array([1.0, 2.0, 3.0, 4.0]), exact=False)
    half = 1.96 * np.sqrt(5 / 3) / 2  # sample variance 5/3
    assert found.high - found.mean == pytest.approx(half)
    assert found.mean - found.low == pytest.approx(half)
