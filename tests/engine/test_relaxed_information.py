"""The relaxed information: ends at the sets' values, is concave, and its derivatives and tangents hold."""

from itertools import chain, combinations

import numpy as np
import pytest
from engine_instances import brute_information, contrast_information, random_model

from layout.engine.model import LinearModel
from layout.engine.relaxation import PooledRelaxation, value_and_gradient

CASES = {
    "plain": ([1] * 7, ()),
    "offset": ([1] * 7, range(7)),
    "blocks": ([3, 1, 2, 3, 2, 1, 3], ()),
    "mixed": ([1, 1, 3, 1, 2, 1, 1], (0, 1, 3, 5)),
}
CASE = pytest.mark.parametrize("case", sorted(CASES))


def _model(case, seed=0, **more):
    widths, electrodes = CASES[case]
    return random_model(np.random.default_rng([7, seed]), widths, electrodes, **more)


def _weights(rng, zeros=False):
    weights = rng.uniform(0.05, 1.0, 7)
    if zeros:
        weights[rng.permutation(7)[:3]] = 0.0
    return weights


@CASE
def test_at_sets_it_equals_the_information(case):
    model = _model(case)
    pooled = PooledRelaxation(model, np.arange(7))
    for bits in range(2**7):
        weights = np.array([bits >> j & 1 for j in range(7)], dtype=float)
        direct = contrast_information(model, np.flatnonzero(weights)) if bits else 0.0
        assert value_and_gradient(model, weights)[0] == pytest.approx(direct, rel=1e-9, abs=1e-10)
        assert pooled.value(weights) == pytest.approx(direct, rel=1e-9, abs=1e-10)


@CASE
@pytest.mark.parametrize("scale", [0.2, 1.0, 20.0])
def test_concave_along_segments(case, scale):
    rng = np.random.default_rng(1)
    model = _model(case, scale=scale)
    for _ in range(40):
        ends = [_weights(rng, zeros=rng.random() < 0.5) for _ in range(2)]
        t = rng.random()
        low = [value_and_gradient(model, w)[0] for w in ends]
        middle = value_and_gradient(model, t * ends[0] + (1 - t) * ends[1])[0]
        assert middle >= t * low[0] + (1 - t) * low[1] - 1e-10


def _slope(function, weights, j, step=1e-5):
    """Central difference; at a weight of zero one-sided, of second order."""
    move = np.zeros(len(weights))
    move[j] = step
    if weights[j] > step:
        return (function(weights + move) - function(weights - move)) / (2 * step)
    return (4 * function(weights + move) - function(weights + 2 * move) - 3 * function(weights)) / (2 * step)


@CASE
@pytest.mark.parametrize("zeros", [False, True])
def test_gradients_against_finite_differences(case, zeros):
    rng = np.random.default_rng(2)
    model = _model(case)
    weights = _weights(rng, zeros)
    if CASES[case][1]:
        weights[0] = 0.7  # an electrode, or the slope is not defined
    numeric = [_slope(lambda w: value_and_gradient(model, w)[0], weights, j) for j in range(7)]
    np.testing.assert_allclose(value_and_gradient(model, weights)[1], numeric, rtol=2e-6, atol=1e-7)
    pool = np.flatnonzero(weights)
    pooled = PooledRelaxation(model, pool)
    np.testing.assert_allclose(pooled.gradient_everywhere(weights[pool]), numeric, rtol=2e-6, atol=1e-7)
    np.testing.assert_allclose(pooled.second_order(weights[pool])[1], np.array(numeric)[pool], rtol=2e-6, atol=1e-7)


@CASE
@pytest.mark.parametrize("zeros", [False, True])
def test_hessian_against_finite_differences(case, zeros):
    rng = np.random.default_rng(3)
    model = _model(case)
    weights = _weights(rng, zeros)
    weights[0] = 0.7
    pooled = PooledRelaxation(model, np.arange(7))
    numeric = np.array([_slope(lambda w: pooled.second_order(w)[1], weights, j) for j in range(7)])
    hessian = pooled.second_order(weights)[2]
    np.testing.assert_allclose(hessian, numeric, rtol=2e-5, atol=1e-6)
    assert np.linalg.eigvalsh(hessian).max() < 1e-10


@CASE
def test_a_pool_gives_the_same_as_all_rows_in_source_space(case):
    rng = np.random.default_rng(4)
    for seed in range(5):
        model = _model(case, seed, scale=rng.choice([0.1, 1.0, 10.0]))
        pool = np.array([0, 2, 3, 5])
        full = np.zeros(7)
        full[pool] = rng.uniform(0.0, 1.0, 4)
        value, gradient = value_and_gradient(model, full)
        pooled = PooledRelaxation(model, pool)
        assert pooled.value(full[pool]) == pytest.approx(value, rel=1e-9)
        assert pooled.second_order(full[pool])[0] == pytest.approx(value, rel=1e-9)
        np.testing.assert_allclose(pooled.second_order(full[pool])[1], gradient[pool], rtol=1e-7, atol=1e-9)
        np.testing.assert_allclose(pooled.gradient_everywhere(full[pool]), gradient, rtol=1e-7, atol=1e-9)


def _all_sets(n):
    return chain.from_iterable(combinations(range(n), k) for k in range(1, n + 1))


@CASE
@pytest.mark.parametrize("scale", [0.2, 1.0, 20.0])
@pytest.mark.parametrize("blind", [False, True])
def test_no_set_passes_the_tangent(case, scale, blind):
    """f(v) <= f(w) + g(w)·(v - w) for every subset v; blind: no weight on any channel that sees the offset."""
    rng = np.random.default_rng(5)
    model = _model(case, scale=scale)
    sets = list(_all_sets(7))
    member = np.array([np.isin(np.arange(7), s) for s in sets], dtype=float)
    values = np.concatenate([brute_information(model, np.array([s for s in sets if len(s) == k])) for k in range(1, 8)])
    for _ in range(10):
        weights = _weights(rng, zeros=True)
        if blind:
            weights[list(CASES[case][1])] = 0.0
        for value, gradient in _tangents(model, weights):
            assert (values <= value + (member - weights) @ gradient + 1e-9).all()


def _tangents(model, weights):
    yield value_and_gradient(model, weights)
    pool = np.flatnonzero(weights)
    if len(pool):
        pooled = PooledRelaxation(model, pool)
        yield pooled.value(weights[pool]), pooled.gradient_everywhere(weights[pool])


def test_the_tangent_without_electrode_weight_holds_when_electrodes_only_clear_the_noise():
    """Two electrodes see no target at all, but their difference tells the magnetometer's nuisance from its target."""
    model = LinearModel(
        np.array([[0.0], [0.0], [10.0]]), np.array([[10.0], [-10.0], [10.0]]), np.array([1.0, 1.0, 0.0]), np.arange(3)
    )
    blind = np.array([0.0, 0.0, 1.0])
    gained = contrast_information(model, [0, 1, 2]) - contrast_information(model, [2])
    assert gained > 1.0
    for value, gradient in _tangents(model, blind):
        assert contrast_information(model, [0, 1, 2]) <= value + gradient @ (np.ones(3) - blind) + 1e-9
