"""The information as a concave function of weights in [0, 1], its gradient, and two independent ways to compute both.

f(w) = ½ log2 det(I + Cᵀ W C) - ½ log2 det(I + Bᵀ W B) + ½ log2(q_C / q_B), q_X(w) = oᵀ (W⁻¹ + X Xᵀ)⁻¹ o, W = diag of
the channels' weights (the channels of one candidate share its weight). It is the log-determinant of a Schur complement,
hence concave (Pukelsheim 1993, Optimal Design of Experiments, ch. 3), and equals the information at every 0/1 vector:

    f(v) <= f(w) + g(w) · (v - w)     for all v >= 0, whatever w

which is all that the bound rests on. With r_X = o - X (I + Xᵀ W X)⁻¹ Xᵀ W o the gradient is
1/(2 ln 2) times, per channel, cᵀ (I + Cᵀ W C)⁻¹ c - bᵀ (I + Bᵀ W B)⁻¹ b + r_C²/q_C - r_B²/q_B.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import cho_solve, cholesky, solve_triangular

from layout.engine.information import BITS
from layout.engine.model import ChannelTable, LinearModel


class PooledRelaxation:
    """Value, gradient and Hessian in sensor space, on a pool of candidates: O(p³) for p pooled channels.

    The channels of the pool's complement have weight zero.
    """

    def __init__(self, model: ChannelTable, pool: np.ndarray) -> None:
        self.model = model
        self.pool = pool
        self.rows = model.channels_of(pool)
        self._owner = np.searchsorted(pool, model.candidate_of_channel[self.rows])
        grams = (model.both_gram, model.nuisance_gram)
        self._grams = []
        for gram in grams:
            block = gram[np.ix_(self.rows, self.rows)]
            block[np.diag_indices_from(block)] -= 1.0
            self._grams.append(block)
        self._offset = model.offset[self.rows]

    def value(self, weights: np.ndarray) -> float:
        """f at pool weights (n_pool,) >= 0 [bits]."""
        live = weights[self._owner] > 0
        root = np.sqrt(weights[self._owner][live])
        offset = root * self._offset[live]
        total = 0.0
        for sign, gram in zip((1.0, -1.0), self._grams, strict=True):
            factor = cholesky(_scaled(gram[np.ix_(live, live)], root), lower=True, check_finite=False)
            total += sign * 2.0 * np.log(np.diag(factor)).sum()
            if offset.any():
                white = solve_triangular(factor, offset, lower=True, check_finite=False)
                total += sign * np.log(white @ white)
        return float(BITS * total)

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """f, its gradient (n_pool,) and its Hessian (n_pool, n_pool) at pool weights (n_pool,) >= 0.

        With G = X (I + Xᵀ W X)⁻¹ Xᵀ + r rᵀ/q per side the gradient is diag G and the Hessian -G∘G, C less B.
        """
        live = weights[self._owner] > 0
        root = np.sqrt(weights[self._owner][live])
        offset = root * self._offset[live]
        total = 0.0
        gradient = np.zeros(len(self.rows))
        hessian = np.zeros((len(self.rows), len(self.rows)))
        for sign, gram in zip((1.0, -1.0), self._grams, strict=True):
            factor = cholesky(_scaled(gram[np.ix_(live, live)], root), lower=True, check_finite=False)
            half = solve_triangular(factor, root[:, None] * gram[live], lower=True, check_finite=False)
            total += sign * 2.0 * np.log(np.diag(factor)).sum()
            left = gram - half.T @ half
            if offset.any():
                white = solve_triangular(factor, offset, lower=True, check_finite=False)
                remainder = self._offset - half.T @ white
                q = white @ white
                total += sign * np.log(q)
                left += np.outer(remainder, remainder) / q
            gradient += sign * np.diag(left)
            hessian -= sign * left * left
        gradient = np.bincount(self._owner, weights=gradient, minlength=len(self.pool))
        if len(self.rows) > len(self.pool):
            start = np.searchsorted(self._owner, np.arange(len(self.pool)))
            hessian = np.add.reduceat(np.add.reduceat(hessian, start, axis=0), start, axis=1)
        return float(BITS * total), BITS * gradient, BITS * hessian

    def gradient_everywhere(self, weights: np.ndarray) -> np.ndarray:
        """The gradient over all candidates of the model (n_candidates,), pooled or not."""
        model = self.model
        live = weights[self._owner] > 0
        rows = self.rows[live]
        root = np.sqrt(weights[self._owner][live])
        gradient = np.zeros(model.n_channels)
        for sign, full in ((1.0, model.both_gram), (-1.0, model.nuisance_gram)):
            cross = full[rows, :-1]
            cross[np.arange(len(rows)), rows] -= 1.0
            factor = cholesky(_scaled(cross[:, rows], root), lower=True, check_finite=False)
            half = solve_triangular(factor, root[:, None] * cross, lower=True, check_finite=False)
            gradient += sign * (np.diag(full)[:-1] - 1.0 - np.einsum("ij,ij->j", half, half))
            white = solve_triangular(factor, root * model.offset[rows], lower=True, check_finite=False)
            q = white @ white
            if q > 0:
                gradient += sign * (model.offset - half.T @ white) ** 2 / q
        return BITS * np.bincount(model.candidate_of_channel, weights=gradient, minlength=model.n_candidates)


def _scaled(gram: np.ndarray, root: np.ndarray) -> np.ndarray:
    matrix = root[:, None] * gram * root[None, :]
    matrix[np.diag_indices_from(matrix)] += 1.0
    return matrix


def value_and_gradient(model: LinearModel, weights: np.ndarray) -> tuple[float, np.ndarray]:
    """f [bits] and its gradient (n_candidates,), in source space, from the model's rows: no Gram matrix, no pool.

    Used to re-evaluate a bound before it is printed: it shares no intermediate result with the solver. Where no channel
    that sees the offset has weight, the gradient without the offset stands: it is that of every finite prior variance
    of the offset, so the tangent bounds their limit too.
    """
    per_channel = np.asarray(weights, dtype=float)[model.candidate_of_channel]
    total = 0.0
    gradient = np.zeros(model.n_channels)
    seen = bool((per_channel * model.offset != 0).any())
    for sign, rows in ((1.0, model.both), (-1.0, model.nuisance)):
        live = per_channel > 0
        weighted = rows[live] * per_channel[live, None]
        factor = cholesky(np.eye(rows.shape[1]) + rows[live].T @ weighted, lower=True)
        total += sign * 2.0 * np.log(np.diag(factor)).sum()
        gradient += sign * (solve_triangular(factor, rows.T, lower=True) ** 2).sum(axis=0)
        if seen:
            offset = model.offset[live]
            inner = cho_solve((factor, True), weighted.T @ offset)
            remainder = model.offset - rows @ inner
            q = (per_channel[live] * offset) @ remainder[live]
            total += sign * np.log(q)
            gradient += sign * remainder**2 / q
    return BITS * total, BITS * np.bincount(model.candidate_of_channel, weights=gradient, minlength=model.n_candidates)
