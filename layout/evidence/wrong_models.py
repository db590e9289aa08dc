"""How layouts fare, and in which order, under other models than the one they were made for."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

import numpy as np

SAME = 1e-9  # relative: scores nearer than this are tied


@dataclass(frozen=True)
class OrderChange:
    """Pairs of layouts that two models both tell apart, and how many of them they put in opposite order."""

    pairs: int
    reversed: int

    @property
    def tau(self) -> float | None:
        """Kendall's rank correlation without ties (Kendall 1938, Biometrika 30:81); None without pairs."""
        return None if self.pairs == 0 else 1.0 - 2.0 * self.reversed / self.pairs


def order_change(own: np.ndarray, other: np.ndarray) -> OrderChange:
    """How the order of layouts changes between their scores (n,) under one model and (n,) under another.

    Pairs that tie under either model are left out.
    """
    pairs = turned = 0
    for i, j in combinations(range(len(own)), 2):
        first, second = _sign(own[i], own[j]), _sign(other[i], other[j])
        if first and second:
            pairs += 1
            turned += first != second
    return OrderChange(pairs, turned)


def _sign(first: float, second: float) -> int:
    if abs(first - second) <= SAME * max(abs(first), abs(second)):
        return 0
    return 1 if first > second else -1
