"""Ranked layouts with free axes: as good as brute force, certified, unchanged by the frame of the components."""

import numpy as np
import pytest
from axis_instances import any_of, best_by_grid, bits, components_model, directions, refined
from engine_instances import brute_information
from scipy.spatial.transform import Rotation

from layout.engine.feasible import Feasible
from layout.engine.free_axes import FreeAxes, Turning, certify_axes, rank_free_axes, with_axes
from layout.engine.information import information
from layout.engine.model import LinearModel
from layout.errors import InfeasibleError


def axes_for_brute(free, layout):
    return [own if free[i] else None for i, own in zip(layout.chosen, layout.axes, strict=True)]


def rotated(model, free, seed):
    """Each free candidate's components in another orthonormal frame; the rotations (n, 3, 3)."""
    turns = Rotation.random(len(free), random_state=seed).as_matrix()
    target, nuisance = model.target.copy(), model.nuisance.copy()
    for i in np.flatnonzero(free):
        rows = np.flatnonzero(model.candidate_of_channel == i)
        target[rows], nuisance[rows] = turns[i] @ target[rows], turns[i] @ nuisance[rows]
    return LinearModel(target, nuisance, model.offset, model.candidate_of_channel), turns


@pytest.mark.parametrize("seed", [0, *(pytest.param(one, marks=pytest.mark.slow) for one in (1, 2, 3))])
def test_the_ranked_layout_is_the_best_of_sites_and_axes(seed):
    model, free = components_model(seed, 4, n_target=2 + seed % 3, scale=[0.5, 2.0][seed % 2], electrodes=2)
    ranking = rank_free_axes(model, any_of(6, 2), FreeAxes(free), starts=4, parts=10, tolerance=0.01)
    best = ranking.layouts[0]
    value, chosen, axes = best_by_grid(model, free, 2, [directions(14)] * 6)
    best_known = max(value, refined(model, chosen, axes)) if free[list(chosen)].any() else value
    assert best.value == pytest.approx(bits(model, best.chosen, axes_for_brute(free, best)), rel=1e-10)
    assert best.value >= best_known * (1 - 1e-6)
    assert best.bound >= best_known * (1 - 1e-9)


def test_branch_and_bound_closes_what_one_target_leaves_open():
    model, free = components_model(21, 12, n_target=1)
    cliques = tuple(np.array([i, i + 1]) for i in range(11))
    plain = rank_free_axes(model, any_of(12, 3, cliques), FreeAxes(free), starts=4)
    proven = rank_free_axes(model, any_of(12, 3, cliques), FreeAxes(free), starts=4, parts=500)
    assert proven.layouts[0].gap_percent < plain.layouts[0].gap_percent
    assert proven.layouts[0].gap_percent < 2
    assert proven.layouts[0].bound >= max(proven.layouts[0].value, plain.layouts[0].value)


@pytest.mark.slow
def test_the_bound_after_branching_holds_for_every_subset_of_a_grid():
    model, free = components_model(22, 5, n_target=4)
    best = rank_free_axes(model, any_of(5, 2), FreeAxes(free), starts=3, parts=40, tolerance=0.01).layouts[0]
    value, chosen, axes = best_by_grid(model, free, 2, [directions(20)] * 5)
    assert best.bound >= max(value, refined(model, chosen, axes)) * (1 - 1e-9)


def test_certificates_can_be_recomputed_from_their_blocks():
    model, free = components_model(23, 8, n_target=6, electrodes=3)
    feasible = any_of(11, 3)
    ranking = rank_free_axes(model, feasible, FreeAxes(free), starts=3)
    blocks = np.zeros((11, 3, 3))
    blocks[ranking.root.candidates] = ranking.root.blocks
    assert certify_axes(Turning(model, FreeAxes(free)), feasible, blocks)[0] == pytest.approx(
        ranking.root.limit, rel=1e-12
    )
    assert np.linalg.eigvalsh(blocks).min() > -1e-12
    assert np.trace(blocks[3:], axis1=1, axis2=2).max() <= 1 + 1e-6
    assert ranking.by_rank.limit <= ranking.root.limit * (1 + 1e-3)


def test_the_frame_of_the_components_changes_nothing():
    model, free = components_model(24, 6, n_target=3, electrodes=2)
    other, turns = rotated(model, free, 24)
    feasible = any_of(8, 3)
    normal = np.random.default_rng(24).standard_normal((8, 3))
    for limits in ({}, {"tilt": 0.5, "normal": normal}):
        first = rank_free_axes(model, feasible, FreeAxes(free, **limits), starts=2, tolerance=1e-4)
        if limits:
            limits = {"tilt": 0.5, "normal": np.einsum("nij,nj->ni", turns, normal)}
        second = rank_free_axes(other, feasible, FreeAxes(free, **limits), starts=2, tolerance=1e-4)
        a, b = first.layouts[0], second.layouts[0]
        assert (a.chosen == b.chosen).all()
        assert a.value == pytest.approx(b.value, rel=1e-8)
        back = np.einsum("kij,kj->ki", turns[a.chosen], a.axes)
        assert np.abs((back * b.axes).sum(axis=1)) == pytest.approx(free[a.chosen].astype(float), abs=1e-4)
        blocks = np.zeros((8, 3, 3))
        blocks[first.root.candidates] = first.root.blocks
        moved = np.where(free[:, None, None], turns @ blocks @ turns.transpose(0, 2, 1), blocks)
        limit = certify_axes(Turning(other, FreeAxes(free, **limits)), feasible, moved)[0]
        assert limit == pytest.approx(first.root.limit, rel=1e-8)


