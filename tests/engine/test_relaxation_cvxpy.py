"""The relaxed optimum against a general cone solver on the same concave problem.

The Schur complement as a matrix inequality: maximise log det T with
[[I + Aᵀ W A - T, Aᵀ W X], [Xᵀ W A, P + Xᵀ W X]] positive semidefinite, X = [B o] and P the prior precision of the
nuisance: 1 for B, 0 for a flat offset.
"""

import cvxpy as cp
import numpy as np
import pytest
from engine_instances import cells_of, random_model, spacing_pairs

from layout.engine.bound import tighten
from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.search import greedy

AGREEMENT = 1e-5  # relative; both solvers are asked for more


def _solved(model, feasible):
    weights = cp.Variable(feasible.n_candidates)
    spread = np.eye(feasible.n_candidates)[model.candidate_of_channel]
    w = cp.diag(spread @ weights)
    a = model.target
    x, precision = model.nuisance, np.ones(model.nuisance.shape[1])
    if (model.offset != 0).any():
        x, precision = np.column_stack([x, model.offset]), np.append(precision, 0.0)
    t = cp.Variable((a.shape[1], a.shape[1]), symmetric=True)
    whole = cp.bmat(
        [[np.eye(a.shape[1]) + a.T @ w @ a - t, a.T @ w @ x], [x.T @ w @ a, np.diag(precision) + x.T @ w @ x]]
    )
    rules = [0.5 * (whole + whole.T) >> 0, weights >= 0, weights <= 1]
    rules += [cp.sum(weights[feasible.group == g]) == count for g, count in enumerate(feasible.counts)]
    rules += [cp.sum(weights[clique]) <= 1 for clique in feasible.cliques]
    rules += [weights[j] == 1 for j in feasible.keep]
    rules += [cp.sum(weights[members]) <= limit for members, limit in feasible.at_most]
    problem = cp.Problem(cp.Maximize(cp.log_det(t)), rules)
    problem.solve(solver=cp.CLARABEL, tol_gap_abs=1e-9, tol_gap_rel=1e-9, tol_feas=1e-9)
    return 0.5 * problem.value / np.log(2)


def _instance(kind):
    rng = np.random.default_rng(12)
    one = np.zeros(12, dtype=int)
    if kind == "plain":
        return random_model(rng, [1] * 12), Feasible(one, np.array([4]))
    if kind == "cells":
        return random_model(rng, [1] * 12, scale=2.0), Feasible(one, np.array([3]), cells_of(4, 3), keep=(4,))
    if kind == "spacing":
        return random_model(rng, [2] * 12), Feasible(one, np.array([3]), spacing_pairs(rng, 12, 0.3))
    group = np.repeat([0, 1], [8, 4])
    rules = Feasible(group, np.array([3, 2]), at_most=((np.arange(4), 1),))
    return random_model(rng, [1] * 8 + [3] * 4, range(8)), rules


@pytest.mark.parametrize("kind", ["plain", "cells", "spacing", "electrodes with an offset, and blocks"])
def test_the_relaxed_optimum_is_the_cone_solvers(kind):
    model, feasible = _instance(kind)
    found = tighten(
        InformationGoal(model), feasible, greedy(InformationGoal(model), feasible), tolerance=1e-7, rounds=300
    )
    optimum = _solved(model, feasible)
    assert found.relaxed == pytest.approx(optimum, rel=AGREEMENT)
    assert found.value == pytest.approx(optimum, rel=AGREEMENT)
