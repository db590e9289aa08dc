"""Bound >= exhaustive optimum >= what the search found, at every rank, on eighty instances small enough to try all."""

import numpy as np
import pytest
from engine_instances import KINDS, allowed_subsets, brute_information, random_instance

from layout.engine.bound import certify
from layout.engine.information import information
from layout.engine.information_goal import InformationGoal
from layout.engine.ranking import rank_layouts
from layout.engine.search import exchange, greedy
from layout.errors import InfeasibleError

ROUNDING = 1e-9  # bits
KIND = pytest.mark.parametrize("kind", KINDS)


def _sensors_moved(places, sets, earlier):
    """How many sensors of each set sit at no place of `earlier`."""
    return (~np.isin(places[sets], places[earlier])).sum(axis=1)


@KIND
@pytest.mark.parametrize("seed", range(6))
def test_bounds_cover_the_exhaustive_optimum_at_every_rank(kind, seed):
    model, feasible, places = random_instance(kind, seed)
    ranking = rank_layouts(model, feasible, places=places, ranked=4, differ_by=1 + seed % 2, starts=6, seed=seed)
    _check_every_rank(ranking, model, feasible, places, 1 + seed % 2)


@pytest.mark.slow
@KIND
@pytest.mark.parametrize("seed", range(2))
def test_branch_and_bound_narrows_the_first_rank_and_every_rank_stays_covered(kind, seed):
    """Nine directions are wanted, more than most layouts have channels: the rank-aware limit takes part."""
    model, feasible, places = random_instance(kind, seed, n_target=9)
    rules = {"places": places, "ranked": 4, "differ_by": 1 + seed % 2, "starts": 1}
    before = rank_layouts(model, feasible, **rules)
    after = rank_layouts(model, feasible, parts=50, **rules)
    _check_every_rank(after, model, feasible, places, 1 + seed % 2)
    first = after.layouts[0]
    assert first.value >= before.layouts[0].value - ROUNDING
    assert first.bound <= before.layouts[0].bound
    assert before.proof is None
    assert after.proof is not None or before.layouts[0].proven
    if after.proof is not None:
        assert after.proof.nodes <= 50
        assert first.value >= after.proof.value - ROUNDING
        assert first.bound == after.proof.bound
        assert first.proven or after.proof.open_parts > 0


def _check_every_rank(ranking, model, feasible, places, differ_by):
    places = np.arange(feasible.n_candidates) if places is None else places
    sets = allowed_subsets(feasible)
    values = brute_information(model, sets)

    start = greedy(InformationGoal(model), feasible)
    exchanged, value, _ = exchange(InformationGoal(model), feasible, start)
    assert feasible.allows(exchanged)
    chain = [ranking.root.value, values.max(), ranking.layouts[0].value, value, information(model, start)]
    assert (np.diff(chain) <= ROUNDING).all()

    open_to_rank = np.ones(len(sets), dtype=bool)
    for rank, one in enumerate(ranking.layouts):
        assert feasible.allows(one.chosen)
        assert (one.chosen == np.sort(one.chosen)).all()
        assert one.value == pytest.approx(information(model, one.chosen), rel=1e-9)
        moved = [_sensors_moved(places, one.chosen[None], other.chosen)[0] for other in ranking.layouts[:rank]]
        assert one.moved == (min(moved) if rank else None)
        assert rank == 0 or one.moved >= differ_by
        assert values[open_to_rank].max() <= one.bound + ROUNDING
        assert one.value <= values[open_to_rank].max() + ROUNDING
        open_to_rank &= _sensors_moved(places, sets, one.chosen) >= differ_by
    assert len(ranking.layouts) == 4 or not open_to_rank.any()
    assert (np.diff([one.value for one in ranking.layouts]) <= ROUNDING).all()
    assert (np.diff([one.bound for one in ranking.layouts]) <= ROUNDING).all()


@KIND
def test_the_root_bound_is_the_tangent_at_the_weights_it_names(kind):
    model, feasible, _ = random_instance(kind, 1)
    root = rank_layouts(model, feasible, starts=2).root
    limit, relaxed = certify(InformationGoal(model), feasible, root.weights)
    assert root.value == pytest.approx(limit, rel=1e-12)
    assert root.relaxed == pytest.approx(relaxed, rel=1e-12)
    assert root.value - root.relaxed <= 2e-4 * root.relaxed + ROUNDING  # the ascent's own tolerance


@KIND
def test_any_weights_give_a_bound(kind):
    model, feasible, _ = random_instance(kind, 2)
    best = brute_information(model, allowed_subsets(feasible)).max()
    rng = np.random.default_rng(2)
    for _ in range(10):
        weights = rng.random(feasible.n_candidates) * (rng.random(feasible.n_candidates) < 0.5)
        assert certify(InformationGoal(model), feasible, weights)[0] >= best - ROUNDING


@KIND
def test_same_seed_same_answer(kind):
    model, feasible, places = random_instance(kind, 3)
    one, other = (
        rank_layouts(model, feasible, places=places, ranked=3, differ_by=1, starts=8, seed=5) for _ in range(2)
    )
    assert len(one.layouts) == len(other.layouts)
    for a, b in zip(one.layouts, other.layouts, strict=True):
        np.testing.assert_array_equal(a.chosen, b.chosen)
        assert (a.value, a.bound) == (b.value, b.bound)
    np.testing.assert_array_equal(one.root.weights, other.root.weights)
    assert (one.swaps, one.starts) == (other.swaps, other.starts)


def test_ranks_end_when_no_other_layout_is_left():
    model, feasible, _ = random_instance("plain", 0)
    n, k = feasible.n_candidates, feasible.size
    ranking = rank_layouts(model, feasible, ranked=20, differ_by=k, starts=3)
    assert len(ranking.layouts) <= n // k
    taken = np.concatenate([one.chosen for one in ranking.layouts])
    assert len(np.unique(taken)) == len(taken)


@pytest.mark.parametrize("differ_by", [1, 2])
def test_kept_candidates_stay_in_every_rank(differ_by):
    """With three of four sensors kept, at most one can move: two differing sensors leave a single rank."""
    model, feasible, _ = random_instance("plain", 4)
    feasible = type(feasible)(feasible.group, np.array([4]), keep=(0, 3, 5))
    ranking = rank_layouts(model, feasible, ranked=3, differ_by=differ_by, starts=3)
    assert all(feasible.allows(one.chosen) for one in ranking.layouts)
    assert len(ranking.layouts) == (3 if differ_by == 1 else 1)


def test_no_allowed_layout_is_reported():
    model, feasible, _ = random_instance("plain", 0)
    everyone = (np.arange(feasible.n_candidates),)
    with pytest.raises(InfeasibleError):
        rank_layouts(model, type(feasible)(feasible.group, np.array([2]), cliques=everyone))


@pytest.mark.parametrize("seed", range(6))
def test_greedy_keeps_the_submodular_guarantee_where_noise_is_independent(seed):
    """Nemhauser, Wolsey & Fisher 1978 (memory): >= 1 - 1/e of the optimum for log det(I + A Aᵀ); not so otherwise."""
    model, feasible, _ = random_instance("plain", seed)
    model = type(model)(model.target, np.zeros((model.n_channels, 0)), model.offset, model.candidate_of_channel)
    best = brute_information(model, allowed_subsets(feasible)).max()
    assert information(model, greedy(InformationGoal(model), feasible)) >= (1 - np.exp(-1)) * best
