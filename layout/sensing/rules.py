"""The rules of a brief about sets of candidates, as plain arrays for a search that knows nothing of heads."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Head
from layout.brief.objects import Brief, ZoneBrief
from layout.errors import InfeasibleError
from layout.sensing.candidates import Candidates
from layout.sensing.kept import kept_candidates
from layout.sensing.zones import zone_mask


@dataclass(frozen=True)
class LinearRule:
    """low <= sum of the weights (m,) of the chosen members (m,) <= high; -inf and inf: no such limit."""

    name: str
    members: np.ndarray
    weights: np.ndarray
    low: float
    high: float


@dataclass(frozen=True)
class BudgetRule:
    """Sum of prices + block_price · ceil(channels / block_size) <= total.

    price (n,) of each candidate, its channels' own prices included; channels (n,) that it takes on amplifiers.
    block_size None: no blocks.
    """

    price: np.ndarray
    channels: np.ndarray
    total: float
    block_size: int | None
    block_price: float


@dataclass(frozen=True)
class PlacementRules:
    """Which sets of n candidates are allowed.

    least and counts (n_groups,): the fewest and most sensors of each group; group (n,) of the candidates; sensors (n,)
    that each brings. At most one of each clique, whose names are clique_names. keep: candidates that must be chosen.
    """

    group: np.ndarray
    counts: np.ndarray
    least: np.ndarray
    sensors: np.ndarray
    cliques: tuple[np.ndarray, ...]
    clique_names: tuple[str, ...]
    keep: tuple[int, ...]
    rules: tuple[LinearRule, ...]
    budget: BudgetRule | None


def placement_rules(
    head: Head, brief: Brief, candidates: Candidates, standard: dict[str, np.ndarray]
) -> PlacementRules:
    """The rules of a brief about its candidates. standard: the head's 10-5 positions by name (3,) [m].

    The most of an entry is its count, or the number of its sensors that there are places for where it may be fewer.
    Raises BriefError and FileError as `kept_candidates`, InfeasibleError where a zone must hold more sensors than it
    has sites, where a left-right layout of an odd count has no site on the midline, or where what is kept breaks a
    rule.
    """
    kind, sensors = candidates.kind, candidates.sensors
    least = np.array(brief.least)
    singles = candidates.singles
    places = np.array(
        [len(np.unique(singles.site[candidates.single_sensors(np.flatnonzero(kind == g))])) for g in range(len(least))]
    )
    counts = np.minimum([entry.count for entry in brief.stock], np.maximum(places, least))
    keep = kept_candidates(brief, candidates)
    _check_parity(counts, least, kind, sensors)
    rules = tuple(
        _zone_rule(head, brief, candidates, standard, zone, keep)
        for zone in brief.places.zones
        if zone.at_least > 0 or zone.at_most is not None
    )
    budget = None if brief.budget is None else _budget(brief, candidates)
    if budget is not None:
        _check_kept_cost(budget, np.array(keep, dtype=int))
    return PlacementRules(
        kind, counts, least, sensors, candidates.cliques, candidates.clique_names, keep, rules, budget
    )


def channels_bought(candidates: Candidates) -> np.ndarray:
    """Channels that each candidate takes on amplifiers (n_candidates,): of three components of free axes, the axes."""
    rows = np.bincount(candidates.candidate_of_channel, minlength=len(candidates))
    if candidates.free_axes is None:
        return rows
    return np.where(candidates.free_axes > 0, candidates.free_axes, rows)


def candidate_prices(brief: Brief, candidates: Candidates) -> np.ndarray:
    """What each candidate costs (n_candidates,), its channels' own prices included and amplifier blocks not."""
    per_sensor = np.array([entry.price for entry in brief.stock])[candidates.kind]
    per_channel = np.array([entry.price_per_channel for entry in brief.stock])[candidates.kind]
    return per_sensor * candidates.sensors + per_channel * channels_bought(candidates)


def _budget(brief: Brief, candidates: Candidates) -> BudgetRule:
    asked = brief.budget
    return BudgetRule(
        candidate_prices(brief, candidates),
        channels_bought(candidates),
        asked.total,
        asked.block_channels,
        asked.block_price,
    )


def _zone_rule(
    head: Head,
    brief: Brief,
    candidates: Candidates,
    standard: dict[str, np.ndarray],
    zone: ZoneBrief,
    keep: tuple[int, ...],
) -> LinearRule:
    singles = candidates.singles
    inside = zone_mask(head, brief.places, zone.name, singles.sites.positions, standard, singles.sites.names)
    counted = inside[singles.site]
    if zone.kinds:
        counted &= np.isin(np.array([entry.name for entry in brief.stock])[singles.kind], zone.kinds)
    if candidates.pairs is None:
        weight = counted.astype(float)
    else:
        members = candidates.pairs.members
        weight = np.where(members >= 0, counted[members], False).sum(axis=1).astype(float)
    members = np.flatnonzero(weight)
    sides = candidates.single_sensors(members)
    n_sites = len(np.unique(singles.site[sides[counted[sides]]]))
    if n_sites < zone.at_least:
        raise InfeasibleError(
            f"places.zones {zone.name!r}: at_least must be at most the number of sites allowed in the zone, {n_sites}, "
            f"but {zone.at_least} was given"
        )
    held = int(weight[list(keep)].sum())
    high = np.inf if zone.at_most is None else float(zone.at_most)
    if held > high:
        raise InfeasibleError(
            f"places.zones {zone.name!r}: at_most must leave room for the {held} sensors that are kept in the zone, "
            f"but {zone.at_most} was given"
        )
    return LinearRule(f"places.zones {zone.name!r}", members, weight[members], float(zone.at_least), high)


def _check_parity(counts: np.ndarray, least: np.ndarray, kind: np.ndarray, sensors: np.ndarray) -> None:
    for group, (most, fewest) in enumerate(zip(counts, least, strict=True)):
        if most == fewest and most % 2 and not (sensors[kind == group] == 1).any():
            raise InfeasibleError(
                f"stock[{group}].count: must be even where places.left_right_pairs is true and no site lies on the "
                f"midline, but {most} was given"
            )


def _check_kept_cost(budget: BudgetRule, keep: np.ndarray) -> None:
    cost = float(budget.price[keep].sum())
    if budget.block_size is not None:
        cost += budget.block_price * -(-int(budget.channels[keep].sum()) // budget.block_size)
    if cost > budget.total * (1 + 1e-12):
        raise InfeasibleError(
            f"budget.total: must be at least {cost:g}, what the kept sensors cost, but {budget.total:g} was given"
        )
