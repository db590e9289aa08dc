"""Compiled kernels of the proof against the plain formulas they repeat, finite differences and trying all sets."""

from itertools import combinations

import numpy as np
import pytest
from engine_instances import allowed_subsets, brute_information, random_model, spacing_pairs

from layout.engine.branch_rules import column_rules
from layout.engine.feasible import Feasible
from layout.engine.information import BITS
from layout.engine.kernels_rank import condition, second_order
from layout.engine.kernels_rest import best_rest
from layout.engine.node_ascent import bound_part, price_everywhere
from layout.engine.rank_aware import RankAwareRelaxation
from layout.engine.remaining import remaining

CASES = {"plain": ([1] * 9, ()), "offset": ([1] * 9, range(9)), "blocks": ([2, 1, 2, 3, 1, 1, 2, 1, 3], (0, 1))}
CASE = pytest.mark.parametrize("case", sorted(CASES))


def _problem(case, n_target=8, seed=0):
    widths, electrodes = CASES[case]
    model = random_model(np.random.default_rng([21, seed]), widths, electrodes, n_target=n_target)
    gram = model.nuisance_gram[:-1, :-1] - np.eye(model.n_channels)
    return model, np.ascontiguousarray(gram)


@CASE
@pytest.mark.parametrize("chosen", [(1,), (0, 4), (1, 3, 6)])
def test_conditioning_is_that_of_what_remains(case, chosen):
    model, gram = _problem(case)
    chosen = np.array(chosen)
    free = np.setdiff1d(np.arange(9), chosen)
    rows, left = model.channels_of(chosen), model.channels_of(free)
    pull, extra, rest = condition(gram, model.target, model.offset, rows, left, 0.0)
    whole = remaining(model, chosen, free, model.target)
    nuisance = gram[np.ix_(left, left)] - pull.T @ pull + np.outer(extra, extra)
    np.testing.assert_allclose(nuisance, whole.nuisance_gram[:-1, :-1] - np.eye(len(left)), atol=1e-12)
    np.testing.assert_allclose(rest @ rest.T, whole.target @ whole.target.T, atol=1e-12)


@pytest.mark.parametrize("channels", [1, 2, 4, 7, 12])
def test_value_and_prices_are_those_of_the_relaxation(channels):
    model, gram = _problem("plain")
    rng = np.random.default_rng(channels)
    pool = np.array([0, 2, 3, 5, 8])
    weights = np.zeros(9)
    weights[pool] = rng.random(5)
    nuisance = np.ascontiguousarray(gram[np.ix_(pool, pool)])
    answer = second_order(nuisance, np.ascontiguousarray(model.target[pool]), weights[pool], channels)
    value, price, _, known, directions = answer
    expected, gradient = RankAwareRelaxation(model.target, gram, np.arange(9), channels).value_and_gradient(weights)
    assert BITS * value == pytest.approx(expected, rel=1e-12)
    np.testing.assert_allclose(BITS * price, gradient[pool], rtol=1e-10)
    nothing = np.zeros((0, 9))
    everywhere = price_everywhere(gram, nothing, np.zeros(9), model.target, np.arange(9), pool, pool, known, directions)
    np.testing.assert_allclose(BITS * everywhere, gradient, rtol=1e-10)


def test_where_no_direction_is_shared_the_metric_is_minus_the_hessian():
    model, gram = _problem("plain", n_target=3)
    rng = np.random.default_rng(4)
    weights, nuisance = rng.uniform(0.1, 0.9, 9), gram
    metric = second_order(nuisance, model.target, weights, 5)[2]
    step = 1e-6
    for i in range(9):
        ends = [second_order(nuisance, model.target, weights + s * step * np.eye(9)[i], 5)[1] for s in (1, -1)]
        np.testing.assert_allclose(metric[i], (ends[1] - ends[0]) / (2 * step), rtol=1e-5, atol=1e-7)


def test_where_directions_are_shared_the_metric_is_near_minus_the_hessian():
    model, gram = _problem("plain")
    weights = np.random.default_rng(5).uniform(0.1, 0.9, 9)
    metric = second_order(gram, model.target, weights, 3)[2]
    step = 1e-6
    hessian = np.empty((9, 9))
    for i in range(9):
        ends = [second_order(gram, model.target, weights + s * step * np.eye(9)[i], 3)[1] for s in (1, -1)]
        hessian[i] = (ends[1] - ends[0]) / (2 * step)
    assert np.linalg.eigvalsh(metric).min() >= -1e-12
    assert np.abs(metric - hessian).max() <= 0.2 * np.abs(hessian).max()


@pytest.mark.parametrize("case", ["plain", "blocks"])
@pytest.mark.parametrize("most", [1, 2, 3])
def test_the_best_rest_is_that_of_trying_all(case, most):
    model, gram = _problem(case, seed=1)
    model = type(model)(model.target, model.nuisance, np.zeros(model.n_channels), model.candidate_of_channel)
    cliques = (np.array([0, 1, 2]), np.array([2, 3]), np.array([5, 8]))
    feasible = Feasible(np.zeros(9, dtype=int), np.array([most]), cliques)
    rules = column_rules(feasible)
    place = np.searchsorted(model.candidate_of_channel, np.arange(10))
    columns = (rules.start, rules.row, rules.share, rules.low, rules.high)
    for needed in ((), (3,)):
        must = np.isin(np.arange(9), needed)
        gain, picks = best_rest(gram, model.target, place, np.arange(9), *columns, must, most)
        sets = [one for one in combinations(range(9), most) if feasible.allows(one) and set(needed) <= set(one)]
        bits = brute_information(model, np.array(sets))
        assert BITS * gain == pytest.approx(bits.max(), rel=1e-12)
        assert tuple(picks) == sets[int(np.argmax(bits))]


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("cliques", ["none", "pairs", "cells"])
def test_what_a_candidate_costs_the_limit_covers_every_set_with_and_without_it(seed, cliques):
    """One weak signal stands out among weaker ones, far from saturation: leaving it out costs the tangent much."""
    rng = np.random.default_rng([31, seed])
    model = random_model(rng, np.ones(12, dtype=int), n_target=6, scale=0.1)
    model.target[4] *= 3.0
    rules = {"none": (), "pairs": spacing_pairs(rng, 12, 0.25), "cells": tuple(np.arange(12).reshape(4, 3))}[cliques]
    feasible = Feasible(np.zeros(12, dtype=int), np.array([3]), rules)
    sets = allowed_subsets(feasible)
    bits = brute_information(model, sets)
    columns = column_rules(feasible)
    gram = np.ascontiguousarray(model.nuisance_gram[:-1, :-1] - np.eye(12))
    low = np.full(len(columns.low), -np.inf)
    problem = (
        gram,
        model.target,
        model.offset,
        0.0,
        np.arange(13),
        np.zeros(0, dtype=int),
        np.arange(12),
        np.zeros(12),
    )
    rows = (columns.start, columns.row, columns.share, low, columns.high)
    limit, value, _, reduced, loss_out, _, _ = bound_part(*problem, *rows, 3, 0.0, 1e-6, 0.0, 100)
    assert bits.max() - 1e-9 <= limit
    assert limit - value <= 1e-4 * value
    for j in range(12):
        inside = (sets == j).any(axis=1)
        assert bits[~inside].max() <= limit - loss_out[j] + 1e-9
        assert bits[inside].max(initial=-np.inf) <= limit - max(0.0, -reduced[j]) + 1e-9
    assert cliques != "none" or loss_out[4] > 0.3 * (limit - bits[~(sets == 4).any(axis=1)].max())
