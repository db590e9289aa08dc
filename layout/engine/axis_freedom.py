"""Which candidates may turn, in how many axes and how far, and the model that a choice of axes leaves."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from layout.engine.information import BITS
from layout.engine.model import ChannelTable, LinearModel
from layout.engine.rank_aware import RESIDUAL_BITS
from layout.errors import LayoutError


@dataclass(frozen=True)
class FreeAxes:
    """Candidates whose axis is free: their three channels are components, and a sensor there measures 1 or 2 axes.

    free (n_candidates,) bool. count: axes of a free sensor, 1 or 2 at right angles, one number or (n_candidates,) (a
    sensor of all three is an ordinary candidate of three channels). tilt [rad]: an axis may lean at most this far from
    normal (n_candidates, 3), given in the components' own coordinates; a number or (n_candidates,), inf where there is
    no limit; None: no limit anywhere. An axis and its opposite are the same.
    """

    free: np.ndarray
    count: int | np.ndarray = 1
    tilt: float | np.ndarray | None = None
    normal: np.ndarray | None = None


class Turning:
    """A model and its free axes, checked and ready for use.

    free, limited (n,) bool; count (n,); normal (n, 3) of unit length; cosine (n,) of the largest tilt; own (n, m, m):
    an ordinary candidate's frame, the identity on its channels; grams: C Cᵀ and B Bᵀ over all channels and the silent
    one; blocks: their parts at each candidate (n, m, m).

    Raises LayoutError where the description does not fit the model.
    """

    def __init__(self, model: LinearModel, axes: FreeAxes) -> None:
        self.model = model
        n = model.n_candidates
        self.free = np.asarray(axes.free, dtype=bool)
        if self.free.shape != (n,):
            raise LayoutError(
                f"free must say yes or no for each of {n} candidates, but its shape is {self.free.shape}."
            )
        widths = (model.channels < model.n_channels).sum(axis=1)
        for i in np.flatnonzero(self.free & (widths != 3))[:1]:
            raise LayoutError(
                f"A candidate with a free axis must bring 3 components, but candidate {i} has {widths[i]}."
            )
        for i in np.flatnonzero(self.free & model.has_offset)[:1]:
            raise LayoutError(f"A candidate with a free axis must not see the offset, but candidate {i} does.")
        self.count = np.broadcast_to(np.asarray(axes.count), (n,))
        for i in np.flatnonzero(self.free & ~np.isin(self.count, (1, 2)))[:1]:
            raise LayoutError(f"count must be 1 or 2 axes, but candidate {i} has {self.count[i]}.")
        tilt = np.broadcast_to(np.asarray(np.inf if axes.tilt is None else axes.tilt, dtype=float), (n,))
        for i in np.flatnonzero(self.free & ~(tilt >= 0))[:1]:
            raise LayoutError(f"tilt must be at least 0, but candidate {i} has {tilt[i]:g}.")
        self.limited = self.free & (tilt < np.pi / 2)
        for i in np.flatnonzero(self.limited & (self.count != 1))[:1]:
            raise LayoutError(f"A tilt limit needs count = 1, but candidate {i} has {self.count[i]} axes.")
        self.cosine = np.where(self.limited, np.cos(np.minimum(tilt, np.pi / 2)), 0.0)
        self.normal = np.zeros((n, 3))
        if self.limited.any():
            self.normal[self.limited] = _unit_normals(axes.normal, self.limited)
        self.width = model.channels.shape[1]
        self.own = np.eye(self.width) * (model.channels < model.n_channels)[:, None, :]

    @property
    def n_candidates(self) -> int:
        """Number of candidates."""
        return self.model.n_candidates

    def part(self, chosen: np.ndarray) -> Turning:
        """The same for the chosen candidates alone, numbered from 0."""
        part = object.__new__(Turning)
        full = np.where(self.free[chosen, None, None], np.eye(self.width), self.own[chosen])
        full *= (self.model.channels[chosen] < self.model.n_channels)[:, None, :]
        part.model = TurnedChannels(self, chosen, full)
        for name in ("free", "count", "limited", "cosine", "normal", "own"):
            setattr(part, name, getattr(self, name)[chosen])
        part.width = part.model.channels.shape[1]
        part.own = part.own[:, : part.width, : part.width]
        return part

    @cached_property
    def grams(self) -> tuple[np.ndarray, np.ndarray]:
        """C Cᵀ and B Bᵀ, with a zero row and column for the silent channel."""
        return tuple(gram - np.eye(len(gram)) for gram in (self.model.both_gram, self.model.nuisance_gram))

    @cached_property
    def blocks(self) -> tuple[np.ndarray, np.ndarray]:
        """The parts of `grams` at each candidate (n, m, m)."""
        channels = self.model.channels
        return tuple(gram[channels[:, :, None], channels[:, None, :]] for gram in self.grams)

    @cached_property
    def rows(self) -> np.ndarray:
        """Target rows of each candidate (n, m, p), zero where there is no channel."""
        return self.padded(self.model.target)

    def padded(self, rows: np.ndarray) -> np.ndarray:
        """Rows of the model's channels (n_channels, p), by candidate (n, m, p)."""
        return np.vstack([rows, np.zeros((1, rows.shape[1]))])[self.model.channels]

    def compressed(self, sensors: int) -> tuple[np.ndarray, float]:
        """The target in the fewest columns, by candidate (n, m, p), and the bits the rest could add to `sensors`.

        As rank_aware.compressed, but whatever its axes, a sensor sees at most what its components see together.
        """
        left, size, _ = np.linalg.svd(self.model.target, full_matrices=False)
        rows = self.padded(left * size)
        beyond = np.cumsum((rows**2).sum(axis=1)[:, ::-1], axis=1)[:, ::-1]
        most = np.sort(beyond, axis=0)[::-1][:sensors].sum(axis=0) * BITS
        keep = int(np.searchsorted(-most, -RESIDUAL_BITS))
        return rows[:, :, :keep], float(most[keep]) if keep < len(most) else 0.0