def test_free_axes_are_worth_at_least_any_of_three():
    for seed in range(4):
        model, free = components_model(30 + seed, 6)
        three = LinearModel(model.target, model.nuisance, model.offset, np.arange(18))
        subsets = np.array([(i, j) for i in range(18) for j in range(i) if i // 3 != j // 3])
        best = rank_free_axes(model, any_of(6, 2), FreeAxes(free), starts=3).layouts[0]
        assert best.value >= brute_information(three, subsets).max() - 1e-10


def test_all_three_axes_at_once_are_worth_more_than_two_and_two_more_than_one():
    model, free = components_model(35, 6, n_target=5)
    one, two = (rank_free_axes(model, any_of(6, 2), FreeAxes(free, count), starts=3).layouts[0] for count in (1, 2))
    three = max(information(model, np.array(pair)) for pair in [(i, j) for i in range(6) for j in range(i)])
    assert one.value < two.value < three
    assert np.einsum("ki,ki->k", two.axes, two.second_axes) == pytest.approx(0, abs=1e-10)
    assert not one.second_axes.any()


def test_later_ranks_differ_and_are_bounded():
    model, free = components_model(36, 7)
    ranking = rank_free_axes(model, any_of(7, 3), FreeAxes(free), ranked=3, differ_by=2, starts=3)
    layouts = ranking.layouts
    assert len(layouts) == 3
    for i, later in enumerate(layouts):
        assert later.value <= later.bound
        for earlier in layouts[:i]:
            assert len(np.intersect1d(later.chosen, earlier.chosen)) <= 1
            assert later.value <= earlier.value + 1e-10
            assert later.bound <= earlier.bound + 1e-10


def test_the_tilt_limit_is_kept_by_every_rank():
    model, free = components_model(37, 7, electrodes=2)
    normal = np.tile([0.0, 0.0, 2.0], (9, 1))
    tilt = np.where(np.arange(9) % 2, 0.35, np.inf)
    ranking = rank_free_axes(model, any_of(9, 4), FreeAxes(free, 1, tilt, normal), ranked=2, starts=2)
    for layout in ranking.layouts:
        limited = free[layout.chosen] & (layout.chosen % 2 == 1)
        assert (layout.axes[limited, 2] >= np.cos(0.35) - 1e-9).all()
        assert np.linalg.norm(layout.axes[free[layout.chosen]], axis=1) == pytest.approx(1, abs=1e-12)


def test_the_fixed_model_keeps_numbers_and_value():
    model, free = components_model(38, 6, electrodes=3)
    axes = FreeAxes(free)
    best = rank_free_axes(model, any_of(9, 4), axes, starts=3).layouts[0]
    fixed = with_axes(model, axes, best.chosen, best.frames)
    assert fixed.n_candidates == fixed.n_channels == 9
    assert information(fixed, best.chosen) == pytest.approx(best.value, rel=1e-10)
    assert (fixed.target[:3] == model.target[:3]).all()


def test_kept_sites_rules_and_the_same_seed():
    model, free = components_model(39, 8, electrodes=2)
    feasible = Feasible(np.repeat([0, 1], [2, 8]), np.array([2, 2]), (np.array([3, 4, 5]),), keep=(4,), forbid=(6,))
    first, again = (rank_free_axes(model, feasible, FreeAxes(free), starts=3, parts=10) for _ in range(2))
    for a, b in zip(first.layouts, again.layouts, strict=True):
        assert feasible.allows(a.chosen)
        assert (a.chosen == b.chosen).all()
        assert (a.axes == b.axes).all()
        assert (a.value, a.bound) == (b.value, b.bound)


def test_clashing_rules_are_said_in_one_sentence():
    model, free = components_model(40, 4)
    feasible = any_of(4, 3, (np.array([0, 1, 2, 3]),))
    with pytest.raises(InfeasibleError, match="sensors together"):
        rank_free_axes(model, feasible, FreeAxes(free))


@pytest.mark.slow
def test_silent_and_very_strong_sites_give_finite_answers():
    model, free = components_model(41, 5)
    target, nuisance = model.target.copy(), model.nuisance.copy()
    target[:3], nuisance[:3] = 0.0, 0.0
    target[3:6] *= 1e6
    nuisance[6:9] *= 1e6
    hostile = LinearModel(target, nuisance, model.offset, model.candidate_of_channel)
    for chosen_model in (hostile, LinearModel(0 * target, nuisance, model.offset, model.candidate_of_channel)):
        best = rank_free_axes(chosen_model, any_of(5, 3), FreeAxes(free), starts=2, parts=5).layouts[0]
        assert np.isfinite([best.value, best.bound]).all()
        assert np.isfinite(best.axes).all()
        assert best.value <= best.bound + 1e-9


def test_everything_and_nothing_can_be_chosen():
    model, free = components_model(42, 3)
    assert rank_free_axes(model, any_of(3, 3), FreeAxes(free)).layouts[0].chosen.tolist() == [0, 1, 2]
    nothing = rank_free_axes(model, any_of(3, 0), FreeAxes(free)).layouts[0]
    assert (nothing.value, nothing.bound, len(nothing.axes)) == (0.0, 0.0, 0)
