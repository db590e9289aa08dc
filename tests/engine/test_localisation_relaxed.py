"""The relaxed linearised error: ends at the sets' values, is concave, its derivatives and tangents hold."""

from itertools import combinations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from localisation_instances import CASES, bordered_score, random_localisation

from layout.engine.bound import tighten_to
from layout.engine.feasible import Feasible
from layout.engine.localisation import LocalisationGoal

CASE = pytest.mark.parametrize("case", sorted(CASES))
KIND = pytest.mark.parametrize("kind", ["rms", "worst"])
SHARPNESS = 30.0  # low, so that finite differences see every hypothesis


def _goal(case, kind, **more):
    return LocalisationGoal(random_localisation(case, **more), kind, SHARPNESS)


def _weights(rng, zeros=False):
    weights = rng.uniform(0.05, 1.0, 8)
    if zeros:
        weights[rng.permutation(8)[:3]] = 0.0
    weights[0] = 0.7  # an electrode, or the slope is not defined
    return weights


def _slope(function, weights, j, step=1e-4):
    """Central difference of fourth order; at a weight of zero one-sided, of second order."""
    move = np.zeros(len(weights))
    move[j] = step
    f = [None if weights[j] + i * step < 0 else function(weights + i * move) for i in (-2, -1, 0, 1, 2)]
    if weights[j] > 2 * step:
        return (f[0] - 8 * f[1] + 8 * f[3] - f[4]) / (12 * step)
    return (4 * f[3] - f[4] - 3 * f[2]) / (2 * step)


@CASE
@KIND
def test_at_sets_it_equals_the_score(case, kind):
    goal = LocalisationGoal(random_localisation(case), kind)
    pooled = goal.relaxed(np.arange(8))
    for bits in range(0, 2**8, 5):
        weights = np.array([bits >> j & 1 for j in range(8)], dtype=float)
        direct = bordered_score(goal.model, np.flatnonzero(weights), kind)
        slack = 0 if kind == "rms" else abs(direct) * (1 - 4 ** (-1 / goal.sharpness))
        assert direct - 1e-12 <= pooled.value(weights) <= direct + slack + 1e-12
        assert direct - 1e-12 <= goal.tangent(weights)[0] <= direct + slack + 1e-12


@CASE
@KIND
@pytest.mark.parametrize("zeros", [False, True])
def test_derivatives_against_finite_differences(case, kind, zeros):
    rng = np.random.default_rng(2)
    goal = _goal(case, kind)
    weights = _weights(rng, zeros)
    pool = np.flatnonzero(weights)
    everything = goal.relaxed(np.arange(8))
    numeric = np.array([_slope(everything.value, weights, j) for j in range(8)])
    scale = np.abs(numeric).max()
    pooled = goal.relaxed(pool)
    height, gradient, hessian = pooled.second_order(weights[pool])
    assert height == pytest.approx(everything.value(weights), rel=1e-12, abs=0)
    assert pooled.value(weights[pool]) == pytest.approx(height, rel=1e-13, abs=0)
    np.testing.assert_allclose(pooled.gradient_everywhere(weights[pool]), numeric, rtol=1e-5, atol=1e-6 * scale)
    np.testing.assert_allclose(gradient, pooled.gradient_everywhere(weights[pool])[pool], rtol=1e-10)
    second = [_slope(lambda w: pooled.second_order(w)[1], weights[pool], j) for j in range(len(pool))]
    np.testing.assert_allclose(hessian, second, rtol=1e-5, atol=1e-6 * np.abs(hessian).max())
    assert np.linalg.eigvalsh(hessian).max() <= 1e-12 * np.abs(hessian).max()


