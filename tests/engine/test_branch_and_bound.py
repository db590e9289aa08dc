"""Branch and bound ends at the exhaustive optimum; every limit on its way holds; stopped early, its bound holds too."""

import time
from dataclasses import dataclass

import numpy as np
import pytest
from engine_instances import KINDS, allowed_subsets, brute_information, random_instance, random_model
from proof_checks import check_cover, check_limits, membership
from rule_instances import allowed_table, random_case

from layout.engine import branch, branch_loop
from layout.engine.bound import tighten
from layout.engine.branch import prove
from layout.engine.branch_tree import SPLIT
from layout.engine.feasible import Feasible
from layout.engine.information_goal import InformationGoal
from layout.engine.later_ranks import differing
from layout.engine.model import LinearModel
from layout.errors import InfeasibleError

ROUNDING = 1e-9  # bits
ALL = [(kind, seed) for kind in KINDS for seed in range(20)]
FEW = [(kind, seed) for kind in KINDS for seed in range(20, 22)]


@pytest.fixture
def bounding(monkeypatch):
    """Small instances would be scored one by one: make them branch."""
    monkeypatch.setattr(branch, "TRIED_AT_ONCE", 3)


@dataclass(frozen=True)
class _Case:
    """An instance with all its allowed sets; the proof starts from the worst of them."""

    model: LinearModel
    feasible: Feasible
    sets: np.ndarray
    bits: np.ndarray

    @property
    def best(self):
        return self.bits.max()

    def prove(self, start=None, **more):
        start = int(np.argmin(self.bits)) if start is None else start
        root = tighten(InformationGoal(self.model), self.feasible, self.sets[start])
        return prove(self.model, self.feasible, self.sets[start], self.bits[start], root.value, root.weights, **more)


def _case(kind, seed, small=True):
    """Half of the targets have more directions than a layout has channels, so that the rank-aware limit takes part."""
    model, feasible, _ = random_instance(kind, seed, n_target=3 + 6 * (seed % 2), small=small)
    sets = allowed_subsets(feasible)
    return _Case(model, feasible, sets, brute_information(model, sets))


def _check_proof(case, tolerance, **more):
    proof = case.prove(tolerance=tolerance, **more)
    assert case.feasible.allows(proof.chosen)
    assert (proof.chosen == np.sort(proof.chosen)).all()
    assert proof.value == pytest.approx(brute_information(case.model, proof.chosen[None])[0], abs=ROUNDING)
    assert proof.open_parts == 0
    assert not proof.stopped_by_clock
    assert case.best <= proof.value * (1 + tolerance) + ROUNDING
    assert case.best - ROUNDING <= proof.bound <= case.best * (1 + tolerance) + ROUNDING
    return proof


@pytest.mark.parametrize(("kind", "seed"), FEW)
def test_proof_from_the_worst_layout_ends_at_the_optimum(kind, seed, bounding):
    _check_proof(_case(kind, seed), 10.0 ** -(5 + seed % 4))


@pytest.mark.parametrize("kind", KINDS)
def test_scoring_the_rest_one_by_one_ends_there_too(kind):
    _check_proof(_case(kind, 22), 1e-6)


@pytest.mark.slow
@pytest.mark.parametrize(("kind", "seed"), ALL)
def test_two_hundred_proofs_from_the_worst_layout_end_at_the_optimum(kind, seed, bounding):
    _check_proof(_case(kind, seed, small=False), 10.0 ** -(4 + seed % 4))


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(60))
def test_proofs_under_rules_of_every_sort_end_at_the_optimum(seed, bounding):
    _check_rules(seed)


@pytest.mark.parametrize("seed", range(60, 66))
def test_proof_under_rules_of_every_sort_ends_at_the_optimum(seed, bounding):
    _check_rules(seed)


def _check_rules(seed):
    """Counts within ranges, weighted sums, budgets with blocks: sets of several sizes."""
    rules = random_case(seed)
    table = allowed_table(rules)
    if not len(table) or not table.any(axis=1).all():
        return
    feasible = rules.feasible()
    rng = np.random.default_rng([5, seed])
    widths = rng.integers(1, 3, len(rules.group))
    model = random_model(rng, widths, np.flatnonzero(rules.group == 0) if seed % 3 == 0 else (), n_target=5)
    bits = np.array([brute_information(model, np.flatnonzero(row)[None])[0] for row in table])
    start = np.flatnonzero(table[np.argmin(bits)])
    root = 2.0 * bits.max() + 1.0
    even = np.full(len(rules.group), 0.3)
    proof = prove(model, feasible, start, bits.min(), root, even, tolerance=1e-6)
    assert feasible.allows(proof.chosen)
    assert proof.open_parts == 0
    assert bits.max() - ROUNDING <= proof.bound <= bits.max() * (1 + 1e-6) + ROUNDING
    check_cover(proof.tree, table, bits, proof.bound, proof.value)


def _without_exchange(monkeypatch):
    monkeypatch.setattr(branch_loop, "exchange", lambda goal, feasible, chosen: (np.sort(chosen), -np.inf, 0))


@pytest.mark.slow
@pytest.mark.parametrize("kind", KINDS)
def test_the_tree_covers_every_layout_and_every_limit_holds(monkeypatch, kind, bounding):
    _without_exchange(monkeypatch)
    splits = fixed = tangents = 0
    for seed in (31, 33):
        case = _case(kind, seed)
        proof = case.prove(tolerance=1e-5)
        member = membership(case.sets, case.feasible.n_candidates)
        fixed += check_cover(proof.tree, member, case.bits, proof.bound, proof.value)
        channels = max(len(case.model.channels_of(one)) for one in case.sets)
        tangents += check_limits(proof.tree, case.model, case.feasible, proof.bound, channels)
        splits += (proof.tree.kind == SPLIT).sum()
    assert min(splits, tangents) > 0
    assert kind not in ("plain", "cells", "offset") or fixed > 0


