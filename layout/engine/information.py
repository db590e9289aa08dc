"""Information of a set of candidates, in bits per sample, and how it changes when one is added, dropped or swapped.

I(S) = ½ log2 det(I + C_S C_Sᵀ) - ½ log2 det(I + B_S B_Sᵀ), C = [A B] (Kemppainen & Ilmoniemi 1989, Advances in
Biomagnetism; as a function of weights it is Ds-optimality with a prior, Pukelsheim, Optimal Design of Experiments,
1993). A flat-prior offset o adds ½ log2(q_C / q_B), q_X = o_Sᵀ (I + X_S X_Sᵀ)⁻¹ o_S: the limit of a growing prior
variance less the constant that both determinants share; a single channel that sees the offset carries exactly
nothing.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_factor, cho_solve, cholesky, solve_triangular

from layout.engine.model import ChannelTable, LinearModel

BITS = 0.5 / np.log(2.0)  # from natural log-determinants to bits


def information(model: LinearModel, chosen: np.ndarray) -> float:
    """Information of the chosen candidates [bits], computed from the model's rows."""
    rows = model.channels_of(chosen)
    if len(rows) == 0:
        return 0.0
    offset = model.offset[rows]
    log_c, q_c = _log_det_and_offset(model.both[rows], offset)
    log_b, q_b = _log_det_and_offset(model.nuisance[rows], offset)
    total = log_c - log_b
    if (offset != 0).any():
        total += np.log(q_c / q_b)
    return float(BITS * total)


def _log_det_and_offset(rows: np.ndarray, offset: np.ndarray) -> tuple[float, float]:
    factor = cholesky(np.eye(len(rows)) + rows @ rows.T, lower=True)
    white = np.linalg.solve(factor, offset)
    return 2.0 * np.log(np.diag(factor)).sum(), float(white @ white)


@dataclass(frozen=True)
class _Side:
    """One of the two covariances, conditioned on the chosen channels.

    inverse (c, c) of the chosen block; pull (c, n+1) = inverse @ rows; log_det; u = inverse @ offset; q; remainder
    (n+1,): the part of the offset that the chosen channels do not explain; blocks (n_candidates, m, m): conditional
    covariances.
    """

    inverse: np.ndarray
    pull: np.ndarray
    log_det: float
    u: np.ndarray
    q: float
    remainder: np.ndarray
    blocks: np.ndarray


def _condition(
    gram: np.ndarray, offset: np.ndarray, rows: np.ndarray, channels: np.ndarray, chosen: np.ndarray
) -> _Side:
    cross = gram[rows]
    if not len(rows):
        return _Side(np.zeros((0, 0)), cross, 0.0, np.zeros(0), 0.0, offset, _own_blocks(gram, channels))
    factor = cho_factor(gram[np.ix_(rows, rows)], lower=True)
    inverse = cho_solve(factor, np.eye(len(rows)))
    # By triangular solves: with the explicit inverse, conditional variances under very strong nuisance turn negative.
    half = solve_triangular(factor[0], cross, lower=True)
    pull = solve_triangular(factor[0], half, lower=True, trans=1)
    u = inverse @ offset[rows]
    if channels.shape[1] == 1:
        blocks = (np.diag(gram) - np.einsum("ij,ij->j", half, half))[channels[:, 0], None, None]
    else:
        blocks = _own_blocks(gram, channels) - np.einsum(
            "cik,cil->ikl", half[:, channels], half[:, channels], optimize=True
        )
    blocks[chosen] = np.eye(channels.shape[1])  # nothing is left of a chosen candidate; keep its block invertible
    log_det = 2.0 * np.log(np.diag(factor[0])).sum()
    return _Side(inverse, pull, log_det, u, float(offset[rows] @ u), offset - cross.T @ u, blocks)


def _own_blocks(gram: np.ndarray, channels: np.ndarray) -> np.ndarray:
    """Covariance of each candidate's own channels (n_candidates, m, m); padding is independent of everything."""
    blocks = gram[channels[:, :, None], channels[:, None, :]]
    silent = channels == len(gram) - 1
    blocks[silent[:, :, None] & silent[:, None, :]] = 0.0
    places = np.arange(channels.shape[1])
    blocks[:, places, places] = np.where(silent, 1.0, blocks[:, places, places])
    return blocks


def _log_det(blocks: np.ndarray) -> np.ndarray:
    if blocks.shape[-1] == 1:
        return np.log(blocks[..., 0, 0])
    return np.linalg.slogdet(blocks)[1]


def _quadratic(blocks: np.ndarray, vectors: np.ndarray) -> np.ndarray:
    if blocks.shape[-1] == 1:
        return vectors[..., 0] ** 2 / blocks[..., 0, 0]
    return (vectors * np.linalg.solve(blocks, vectors[..., None])[..., 0]).sum(axis=-1)


