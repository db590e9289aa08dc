"""The rules that a set of candidates must keep beside counts and exclusions: weighted sums and a budget."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

ROUNDING = 1e-9  # relative; sums that pass a limit by no more than this are rounding


def _slack(amounts: np.ndarray, *limits: float) -> float:
    """How far sums of the amounts may pass a limit: not at all where every number is whole and sums are exact."""
    numbers = np.append(amounts, [limit for limit in limits if np.isfinite(limit)])
    if (numbers == np.round(numbers)).all():
        return 0.0
    return ROUNDING * float(np.abs(numbers).max())


@dataclass(frozen=True)
class Rule:
    """low <= sum of the weights of the chosen members <= high.

    members (m,) candidates; weights (m,) >= 0 (default: 1 each). slack: how far rounding may pass a limit (set from the
    numbers themselves; rules for the rest of a layout inherit it).
    """

    name: str
    members: np.ndarray
    weights: np.ndarray | None = None
    low: float = 0.0
    high: float = np.inf
    slack: float | None = None

    def __post_init__(self) -> None:
        members = np.asarray(self.members, dtype=int)
        weights = np.ones(len(members)) if self.weights is None else np.asarray(self.weights, dtype=float)
        object.__setattr__(self, "members", members)
        object.__setattr__(self, "weights", weights)
        if self.slack is None:
            object.__setattr__(self, "slack", _slack(weights, self.low, self.high))

    def total(self, chosen: np.ndarray) -> float:
        """Sum of the weights of the chosen members."""
        return float(self.weights[np.isin(self.members, chosen)].sum())

    def rest(self, chosen: np.ndarray, number: np.ndarray) -> Rule:
        """What the rule leaves once `chosen` are in; number (n,): new number of each candidate, -1 where it is gone."""
        members = number[self.members]
        held, left = self.total(chosen), members >= 0
        return Rule(self.name, members[left], self.weights[left], self.low - held, self.high - held, self.slack)


@dataclass(frozen=True)
class Budget:
    """Sum of prices + block_price * ceil(channels / block_size) <= total, all in one currency.

    price (n,) >= 0 of each candidate, its channels' prices in it; channels (n,) whole numbers that a candidate takes in
    blocks of `block_size` (amplifiers; None: no blocks). used: channels taken already, whose blocks count again.
    """

    price: np.ndarray
    channels: np.ndarray
    total: float
    block_size: int | None = None
    block_price: float = 0.0
    used: int = 0
    slack: float | None = None

    def __post_init__(self) -> None:
        if self.slack is None:
            object.__setattr__(self, "slack", _slack(self.price, self.total, self.block_price))

    @property
    def has_blocks(self) -> bool:
        """Whether blocks cost anything."""
        return self.block_size is not None and self.block_price > 0

    def blocks(self, channels: np.ndarray | int) -> np.ndarray | int:
        """Blocks started by so many channels and those used already."""
        return -(-(self.used + channels) // self.block_size) if self.has_blocks else 0 * channels

    def cost(self, chosen: np.ndarray) -> float:
        """What the chosen candidates cost, every started block included."""
        chosen = np.asarray(chosen, dtype=int)
        return float(self.price[chosen].sum() + self.block_price * self.blocks(int(self.channels[chosen].sum())))

    def fits(self, spent: np.ndarray | float, channels: np.ndarray | int) -> np.ndarray | bool:
        """Whether sums of prices and of channels are within the budget."""
        return spent + self.block_price * self.blocks(channels) <= self.total + self.slack

    def block_range(self, size: int) -> range:
        """Numbers of blocks that sets of at most `size` candidates may end with."""
        if not self.has_blocks:
            return range(1)
        fewest = int(self.blocks(0))
        most = int(self.blocks(int(np.sort(self.channels)[::-1][:size].sum())))
        paid = int(max(self.total + self.slack, 0.0) // self.block_price)
        return range(fewest, max(fewest, min(most, paid)) + 1)

    def rest(self, chosen: np.ndarray, candidates: np.ndarray) -> Budget:
        """What is left of the budget for the other candidates once `chosen` are bought."""
        return Budget(
            self.price[candidates],
            self.channels[candidates],
            self.total - float(self.price[chosen].sum()),
            self.block_size,
            self.block_price,
            self.used + int(self.channels[chosen].sum()),
            self.slack,
        )
