"""The information of turned sensors as a concave function of matrix weights, on a pool of axes and over all of them.

The weight of a candidate is a positive semidefinite block W_i over its components, F Fᵀ for a sensor in frame F; f(W) =
½ log2 det(I + Cᵀ W C) - ½ log2 det(I + Bᵀ W B) (+ the offset's part) is the log-determinant of a Schur complement and
f_k (rank_aware.py) a function of the parallel sum of W and (B Bᵀ)⁻¹, so both are concave in the matrix W (Pukelsheim
1993, ch. 3; Anderson & Duffin 1969, J Math Anal Appl 26:576, from memory) and

    f(V) <= f(W) + Σ_i <G_i(W), V_i - W_i>     for all V >= 0, whatever W >= 0.

A pool of atoms (candidate, frame, weight), W_i = Σ weight F Fᵀ, makes an ordinary relaxation of few candidates of it.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.linalg import cho_solve, cholesky, eigh, solve_triangular

from layout.engine.axis_freedom import TurnedChannels, Turning
from layout.engine.information import BITS
from layout.engine.rank_aware import PooledRankAware, RankAwareRelaxation, flat_column, split
from layout.engine.relaxation import PooledRelaxation


@dataclass(frozen=True)
class Atoms:
    """Weighted frames: owners (a,) candidates, sorted; frames (a, m, m); weights (a,) >= 0."""

    owners: np.ndarray
    frames: np.ndarray
    weights: np.ndarray

    def blocks(self, n_candidates: int) -> np.ndarray:
        """W (n_candidates, m, m)."""
        out = np.zeros((n_candidates, *self.frames.shape[1:]))
        np.add.at(out, self.owners, self.weights[:, None, None] * (self.frames @ np.swapaxes(self.frames, 1, 2)))
        return out

    def totals(self, n_candidates: int) -> np.ndarray:
        """Weight of each candidate (n_candidates,)."""
        return np.bincount(self.owners, weights=self.weights, minlength=n_candidates)

    def kept(self, which: np.ndarray) -> Atoms:
        """Some of the atoms."""
        return Atoms(self.owners[which], self.frames[which], self.weights[which])

    def weighing(self, weights: np.ndarray) -> Atoms:
        """The same atoms with other weights."""
        return Atoms(self.owners, self.frames, weights)

    def joined(self, owners: np.ndarray, frames: np.ndarray) -> Atoms:
        """With more atoms, of weight zero."""
        owners = np.concatenate([self.owners, owners])
        order = np.argsort(owners, kind="stable")
        frames = np.concatenate([self.frames, frames])
        return Atoms(
            owners[order], frames[order], np.append(self.weights, np.zeros(len(order) - len(self.weights)))[order]
        )


def merged(turning: Turning, atoms: Atoms) -> Atoms:
    """The same W in fewer atoms: one axis without a tilt limit needs no more than its block's eigenvectors."""
    held = np.bincount(atoms.owners, minlength=turning.n_candidates)
    crowded = np.flatnonzero((held > 3) & turning.free & (turning.count == 1) & ~turning.limited)
    if not len(crowded):
        return atoms
    size, vectors = np.linalg.eigh(atoms.blocks(turning.n_candidates)[crowded][:, :3, :3])
    rest = atoms.kept(~np.isin(atoms.owners, crowded))
    frames = np.zeros((3 * len(crowded), turning.width, turning.width))
    frames[:, :3, 0] = np.swapaxes(vectors, 1, 2).reshape(-1, 3)
    both = rest.joined(np.repeat(crowded, 3), frames)
    weights = np.zeros(len(both.owners))
    weights[np.isin(both.owners, crowded)] = np.maximum(size, 0.0).ravel()
    weights[~np.isin(both.owners, crowded)] = rest.weights
    return both.weighing(weights).kept(weights > 0)


