"""Where the exchange starts from: the relaxed weights rounded or drawn, the leader shaken."""

from __future__ import annotations

import numpy as np

from layout.engine.feasible import Feasible


def rounded(feasible: Feasible, weights: np.ndarray) -> np.ndarray:
    """The candidates that the relaxation is sure of: more than half a sensor, heaviest first, where rules allow."""
    return _as_far_as_allowed(feasible, np.argsort(-weights, kind="stable"), weights > 0.5)


def drawn(feasible: Feasible, weights: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Candidates drawn without replacement in proportion to their relaxed weights, as far as the rules go.

    The relaxation spreads its weight over the places that good layouts use, so exchange ends higher from here than from
    uniform draws, and in a third of the time (Gumbel's trick draws them all at once).
    """
    key = np.log(np.maximum(weights, 1e-300)) + rng.gumbel(size=len(weights))
    return _as_far_as_allowed(feasible, np.argsort(-key, kind="stable"), weights > 0)


def shaken(feasible: Feasible, leader: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """The leader with a quarter of its sensors dropped at random."""
    free = leader[~np.isin(leader, feasible.keep)]
    dropped = rng.choice(free, size=max(1, len(free) // 4), replace=False) if len(free) else free
    return leader[~np.isin(leader, dropped)]


def _as_far_as_allowed(feasible: Feasible, order: np.ndarray, wanted: np.ndarray) -> np.ndarray:
    chosen = np.array(sorted(feasible.keep), dtype=int)
    allowed = feasible.addable(chosen)
    for candidate in order[wanted[order]]:
        if allowed[candidate]:
            chosen = np.append(chosen, candidate)
            allowed = feasible.addable(chosen)
            if not allowed.any():
                break
    return chosen
