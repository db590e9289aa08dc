"""Information under limits of the localisation error: search order, multipliers, and layouts that cannot be."""

from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest
from engine_instances import contrast_information, random_model
from localisation_instances import CASES, bordered_score, random_localisation
from scipy.optimize import minimize

from layout.engine.bound import tighten_to
from layout.engine.combined_limits import BROKEN, Limited, with_multipliers
from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.localisation import LocalisationGoal
from layout.errors import LayoutError

N, K = 8, 4
FEASIBLE = Feasible(np.zeros(N, dtype=int), np.array([K]))
SUBSETS = [np.array(s) for s in combinations(range(N), K)]


def tighten(goal, weights):
    """Upper limit of a goal and weights near it; the limit from the goal's source-space tangent."""
    start = np.full(N, K / N) if weights is None else weights
    found = tighten_to(goal.relaxed, FEASIBLE, start, tolerance=1e-5)
    value, gradient = goal.tangent(found.weights)
    return value - gradient @ found.weights + FEASIBLE.best_linear(gradient)[0], found.weights


def _instance(case, seed):
    """(goal, errors of both regions at every subset, bits at every subset)."""
    widths, electrodes = CASES[case]
    goal = InformationGoal(random_model(np.random.default_rng([23, seed]), widths, electrodes))
    model = random_localisation(case, seed, scale=3.0)
    regions = [LocalisationGoal(model.of_region(r), "rms" if r else "worst") for r in (0, 1)]
    errors = np.array([[-bordered_score(r.model, s, r.kind) for r in regions] for s in SUBSETS])
    return goal, regions, errors, np.array([contrast_information(goal.model, s) for s in SUBSETS])


@pytest.mark.parametrize("case", sorted(CASES))
@pytest.mark.parametrize("share", [0.15, 0.5, 0.9])
def test_lexicographic_score_and_certified_limit(case, share):
    goal, regions, errors, bits = _instance(case, 1)
    most = np.quantile(errors, share, axis=0)
    limited = Limited(goal, tuple(zip(regions, most, strict=True)))
    kept = (errors <= most).all(axis=1)
    if not kept.any():
        most = errors[np.argmin((errors / most).max(axis=1))] * 1.001
        limited, kept = replace(limited, limits=tuple(zip(regions, most, strict=True))), (errors <= most).all(axis=1)
    excess = np.maximum(errors / most - 1, 0).sum(axis=1)
    expected = np.where(kept, bits, -BROKEN - excess)
    for chosen, score, good in zip(SUBSETS, expected, kept, strict=True):
        assert limited.score(chosen) == pytest.approx(score, rel=1e-9, abs=0)
        assert limited.kept(chosen) == good
    found = limited.priced(SUBSETS[7]).swaps()
    for i, j in np.argwhere(np.isfinite(found)):
        swapped = SUBSETS[7].copy()
        swapped[i] = j
        assert found[i, j] == pytest.approx(limited.score(swapped), rel=1e-9, abs=0)
    mu = np.array([3.0, 40.0])
    lagrangian = replace(limited, multipliers=tuple(mu)).lagrangian
    scores = np.array([lagrangian.score(chosen) for chosen in SUBSETS])
    np.testing.assert_allclose(scores, bits + (most - errors) @ mu, rtol=1e-9)
    assert (scores[kept] >= bits[kept] - 1e-12).all()
    best = bits[kept].max()
    free, _ = tighten(goal, None)
    better, limit = with_multipliers(limited, tighten)
    assert best - 1e-9 <= limit <= free + 1e-9
    for multipliers in ((0.0, 0.0), (3.0, 40.0), better.multipliers):  # any of them are valid
        assert best <= tighten(replace(limited, multipliers=multipliers), None)[0] + 1e-9


def test_multipliers_reach_the_relaxed_optimum():
    """One limit: against the relaxed problem solved by a general-purpose optimiser."""
    goal, regions, _, _ = _instance("plain", 2)
    weights = tighten(goal, None)[1]
    pooled, error = goal.relaxed(np.arange(N)), regions[1].relaxed(np.arange(N))
    least = -tighten(regions[1], None)[0]
    most = 0.5 * (least - error.value(weights))  # between the least possible and what the free optimum has
    _, limit = with_multipliers(Limited(goal, ((regions[1], most),)), tighten, steps=25, tolerance=1e-5)
    answer = minimize(
        lambda w: -pooled.value(w),
        tighten(regions[1], None)[1].clip(0.02, 0.98),
        jac=lambda w: -pooled.gradient_everywhere(w),
        bounds=[(1e-9, 1)] * N,
        constraints=[
            {"type": "eq", "fun": lambda w: w.sum() - K},
            {"type": "ineq", "fun": lambda w: 1e2 * (most + error.value(w))},
        ],
        method="SLSQP",
        options={"ftol": 1e-12, "maxiter": 500},
    )
    assert answer.success
    assert limit == pytest.approx(-answer.fun, rel=1e-4)
    assert limit < tighten(goal, None)[0] * (1 - 1e-3)


@pytest.mark.parametrize("case", sorted(CASES))
def test_limits_that_no_layout_keeps_are_proven(case):
    goal, regions, errors, _ = _instance(case, 3)
    least = [-tighten(region, None)[0] for region in regions]
    assert (errors >= np.array(least) * (1 - 1e-9)).all()
    hopeless = Limited(goal, tuple((region, 0.9 * low) for region, low in zip(regions, least, strict=True)))
    assert tighten(hopeless.slack, None)[0] < 0
    possible = Limited(goal, tuple((region, high) for region, high in zip(regions, errors[5] * 1.01, strict=True)))
    assert tighten(possible.slack, None)[0] > 0


def test_what_does_not_fit_is_said():
    goal, regions, _, _ = _instance("plain", 1)
    with pytest.raises(LayoutError, match="must be positive, not 0"):
        Limited(goal, ((regions[0], 0.0),))
    with pytest.raises(LayoutError, match="one for each limit"):
        Limited(goal, ((regions[0], 0.01),), (1.0, 2.0))
