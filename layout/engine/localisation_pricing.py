"""A chosen set with the linearised localisation error after every addition, loss and swap.

A candidate whose channels, given the chosen ones, have derivatives U (unit noise after whitening, p columns) changes
M_j to M_j + UᵀU, so with Z = U L⁻ᵀ (M_j = L Lᵀ) and Y = Z L⁻¹ diag(spread) its arrival lowers e_j² by
tr[(I + Z Zᵀ)⁻¹ Y Yᵀ] (Woodbury). Dropping a chosen candidate changes the other channels' conditional derivatives by a
matrix of the rank of its channels.
"""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING

import numba
import numpy as np
from scipy.linalg import solve_triangular

if TYPE_CHECKING:
    from layout.engine.localisation import LocalisationModel


class _Given:
    """What some chosen channels leave of the noise and of the unknowns.

    half (c, n+1) = L⁻¹ R_c:, L Lᵀ the chosen channels' noise covariance; seen: whether one of them sees the offset;
    remainder (n+1,): what they leave of the offset; q = oᵀ (L Lᵀ)⁻¹ o; squared (m,): e_j²; root (m, p, p): inverse of
    the lower Cholesky factor of M_j.
    """

    def __init__(self, model: LocalisationModel, rows: np.ndarray) -> None:
        self.model, self.rows = model, rows
        gram, offset = model.nuisance_gram, model.padded_offset
        self.seen = bool((offset[rows] != 0).any())
        factor = np.linalg.cholesky(gram[np.ix_(rows, rows)])
        _, m, p = model.derivatives.shape
        stack = np.hstack([model.derivatives[rows].reshape(len(rows), m * p), offset[rows][:, None], gram[rows]])
        white = solve_triangular(factor, stack, lower=True) if len(rows) else stack
        self.factor, self.half = factor, white[:, m * p + 1 :]
        self.signals, self.flat = white[:, : m * p], white[:, m * p]
        self.q = float(self.flat @ self.flat)
        self.remainder = offset - self.half.T @ self.flat
        self.level = self.flat @ self.signals / self.q if self.seen else np.zeros(m * p)
        left = (self.signals - np.outer(self.flat, self.level)).reshape(len(rows), m, p)
        matrices = np.eye(p) + np.matmul(left.transpose(1, 2, 0), left.transpose(1, 0, 2))
        self.root = np.linalg.inv(np.linalg.cholesky(matrices))
        self.squared = ((self.root[:, :, :3] * model.spread[:, None, :]) ** 2).sum(axis=(1, 2))

    def whiteners(self, chosen: np.ndarray) -> np.ndarray:
        """(n_candidates, b, b): maps a candidate's channels to unit noise, given the chosen, free of the offset."""
        model, channels = self.model, self.model.channels
        gram, width = model.nuisance_gram, channels.shape[1]
        blocks = gram[channels[:, :, None], channels[:, None, :]] - np.einsum(
            "cik,cil->ikl", self.half[:, channels], self.half[:, channels], optimize=True
        )
        offset = self.remainder[channels]
        if self.seen:
            blocks += offset[:, :, None] * offset[:, None, :] / self.q
        silent = channels == model.n_channels
        blocks[silent[:, :, None] | silent[:, None, :]] = 0.0
        places = np.arange(width)
        blocks[:, places, places] = np.where(silent, 1.0, blocks[:, places, places])
        blocks[chosen] = np.eye(width)  # priced as -inf; keep it invertible
        white = np.linalg.inv(np.linalg.cholesky(blocks))
        if not self.seen:
            flat = np.einsum("ikl,il->ik", white, offset)
            size = (flat**2).sum(axis=1)
            flat /= np.sqrt(np.where(size > 0, size, 1.0))[:, None]
            white -= flat[:, :, None] * np.einsum("ik,ikl->il", flat, white)[:, None, :]
        return white


