"""The linear model that every criterion of the engine is computed from."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from layout.errors import LayoutError


class ChannelTable:
    """Which channels each candidate brings; shared by a model and by what is left of it once some are chosen.

    Subclasses have offset (n_channels,), candidate_of_channel (n_channels,) and the Gram matrices both_gram and
    nuisance_gram (n_channels + 1 squared), whose last row and column belong to a silent channel used as padding.
    """

    offset: np.ndarray
    candidate_of_channel: np.ndarray

    @property
    def n_channels(self) -> int:
        """Number of channels over all candidates."""
        return len(self.offset)

    @cached_property
    def n_candidates(self) -> int:
        """Number of candidates."""
        return int(self.candidate_of_channel[-1]) + 1 if self.n_channels else 0

    @cached_property
    def channels(self) -> np.ndarray:
        """Channels of each candidate (n_candidates, widest), padded with n_channels: the index of a silent channel."""
        counts = np.bincount(self.candidate_of_channel, minlength=self.n_candidates)
        table = np.full((self.n_candidates, int(counts.max(initial=1))), self.n_channels)
        place = np.arange(self.n_channels) - np.concatenate([[0], np.cumsum(counts)[:-1]])[self.candidate_of_channel]
        table[self.candidate_of_channel, place] = np.arange(self.n_channels)
        return table

    @cached_property
    def padded_offset(self) -> np.ndarray:
        """The offset row with a 0 for the silent channel (n_channels + 1,)."""
        return np.append(self.offset, 0.0)

    @cached_property
    def has_offset(self) -> np.ndarray:
        """Which candidates bring a channel that sees the offset (n_candidates,) bool."""
        return (self.padded_offset[self.channels] != 0).any(axis=1)

    def channels_of(self, chosen: np.ndarray) -> np.ndarray:
        """Channel numbers of the chosen candidates, in the order of `chosen`."""
        flat = self.channels[np.asarray(chosen, dtype=int)].ravel()
        return flat[flat < self.n_channels]


@dataclass(frozen=True)
class LinearModel(ChannelTable):
    """y = A s + B b + o t + e per channel, every row divided by the channel's own independent noise.

    target A (n_channels, n_target): what is wanted, s ~ N(0, I). nuisance B (n_channels, n_nuisance), b ~ N(0, I).
    offset o (n_channels,): row of a flat-prior unknown t common to all channels with o != 0 (an EEG reference); 0
    where a channel has none. e ~ N(0, I). candidate_of_channel (n_channels,): the candidate that brings the channel,
    sorted, each of 0..n_candidates-1 at least once. Unitless throughout.
    """

    target: np.ndarray
    nuisance: np.ndarray
    offset: np.ndarray
    candidate_of_channel: np.ndarray

    def __post_init__(self) -> None:
        n = len(self.offset)
        owner = self.candidate_of_channel
        if self.target.shape[0] != n or self.nuisance.shape[0] != n or owner.shape != (n,):
            raise LayoutError(
                f"target, nuisance, offset and candidate_of_channel must have one row per channel, not "
                f"{self.target.shape}, {self.nuisance.shape}, {self.offset.shape}, {owner.shape}."
            )
        for name in ("target", "nuisance", "offset"):
            if not np.isfinite(getattr(self, name)).all():
                raise LayoutError(f"{name} must be finite, but it holds NaN or infinite entries.")
        if n and (owner[0] != 0 or not np.isin(np.diff(owner), (0, 1)).all()):
            raise LayoutError("candidate_of_channel must be sorted and name every candidate from 0 on, without a hole.")

    @cached_property
    def both(self) -> np.ndarray:
        """C = [A B] (n_channels, n_target + n_nuisance): target and nuisance kept in one matrix."""
        return np.hstack([self.target, self.nuisance])

    @cached_property
    def nuisance_gram(self) -> np.ndarray:
        """I + B Bᵀ, with a last row and column for the silent channel (n_channels + 1 squared)."""
        return _padded_gram(self.nuisance)

    @cached_property
    def both_gram(self) -> np.ndarray:
        """I + C Cᵀ, with a last row and column for the silent channel (n_channels + 1 squared)."""
        gram = self.nuisance_gram.copy()
        gram[:-1, :-1] += self.target @ self.target.T
        return gram


def _padded_gram(rows: np.ndarray) -> np.ndarray:
    n = len(rows)
    gram = np.zeros((n + 1, n + 1))
    gram[:n, :n] = rows @ rows.T
    gram[np.arange(n + 1), np.arange(n + 1)] += 1.0
    return gram
