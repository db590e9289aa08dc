"""The limit over sites and axes: never passed by a dense grid, the same in both spaces, ordinary if nothing is free."""

import numpy as np
import pytest
from axis_instances import any_of, best_by_grid, bits, cap_directions, components_model, directions, refined
from hypothesis import given, settings
from hypothesis import strategies as st

from layout.engine.axis_bound import certify_axes, tighten_axes, whole
from layout.engine.axis_freedom import FreeAxes, Turning
from layout.engine.axis_relaxation import (
    Atoms,
    ByRank,
    PooledAxes,
    rank_aware_value_and_blocks,
    value_and_blocks,
)
from layout.engine.axis_search import start_frames
from layout.engine.bound import certify
from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.model import LinearModel
from layout.engine.rank_aware import rank_aware_in_source_space
from layout.engine.relaxation import value_and_gradient


def some_atoms(turning, rng, n=8):
    """Weighted axes of the free candidates, and weight on all ordinary ones."""
    free, rest = np.flatnonzero(turning.free), np.flatnonzero(~turning.free)
    owners = np.sort(np.concatenate([rest, rng.choice(free, n)]))
    frames = turning.own[owners]
    for place in np.flatnonzero(turning.free[owners]):
        frames[place] = 0.0
        count = turning.count[owners[place]]
        frames[place, :, :count] = np.linalg.qr(rng.standard_normal((3, count)))[0]
    return Atoms(owners, frames, rng.uniform(0.05, 0.4, len(owners)))


def limits_of(turning, feasible, k, chosen):
    """Certified plain and rank-aware limits, from the chosen candidates on."""
    chosen = np.asarray(chosen)
    start = Atoms(chosen, start_frames(turning, chosen), np.ones(len(chosen)))
    plain = tighten_axes(turning, whole(feasible), start, tolerance=1e-4, rounds=25)
    out = [certify_axes(turning, feasible, plain.atoms.blocks(turning.n_candidates))[0]]
    by_rank = ByRank(turning, k, int(np.where(turning.free, turning.count, 1).max()) * k)
    if by_rank.helps:
        ranked = tighten_axes(turning, whole(feasible), plain.atoms, by_rank, tolerance=1e-4, rounds=25)
        out.append(certify_axes(turning, feasible, ranked.atoms.blocks(turning.n_candidates), by_rank)[0])
    return out


@pytest.mark.parametrize("electrodes", [0, 3])
@pytest.mark.parametrize("ranked", [False, True])
def test_pool_and_source_space_agree_and_the_blocks_are_the_gradient(electrodes, ranked):
    model, free = components_model(1, 5, n_target=6, electrodes=electrodes)
    turning = Turning(model, FreeAxes(free))
    rng = np.random.default_rng(1)
    atoms = some_atoms(turning, rng)
    by_rank = ByRank(turning, 3, 3) if ranked else None
    everything = np.arange(turning.n_candidates)
    pooled = PooledAxes(turning, atoms, by_rank)
    value, blocks = pooled.gradient(atoms.weights, everything)

    def source(weights):
        return rank_aware_value_and_blocks(turning, weights, by_rank) if ranked else value_and_blocks(turning, weights)

    weights = atoms.blocks(turning.n_candidates)
    again, others = source(weights)
    tight = 1e-5 if ranked and electrodes else 1e-9  # the flat offset is a column of variance 1e8 in the ranked one
    assert pooled.value(atoms.weights) == pytest.approx(value, rel=tight)
    assert value == pytest.approx(again, rel=tight)
    assert np.allclose(blocks, others, rtol=10 * tight, atol=10 * tight)
    assert pooled.second_order(atoms.weights)[1] == pytest.approx(
        np.einsum("akl,akr,alr->a", blocks[atoms.owners], atoms.frames, atoms.frames), rel=10 * tight
    )
    change = rng.standard_normal(weights.shape) * (weights != 0)
    change = 0.5 * (change + change.transpose(0, 2, 1))
    step = 1e-5
    slope = (source(weights + step * change)[0] - source(weights - step * change)[0]) / (2 * step)
    assert (others * change).sum() == pytest.approx(slope, rel=1e-3 if ranked and electrodes else 1e-5)


def test_fixed_axes_are_ordinary_candidates():
    model, free = components_model(2, 6, n_target=6)
    turning = Turning(model, FreeAxes(free))
    rng = np.random.default_rng(2)
    axes = rng.standard_normal((6, 3))
    axes /= np.linalg.norm(axes, axis=1)[:, None]
    weights = rng.uniform(0.1, 1.0, 6)
    rows = {
        name: np.einsum("sa,sad->sd", axes, getattr(model, name).reshape(6, 3, -1)) for name in ("target", "nuisance")
    }
    plain = LinearModel(rows["target"], rows["nuisance"], np.zeros(6), np.arange(6))
    blocks = weights[:, None, None] * axes[:, :, None] * axes[:, None, :]
    by_rank = ByRank(turning, 3, 3)
    turned = np.einsum("sa,sap->sp", axes, by_rank.rows)
    for (value, own), (expected, gradient) in (
        (value_and_blocks(turning, blocks), value_and_gradient(plain, weights)),
        (
            rank_aware_value_and_blocks(turning, blocks, by_rank),
            rank_aware_in_source_space(plain, weights, turned, 3),
        ),
    ):
        assert value == pytest.approx(expected, rel=1e-10)
        assert np.einsum("sab,sa,sb->s", own, axes, axes) == pytest.approx(gradient, rel=1e-9)


