"""A stop by the clock: valid bounds, allowed layouts, and a record of it."""

from itertools import combinations

import numpy as np
import pytest
from engine_instances import allowed_subsets, brute_information, random_instance
from localisation_instances import random_localisation

from layout.engine.bound import tighten
from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.localisation import LocalisationGoal
from layout.engine.ranking import rank_layouts
from layout.engine.search import greedy


@pytest.mark.parametrize("kind", ["plain", "cells", "spacing", "mixed"])
def test_a_stop_by_the_clock_keeps_every_bound_valid_and_is_recorded(kind):
    model, feasible, places = random_instance(kind, 1)
    cut = rank_layouts(model, feasible, places=places, ranked=2, starts=500, time_allowance=0.0)
    best = brute_information(model, allowed_subsets(feasible)).max()
    assert cut.stopped_by_clock
    assert cut.starts < 500
    assert cut.root.value >= best - 1e-9
    for one in cut.layouts:
        assert feasible.allows(one.chosen)
        assert one.value <= one.bound + 1e-9


@pytest.mark.parametrize("kind", ["plain", "spacing"])
def test_the_root_bound_itself_records_the_stop(kind):
    model, feasible, _ = random_instance(kind, 2)
    layout = greedy(InformationGoal(model), feasible)
    cut = tighten(InformationGoal(model), feasible, layout, tolerance=1e-12, deadline=-np.inf)
    assert cut.stopped_by_clock
    assert cut.rounds == 1
    assert cut.value >= brute_information(model, allowed_subsets(feasible)).max() - 1e-9


def test_without_a_clock_nothing_is_recorded():
    model, feasible, _ = random_instance("plain", 1)
    ranking = rank_layouts(model, feasible, starts=3)
    assert not ranking.stopped_by_clock
    assert ranking.starts == 3


def test_no_limit_promises_a_negative_error_however_early_the_clock_strikes():
    goal = LocalisationGoal(random_localisation("plain", m=6, scale=3.0))
    feasible = Feasible(np.zeros(goal.n_candidates, dtype=int), np.array([4]))
    cut = rank_layouts(goal, feasible, time_allowance=1e-9, starts=2, tolerance=1e-12)
    best = max(goal.score(np.array(one)) for one in combinations(range(goal.n_candidates), 4))
    (found,) = cut.layouts
    assert found.value <= best + 1e-15
    assert best - 1e-15 <= found.bound <= 0.0