def _unit_normals(normal: np.ndarray | None, limited: np.ndarray) -> np.ndarray:
    if normal is None or np.shape(normal) != (len(limited), 3):
        raise LayoutError(
            f"A tilt limit needs a normal for each of {len(limited)} candidates, but its shape is {np.shape(normal)}."
        )
    chosen = np.asarray(normal, dtype=float)[limited]
    length = np.linalg.norm(chosen, axis=1)
    if not (np.isfinite(length) & (length > 0)).all():
        raise LayoutError("normal must be finite and not zero where the tilt is limited.")
    return chosen / length[:, None]


class TurnedChannels(ChannelTable):
    """Candidates held in given frames, as a table of ordinary candidates: one for each frame.

    owners (a,): the candidates; frames (a, m, m): columns are channels, zero columns are none.
    """

    def __init__(self, turning: Turning, owners: np.ndarray, frames: np.ndarray) -> None:
        self.turning, self.owners, self.frames = turning, owners, frames
        held = (frames != 0).any(axis=1)
        held[~held.any(axis=1), 0] = True
        self._held = held
        self.candidate_of_channel = np.nonzero(held)[0]
        components = turning.model.channels[owners]
        self.offset = np.einsum("am,amr->ar", turning.model.padded_offset[components], frames)[held]
        self.both_gram, self.nuisance_gram = (self._turned(gram, components) for gram in turning.grams)

    def _turned(self, gram: np.ndarray, components: np.ndarray) -> np.ndarray:
        a, m = components.shape
        flat = components.ravel()
        left = np.swapaxes(self.frames, 1, 2) @ gram[np.ix_(flat, flat)].reshape(a, m, a * m)
        both = left.reshape(a * m, a, m).transpose(1, 0, 2) @ self.frames  # (a, a m, m)
        keep = self._held.ravel()
        whole = both.transpose(1, 0, 2).reshape(a * m, a * m)[np.ix_(keep, keep)]
        out = np.eye(len(whole) + 1)
        out[:-1, :-1] += 0.5 * (whole + whole.T)
        return out

    def across(self, gram: np.ndarray, columns: np.ndarray) -> np.ndarray:
        """Products of the turned channels with some of the components (c, n_columns) under one of `Turning.grams`."""
        components = self.turning.model.channels[self.owners]
        taken = gram[np.ix_(components.ravel(), columns)].reshape(*components.shape, len(columns))
        return (np.swapaxes(self.frames, 1, 2) @ taken)[self._held]

    def of(self, rows: np.ndarray) -> np.ndarray:
        """Rows by candidate (n, m, p), turned (c, p)."""
        return (np.swapaxes(self.frames, 1, 2) @ rows[self.owners])[self._held]

    def own_noise(self) -> np.ndarray:
        """Covariance (c, n_channels + 1) that the turned channels share with their own components' noise."""
        model = self.turning.model
        out = np.zeros((len(self.offset), model.n_channels + 1))
        mixing = np.swapaxes(self.frames, 1, 2)[self._held]
        rows = np.arange(len(out))
        for part, channel in enumerate(model.channels[self.owners[self.candidate_of_channel]].T):
            out[rows, channel] += mixing[:, part]
        out[:, -1] = 0.0
        return out