class Conditioned:
    """A chosen set with both covariances conditioned on it: prices additions, losses and swaps from one factorisation.

    `chosen` (k,) are candidate numbers. Building costs O(c³ + c² n) for c chosen of n channels; each table below costs
    O(k n) small-block operations and no further factorisation of the chosen block.
    """

    def __init__(self, model: ChannelTable, chosen: np.ndarray) -> None:
        self.model = model
        self.chosen = np.asarray(chosen, dtype=int)
        rows = model.channels_of(self.chosen)
        self._start = np.searchsorted(np.cumsum(self._widths()), np.arange(len(rows)), side="right")
        offset = model.padded_offset
        self._sides = tuple(
            _condition(gram, offset, rows, model.channels, self.chosen)
            for gram in (model.both_gram, model.nuisance_gram)
        )
        self._offsets = int(model.has_offset[self.chosen].sum())

    def _widths(self) -> np.ndarray:
        return (self.model.channels[self.chosen] < self.model.n_channels).sum(axis=1)

    @property
    def value(self) -> float:
        """Information of the chosen set [bits]."""
        both, nuisance = self._sides
        total = both.log_det - nuisance.log_det
        if self._offsets:
            total += np.log(both.q / nuisance.q)
        return float(BITS * total)

    def additions(self) -> np.ndarray:
        """Information after adding each candidate (n_candidates,) [bits]; -inf for those already chosen."""
        channels = self.model.channels
        log_dets, qs = [], []
        for side in self._sides:
            log_dets.append(side.log_det + _log_det(side.blocks))
            qs.append((side.q if self._offsets else 0.0) + _quadratic(side.blocks, side.remainder[channels]))
        gains = self._combine(log_dets, qs, self._offsets + self.model.has_offset > 0)
        gains[self.chosen] = -np.inf
        return gains

    def removals(self) -> np.ndarray:
        """Information after dropping each chosen candidate (k,) [bits]."""
        log_dets, qs = [], []
        for side in self._sides:
            parts = [self._without(side, place) for place in range(len(self.chosen))]
            log_dets.append(np.array([part[0] for part in parts]))
            qs.append(np.array([part[1] for part in parts]))
        return self._combine(log_dets, qs, self._offsets - self.model.has_offset[self.chosen] > 0)

    def swaps(self) -> np.ndarray:
        """Information after dropping chosen[i] and adding candidate j (k, n_candidates) [bits]; -inf for chosen j."""
        channels = self.model.channels
        table = np.empty((len(self.chosen), self.model.n_candidates))
        for place, dropped in enumerate(self.chosen):
            left = self._offsets - int(self.model.has_offset[dropped])
            log_dets, qs = [], []
            for side in self._sides:
                log_det, q, inner, pull, shift = self._without(side, place)
                back = pull[:, channels]  # (b, n_candidates, m)
                half = np.linalg.solve(inner, pull)[:, channels] if len(inner) > 1 else back / inner[0, 0]
                blocks = side.blocks + np.einsum("bik,bil->ikl", back, half)
                remainder = (side.remainder + shift)[channels]
                log_dets.append(log_det + _log_det(blocks))
                qs.append((q if left else 0.0) + _quadratic(blocks, remainder))
            table[place] = self._combine(log_dets, qs, left + self.model.has_offset > 0)
        table[:, self.chosen] = -np.inf
        return table

    def _without(self, side: _Side, place: int):
        """log-det and q without one chosen candidate, and what its return would change elsewhere."""
        block = np.flatnonzero(self._start == place)
        inner = side.inverse[np.ix_(block, block)]
        pull = side.pull[block]
        lost = np.linalg.solve(inner, side.u[block])
        log_det = side.log_det + np.linalg.slogdet(inner)[1]
        return log_det, side.q - side.u[block] @ lost, inner, pull, lost @ pull

    @staticmethod
    def _combine(log_dets: list[np.ndarray], qs: list[np.ndarray], seen: np.ndarray) -> np.ndarray:
        total = log_dets[0] - log_dets[1]
        ratio = np.divide(qs[0], qs[1], out=np.ones(np.broadcast(qs[0], qs[1]).shape), where=seen & (qs[1] > 0))
        return BITS * (total + np.log(ratio))


def pair_information(model: LinearModel, candidates: np.ndarray) -> np.ndarray:
    """Information of every pair of single-channel candidates that see the offset (n, n) [bits]; 0 on the diagonal.

    det K · q of a pair is oᵀ adj(K) o, so no factorisation is needed: the start of a greedy search in which the first
    electrode alone carries nothing.
    """
    rows = model.channels[candidates, 0]
    o = model.padded_offset[rows]
    logs = []
    for gram in (model.both_gram, model.nuisance_gram):
        k = gram[np.ix_(rows, rows)]
        square = o[:, None] ** 2 * np.diag(k)[None, :]
        contrast = square + square.T - 2.0 * np.outer(o, o) * k
        np.fill_diagonal(contrast, 1.0)
        logs.append(np.log(contrast))
    return BITS * (logs[0] - logs[1])
