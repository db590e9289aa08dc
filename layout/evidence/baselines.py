"""What a layout gives without a search, at the same count: the yardsticks beside every chosen layout."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.spatial import cKDTree
from threadpoolctl import threadpool_limits

from layout.engine.feasible import Feasible
from layout.engine.goal import Goal
from layout.engine.search import random_set
from layout.evidence.spread import even_spread
from layout.units import MM

RANDOM_LAYOUTS = 200
# Small factorisations: on a busy machine, threads made each a hundred times slower.
one_thread = threadpool_limits.wrap(limits=1, user_api="blas")
NEAR = 12 * MM  # a standard position farther than this from every site is not available


@dataclass(frozen=True)
class Yardstick:
    """name; value (a score); chosen candidates, None where there is no single layout; note: what to know about it."""

    name: str
    value: float
    chosen: np.ndarray | None
    note: str = ""


def first_at_site(site: np.ndarray, kind: np.ndarray, entry: int) -> tuple[np.ndarray, np.ndarray]:
    """(sites, candidates) of one stock entry: every site it can use, its first candidate (axis option) there."""
    members = np.flatnonzero(kind == entry)
    sites, first = np.unique(site[members], return_index=True)
    return sites, members[first]


def evenly(points: np.ndarray, site: np.ndarray, feasible: Feasible, counts: np.ndarray) -> np.ndarray:
    """Candidates of an even spread of counts[g] sensors of each stock entry g; sites' points (n_sites, 3) [m]."""
    picked = []
    for entry, count in enumerate(counts):
        sites, candidates = first_at_site(site, feasible.group, entry)
        fixed = np.flatnonzero(np.isin(candidates, feasible.keep))
        picked.append(candidates[even_spread(points[sites], int(count), fixed)])
    return np.concatenate(picked)


@one_thread
def equal_even_spread(
    goal: Goal,
    feasible: Feasible,
    points: np.ndarray,
    site: np.ndarray,
    value: float,
    size: int,
    cache: dict[int, float],
) -> tuple[int | None, int]:
    """(n, largest): a count at which an even spread reaches the score `value` and one less does not; None if none does.

    Found by bisection: it is the smallest such count where the value rises with the count, as it nearly always does.
    For a stock of one entry and layouts of `size` sensors; `largest` is the number of its sites. cache: values of
    spreads already computed.
    """
    largest = len(np.unique(site))

    def spread_value(count: int) -> float:
        if count not in cache:
            cache[count] = goal.score(evenly(points, site, feasible, np.array([count])))
        return cache[count]

    low, high = size - 1, largest
    if spread_value(largest) < value:
        return None, largest
    while high - low > 1:
        middle = (low + high) // 2
        if spread_value(middle) >= value:
            high = middle
        else:
            low = middle
    return high, largest


def standard_subset(
    points: np.ndarray,
    site: np.ndarray,
    feasible: Feasible,
    counts: np.ndarray,
    families: tuple[tuple[str, np.ndarray], ...],
) -> tuple[np.ndarray | None, str]:
    """Candidates at standard positions: the 10-20 ones first, thinned evenly, then 10-10, then 10-5.

    counts (n_entries,): sensors of each stock entry. families: (name, positions (n, 3) [m]) from coarse to fine.
    Positions without an allowed site within 12 mm are left out. Returns (candidates or None when there are too few, a
    note).
    """
    picked = []
    finest = families[0][0]
    for entry, count in enumerate(counts):
        sites, candidates = first_at_site(site, feasible.group, entry)
        chosen = np.flatnonzero(np.isin(candidates, feasible.keep))
        tree = cKDTree(points[sites])
        for name, positions in families:
            if len(chosen) == count:
                break
            away, nearest = tree.query(positions)
            pool = np.unique(np.concatenate([chosen, nearest[away <= NEAR]]))
            take = min(int(count), len(pool))
            fixed = np.searchsorted(pool, chosen)
            chosen = pool[even_spread(points[sites][pool], take, fixed)]
            finest = max(finest, name, key=[family for family, _ in families].index)
        if len(chosen) < count:
            return None, f"only {len(chosen)} standard positions have an allowed site"
        picked.append(candidates[chosen])
    return np.concatenate(picked), f"{finest} positions"


def best_singles(alone: np.ndarray, feasible: Feasible, counts: np.ndarray) -> np.ndarray:
    """The candidates that carry most on their own, taken from the top as far as the rules allow.

    alone (n_candidates,): score of each on its own, as if the reference were known: against an unknown one a single
    electrode carries nothing. counts (n_entries,): sensors of each stock entry.
    """
    chosen = np.array(sorted(feasible.keep), dtype=int)
    while len(chosen) < counts.sum():
        held = np.bincount(feasible.group[chosen], minlength=len(counts))
        allowed = feasible.addable(chosen) & (held < counts)[feasible.group]
        if not allowed.any():
            return feasible.any_set(alone)
        chosen = np.append(chosen, int(np.argmax(np.where(allowed, alone, -np.inf))))
    return chosen


@one_thread
def yardsticks(
    goal: Goal,
    feasible: Feasible,
    counts: np.ndarray,
    alone: np.ndarray,
    points: np.ndarray,
    site: np.ndarray,
    families: tuple[tuple[str, np.ndarray], ...],
    seed: int,
    progress: Callable[[str], None] = lambda doing: None,
    axis_names: tuple[str, ...] = (),
    breaks_limits: Callable[[np.ndarray], bool] = lambda chosen: False,
) -> tuple[Yardstick, ...]:
    """Even spread, standard positions, best single channels, median of 200 random layouts.

    counts (n_entries,): sensors of each stock entry; alone: see `best_singles`. axis_names: of each candidate, "" for
    electrodes; the first two take a site's first option and say which it is. breaks_limits(chosen): whether errors pass
    limits that the brief sets.
    """
    progress("baselines")

    def of(name: str, chosen: np.ndarray, *notes: str) -> Yardstick:
        kept = feasible.allows(chosen) and not breaks_limits(chosen)
        broken = "" if kept else "breaks a rule of the brief, shown all the same"
        return Yardstick(name, goal.score(chosen), chosen, ", ".join(filter(None, [*notes, broken])))

    def axis_used(chosen: np.ndarray) -> str:
        used = dict.fromkeys(axis_names[candidate] for candidate in chosen if axis_names and axis_names[candidate])
        return f"every magnetometer's axis {' or '.join(used)}, a site's first option" if used else ""

    spread = evenly(points, site, feasible, counts)
    even = of("even spread", spread, axis_used(spread))
    chosen, note = standard_subset(points, site, feasible, counts, families)
    standard = () if chosen is None else (of("standard positions", chosen, note, axis_used(chosen)),)
    singles = of("best single channels", best_singles(alone, feasible, counts))
    rng = np.random.default_rng([seed, RANDOM_LAYOUTS])
    draws = [goal.score(random_set(feasible, rng)) for _ in range(RANDOM_LAYOUTS)]
    random = Yardstick("random", float(np.median(draws)), None, f"median of {RANDOM_LAYOUTS}")
    return (even, *standard, singles, random)