def test_with_nothing_free_the_limit_is_the_ordinary_one():
    rng = np.random.default_rng(3)
    model = LinearModel(rng.standard_normal((9, 3)), rng.standard_normal((9, 4)), np.zeros(9), np.arange(9))
    turning = Turning(model, FreeAxes(np.zeros(9, dtype=bool)))
    feasible, weights = any_of(9, 3), rng.uniform(0, 0.5, 9)
    limit, value = certify_axes(turning, feasible, weights[:, None, None])
    assert (limit, value) == pytest.approx(certify(InformationGoal(model), feasible, weights)[:2], rel=1e-10)


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 10_000), n_target=st.integers(1, 6), scale=st.sampled_from([0.3, 1.0, 4.0]))
def test_any_weights_give_a_limit_that_no_random_layout_passes(seed, n_target, scale):
    model, free = components_model(seed, 6, n_target=n_target, scale=scale, electrodes=2)
    turning, feasible = Turning(model, FreeAxes(free)), any_of(8, 3)
    rng = np.random.default_rng(seed)
    blocks = some_atoms(turning, rng).blocks(8)
    limits = [certify_axes(turning, feasible, blocks)[0]]
    limits.append(certify_axes(turning, feasible, blocks, ByRank(turning, 3, 3))[0])
    for _ in range(20):
        chosen = np.sort(rng.choice(8, 3, replace=False))
        axes = [
            None if i < 2 else one / np.linalg.norm(one)
            for i, one in zip(chosen, rng.standard_normal((3, 3)), strict=True)
        ]
        assert bits(model, chosen, axes) <= min(limits) * (1 + 1e-9)


@pytest.mark.parametrize(
    ("seed", "clique"),
    [(1, True), *(pytest.param(*one, marks=pytest.mark.slow) for one in ((0, False), (2, False), (3, True)))],
)
def test_no_layout_of_a_dense_grid_passes_the_limits(seed, clique):
    model, free = components_model(seed, 5, n_target=2 + seed, scale=[0.5, 2.0][seed % 2], electrodes=1)
    cliques = (np.array([1, 2]), np.array([2, 3])) if clique else ()
    turning, feasible = Turning(model, FreeAxes(free)), any_of(6, 2, cliques)
    value, chosen, axes = best_by_grid(model, free, 2, [directions(12)] * 6, lambda s: feasible.allows(np.array(s)))
    best = max(value, refined(model, chosen, axes))
    limits = limits_of(turning, feasible, 2, chosen)
    assert min(limits) >= best * (1 - 1e-9)
    assert min(limits) <= 4 * best  # it says something, though four nuisances and two sensors make it loose


@pytest.mark.slow
def test_three_sensors_of_a_grid_do_not_pass_either():
    model, free = components_model(9, 4, n_target=4)
    turning, feasible = Turning(model, FreeAxes(free)), any_of(4, 3)
    value, chosen, axes = best_by_grid(model, free, 3, [directions(8)] * 4)
    best = max(value, refined(model, chosen, axes))
    assert min(limits_of(turning, feasible, 3, chosen)) >= best * (1 - 1e-9)


def test_within_a_tilt_the_limit_holds_and_is_lower():
    model, free = components_model(11, 4)
    normal = np.random.default_rng(11).standard_normal((4, 3))
    grids = [cap_directions(one, 0.4, 24) for one in normal]
    feasible = any_of(4, 2)
    value, chosen, _ = best_by_grid(model, free, 2, grids)
    limited = limits_of(Turning(model, FreeAxes(free, 1, 0.4, normal)), feasible, 2, chosen)
    unlimited = limits_of(Turning(model, FreeAxes(free)), feasible, 2, chosen)
    assert value * (1 - 1e-9) <= min(limited) < min(unlimited)


@pytest.mark.slow
def test_two_axes_of_a_dense_grid_do_not_pass_the_limit():
    model, free = components_model(12, 4, n_target=5)
    turning, feasible = Turning(model, FreeAxes(free, 2)), any_of(4, 2)
    planes = [np.linalg.svd(one[None])[2][1:] for one in directions(30)]
    value, chosen, _ = best_by_grid(model, free, 2, [planes] * 4)
    limits = limits_of(turning, feasible, 2, chosen)
    assert min(limits) >= value * (1 - 1e-9)
    assert min(limits) <= 1.5 * value


def test_forced_and_closed_candidates_are_priced_as_such():
    model, free = components_model(13, 6)
    turning = Turning(model, FreeAxes(free))
    feasible = Feasible(np.zeros(6, dtype=int), np.array([2]), keep=(1,), forbid=(0,))
    value, chosen, axes = best_by_grid(model, free, 2, [directions(12)] * 6, lambda s: 1 in s and 0 not in s)
    best = max(value, refined(model, chosen, axes))
    kept = min(limits_of(turning, feasible, 2, [1, 2]))
    assert best * (1 - 1e-9) <= kept < min(limits_of(turning, any_of(6, 2), 2, [1, 2]))


def test_silent_sites_are_worth_nothing_and_nothing_turns_nan():
    model, free = components_model(14, 4)
    target, nuisance = model.target.copy(), model.nuisance.copy()
    target[:6], nuisance[:3] = 0.0, 0.0
    turning, feasible = (
        Turning(LinearModel(target, nuisance, model.offset, model.candidate_of_channel), FreeAxes(free)),
        any_of(4, 3),
    )
    limits = limits_of(turning, feasible, 3, [0, 1, 2])
    assert np.isfinite(limits).all()
    silent = Turning(LinearModel(0 * target, 0 * nuisance, model.offset, model.candidate_of_channel), FreeAxes(free))
    assert limits_of(silent, feasible, 3, [0, 1, 2]) == pytest.approx([0.0], abs=1e-9)
