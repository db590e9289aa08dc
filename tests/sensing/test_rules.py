"""From a brief's rules to arrays: counts, zones, budget and what is kept, checked against what the brief says."""

import dataclasses

import numpy as np
import pytest
from synthetic_head import brief, electrodes, magnetometers

from layout.brief.objects import BudgetBrief, ExistingBrief, GoalBrief, SitesBrief, ZoneBrief
from layout.errors import BriefError, InfeasibleError
from layout.sensing.lay_out import lay_candidates
from layout.sensing.rules import candidate_prices, channels_bought, placement_rules

FAMILY = SitesBrief(family="10-20")
TEN_TEN = SitesBrief(family="10-10")


def rules_of(head, standard, one):
    laid = lay_candidates(head, one, standard)
    return laid, placement_rules(head, one, laid, standard)


def test_plain_counts(head, standard):
    one = brief(electrodes(count=5), magnetometers(count=3, sites=FAMILY, axes="tangents"), keep=("Cz",))
    laid, rules = rules_of(head, standard, one)
    assert np.array_equal(rules.group, laid.kind)
    assert rules.counts.tolist() == rules.least.tolist() == [5, 3]
    assert (rules.sensors == 1).all()
    assert rules.cliques == laid.cliques
    assert len(rules.clique_names) == len(rules.cliques)
    assert [laid.names[number] for number in rules.keep] == ["Cz"]
    assert (rules.rules, rules.budget) == ((), None)


def test_counts_under_a_budget_and_with_a_target(head, standard):
    stock = (electrodes(count=30, count_at_least=4), magnetometers(count=3, sites=FAMILY))
    one = dataclasses.replace(brief(*stock), budget=BudgetBrief(100.0))
    rules = rules_of(head, standard, one)[1]
    assert rules.least.tolist() == [4, 0]
    assert rules.counts.tolist() == [19, 3]  # no more than there are places
    reach = dataclasses.replace(brief(electrodes(count=12)), goal=GoalBrief(reach_bits=2.0))
    rules = rules_of(head, standard, reach)[1]
    assert (rules.least.tolist(), rules.counts.tolist()) == ([2], [12])


def test_prices_and_channels(head, standard):
    """What a sensor costs, written out by hand for each kind of axes."""
    stock = (
        electrodes(price=10.0, price_per_channel=2.0),
        magnetometers(name="two", count=1, sites=FAMILY, axes="two_axis", price=100.0, price_per_channel=7.0),
        magnetometers(name="three", count=1, sites=FAMILY, axes="three_axis", price=5.0),
        magnetometers(name="free", count=1, sites=FAMILY, axes="free", price=1.0, price_per_channel=3.0),
        magnetometers(name="free two", count=1, sites=FAMILY, axes="free_two", price=0.0, price_per_channel=3.0),
    )
    one = dataclasses.replace(brief(*stock), budget=BudgetBrief(500.0, 8, 40.0))
    laid, rules = rules_of(head, standard, one)
    assert np.array_equal(channels_bought(laid), np.array([1, 2, 3, 1, 2])[laid.kind])
    assert np.array_equal(candidate_prices(one, laid), np.array([12.0, 114.0, 5.0, 4.0, 6.0])[laid.kind])
    budget = rules.budget
    assert np.array_equal(budget.price, candidate_prices(one, laid))
    assert np.array_equal(budget.channels, channels_bought(laid))
    assert (budget.total, budget.block_size, budget.block_price) == (500.0, 8, 40.0)


def test_a_pair_costs_twice_and_has_twice_the_channels(head, standard):
    one = brief(magnetometers(sites=FAMILY, axes="two_axis", price=3.0, price_per_channel=5.0), left_right_pairs=True)
    laid = lay_candidates(head, one, standard)
    assert np.array_equal(channels_bought(laid), 2 * laid.sensors)
    assert np.array_equal(candidate_prices(one, laid), 13.0 * laid.sensors)


