"""The projection of the ascent against a general quadratic programme."""

import cvxpy as cp
import numpy as np
import pytest

from layout.engine.ascent import project_on_cells

TOLERANCE = 2e-6  # the programme's own accuracy


def _nearest(point, rules):
    w = cp.Variable(len(point), nonneg=True)
    cp.Problem(cp.Minimize(cp.sum_squares(w - point)), rules(w)).solve(
        solver=cp.CLARABEL, tol_gap_abs=1e-12, tol_gap_rel=1e-12, tol_feas=1e-12
    )
    return w.value


@pytest.mark.parametrize("seed", range(12))
def test_cells_in_groups(seed):
    rng = np.random.default_rng(seed)
    sizes = rng.integers(1, 5, rng.integers(4, 10))
    cell = np.repeat(np.arange(len(sizes)), sizes)
    owner = np.sort(rng.integers(0, 2, len(sizes)))
    owner[0], owner[-1] = 0, 1
    group = owner[cell]
    counts = np.array([rng.integers(0, (owner == g).sum() + 1) for g in range(2)], dtype=float)
    point = rng.standard_normal(len(cell)) * rng.choice([0.1, 1.0, 5.0])

    def rules(w):
        cells = [cp.sum(w[cell == c]) <= 1 for c in range(len(sizes))]
        return cells + [cp.sum(w[group == g]) == counts[g] for g in range(2)]

    found = project_on_cells(point, cell, group, counts)
    np.testing.assert_allclose(found, _nearest(point, rules), atol=TOLERANCE)
    np.testing.assert_allclose(np.bincount(group, weights=found, minlength=2), counts, atol=1e-9)


@pytest.mark.parametrize("seed", range(8))
def test_one_group_without_cells_is_a_simplex(seed):
    rng = np.random.default_rng(seed)
    n = rng.integers(1, 12)
    point = rng.standard_normal(n) * rng.choice([0.1, 1.0, 5.0])
    found = project_on_cells(point, np.zeros(n, dtype=int), np.zeros(n, dtype=int), np.ones(1))
    np.testing.assert_allclose(found, _nearest(point, lambda w: [cp.sum(w) == 1]), atol=TOLERANCE)


def test_a_point_of_the_set_stays():
    cell, group = np.array([0, 0, 1, 2]), np.array([0, 0, 0, 1])
    inside = np.array([0.3, 0.5, 0.2, 1.0])
    np.testing.assert_allclose(project_on_cells(inside, cell, group, np.array([1.0, 1.0])), inside, atol=1e-12)
