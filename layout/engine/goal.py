"""What the search, the bound and the proof ask of a goal.

Every goal is a score to be made large: bits of information, or minus an error in metres. As a function of weights in
[0, 1] it is concave and never falls when a weight grows, and equals the score at every 0/1 vector; that is all the
certificates rest on.
"""

from __future__ import annotations

from typing import Protocol

import numpy as np


class Pricing(Protocol):
    """A chosen set with every one-step change priced; -inf marks what is already chosen."""

    chosen: np.ndarray

    @property
    def value(self) -> float:
        """Score of the chosen set."""

    def additions(self) -> np.ndarray:
        """Score after adding each candidate (n_candidates,)."""

    def removals(self) -> np.ndarray:
        """Score after dropping each chosen candidate (k,)."""

    def swaps(self) -> np.ndarray:
        """Score after dropping chosen[i] and adding candidate j (k, n_candidates)."""


class Relaxed(Protocol):
    """The concave score on a pool of candidates; all others have weight zero."""

    pool: np.ndarray

    def value(self, weights: np.ndarray) -> float:
        """Score at pool weights (n_pool,) >= 0."""

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """Score, gradient (n_pool,) and a negative semidefinite metric (n_pool, n_pool), the Hessian or near it."""

    def gradient_everywhere(self, weights: np.ndarray) -> np.ndarray:
        """Supergradient over all candidates (n_candidates,), pooled or not."""


class Goal(Protocol):
    """A concave score over sets of n_candidates candidates."""

    @property
    def n_candidates(self) -> int:
        """Number of candidates."""

    @property
    def has_offset(self) -> np.ndarray:
        """Which candidates see the flat offset (n_candidates,) bool; the first of them alone carries nothing."""

    @property
    def highest(self) -> float:
        """What no set can score whatever it holds: inf, or 0 for minus an error."""

    def score(self, chosen: np.ndarray) -> float:
        """Score of a set, from the goal's rows, sharing nothing with `priced`."""

    def pairs(self, candidates: np.ndarray) -> np.ndarray:
        """Score of every pair of the given candidates (n, n), each of which sees the offset; diagonal: anything."""

    def priced(self, chosen: np.ndarray) -> Pricing:
        """The chosen set, ready to price its changes."""

    def relaxed(self, pool: np.ndarray) -> Relaxed:
        """The relaxation on a pool of candidates."""

    def tangent(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        """(f, g): score(S) <= f + g · (1_S - weights) for every set S; recomputed from the goal's rows."""
