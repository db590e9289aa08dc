"""Losses by low-rank updates against one evaluation for each loss."""

import numpy as np
import pytest
from combined_instances import N, combination
from localisation_instances import CASES

from layout.engine.combined_loss import RelaxedLoss, losses


class Plain:
    """A relaxation without a way of its own to price losses."""

    def __init__(self, relaxed):
        self.pool, self.value = relaxed.pool, relaxed.value
        self.second_order, self.gradient_everywhere = relaxed.second_order, relaxed.gradient_everywhere


def _weights(rng, zeros):
    weights = rng.uniform(0.05, 1.0, N)
    weights[rng.permutation(N)[:zeros]] = 0.0
    return weights


@pytest.mark.parametrize("case", sorted(CASES))
@pytest.mark.parametrize("zeros", [0, 3, 6, 7])
def test_localisation(case, zeros):
    goal = combination("lost error", case)[0].goal
    for seed in range(5):
        weights = _weights(np.random.default_rng(seed), zeros)
        relaxed = goal.relaxed(np.arange(N))
        np.testing.assert_allclose(losses(relaxed, weights), losses(Plain(relaxed), weights), rtol=1e-9)


@pytest.mark.parametrize("case", sorted(CASES))
@pytest.mark.parametrize("zeros", [0, 3, 6, 7])
@pytest.mark.parametrize("sharpness", [20.0, 3000.0])
def test_information(case, zeros, sharpness):
    goal, _ = combination("lost", case, sharpness=sharpness)
    for seed in range(5):
        weights = _weights(np.random.default_rng(seed), zeros)
        pool = np.flatnonzero(weights + (np.arange(N) % 3 == 0))
        fast = goal.relaxed(pool)
        slow = RelaxedLoss(Plain(goal.goal.relaxed(pool)), goal.steepness, N)
        assert fast.value(weights[pool]) == pytest.approx(slow.value(weights[pool]), rel=1e-9, abs=1e-10)
        for ours, direct in zip(fast.second_order(weights[pool]), slow.second_order(weights[pool]), strict=True):
            np.testing.assert_allclose(ours, direct, rtol=1e-6, atol=1e-8 * max(1.0, np.abs(direct).max()))
        everywhere = slow.gradient_everywhere(weights[pool])
        np.testing.assert_allclose(fast.gradient_everywhere(weights[pool]), everywhere, rtol=1e-6, atol=1e-8)