def test_zones_become_weighted_rules(head, standard):
    zones = (
        ZoneBrief("front", around=("Fz",), radius=45e-3, at_least=1, at_most=4),
        ZoneBrief("back", positions=("O1", "Oz", "O2"), at_most=0, kinds=("cap",)),
        ZoneBrief("rim", corners=("AF7", "AF8", "F8", "F7"), at_least=2),
        ZoneBrief("unruled", around=("Cz",), radius=10e-3),
    )
    stock = (electrodes(sites=TEN_TEN), magnetometers(sites=TEN_TEN, axes="tangents"))
    laid, rules = rules_of(head, standard, brief(*stock, zones=zones))
    front, back, rim = rules.rules
    assert [rule.name for rule in rules.rules] == [f"places.zones '{name}'" for name in ("front", "back", "rim")]
    assert [(rule.low, rule.high) for rule in rules.rules] == [(1, 4), (0, 0), (2, np.inf)]
    near = np.linalg.norm(laid.sites.positions - standard["Fz"], axis=1) <= 45e-3
    assert np.array_equal(front.members, np.flatnonzero(near[laid.site]))
    assert set(laid.kind[front.members]) == {0, 1}
    assert {laid.names[number] for number in back.members} == {"O1", "Oz", "O2"}
    assert {"AF7", "AF8 tangent1", "F8", "F7"} <= {laid.names[number] for number in rim.members}
    for rule in rules.rules:
        assert (rule.weights == 1).all()


@pytest.mark.parametrize(
    ("zone", "keep", "said"),
    [
        ({"positions": ("O1", "O2"), "at_least": 3}, (), r"places\.zones 'z': at_least .* zone, 2, but 3 was given"),
        ({"around": ("Cz",), "radius": 1e-3, "at_most": 0}, ("Cz",), r"'z': at_most .* the 1 sensors .*, but 0 was"),
        ({"around": ("Cz",), "radius": 9e-2, "at_least": 1, "kinds": ("b",)}, (), "at_least .* zone, 0, but 1"),
    ],
)
def test_zones_that_cannot_be_kept(head, standard, zone, keep, said):
    stock = (electrodes(), electrodes(name="b", count=1, only_in=("low",)))
    low = ZoneBrief("low", positions=("O1",))
    one = brief(*stock, zones=(ZoneBrief("z", **zone), low), keep=keep)
    with pytest.raises(InfeasibleError, match=said) as caught:
        rules_of(head, standard, one)
    assert "\n" not in str(caught.value)


def test_unknown_positions_of_a_zone(head, standard):
    one = brief(electrodes(), zones=(ZoneBrief("z", positions=("O1", "Q7"), at_most=1),))
    with pytest.raises(BriefError, match=r"places\.zones 'z': positions must name .* 'Q7' was given"):
        rules_of(head, standard, one)


def test_what_is_kept_must_be_paid_for(head, standard):
    one = brief(electrodes(price=30.0), keep=("Cz", "Pz"))
    extended = dataclasses.replace(one, budget=BudgetBrief(99.0, 2, 10.0), existing=ExistingBrief("extend", ("Fz",)))
    with pytest.raises(InfeasibleError, match=r"budget\.total: must be at least 110, .* but 99 was given"):
        rules_of(head, standard, extended)
    paid = dataclasses.replace(extended, budget=BudgetBrief(110.0, 2, 10.0))
    assert len(rules_of(head, standard, paid)[1].keep) == 3


def test_cliques_say_what_they_stand_for(head, standard):
    one = brief(electrodes(sites=TEN_TEN, spacing=0.04), magnetometers(sites=FAMILY, axes="tangents"))
    laid = lay_candidates(head, one, standard)
    named = dict(zip(laid.clique_names, laid.cliques, strict=True))
    assert len(named) == len(laid.cliques)
    assert "spacing_mm (AF7, AF3, F5, F3)" in named
    shared = next(clique for name, clique in named.items() if "one sensor per place" in name)
    assert set(laid.kind[shared]) == {0, 1}