@pytest.mark.parametrize("square", [7.1, 7.2, 7.3])
@pytest.mark.parametrize("tolerance", [2e-3, 5e-3, 1e-2, 2e-2, 3e-2])
def test_the_bound_covers_what_fixing_cut_off_within_the_tolerance(monkeypatch, square, tolerance, bounding):
    """Three equal directions 60 degrees apart beat a fourth in the relaxation, though a pair with the fourth is best.

    Fixing may drop the fourth once the pair it is in is within the tolerance; the bound must not forget it.
    """
    _without_exchange(monkeypatch)
    angle = np.radians([0, 60, 120])
    target = np.zeros((5, 3))
    target[:3, :2] = 3 * np.column_stack([np.cos(angle), np.sin(angle)])
    target[3, 1], target[4, 2] = np.sqrt(square), 5.0
    model = LinearModel(target, np.zeros((5, 0)), np.zeros(5), np.arange(5))
    feasible = Feasible(np.zeros(5, dtype=int), np.array([3]))
    sets = allowed_subsets(feasible)
    case = _Case(model, feasible, sets, brute_information(model, sets))
    start = int(np.flatnonzero((sets == [0, 1, 4]).all(axis=1))[0])
    assert case.bits[start] < case.best
    proof = case.prove(start, tolerance=tolerance)
    assert proof.bound >= case.best - ROUNDING
    assert proof.value * (1 + tolerance) >= case.best - ROUNDING


@pytest.mark.parametrize("kind", KINDS)
def test_stopped_at_any_node_the_bound_holds_and_never_rises(kind, bounding):
    case = _case(kind, 41)
    full = case.prove(tolerance=1e-7)
    member = membership(case.sets, case.feasible.n_candidates)
    bounds, values = [], []
    for limit in (0, 4, 12, 40, 4000):
        proof = case.prove(tolerance=1e-7, node_limit=limit)
        assert proof.nodes == min(limit, full.nodes)
        assert proof.bound >= case.best - ROUNDING
        assert proof.value <= case.best + ROUNDING
        assert (proof.open_parts == 0) == (proof.bound <= proof.value * (1 + 1e-7))
        check_cover(proof.tree, member, case.bits, proof.bound, proof.value)
        bounds.append(proof.bound)
        values.append(proof.value)
    assert (np.diff(bounds) <= 0).all()
    assert (np.diff(values) >= 0).all()
    assert bounds[-1] == full.bound


@pytest.mark.parametrize("kind", KINDS)
def test_out_of_time_the_bound_is_the_one_it_was_given(kind):
    case = _case(kind, 43)
    start = int(np.argmin(case.bits))
    proof = case.prove(deadline=time.monotonic() - 1.0, tolerance=1e-7)
    root = tighten(InformationGoal(case.model), case.feasible, case.sets[start])
    assert proof.stopped_by_clock
    assert proof.nodes == 0
    assert proof.open_parts == 1
    assert proof.bound == root.value >= case.best - ROUNDING
    np.testing.assert_array_equal(proof.chosen, case.sets[start])
    assert proof.value == case.bits[start]


@pytest.mark.parametrize("kind", KINDS)
def test_the_proof_is_the_same_on_one_core_and_on_four(kind, bounding, monkeypatch):
    proofs = []
    for cores in (1, 4):
        monkeypatch.setattr(branch_loop.os, "cpu_count", lambda cores=cores: cores)
        proofs.append(_case(kind, 44).prove(tolerance=1e-6))
    one, other = proofs
    np.testing.assert_array_equal(one.chosen, other.chosen)
    assert (one.bound, one.value, one.nodes) == (other.bound, other.value, other.nodes)
    for name in ("parent", "kind", "limit", "chosen", "free", "weights"):
        np.testing.assert_array_equal(getattr(one.tree, name), getattr(other.tree, name))


def test_a_single_allowed_layout_is_proven():
    model, feasible, _ = random_instance("plain", 3, small=True)
    feasible = Feasible(feasible.group, np.array([3]), keep=(0, 2, 4))
    case = _Case(model, feasible, np.array([[0, 2, 4]]), brute_information(model, np.array([[0, 2, 4]])))
    proof = case.prove(tolerance=1e-9)
    assert proof.bound == pytest.approx(case.best, abs=1e-8)
    assert proof.open_parts == 0


@pytest.mark.parametrize("kind", ["plain", "spacing", "offset", "blocks", "groups", "zone limit"])
def test_ranks_by_excluding_what_was_found_are_the_exhaustive_ones(kind, bounding):
    case = _case(kind, 50)
    rules, tolerance = case.feasible, 1e-7
    order = np.sort(case.bits)[::-1]
    places = np.arange(rules.n_candidates)
    for rank in range(4):
        sets = allowed_subsets(rules)
        bits = brute_information(case.model, sets)
        root = tighten(InformationGoal(case.model), rules, sets[np.argmin(bits)])
        lowest = np.argmin(bits)
        proof = prove(case.model, rules, sets[lowest], bits[lowest], root.value, root.weights, tolerance=tolerance)
        assert proof.value == pytest.approx(order[rank], abs=1e-6 * order[rank])
        assert order[rank] - ROUNDING <= proof.bound <= order[rank] * (1 + tolerance) + ROUNDING
        try:
            rules = differing(rules, proof.chosen, places, 1)
        except InfeasibleError:
            break
