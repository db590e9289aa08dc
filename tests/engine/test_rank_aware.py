"""The rank-aware relaxation: exact at sets, concave, with true derivatives, never above the plain one, and a limit."""

from itertools import combinations

import numpy as np
import pytest
from engine_instances import KINDS, allowed_subsets, brute_information, random_instance, random_model, rows_of
from hypothesis import given
from hypothesis import strategies as st

from layout.engine.bound import certify_by_rank, most_channels, tighten, tighten_by_rank
from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.model import LinearModel
from layout.engine.rank_aware import (
    FLAT,
    RankAwareRelaxation,
    compressed,
    flat_column,
    rank_aware_in_source_space,
    split,
)
from layout.engine.relaxation import value_and_gradient
from layout.engine.remaining import remaining

CASES = {
    "plain": ([1] * 8, ()),
    "offset": ([1] * 8, range(8)),
    "blocks": ([3, 1, 2, 3, 2, 1, 3, 2], ()),
    "mixed": ([1, 1, 3, 1, 2, 1, 1, 1], (0, 1, 3, 5)),
}
CASE = pytest.mark.parametrize("case", sorted(CASES))
ROUNDING = {
    case: 1e-15 * FLAT if electrodes else 1e-9 for case, (_, electrodes) in CASES.items()
}  # FLAT costs 8 digits
KIND = pytest.mark.parametrize("kind", KINDS)
EVERY = np.arange(8)


def _model(case, seed=0, n_target=7, **more):
    widths, electrodes = CASES[case]
    return random_model(np.random.default_rng([13, seed]), widths, electrodes, n_target=n_target, **more)


def _stand_in(model, variance=None):
    """The model with an unknown offset of large finite variance, as the limit takes it; same model without offset."""
    if not model.offset.any():
        return model
    column = flat_column(model.offset) if variance is None else np.sqrt(variance) * model.offset
    nuisance = np.column_stack([model.nuisance, column])
    return LinearModel(model.target, nuisance, np.zeros(model.n_channels), model.candidate_of_channel)


def _relaxation(left, channels):
    """f_k on what is left, from its covariances."""
    nuisance = left.nuisance_gram[:-1, :-1] - np.eye(left.n_channels)
    if left.offset.any():
        nuisance = nuisance + np.outer(flat_column(left.offset), flat_column(left.offset))
    return RankAwareRelaxation(left.target, nuisance, left.candidate_of_channel, channels)


def _whole(model, channels):
    return _relaxation(remaining(model, EVERY[:0], EVERY, model.target), channels)


def _rules(k):
    return Feasible(np.zeros(8, dtype=int), np.array([k]))


def _weights(rng, zeros=False):
    weights = rng.uniform(0.05, 1.0, 8)
    if zeros:
        weights[rng.permutation(8)[:3]] = 0.0
    return weights


def _indicator(chosen):
    weights = np.zeros(8)
    weights[list(chosen)] = 1.0
    return weights


@CASE
@pytest.mark.parametrize("scale", [0.3, 3.0])
def test_at_sets_of_that_many_channels_it_equals_the_information(case, scale):
    model = _model(case, scale=scale)
    slack = ROUNDING[case]
    widest = 0
    for k in (1, 2, 3, 4):
        channels = most_channels(model, _rules(k))
        relaxation = _whole(model, channels)
        sets = np.array(list(combinations(range(8), k)))
        for chosen, bits in zip(sets, brute_information(_stand_in(model), sets), strict=True):
            value = relaxation.value_and_gradient(_indicator(chosen))[0]
            if len(rows_of(model, chosen)) == channels or channels >= 7:
                widest += 1
                assert value == pytest.approx(bits, rel=1e-9, abs=slack)
            assert value >= bits - slack
    assert widest > 20


@pytest.mark.parametrize("case", ["offset", "mixed"])
def test_what_an_electrode_leaves_is_met_exactly(case):
    """Once the offset is seen, its remainder is ordinary noise: no finite variance stands in for it."""
    model = _model(case)
    candidates = EVERY[1:]
    left = remaining(model, np.array([0]), candidates, model.target)
    for k in (1, 2, 3):
        rest = np.array([one for one in combinations(range(7), k) if len(rows_of(left, one)) == k])
        relaxation = _relaxation(left, k)
        union = np.column_stack([np.zeros(len(rest), dtype=int), candidates[rest]])
        for chosen, bits in zip(rest, brute_information(model, union), strict=True):
            weights = np.zeros(7)
            weights[chosen] = 1.0
            value = left.value + relaxation.value_and_gradient(weights)[0]
            assert value == pytest.approx(bits, rel=1e-9, abs=1e-9)


@pytest.mark.parametrize("case", ["offset", "mixed"])
def test_the_finite_variance_of_the_offset_takes_nothing_and_adds_little(case):
    model = _model(case)
    sets = np.array(list(combinations(range(8), 3)))
    added = brute_information(_stand_in(model), sets) - brute_information(model, sets)
    assert added.min() >= -ROUNDING[case]
    assert added.max() <= 1e-6


