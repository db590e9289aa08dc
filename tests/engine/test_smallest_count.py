"""The fewest sensors that reach a target, against trying every set of every size."""

from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest
from engine_instances import brute_information, random_model, spacing_pairs

from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.smallest import smallest_count
from layout.errors import InfeasibleError


def _best_by_count(model, feasible, most):
    """Highest bits of every count by trying all sets; -inf where no set is allowed."""
    best = {}
    for count in range(1, most + 1):
        rules = replace(feasible, counts=np.array([count]), least=np.array([count]))
        sets = np.array([one for one in combinations(range(model.n_candidates), count) if rules.allows(np.array(one))])
        best[count] = brute_information(model, sets).max() if len(sets) else -np.inf
    return best


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("with_spacing", [False, True])
def test_the_smallest_count_is_that_of_trying_all(seed, with_spacing):
    rng = np.random.default_rng(seed)
    model = random_model(rng, [1] * 11, range(11) if seed % 2 else (), n_target=4)
    cliques = spacing_pairs(rng, 11, 0.2) if with_spacing else ()
    feasible = Feasible(np.zeros(11, dtype=int), np.array([5]), cliques)
    best = _best_by_count(model, feasible, 5)
    for target in (0.4 * best[5], 0.8 * best[5], 0.97 * best[5]):
        found = smallest_count(InformationGoal(model), feasible, target, 1, starts=4, parts=200)
        exact = min(count for count, value in best.items() if value >= target)
        assert found.found == exact
        assert found.too_few < exact
        assert found.proven
        for count, limit in found.limits.items():
            assert found.values[count] <= best[count] + 1e-9 <= limit + 2e-9


def test_a_target_out_of_reach_is_certified_so():
    model = random_model(np.random.default_rng(3), [1] * 9)
    feasible = Feasible(np.zeros(9, dtype=int), np.array([4]))
    best = _best_by_count(model, feasible, 4)[4]
    far = smallest_count(model, feasible, 3.0 * best, 1)
    assert far.found is None
    assert far.too_few == 4
    near = smallest_count(model, feasible, best * (1 + 1e-7), 1, parts=0)
    assert near.found is None
    assert near.too_few < 4  # the relaxation alone cannot exclude what lies so near


def test_nothing_is_claimed_between_what_is_known():
    """Without branch and bound the plain relaxation leaves counts undecided; they are not called proven."""
    model = random_model(np.random.default_rng(5), [1] * 14, n_target=8, scale=3.0)
    feasible = Feasible(np.zeros(14, dtype=int), np.array([6]))
    best = _best_by_count(model, feasible, 6)
    target = 0.5 * (best[4] + best[5])
    loose = smallest_count(model, feasible, target, 1, parts=0)
    assert loose.found == 5
    assert loose.too_few < 4
    assert not loose.proven


def test_no_layout_at_all_is_one_sentence():
    model = random_model(np.random.default_rng(1), [1] * 6)
    cliques = (np.arange(6),)
    with pytest.raises(InfeasibleError, match="3 sensors together"):
        smallest_count(model, Feasible(np.zeros(6, dtype=int), np.array([3]), cliques), 1.0, 1)