@CASE
@pytest.mark.parametrize("zeros", [False, True])
def test_source_space_agrees_with_sensor_space(case, zeros):
    goal = _goal(case, "rms")
    weights = _weights(np.random.default_rng(3), zeros)
    pool = np.flatnonzero(weights)
    value, gradient = goal.tangent(weights)
    pooled = goal.relaxed(pool)
    assert value == pytest.approx(pooled.value(weights[pool]), rel=1e-11, abs=0)
    np.testing.assert_allclose(gradient, pooled.gradient_everywhere(weights[pool]), rtol=1e-9)


@given(
    case=st.sampled_from(sorted(CASES)),
    kind=st.sampled_from(["rms", "worst"]),
    seed=st.integers(0, 10**6),
    scale=st.sampled_from([0.1, 1.0, 20.0]),
    t=st.floats(0.01, 0.99),
    zeros=st.booleans(),
)
@settings(max_examples=150, deadline=None, derandomize=True)
def test_concave_monotone_and_below_its_tangents(case, kind, seed, scale, t, zeros):
    rng = np.random.default_rng(seed)
    goal = _goal(case, kind, seed=seed % 7, scale=scale)
    pooled = goal.relaxed(np.arange(8))
    ends = [rng.uniform(0, 1, 8) * (rng.random(8) < (0.5 if zeros else 1.1)) for _ in range(2)]
    middle = t * ends[0] + (1 - t) * ends[1]
    values = [pooled.value(w) for w in ends]
    assert pooled.value(middle) >= t * values[0] + (1 - t) * values[1] - 1e-13
    assert pooled.value(np.minimum(ends[0], ends[1])) <= min(values) + 1e-13
    value, gradient = pooled.value(ends[0]), pooled.gradient_everywhere(ends[0])
    assert values[1] <= value + gradient @ (ends[1] - ends[0]) + 1e-13
    assert (gradient >= 0).all()
    chosen = np.flatnonzero(rng.random(8) < 0.5)
    value, gradient = goal.tangent(ends[0])
    limit = value + gradient @ (np.isin(np.arange(8), chosen) - ends[0])
    assert bordered_score(goal.model, chosen, kind) <= limit + 1e-13


@CASE
@KIND
@pytest.mark.parametrize("scale", [0.5, 5.0])
def test_limit_holds_and_nearly_closes_on_itself(case, kind, scale):
    goal = LocalisationGoal(random_localisation(case, scale=scale), kind)
    feasible = Feasible(np.zeros(8, dtype=int), np.array([4]))
    best = max(bordered_score(goal.model, np.array(s), kind) for s in combinations(range(8), 4))
    start = np.zeros(8)
    start[:4] = 1.0
    tangent = tighten_to(goal.relaxed, feasible, start, tolerance=1e-4)
    value, gradient = goal.tangent(tangent.weights)
    certified = value - gradient @ tangent.weights + feasible.best_linear(gradient)[0]
    assert best <= certified + 1e-12
    assert best <= tangent.limit + 1e-12
    # the relaxation's own gap: how far the certificate is above the true relaxed score at these weights
    reached = -goal.relaxed(np.arange(8)).value(tangent.weights)
    assert -certified >= reached * (1 - (1e-3 if kind == "rms" else 5e-3))


@KIND
@pytest.mark.parametrize("case", ["offset", "mixed"])
@pytest.mark.parametrize("others", [0.0, 0.6])
def test_tangents_hold_where_no_electrode_has_weight(case, kind, others):
    goal = LocalisationGoal(random_localisation(case, scale=2.0), kind)
    weights = np.where(goal.has_offset, 0.0, others)
    pool = np.arange(8)
    pooled = goal.relaxed(pool)
    tangents = [goal.tangent(weights), (pooled.value(weights), pooled.gradient_everywhere(weights))]
    if kind == "rms":
        np.testing.assert_allclose(tangents[0][1], tangents[1][1], rtol=1e-9)
    for bits in range(2**8):
        at = np.array([bits >> j & 1 for j in range(8)], dtype=float)
        score = bordered_score(goal.model, np.flatnonzero(at), kind)
        for value, gradient in tangents:
            assert score <= value + gradient @ (at - weights) + 1e-13
