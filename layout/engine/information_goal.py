"""Information as a goal of the search, the bound and the proof."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.engine.information import Conditioned, information, pair_information
from layout.engine.model import LinearModel
from layout.engine.relaxation import PooledRelaxation, value_and_gradient


@dataclass(frozen=True)
class InformationGoal:
    """The information of a linear model's target [bits]."""

    model: LinearModel

    @property
    def n_candidates(self) -> int:
        """Number of candidates."""
        return self.model.n_candidates

    @property
    def has_offset(self) -> np.ndarray:
        """Which candidates see the flat offset (n_candidates,) bool."""
        return self.model.has_offset

    @property
    def highest(self) -> float:
        """Bits have no limit of their own."""
        return np.inf

    def score(self, chosen: np.ndarray) -> float:
        """Information of the chosen candidates [bits]."""
        return information(self.model, chosen)

    def pairs(self, candidates: np.ndarray) -> np.ndarray:
        """Information of every pair of single-channel candidates that see the offset (n, n) [bits]."""
        return pair_information(self.model, candidates)

    def priced(self, chosen: np.ndarray) -> Conditioned:
        """The chosen set with its additions, losses and swaps priced [bits]."""
        return Conditioned(self.model, chosen)

    def relaxed(self, pool: np.ndarray) -> PooledRelaxation:
        """The relaxation on a pool of candidates."""
        return PooledRelaxation(self.model, pool)

    def tangent(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        """(f, g) [bits] in source space: no Gram matrix, no pool."""
        return value_and_gradient(self.model, weights)
