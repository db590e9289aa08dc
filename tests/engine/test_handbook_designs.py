"""Search and relaxation on problems whose optimal design is known.

With rows s·f(x) and no nuisance the information is ½ log2 det(I + s² Σ w f fᵀ): for s large it is ½ log2 det M plus a
constant, so D-optimal designs must come out. An intercept that is not wanted is the offset, other unwanted coefficients
are nuisance of wide prior (Ds-optimality).
"""

from itertools import product

import numpy as np
import pytest
from references.optimal_designs import (
    CHEMICAL_BALANCE_DET,
    D_POLYNOMIAL,
    D_POLYNOMIAL_REL_TOLERANCE,
    EFFICIENCY_OF_QUADRATIC_IN_LINEAR,
    EXACT_QUADRATIC_DET,
    HIGHEST_COEFFICIENT_VARIANCE,
    MAIN_EFFECTS_DET,
    MAIN_EFFECTS_RUNS,
    SPRING_BALANCE_DET,
    VECTOR_SENSOR_DET,
)

from layout.engine.bound import tighten
from layout.engine.feasible import Feasible
from layout.engine.information import information
from layout.engine.information_goal import InformationGoal
from layout.engine.model import LinearModel
from layout.engine.ranking import rank_layouts
from layout.engine.relaxation import value_and_gradient

WIDE = 1e4  # prior standard deviation of a coefficient: the prior adds 1e-8 to an information matrix of order one
STRONG = 100.0  # for counted runs, whose determinants are whole numbers: the prior adds 1e-4

RELATIVE_GAP = 1e-7  # asked of the ascent


def _model(regressors, nuisance=None, offset=None):
    n = len(regressors)
    nuisance = np.zeros((n, 0)) if nuisance is None else nuisance
    return LinearModel(regressors, nuisance, np.zeros(n) if offset is None else offset, np.arange(n))


def _pick(n, k):
    return Feasible(np.zeros(n, dtype=int), np.array([k]))


def _monomials(points, degree):
    return np.asarray(points)[:, None] ** np.arange(degree + 1)


def _grid_with(support):
    return np.unique(np.round(np.concatenate([np.linspace(-1, 1, 81), support]), 12))


def _design(model, start):
    """The relaxed optimum of one sensor: a probability measure over the candidates."""
    return tighten(
        InformationGoal(model), _pick(model.n_candidates, 1), np.array([start]), tolerance=RELATIVE_GAP, rounds=400
    )


@pytest.mark.parametrize("degree", sorted(D_POLYNOMIAL))
def test_d_optimal_polynomial_designs(degree):
    support, det = D_POLYNOMIAL[degree]
    points = _grid_with(support)
    f = _monomials(points, degree)
    found = _design(_model(WIDE * f), 5)
    moment = f.T @ (found.weights[:, None] * f)
    assert np.linalg.det(moment) == pytest.approx(det, rel=D_POLYNOMIAL_REL_TOLERANCE)
    on_support = np.isin(points, np.round(support, 12))
    assert on_support.sum() == degree + 1
    np.testing.assert_allclose(found.weights[on_support], 1 / (degree + 1), atol=1e-3)
    bits = 0.5 * np.log2(det) + (degree + 1) * np.log2(WIDE)
    prior = 0.5 * np.trace(np.linalg.inv(moment)) / WIDE**2 / np.log(2)  # what the prior adds to the bits, at most
    assert found.relaxed - prior - 1e-9 <= bits <= found.value + 1e-9
    # the certificate is the equivalence theorem's: log det M* - log det M <= largest variance - p
    variance = np.einsum("ij,ij->i", f @ np.linalg.inv(moment + np.eye(degree + 1) / WIDE**2), f)
    excess = (variance.max() - found.weights @ variance) * 0.5 / np.log(2)
    assert found.value - found.relaxed == pytest.approx(excess, abs=1e-9)
    assert variance.max() == pytest.approx(degree + 1, rel=2e-5)


def test_efficiency_of_the_quadratic_design_in_the_linear_model():
    points, _ = D_POLYNOMIAL[2]
    model = _model(WIDE * _monomials(points, 1))
    quadratic = value_and_gradient(model, np.full(3, 1 / 3))[0]
    linear = value_and_gradient(model, np.array([0.5, 0.0, 0.5]))[0]
    assert 2.0 ** (quadratic - linear) == pytest.approx(EFFICIENCY_OF_QUADRATIC_IN_LINEAR, rel=1e-6)  # ½ log det, p = 2