class PricedLocalisation:
    """Scores [m] (minus the rms or worst linearised error) of a chosen set (k,) and of its one-step changes.

    Building costs O(c³ + c n m p) for c chosen of n channels, m hypotheses and p unknowns; additions O(n m p²); swaps k
    times that and one factorisation for each candidate dropped.
    """

    def __init__(self, model: LocalisationModel, chosen: np.ndarray, worst: bool) -> None:
        self.model, self.chosen, self.worst = model, np.asarray(chosen, dtype=int), worst
        self._rows = model.channels_of(self.chosen)
        self._owner = model.candidate_of_channel[self._rows]
        self._given = _Given(model, self._rows)

    def _score(self, squared: np.ndarray) -> np.ndarray:
        mean = squared.max(axis=-1) if self.worst else squared @ self.model.share
        return -np.sqrt(np.maximum(mean, 0.0))

    @property
    def value(self) -> float:
        """Score of the chosen set [m]."""
        return float(self._score(self._given.squared))

    @cached_property
    def _residual(self) -> np.ndarray:
        """Derivatives of every channel less what the chosen ones predict of them (n_channels + 1, p, m)."""
        given, whole = self._given, self.model.padded_derivatives
        flat = given.half.T @ given.signals + np.outer(given.remainder, given.level)
        return np.ascontiguousarray((whole - flat.reshape(whole.shape)).transpose(0, 2, 1))

    @cached_property
    def _without(self) -> list[_Given]:
        return [_Given(self.model, self._rows[self._owner != one]) for one in self.chosen]

    def additions(self) -> np.ndarray:
        """Score after adding each candidate (n_candidates,) [m]; -inf for those already chosen."""
        _, m, p = self.model.derivatives.shape
        nothing = np.zeros((0, self.model.n_channels + 1)), np.zeros((0, m, p))
        return self._after(self._given, *nothing)

    def removals(self) -> np.ndarray:
        """Score after dropping each chosen candidate (k,) [m]."""
        return np.array([float(self._score(left.squared)) for left in self._without])

    def swaps(self) -> np.ndarray:
        """Score after dropping chosen[i] and adding candidate j (k, n_candidates) [m]; -inf for chosen j."""
        table = np.empty((len(self.chosen), self.model.n_candidates))
        for place, (dropped, left) in enumerate(zip(self.chosen, self._without, strict=True)):
            table[place] = self._after(left, *self._return(self._owner == dropped, left.seen))
        return table

    def _after(self, given: _Given, pull: np.ndarray, back: np.ndarray) -> np.ndarray:
        model = self.model
        scores = _scores_after(
            self._residual,
            model.channels,
            given.whiteners(self.chosen),
            np.ascontiguousarray(pull.T),
            np.ascontiguousarray(back.transpose(0, 2, 1)),
            np.ascontiguousarray(given.root.transpose(1, 2, 0)),
            np.ascontiguousarray(model.spread.T),
            given.squared,
            model.share,
            self.worst,
        )
        scores[self.chosen] = -np.inf
        return scores

    def _return(self, block: np.ndarray, still_seen: bool) -> tuple[np.ndarray, np.ndarray]:
        """pull (r, n+1), back (r, m, p): pullᵀ back is what dropping a block adds to the residual derivatives."""
        given = self._given
        columns = np.eye(len(block))[:, block]
        half = solve_triangular(given.factor, columns, lower=True)
        pull, right = half.T @ given.half, half.T @ given.signals
        inner = half.T @ half
        if given.seen and still_seen:
            flat = half.T @ given.flat
            pull = pull + np.outer(flat, given.remainder) / given.q
            right = right - np.outer(flat, given.level)
            inner = inner - np.outer(flat, flat) / given.q
        back = np.linalg.solve(inner, right)
        if given.seen and not still_seen:  # the offset is nobody's any more: what it had taken comes back too
            pull, back = np.vstack([pull, given.remainder]), np.vstack([back, given.level])
        return pull, back.reshape(len(back), *self.model.derivatives.shape[1:])


@numba.njit(cache=True)
def _scores_after(residual, channels, whitener, pull, back, root, spread, squared, share, worst):
    """Score of the set after each candidate's arrival (n_candidates,); arrays as named in this module.

    Hypotheses run last in every array and innermost in every loop, so that the loops vectorise: residual (n+1, p, m),
    back (r, p, m), root (p, p, m), spread (3, m); pull (n+1, r); share holds the weights of the mean.
    """
    n_candidates, width = channels.shape
    _, p, m = residual.shape
    white = np.empty(m)
    z = np.empty((width, p, m))
    y = np.empty((width, 3, m))
    plain = np.empty((width, p, m))
    cross = np.empty((width, width, m))
    left = np.empty(m)
    out = np.empty(n_candidates)
    for c in range(n_candidates):
        z[:] = 0.0
        y[:] = 0.0
        for b in range(width):
            i = channels[c, b]
            for a in range(p):
                for j in range(m):
                    plain[b, a, j] = residual[i, a, j]
                for r in range(len(back)):
                    reach = pull[i, r]
                    for j in range(m):
                        plain[b, a, j] += reach * back[r, a, j]
        for b in range(width):
            for a in range(p):
                white[:] = 0.0
                for d in range(width):
                    part = whitener[c, b, d]
                    for j in range(m):
                        white[j] += part * plain[d, a, j]
                for t in range(a, p):
                    for j in range(m):
                        z[b, t, j] += root[t, a, j] * white[j]
            for a in range(3):
                for t in range(a, p):
                    for j in range(m):
                        y[b, a, j] += root[t, a, j] * z[b, t, j]
                for j in range(m):
                    y[b, a, j] *= spread[a, j]
        for b in range(width):
            for d in range(b, width):
                cross[d, b] = 1.0 if b == d else 0.0
                for t in range(p):
                    for j in range(m):
                        cross[d, b, j] += z[b, t, j] * z[d, t, j]
        for j in range(m):
            left[j] = squared[j]
            for b in range(width):  # elimination of I + Z Zᵀ without pivots: it is positive definite
                left[j] -= (y[b, 0, j] ** 2 + y[b, 1, j] ** 2 + y[b, 2, j] ** 2) / cross[b, b, j]
                for d in range(b + 1, width):
                    part = cross[d, b, j] / cross[b, b, j]
                    for a in range(3):
                        y[d, a, j] -= part * y[b, a, j]
                    for f in range(b + 1, d + 1):
                        cross[d, f, j] -= part * cross[f, b, j]
        mean = left.max() if worst else (share * left).sum()
        out[c] = -np.sqrt(max(mean, 0.0))
    return out
