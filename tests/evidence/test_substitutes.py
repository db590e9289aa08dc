"""Substitutes against trying every candidate."""

import numpy as np
import pytest

from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.model import LinearModel
from layout.evidence.substitutes import best_substitutes


@pytest.mark.parametrize("seed", range(5))
def test_substitutes_are_the_best_of_all_single_changes(seed):
    rng = np.random.default_rng(seed)
    n = 16
    goal = InformationGoal(LinearModel(rng.normal(size=(n, 3)), rng.normal(size=(n, 2)), np.zeros(n), np.arange(n)))
    places = np.arange(n) // 2
    cliques = (*(np.flatnonzero(places == one) for one in range(n // 2)), np.array([1, 5, 9]))
    rules = Feasible(np.arange(n) // 2 % 2, np.array([2, 2]), cliques=cliques, keep=(8,))
    chosen = rules.any_set(rng.random(n))
    for place, found in enumerate(best_substitutes(goal, rules, chosen, places, most=4)):
        best = {}
        for other in range(n):
            swapped = np.append(np.delete(chosen, place), other)
            if other not in chosen and places[other] != places[chosen[place]] and rules.allows(swapped):
                score = goal.score(swapped)
                best[places[other]] = max(best.get(places[other], (-1, 0)), (score, other))
        expected = sorted(best.values(), reverse=True)[:4]
        assert list(found.candidates) == [other for _, other in expected]
        np.testing.assert_allclose(found.scores, [score for score, _ in expected], rtol=1e-9)
        if chosen[place] == 8:
            assert len(found.candidates) == 0  # what is kept has no substitute
