"""Goals made of goals: scores and tables by brute force, concavity, derivatives, tangents, limits."""

from itertools import combinations

import numpy as np
import pytest
from combined_instances import EXACT, NAMES, N, combination
from hypothesis import given, settings
from hypothesis import strategies as st
from localisation_instances import CASES, random_localisation

from layout.engine.bound import tighten_to
from layout.engine.combined import WeightedSum, Worst
from layout.engine.feasible import Feasible
from layout.engine.localisation import LocalisationGoal
from layout.errors import LayoutError

NAME = pytest.mark.parametrize("name", NAMES)
CASE = pytest.mark.parametrize("case", sorted(CASES))
CLOSE = {"rtol": 1e-9, "atol": 1e-12}


@NAME
@CASE
def test_scores_and_tables_equal_brute_force(name, case):
    goal, brute = combination(name, case)
    rng = np.random.default_rng(5)
    for size in (0, 1, 2, 3, 5):
        chosen = rng.permutation(N)[:size]
        state = goal.priced(chosen)

        def direct(candidates):
            return -np.inf if len(set(candidates)) < len(candidates) else brute(np.array(candidates, dtype=int))

        assert goal.score(chosen) == pytest.approx(brute(chosen), rel=1e-9, abs=1e-12)
        np.testing.assert_allclose(state.value, brute(chosen), **CLOSE)
        np.testing.assert_allclose(state.additions(), [direct([*chosen, j]) for j in range(N)], **CLOSE)
        rest = [np.delete(chosen, i) for i in range(size)]
        np.testing.assert_allclose(state.removals(), [brute(r) for r in rest], **CLOSE)
        swaps = [[direct([*r, j]) if j not in chosen else -np.inf for j in range(N)] for r in rest]
        np.testing.assert_allclose(state.swaps(), np.reshape(swaps, (size, N)), **CLOSE)


@NAME
def test_pairs_of_electrodes(name):
    goal, brute = combination(name, "offset")
    candidates = np.array([5, 0, 3])
    table = goal.pairs(candidates)
    for a, b in combinations(range(3), 2):
        assert table[a, b] == table[b, a] == pytest.approx(brute(candidates[[a, b]]), rel=1e-9, abs=1e-12)


@NAME
@CASE
def test_derivatives_against_finite_differences(name, case):
    goal, _ = combination(name, case, sharpness=20.0)  # soft enough for finite differences to see every member
    weights = np.random.default_rng(6).uniform(0.3, 1.0, N)
    pooled = goal.relaxed(np.arange(N))
    height, gradient, hessian = pooled.second_order(weights)
    assert height == pytest.approx(pooled.value(weights), rel=1e-12)
    step = 1e-4
    moves = step * np.eye(N)

    def slope(function, move):
        ends = [function(weights + i * move) for i in (-2, -1, 1, 2)]
        return (ends[0] - 8 * ends[1] + 8 * ends[2] - ends[3]) / (12 * step)

    numeric = np.array([slope(pooled.value, move) for move in moves])
    np.testing.assert_allclose(gradient, numeric, rtol=1e-5, atol=2e-5 * np.abs(numeric).max())
    np.testing.assert_allclose(pooled.gradient_everywhere(weights), gradient, rtol=1e-9)
    second = np.array([slope(lambda w: pooled.second_order(w)[1], move) for move in moves])
    np.testing.assert_allclose(hessian, second, rtol=1e-4, atol=2e-4 * np.abs(second).max())
    assert np.linalg.eigvalsh(hessian).max() <= 1e-10 * np.abs(hessian).max()


@given(
    name=st.sampled_from(NAMES),
    case=st.sampled_from(sorted(CASES)),
    seed=st.integers(0, 10**6),
    t=st.floats(0.01, 0.99),
    zeros=st.booleans(),
)
@settings(max_examples=100, deadline=None, derandomize=True)
def test_concave_monotone_above_the_score_and_below_its_tangents(name, case, seed, t, zeros):
    rng = np.random.default_rng(seed)
    goal, brute = combination(name, case, seed % 5, sharpness=float(rng.choice([20.0, 500.0])))
    pooled = goal.relaxed(np.arange(N))
    ends = [rng.uniform(0, 1, N) * (rng.random(N) < (0.6 if zeros else 1.1)) for _ in range(2)]
    values = [pooled.value(w) for w in ends]
    assert pooled.value(t * ends[0] + (1 - t) * ends[1]) >= t * values[0] + (1 - t) * values[1] - 1e-11
    assert pooled.value(np.minimum(*ends)) <= min(values) + 1e-11
    chosen = np.flatnonzero(rng.random(N) < 0.5)
    at = np.isin(np.arange(N), chosen).astype(float)
    score = brute(chosen)
    assert score <= pooled.value(at) + 1e-11
    if name in EXACT:
        assert score == pytest.approx(pooled.value(at), rel=1e-9, abs=1e-11)
    pool = np.flatnonzero(ends[0])
    if len(pool):
        small = goal.relaxed(pool)
        for value, gradient in (
            goal.tangent(ends[0]),
            (small.value(ends[0][pool]), small.gradient_everywhere(ends[0][pool])),
        ):
            assert score <= value + gradient @ (at - ends[0]) + 1e-11


@NAME
@CASE
def test_limit_is_above_the_best_and_closes_on_itself(name, case):
    goal, brute = combination(name, case, seed=3)
    feasible = Feasible(np.zeros(N, dtype=int), np.array([4]))
    scores = {s: brute(np.array(s)) for s in combinations(range(N), 4)}
    best = max(scores.values())
    start = np.full(N, 0.25)  # inside: with a single electrode's weight the loss of it has no slope to climb
    start[list(max(scores, key=scores.get))] = 0.75
    tangent = tighten_to(goal.relaxed, feasible, start, tolerance=1e-4)
    value, gradient = goal.tangent(tangent.weights)
    certified = value - gradient @ tangent.weights + feasible.best_linear(gradient)[0]
    assert best <= certified + 1e-11
    assert best <= tangent.limit + 1e-11
    relaxed = goal.relaxed(np.arange(N)).value(tangent.weights)
    assert certified - relaxed <= 5e-3 * abs(relaxed)


def test_what_does_not_fit_is_said():
    first = LocalisationGoal(random_localisation("plain"))
    other = LocalisationGoal(random_localisation("offset"))
    with pytest.raises(LayoutError, match="same candidates"):
        Worst((first, other))
    with pytest.raises(LayoutError, match="at least one"):
        Worst(())
    with pytest.raises(LayoutError, match="weights must be positive"):
        WeightedSum((first,), (0.0,))
