"""Branch and bound of any goal by its own relaxation ends at the exhaustive optimum, whatever the sign of the score."""

import numpy as np
import pytest
from engine_instances import allowed_subsets, brute_information, random_instance
from localisation_instances import bordered_score, random_localisation
from proof_checks import check_cover, membership

from layout.engine.bound import tighten
from layout.engine.branch_goal import prove_goal
from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.localisation import LocalisationGoal

ROUNDING = 1e-9  # bits
KINDS = ("plain", "cells", "spacing", "blocks", "groups", "keep", "zone limit", "mixed")


def _check(goal, feasible, sets, scores, tolerance, rounding):
    start = int(np.argmin(scores))
    root = tighten(goal, feasible, sets[start])
    proof = prove_goal(goal, feasible, sets[start], float(scores[start]), root.value, root.weights, tolerance=tolerance)
    best = scores.max()
    assert feasible.allows(proof.chosen)
    assert proof.open_parts == 0
    assert proof.value >= best - tolerance * abs(best) - rounding
    assert best - rounding <= proof.bound <= best + tolerance * abs(best) + rounding
    member = membership(sets, feasible.n_candidates)
    check_cover(proof.tree, member, scores, proof.bound, proof.value)
    return proof


@pytest.mark.parametrize("kind", KINDS)
def test_information_by_the_general_way_ends_at_the_optimum(kind):
    model, feasible, _ = random_instance(kind, 61, small=True)
    sets = allowed_subsets(feasible)
    _check(InformationGoal(model), feasible, sets, brute_information(model, sets), 1e-4, ROUNDING)


@pytest.mark.slow
@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("seed", range(70, 76))
def test_many_informations_by_the_general_way_end_at_the_optimum(kind, seed):
    model, feasible, _ = random_instance(kind, seed, small=True)
    sets = allowed_subsets(feasible)
    _check(InformationGoal(model), feasible, sets, brute_information(model, sets), 1e-4, ROUNDING)


@pytest.mark.parametrize("case", ["plain", "offset", "blocks", "mixed"])
@pytest.mark.parametrize("rules", [(), (np.array([0, 1, 2]), np.array([2, 3]), np.array([5, 6]))])
def test_localisation_ends_at_the_smallest_error(case, rules):
    """Scores are minus an error of some millimetres, in metres."""
    model = random_localisation(case, seed=3)
    feasible = Feasible(np.zeros(8, dtype=int), np.array([4]), rules)
    sets = allowed_subsets(feasible)
    scores = np.array([bordered_score(model, one, "rms") for one in sets])
    assert (scores < 0).all()
    _check(LocalisationGoal(model), feasible, sets, scores, 1e-3, 1e-9)