@CASE
@pytest.mark.parametrize("scale", [0.2, 1.0, 20.0])
def test_never_above_the_plain_relaxation_and_equal_to_it_from_the_rank_on(case, scale):
    rng = np.random.default_rng(2)
    model = _model(case, scale=scale)
    slack = ROUNDING[case]
    strictly_below = 0
    for draw in range(30):
        weights = _weights(rng, zeros=draw % 2 == 1)
        plain = value_and_gradient(_stand_in(model), weights)[0]
        values = [_whole(model, channels).value_and_gradient(weights)[0] for channels in range(1, 10)]
        assert max(values) <= plain + slack
        assert (np.diff(values) >= -slack).all()  # more channels, more room
        np.testing.assert_allclose(values[6:], plain, rtol=1e-9, atol=slack)
        strictly_below += values[1] < 0.99 * plain
    assert strictly_below > 5


@CASE
@pytest.mark.parametrize("scale", [0.2, 1.0, 20.0])
def test_concave_along_segments(case, scale):
    rng = np.random.default_rng(1)
    model = _model(case, scale=scale)
    slack = ROUNDING[case]
    for channels in (1, 2, 4, 6):
        relaxation = _whole(model, channels)
        for _ in range(15):
            ends = [_weights(rng, zeros=rng.random() < 0.5) for _ in range(2)]
            t = rng.random()
            low = [relaxation.value_and_gradient(w)[0] for w in ends]
            middle = relaxation.value_and_gradient(t * ends[0] + (1 - t) * ends[1])[0]
            assert middle >= t * low[0] + (1 - t) * low[1] - slack


@CASE
@pytest.mark.parametrize("channels", [1, 2, 3, 5])
def test_gradient_against_central_differences(case, channels):
    rng = np.random.default_rng(channels)
    model = _stand_in(_model(case), variance=10.0)  # differences need the digits that FLAT costs
    relaxation = _whole(model, channels)
    for _ in range(5):
        weights = _weights(rng)
        gradient = relaxation.value_and_gradient(weights)[1]
        step = 1e-4
        for j in EVERY:
            ends = [relaxation.value_and_gradient(weights + sign * step * np.eye(8)[j])[0] for sign in (1, -1)]
            assert gradient[j] == pytest.approx((ends[0] - ends[1]) / (2 * step), rel=1e-6, abs=1e-7)


@CASE
def test_some_rows_get_the_same_prices_and_the_others_none(case):
    model = _model(case)
    relaxation = _whole(model, 3)
    weights = _weights(np.random.default_rng(6), zeros=True)
    value, gradient = relaxation.value_and_gradient(weights)
    pool = np.array([1, 4, 6])
    again, priced = relaxation.value_and_gradient(weights, rows_of(model, pool))
    assert again == value
    np.testing.assert_allclose(priced[pool], gradient[pool], rtol=1e-9)
    assert not np.delete(priced, pool).any()


@CASE
@pytest.mark.parametrize("scale", [0.3, 3.0])
def test_tangents_pass_over_every_set(case, scale):
    rng = np.random.default_rng(3)
    model = _model(case, scale=scale)
    for k in (1, 2, 3):
        relaxation = _whole(model, most_channels(model, _rules(k)))
        sets = allowed_subsets(_rules(k))
        bits = brute_information(model, sets)
        for draw in range(12):
            weights = _weights(rng, zeros=draw % 2 == 1)
            value, gradient = relaxation.value_and_gradient(weights)
            tangent = value - gradient @ weights + gradient[sets].sum(axis=1)
            assert (tangent >= bits - ROUNDING[case]).all()


@CASE
def test_two_ways_to_compute_it_agree(case):
    """Source space inverts a matrix of condition FLAT where an offset is free, so eight digits fewer are left there."""
    rng = np.random.default_rng(4)
    for scale in (0.3, 1.0, 3.0):
        model = _model(case, scale=scale)
        slack = ROUNDING[case]
        for channels in (1, 2, 4, 8):
            weights = _weights(rng, zeros=channels > 1)
            value, gradient = _whole(model, channels).value_and_gradient(weights)
            other = rank_aware_in_source_space(model, weights, model.target, channels)
            assert other[0] == pytest.approx(value, rel=slack, abs=slack)
            np.testing.assert_allclose(other[1], gradient, rtol=slack, atol=slack * max(1.0, gradient.max()))


STRENGTHS = st.lists(st.floats(0.0, 1e6), min_size=0, max_size=12).map(lambda some: np.array(sorted(some)[::-1]))


