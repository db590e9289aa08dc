"""Which rules clash: planted clashes, and random ones against trying every set."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from rule_instances import Case, allowed_table, random_case

from layout.engine.clash import clashing_rules, rule_names
from layout.engine.feasible import Feasible
from layout.engine.rules import Budget, Rule


def _only(case, names):
    """The case with no rules but the named ones."""
    n = len(case.group)
    counts, least = case.counts.copy(), case.least.copy()
    for g in range(len(counts)):
        if f"count of group {g}" not in names:
            counts[g], least[g] = 2 * n, 0
    return Case(
        case.group,
        counts,
        least,
        case.sensors,
        case.cliques if "spacing" in names else (),
        case.keep if "keep" in names else (),
        case.forbid if "forbid" in names else (),
        tuple(one for one in case.at_most if f"at most {one[1]}" in names),
        tuple(rule for rule in case.rules if rule[0] in names),
        case.budget if "budget" in names else None,
    )


@settings(max_examples=60, deadline=None, derandomize=True)
@given(st.integers(0, 2**32 - 1))
def test_named_rules_clash_and_no_fewer_of_them_do(seed):
    case = random_case(seed, most=8)
    case = replace(case, least=case.counts, keep=(0, 1) if seed % 3 == 0 else case.keep)
    names = clashing_rules(case.feasible(checked=False))
    assert bool(names) == (not len(allowed_table(case)))
    if names:
        assert not len(allowed_table(_only(case, names)))
    for name in names:
        assert len(allowed_table(_only(case, set(names) - {name})))


GROUP = np.repeat([0, 1], 6)
COUNTS = np.array([3, 2])
NAMES = {"group_names": ("electrodes", "magnetometers")}
ROOMY = {
    "rules": (Rule("front", np.arange(4), low=1), Rule("back", np.arange(6, 12), high=4)),
    "cliques": (np.array([0, 1]), np.array([6, 7])),
    "clique_names": ("spacing of electrodes", "spacing of magnetometers"),
    "budget": Budget(np.full(12, 10.0), np.ones(12, dtype=int), 100.0, block_size=4, block_price=10.0),
}

PLANTED = {
    "a zone that asks for more than its spacing lets in": (
        {
            "rules": (*ROOMY["rules"], Rule("left", np.arange(3), low=2)),
            "cliques": (np.array([0, 1, 2]), np.array([6, 7])),
        },
        {"left", "spacing of electrodes"},
    ),
    "counts beyond the budget, blocks and all": (
        {"budget": Budget(np.full(12, 10.0), np.ones(12, dtype=int), 69.0, block_size=4, block_price=10.0)},
        {"electrodes", "magnetometers", "budget"},
    ),
    "two blocks are one too many": (
        {"budget": Budget(np.zeros(12), np.ones(12, dtype=int), 19.0, block_size=4, block_price=10.0)},
        {"electrodes", "magnetometers", "budget"},
    ),
    "kept and forbidden": ({"keep": (3,), "forbid": (3, 5)}, {"keep", "forbid"}),
    "kept ones too close": ({"keep": (6, 7)}, {"keep", "spacing of magnetometers"}),
    "a zone alone": ({"rules": (*ROOMY["rules"], Rule("nowhere", np.arange(2), low=3))}, {"nowhere"}),
    "at least here, at most there": (
        {"rules": (Rule("front", np.arange(4), low=3), Rule("face", np.arange(3), high=1))},
        {"front", "face"},
    ),
    "more than there are": ({"counts": np.array([7, 2])}, {"electrodes"}),
}


def _planted(case):
    return Feasible(**{"group": GROUP, "counts": COUNTS, "checked": False} | NAMES | ROOMY | PLANTED[case][0])


@pytest.mark.parametrize("case", sorted(PLANTED))
def test_a_planted_clash_is_named_exactly(case):
    feasible = _planted(case)
    names = clashing_rules(feasible)
    assert set(names) == PLANTED[case][1]
    assert len(set(names)) == len(names)
    assert names == clashing_rules(_planted(case))
    assert set(names) <= set(rule_names(feasible))


def test_rules_that_allow_a_set_do_not_clash():
    assert clashing_rules(Feasible(GROUP, COUNTS, **NAMES, **ROOMY)) == ()


def test_nothing_to_choose_from_clashes_with_its_count_alone():
    nothing = np.zeros(0, dtype=int)
    feasible = Feasible(nothing, np.array([2]), budget=Budget(np.zeros(0), nothing, 5.0), checked=False)
    assert clashing_rules(feasible) == ("count of group 0",)