class ByRank:
    """What the rank-aware relaxation needs: target rows (n, m, p) in few columns, and the most channels of a set.

    residual [bits]: what the columns left out could add to a limit.
    """

    def __init__(self, turning: Turning, sensors: int, channels: int) -> None:
        self.rows, self.residual = turning.compressed(sensors)
        self.channels = channels
        offset = turning.model.offset
        self.flat = flat_column(offset) if offset.any() else np.zeros(len(offset))

    @property
    def helps(self) -> bool:
        """Whether the rank-aware limit can be below the plain one."""
        return 0 < self.channels < self.rows.shape[2]

    @cached_property
    def padded_flat(self) -> np.ndarray:
        """The offset as a column of large variance (n_channels + 1,)."""
        return np.append(self.flat, 0.0)


class PooledAxes:
    """f, or f_k where `by_rank` is given, on a pool of atoms, and its gradient blocks over any candidates."""

    def __init__(self, turning: Turning, atoms: Atoms, by_rank: ByRank | None) -> None:
        self.turning, self.atoms, self.by_rank = turning, atoms, by_rank
        self._table = table = TurnedChannels(turning, atoms.owners, atoms.frames)
        self._owner = table.candidate_of_channel
        self._relaxation = PooledRelaxation(table, np.arange(len(atoms.owners)))
        if by_rank is not None:
            nuisance = table.nuisance_gram[:-1, :-1] - np.eye(table.n_channels)
            self._flat = table.of(turning.padded(by_rank.flat[:, None]))[:, 0]
            nuisance += np.outer(self._flat, self._flat)
            self._target = table.of(by_rank.rows)
            self._nuisance = nuisance
            whole = RankAwareRelaxation(self._target, nuisance, self._owner, by_rank.channels)
            self._relaxation = PooledRankAware(whole, self._relaxation)

    def value(self, weights: np.ndarray) -> float:
        """f at atom weights (a,) [bits]."""
        return self._relaxation.value(weights)

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """f, its gradient (a,) and a negative semidefinite metric (a, a)."""
        return self._relaxation.second_order(weights)

    def gradient(self, weights: np.ndarray, candidates: np.ndarray) -> tuple[float, np.ndarray]:
        """f and the gradient blocks (n, m, m) of `candidates` (n,), their components in the pool or not."""
        components = self.turning.model.channels[candidates]
        columns = np.append(components.ravel(), self.turning.model.n_channels)
        live = np.flatnonzero(weights[self._owner] > 0)
        root = np.sqrt(weights[self._owner][live])
        shape = (len(live), *components.shape)
        if self.by_rank is not None:
            return self._by_rank(live, root, candidates, columns, shape)
        grams = (self._table.both_gram, self._table.nuisance_gram)
        own_offset = self.turning.model.padded_offset[components]
        value, out = 0.0, np.zeros((*components.shape, components.shape[1]))
        for sign, gram, whole, own in zip((1, -1), self.turning.grams, grams, self.turning.blocks, strict=True):
            factor = _factor(whole[np.ix_(live, live)] - np.eye(len(live)), root)
            across = self._table.across(gram, columns)[live]
            half = solve_triangular(factor, root[:, None] * across, lower=True, check_finite=False)
            seen = half[:, :-1].reshape(shape)
            out += sign * (own[candidates] - np.einsum("cnk,cnl->nkl", seen, seen, optimize=True))
            value += sign * 2.0 * np.log(np.diag(factor)).sum()
            offset = root * self._table.offset[live]
            if offset.any():
                white = solve_triangular(factor, offset, lower=True, check_finite=False)
                left = own_offset - np.tensordot(white, seen, axes=1)
                q = white @ white
                out += sign * left[:, :, None] * left[:, None, :] / q
                value += sign * np.log(q)
        return float(BITS * value), BITS * out

    def _by_rank(
        self, live: np.ndarray, root: np.ndarray, candidates: np.ndarray, columns: np.ndarray, shape: tuple
    ) -> tuple[float, np.ndarray]:
        rule = self.by_rank
        factor = _factor(self._nuisance[np.ix_(live, live)], root)
        across = self._table.across(self.turning.grams[1], columns)[live]
        across += np.outer(self._flat[live], rule.padded_flat[columns])
        pull = solve_triangular(factor, root[:, None] * across, lower=True, check_finite=False)[:, :-1]
        seen = solve_triangular(factor, root[:, None] * self._target[live], lower=True, check_finite=False)
        left = rule.rows[candidates] - (pull.T @ seen).reshape(*shape[1:], -1)
        value, blocks = _ranked_blocks(seen.T @ seen, left, rule.channels)
        return BITS * value, BITS * blocks


