"""Where a sensor goes when its spot cannot be used."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.engine.feasible import Feasible
from layout.engine.goal import Goal


@dataclass(frozen=True)
class Substitutes:
    """The best candidates (m,) to take one sensor's part, best first, and the layout's score with each (m,)."""

    candidates: np.ndarray
    scores: np.ndarray


def best_substitutes(
    goal: Goal, feasible: Feasible, chosen: np.ndarray, places: np.ndarray, most: int = 5
) -> tuple[Substitutes, ...]:
    """For each of the chosen (k,) the best other places to put it, all others staying and every rule kept.

    places (n_candidates,): of each candidate; one that shares the sensor's place is no substitute, and of candidates
    that share another place only the best counts. Fewer than `most` come back where the rules leave no more. A layout
    that breaks a rule itself may be mended by a swap or have no substitutes.
    """
    table = np.where(feasible.swappable(chosen), goal.priced(chosen).swaps(), -np.inf)
    found = []
    for one, scores in zip(chosen, table, strict=True):
        scores = np.where(places == places[one], -np.inf, scores)
        order = np.argsort(-scores, kind="stable")
        order = order[np.isfinite(scores[order])]
        _, first = np.unique(places[order], return_index=True)
        best = order[np.sort(first)][:most]
        found.append(Substitutes(best, scores[best]))
    return tuple(found)