@given(STRENGTHS, st.integers(1, 15))
def test_the_split_keeps_the_sum_and_shares_the_tail_evenly(strength, channels):
    whole, mean = split(strength, channels)
    assert 0 <= whole <= min(len(strength), channels - 1)
    assert whole == 0 or strength[whole - 1] > mean
    assert whole == len(strength) or mean >= strength[whole] * (1 - 1e-12)
    shared = np.append(strength[:whole], np.full(channels - whole, mean))
    assert shared.sum() == pytest.approx(strength.sum(), rel=1e-12)
    # Majorised by the eigenvalues folded into `channels` places by any other rule, here: the tail onto the last place.
    size = max(len(strength), channels)
    folded = np.zeros(channels)
    folded[: min(channels, len(strength))] = strength[:channels]
    folded[-1] += strength[channels:].sum()
    folded = np.sort(folded)[::-1]
    partial = np.cumsum(shared)
    assert (partial <= np.cumsum(folded) * (1 + 1e-12) + 1e-300).all()
    # It majorises the eigenvalues themselves: hence never above the plain sum of logarithms.
    spread = np.cumsum(np.pad(strength, (0, size - len(strength))))
    assert (np.cumsum(np.pad(shared, (0, size - channels))) >= spread * (1 - 1e-12)).all()
    assert np.log1p(shared).sum() <= np.log1p(strength).sum() * (1 + 1e-12)


@KIND
@pytest.mark.parametrize("seed", range(5))
def test_certified_root_limits_cover_the_exhaustive_optimum(kind, seed):
    model, feasible, _ = random_instance(kind, seed, n_target=9)
    best = brute_information(model, allowed_subsets(feasible)).max()
    channels = most_channels(model, feasible)
    target, residual = compressed(model.target, channels)
    everything = np.arange(feasible.n_candidates)
    left = remaining(model, everything[:0], everything, target)
    start = np.zeros(feasible.n_candidates)
    start[allowed_subsets(feasible)[0]] = 1.0
    tangent = tighten_by_rank(left, feasible, start)
    assert (tangent is None) == (channels >= 9)
    slack = 1e-15 * FLAT if model.offset.any() else 1e-9
    rng = np.random.default_rng(seed)
    candidates = [rng.random(feasible.n_candidates) for _ in range(3)]
    for weights in candidates if tangent is None else [tangent.weights, *candidates]:
        limit, value = certify_by_rank(model, feasible, weights, target)
        assert limit + residual >= best - slack
    if tangent is not None:
        limit, value = certify_by_rank(model, feasible, tangent.weights, target)
        assert (limit, value) == pytest.approx((tangent.limit, tangent.value), rel=slack, abs=slack)
        assert limit - value <= 0.02 * value  # the ascent came near the top


def test_no_rank_aware_limit_where_it_cannot_be_lower():
    model = _model("plain", n_target=3)
    left = remaining(model, EVERY[:0], EVERY, model.target)
    assert tighten_by_rank(left, _rules(3), _indicator([0, 1, 2])) is None
    assert tighten_by_rank(left, _rules(2), _indicator([0, 1])) is not None


def test_it_halves_the_gap_of_few_magnetometers_among_many():
    """Normal axes on a hemisphere, thirty strong sources: B_r of a dipole in a sphere (Sarvas 1987), k = 4 of 60."""
    turn = np.pi * (3 - np.sqrt(5)) * np.arange(60)
    height = 1 - np.arange(60) / 70
    ring = np.sqrt(1 - height**2)
    sensors = 0.1 * np.column_stack([ring * np.cos(turn), ring * np.sin(turn), height])
    rng = np.random.default_rng(8)

    def fields(places, moments):
        apart = np.linalg.norm(sensors[:, None] - places[None], axis=-1)
        return 1e-7 * (10 * sensors) @ np.cross(places, moments).T / apart**3

    def shell(n, lowest):
        points = rng.standard_normal((n, 3))
        points[:, 2] = np.abs(points[:, 2]) + lowest
        return 0.07 * points / np.linalg.norm(points, axis=1, keepdims=True)

    target = fields(shell(30, 0.5), 50e-9 * rng.standard_normal((30, 3))) / 30e-15
    nuisance = fields(shell(200, 0.0), 1e-9 * rng.standard_normal((200, 3))) / 30e-15
    model = LinearModel(target, nuisance, np.zeros(60), np.arange(60))
    feasible = Feasible(np.zeros(60, dtype=int), np.array([4]))
    best = _best_of_all(model, 4)
    start = np.arange(4)
    plain = tighten(InformationGoal(model), feasible, start)
    rows, residual = compressed(model.target, 4)
    assert rows.shape[1] > 15
    left = remaining(model, start[:0], np.arange(60), rows)
    limit = certify_by_rank(model, feasible, tighten_by_rank(left, feasible, plain.weights).weights, rows)[0] + residual
    assert best <= limit
    assert plain.value / best - 1 > 0.05
    assert limit - best <= 0.5 * (plain.value - best)


def _best_of_all(model, k):
    """The best k single-channel candidates by trying all, from Gram matrices (n, n)."""
    noise = np.eye(model.n_channels) + model.nuisance @ model.nuisance.T
    sets = np.array(list(combinations(range(model.n_channels), k)))
    index = (sets[:, :, None], sets[:, None, :])
    signal = np.linalg.slogdet((noise + model.target @ model.target.T)[index])[1]
    return (signal - np.linalg.slogdet(noise[index])[1]).max() / (2 * np.log(2))