def _factor(gram: np.ndarray, root: np.ndarray) -> np.ndarray:
    inner = root[:, None] * gram * root
    inner[np.diag_indices_from(inner)] += 1.0
    return cholesky(inner, lower=True, check_finite=False)


def _ranked_blocks(signal: np.ndarray, left: np.ndarray, channels: int) -> tuple[float, np.ndarray]:
    """2 ln 2 times f_k and its blocks from M (p, p) and what is left of each candidate's target rows (n, m, p)."""
    strength, directions = eigh(signal, check_finite=False)
    strength, directions = np.maximum(strength[::-1], 0.0), directions[:, ::-1]
    whole, rest = split(strength, channels)
    value = np.log1p(strength[:whole]).sum() + (channels - whole) * np.log1p(rest)
    blocks = left @ np.swapaxes(left, 1, 2) / (1.0 + rest)
    along = left @ directions[:, :whole]
    blocks += (along * (1.0 / (1.0 + strength[:whole]) - 1.0 / (1.0 + rest))) @ np.swapaxes(along, 1, 2)
    return float(value), blocks


def value_and_blocks(turning: Turning, weights: np.ndarray) -> tuple[float, np.ndarray]:
    """f [bits] and its gradient blocks (n, m, m) at W (n, m, m), in source space, from the model's rows.

    Used to recompute a certificate: it shares no Gram matrix, no pool and no factor with the search.
    """
    model = turning.model
    offset = model.padded_offset[model.channels]
    weighted_offset = np.einsum("nkl,nl->nk", weights, offset)
    seen = bool(weighted_offset.any())
    value, blocks = 0.0, np.zeros_like(weights)
    for sign, flat_rows in ((1, model.both), (-1, model.nuisance)):
        rows = turning.padded(flat_rows)
        size = rows.shape[2]
        weighted = (weights @ rows).reshape(-1, size)
        inner = rows.reshape(-1, size).T @ weighted
        factor = cholesky(np.eye(size) + 0.5 * (inner + inner.T), lower=True)
        value += sign * 2.0 * np.log(np.diag(factor)).sum()
        half = solve_triangular(factor, rows.reshape(-1, size).T, lower=True).T.reshape(rows.shape)
        blocks += sign * (half @ np.swapaxes(half, 1, 2))
        if seen:
            known = cho_solve((factor, True), rows.reshape(-1, size).T @ weighted_offset.ravel())
            left = offset - rows @ known
            q = (weighted_offset * left).sum()
            value += sign * np.log(q)
            blocks += sign * left[:, :, None] * left[:, None, :] / q
    return float(BITS * value), BITS * blocks


def rank_aware_value_and_blocks(turning: Turning, weights: np.ndarray, by_rank: ByRank) -> tuple[float, np.ndarray]:
    """The same for f_k: (W⁻¹ + B Bᵀ)⁻¹ = W - W B (I + Bᵀ W B)⁻¹ Bᵀ W."""
    nuisance = turning.padded(np.column_stack([turning.model.nuisance, by_rank.flat]))
    size, columns = nuisance.shape[2], by_rank.rows.shape[2]
    heavy_nuisance = (weights @ nuisance).reshape(-1, size)
    heavy_target = (weights @ by_rank.rows).reshape(-1, columns)
    inner = nuisance.reshape(-1, size).T @ heavy_nuisance
    factor = cholesky(np.eye(size) + 0.5 * (inner + inner.T), lower=True)
    across = heavy_nuisance.T @ by_rank.rows.reshape(-1, columns)
    known = cho_solve((factor, True), across)
    signal = by_rank.rows.reshape(-1, columns).T @ heavy_target - across.T @ known
    value, blocks = _ranked_blocks(0.5 * (signal + signal.T), by_rank.rows - nuisance @ known, by_rank.channels)
    return BITS * value, BITS * blocks
