"""The linearised localisation errors as convex functions of weights, in sensor space and in source space.

K(w) = (W⁻¹ + R)⁻¹, R = B Bᵀ, projected on the contrasts free of a flat offset where a channel that sees it has weight.
With h_i the derivatives of channel i less what the weighted channels predict of them, y_i = diag(spread) M⁻¹ h_i (the
position rows) and G the nuisance covariance (offset included) given the weighted channels,

    ∂M/∂w_i = h_i h_iᵀ,   ∂e²/∂w_i = -|y_i|²,   ∂²e²/∂w_i∂w_k = 2 (y_i·y_k) (h_iᵀ M⁻¹ h_k + G_ik),

the last positive semidefinite as a Hadamard product of two such matrices (Schur). Where no channel that sees the offset
has weight, the gradient with h_i - o_i α in place of h_i is valid for any α (p,): the flat offset absorbs o α t, so
derivatives J - o α describe the same problem, and for them the gradient of every finite prior variance of the offset
bounds the limit. α is the fit of the h_i by o: what the electrodes have in common.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.linalg import cholesky, solve_triangular

if TYPE_CHECKING:
    from layout.engine.localisation import LocalisationModel

LEAST_LEFT = 1e-6  # of a channel's weight: below it, an update for its loss would be rounding
LEAST_SHARE = 1e-9  # hypotheses with less of the curvature than this part of the largest are left out of it


class PooledLocalisation:
    """Minus the mean of order `order` of the errors, (Σ share_j e_j^order)^(1/order) [m], on a pool of candidates.

    Order 2 is the rms; a large order with equal shares is just below the maximum. O(p³) for p pooled channels and
    O(p² m) for the curvature over m hypotheses. The channels of the pool's complement have weight zero.
    """

    def __init__(self, model: LocalisationModel, pool: np.ndarray, share: np.ndarray, order: float) -> None:
        self.model, self.pool, self.share, self.order = model, pool, share, order
        self.rows = model.channels_of(pool)
        self._owner = np.searchsorted(pool, model.candidate_of_channel[self.rows])
        self._gram = model.nuisance_gram[np.ix_(self.rows, self.rows)]
        self._gram[np.diag_indices_from(self._gram)] -= 1.0
        self._offset = model.offset[self.rows]
        _, self._m, self._p = model.derivatives.shape
        self._signals = model.derivatives[self.rows].reshape(len(self.rows), self._m * self._p)

    def value(self, weights: np.ndarray) -> float:
        """Score at pool weights (n_pool,) >= 0 [m]."""
        errors, _ = self._errors(self._solve(weights)[3])
        return -self._mean(errors)[0]

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """Score, its gradient (n_pool,) and its Hessian (n_pool, n_pool) at pool weights (n_pool,) >= 0 [m]."""
        live, root, factor, signals, flat, level = self._solve(weights)
        errors, inverse_root = self._errors(signals)
        mean, mix = self._mean(errors)
        half = solve_triangular(factor, root[:, None] * self._gram[live], lower=True, check_finite=False)
        left = self._gram - half.T @ half
        plain = self._signals - half.T @ (signals + np.outer(flat, level))
        q = flat @ flat
        if q > 0:
            remainder = self._offset - half.T @ flat
            left += np.outer(remainder, remainder) / q
            plain -= np.outer(remainder, level)
        else:
            plain -= _common(plain, self._offset)
        z, y = self._responses(plain, inverse_root)
        slopes = 0.5 * (y**2).sum(axis=2) / errors  # (L, m): minus the gradient of each error
        per_error = mix / errors
        kept = np.flatnonzero(per_error > LEAST_SHARE * per_error.max())
        y = y[:, kept] * np.sqrt(per_error[kept])[:, None]
        flat_y = y.reshape(len(y), 3 * len(kept))
        outer = (y[:, :, :, None] * z[:, kept][:, :, None, :]).reshape(len(y), 3 * self._p * len(kept))
        gradient = slopes @ mix
        bend = outer @ outer.T + (flat_y @ flat_y.T) * left
        bend -= (self.order - 1.0) / mean * np.outer(gradient, gradient)
        if self.order != 2.0:
            tilted = slopes[:, kept] * np.sqrt((self.order - 2.0) * per_error[kept])
            bend += tilted @ tilted.T
        gradient = np.bincount(self._owner, weights=gradient, minlength=len(self.pool))
        if len(self.rows) > len(self.pool):
            start = np.searchsorted(self._owner, np.arange(len(self.pool)))
            bend = np.add.reduceat(np.add.reduceat(bend, start, axis=0), start, axis=1)
        return -mean, gradient, -bend

    def gradient_everywhere(self, weights: np.ndarray) -> np.ndarray:
        """The gradient over all candidates of the model (n_candidates,), pooled or not [m]."""
        model = self.model
        live, root, factor, signals, flat, level = self._solve(weights)
        errors, inverse_root = self._errors(signals)
        _, mix = self._mean(errors)
        rows = self.rows[live]
        cross = model.nuisance_gram[rows, :-1]
        cross[np.arange(len(rows)), rows] -= 1.0
        half = solve_triangular(factor, root[:, None] * cross, lower=True, check_finite=False)
        # Contract to the three position rows first: a third of the work and of the memory.
        turn = inverse_root.transpose(0, 2, 1) @ inverse_root[:, :, :3] * self.model.spread[:, None, :]
        own = _contracted(model.derivatives, turn)
        held = _contracted((signals + np.outer(flat, level)).reshape(len(rows), self._m, self._p), turn)
        y = own - half.T @ held
        if flat.any():
            remainder = model.offset - half.T @ flat
            y -= np.outer(remainder, _contracted(level.reshape(1, self._m, self._p), turn))
        else:
            y -= _common(y, model.offset)
        weight = np.repeat(0.5 * mix / errors, 3)
        return np.bincount(model.candidate_of_channel, weights=y**2 @ weight, minlength=model.n_candidates)

    def losses(self, weights: np.ndarray) -> np.ndarray:
        """Score with each of the pool's candidates silent (n_pool,) [m], by updates of the rank of its channels.

        Losing channels b of weight w raises e² by tr[((I/w - G_bb) - Z Zᵀ)⁻¹ Y Yᵀ], Z and Y their rows z and y; a loss
        that leaves nearly no information, or nobody who sees the offset, is evaluated afresh.
        """
        live, root, factor, signals, flat, level = self._solve(weights)
        errors, inverse_root = self._errors(signals)
        values = np.full(len(self.pool), -self._mean(errors)[0])
        half = solve_triangular(factor, root[:, None] * self._gram[np.ix_(live, live)], lower=True)
        left = self._gram[np.ix_(live, live)] - half.T @ half
        plain = self._signals[live] - half.T @ (signals + np.outer(flat, level))
        if flat.any():
            remainder = self._offset[live] - half.T @ flat
            left += np.outer(remainder, remainder) / (flat @ flat)
            plain -= np.outer(remainder, level)
        z, y = self._responses(plain, inverse_root)
        seers = np.unique(self._owner[live[self._offset[live] != 0]])
        for lost in np.unique(self._owner[live]):
            block = np.flatnonzero(self._owner[live] == lost)
            own = np.eye(len(block)) / weights[lost] - left[np.ix_(block, block)]
            inner = own - np.einsum("bjp,djp->jbd", z[block], z[block])
            last = len(seers) == 1 and lost == seers[0]
            if last or np.linalg.eigvalsh(inner).min() * weights[lost] < LEAST_LEFT:
                without = weights.copy()
                without[lost] = 0.0
                values[lost] = self.value(without)
                continue
            reach = y[block].transpose(1, 0, 2)
            squared = errors**2 + (np.linalg.solve(inner, reach) * reach).sum(axis=(1, 2))
            values[lost] = -self._mean(np.sqrt(squared))[0]
        return values

    def _solve(self, weights: np.ndarray):
        """live channels, roots of their weights, factor of I + √W R √W, and by it whitened: signals free of the offset,
        the offset, and the offset's level (m p,) in each signal."""
        live = np.flatnonzero(weights[self._owner] > 0)
        root = np.sqrt(weights[self._owner][live])
        matrix = root[:, None] * self._gram[np.ix_(live, live)] * root
        matrix[np.diag_indices_from(matrix)] += 1.0
        if not len(live):
            nothing = np.zeros((0, self._signals.shape[1]))
            return live, root, matrix, nothing, np.zeros(0), np.zeros(nothing.shape[1])
        factor = cholesky(matrix, lower=True, check_finite=False)
        stack = root[:, None] * np.hstack([self._signals[live], self._offset[live][:, None]])
        white = solve_triangular(factor, stack, lower=True, check_finite=False)
        signals, flat = white[:, :-1], white[:, -1]
        level = np.zeros(signals.shape[1])
        if flat.any():
            level = flat @ signals / (flat @ flat)
            signals = signals - np.outer(flat, level)
        return live, root, factor, signals, flat, level

    def _errors(self, signals: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        white = signals.reshape(len(signals), self._m, self._p)
        matrices = np.eye(self._p) + np.matmul(white.transpose(1, 2, 0), white.transpose(1, 0, 2))
        root = np.linalg.inv(np.linalg.cholesky(matrices))
        return np.sqrt(((root[:, :, :3] * self.model.spread[:, None, :]) ** 2).sum(axis=(1, 2))), root

    def _mean(self, errors: np.ndarray) -> tuple[float, np.ndarray]:
        """The mean of order `order` and its derivatives with respect to the errors (m,)."""
        top = errors.max()
        ratio = errors / top
        mean = (self.share @ ratio**self.order) ** (1.0 / self.order)
        return float(top * mean), self.share * (ratio / mean) ** (self.order - 1.0)

    def _responses(self, plain: np.ndarray, inverse_root: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """z (L, m, p) = L⁻¹ h and y (L, m, 3) = diag(spread) M⁻¹ h for channels with derivatives h."""
        h = plain.reshape(len(plain), self._m, self._p).transpose(1, 0, 2)
        z = h @ inverse_root.transpose(0, 2, 1)
        y = z @ (inverse_root[:, :, :3] * self.model.spread[:, None, :])
        return z.transpose(1, 0, 2), y.transpose(1, 0, 2)


def _common(rows: np.ndarray, offset: np.ndarray) -> np.ndarray:
    """The part of rows (n, q) that is fitted by the offset (n,); 0 where nobody sees it."""
    size = offset @ offset
    return np.outer(offset, offset @ rows / size) if size > 0 else np.zeros_like(rows)


def _contracted(derivatives: np.ndarray, turn: np.ndarray) -> np.ndarray:
    """(n, m, p) by (m, p, 3) to (n, 3 m)."""
    return np.matmul(derivatives.transpose(1, 0, 2), turn).transpose(1, 0, 2).reshape(len(derivatives), 3 * len(turn))


def errors_and_slopes(model: LocalisationModel, weights: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """e_j (m,) [m] and -∂e_j/∂w per channel (m, n_channels), in source space: no Gram matrix, no pool.

    Used to re-evaluate a limit before it is printed: it shares no intermediate result with the solver. M_j comes from
    the fit that its inverse covariance belongs to, as a sum of squares: residuals by weight, plus the fitted nuisance.
    """
    per_channel = np.asarray(weights, dtype=float)[model.candidate_of_channel]
    n, m, p = model.derivatives.shape
    signals = model.derivatives.reshape(n, m * p)
    live = per_channel > 0
    weighted = model.nuisance[live] * per_channel[live, None]
    factor = cholesky(np.eye(model.nuisance.shape[1]) + model.nuisance[live].T @ weighted, lower=True)
    fitted = solve_triangular(factor, weighted.T @ signals[live], lower=True)
    fitted = solve_triangular(factor, fitted, lower=True, trans=1)
    left = signals - model.nuisance @ fitted
    pull = per_channel[live] * model.offset[live]
    if pull.any():
        inner = solve_triangular(factor, weighted.T @ model.offset[live], lower=True)
        inner = solve_triangular(factor, inner, lower=True, trans=1)
        remainder = model.offset - model.nuisance @ inner
        level = pull @ left[live] / (pull @ remainder[live])
        left = left - np.outer(remainder, level)
        fitted = fitted - np.outer(inner, level)
    else:
        left = left - _common(left, model.offset)
    squares = np.vstack([np.sqrt(per_channel[live])[:, None] * left[live], fitted])
    squares = squares.reshape(len(squares), m, p)
    inverse = np.linalg.inv(np.eye(p) + np.matmul(squares.transpose(1, 2, 0), squares.transpose(1, 0, 2)))
    errors = np.sqrt((model.spread**2 * np.diagonal(inverse, axis1=1, axis2=2)[:, :3]).sum(axis=1))
    responses = np.matmul(left.reshape(n, m, p).transpose(1, 0, 2), inverse[:, :, :3] * model.spread[:, None, :])
    return errors, 0.5 * (responses**2).sum(axis=2) / errors[:, None]