@pytest.mark.parametrize("degree", sorted(HIGHEST_COEFFICIENT_VARIANCE))
def test_designs_for_the_highest_coefficient(degree):
    """Target: the highest coefficient. The intercept is the flat offset, the coefficients between are wide nuisance."""
    support = np.cos(np.arange(degree + 1) * np.pi / degree)
    points = _grid_with(np.where(np.abs(support) < 1e-12, 0.0, support))
    f = _monomials(points, degree)
    model = _model(3.0 * f[:, degree:], WIDE * f[:, 1:degree], np.ones(len(points)))
    found = _design(model, 5)
    bits = 0.5 * np.log2(1 + 9.0 / HIGHEST_COEFFICIENT_VARIANCE[degree])
    assert found.relaxed == pytest.approx(bits, abs=1e-6)
    assert found.value == pytest.approx(bits, abs=1e-6)
    weights = np.full(degree + 1, 1 / degree)
    weights[[0, -1]] /= 2
    heavy = np.flatnonzero(np.isclose(points[:, None], support[None], atol=1e-12).any(axis=1))
    np.testing.assert_allclose(found.weights[heavy], weights, atol=3e-3)


@pytest.mark.parametrize("strength", [0.5, 3.0, WIDE])
def test_orientation_choice_of_vector_sensors(strength):
    rng = np.random.default_rng(0)
    axes = rng.standard_normal((40, 3))
    axes /= np.linalg.norm(axes, axis=1, keepdims=True)
    axes = np.vstack([axes, np.eye(3)])
    found = _design(_model(strength * axes), 0)
    moment = axes.T @ (found.weights[:, None] * axes)
    np.testing.assert_allclose(moment, np.eye(3) / 3, atol=1e-3)
    assert np.linalg.det(moment) == pytest.approx(VECTOR_SENSOR_DET, rel=1e-5)
    bits = 1.5 * np.log2(1 + strength**2 / 3)
    assert found.relaxed <= bits * (1 + 1e-12)
    assert found.value >= bits * (1 - 1e-12)
    assert found.value - found.relaxed <= 10 * RELATIVE_GAP * bits


def test_main_effects_in_eight_runs_are_orthogonal_and_proven():
    factorial = np.array(list(product([-1.0, 1.0], repeat=7)))
    f = np.column_stack([np.ones(128), factorial])
    ranking = rank_layouts(_model(3.0 * f), _pick(128, MAIN_EFFECTS_RUNS), starts=20, tolerance=1e-6)
    chosen = f[ranking.layouts[0].chosen]
    assert np.linalg.det(chosen.T @ chosen) == pytest.approx(MAIN_EFFECTS_DET, rel=1e-9)
    np.testing.assert_allclose(chosen.T @ chosen, MAIN_EFFECTS_RUNS * np.eye(8), atol=1e-9)
    assert ranking.layouts[0].proven


def _largest_det(rows, n, starts):
    ranking = rank_layouts(_model(STRONG * rows), _pick(len(rows), n), starts=starts)
    assert ranking.layouts[0].value <= ranking.root.value
    return abs(np.linalg.det(rows[ranking.layouts[0].chosen]))


@pytest.mark.parametrize("n", sorted(CHEMICAL_BALANCE_DET))
def test_chemical_balance_weighings(n):
    rows = np.array([(1.0, *signs) for signs in product([-1.0, 1.0], repeat=n - 1)])
    assert _largest_det(rows, n, starts=20) == pytest.approx(CHEMICAL_BALANCE_DET[n], rel=1e-9)


@pytest.mark.parametrize("n", sorted(SPRING_BALANCE_DET))
def test_spring_balance_weighings(n):
    rows = np.array(list(product([0.0, 1.0], repeat=n)))[1:]
    assert _largest_det(rows, n, starts=20) == pytest.approx(SPRING_BALANCE_DET[n], rel=1e-9)


@pytest.mark.parametrize("n", sorted(EXACT_QUADRATIC_DET))
def test_exact_runs_of_the_quadratic(n):
    f = np.repeat(_monomials([-1.0, 0.0, 1.0], 2), n, axis=0)  # every point may be repeated n times
    model = _model(STRONG * f)
    ranking = rank_layouts(model, _pick(3 * n, n), starts=10)
    chosen = f[ranking.layouts[0].chosen]
    assert np.linalg.det(chosen.T @ chosen) == pytest.approx(EXACT_QUADRATIC_DET[n], rel=1e-9)
    assert information(model, ranking.layouts[0].chosen) == pytest.approx(ranking.layouts[0].value, rel=1e-9)
