"""A tighter concave limit for few channels: k channels see at most k directions of what is wanted.

The signal-to-noise matrix M(w) = Aᵀ (W⁻¹ + R)⁻¹ A, R = B Bᵀ, is matrix-concave in w and has at most k nonzero
eigenvalues at every set of k channels, but a fractional layout may spread over more. With eigenvalues λ1 >= λ2 >= ...

    f_k(w) = ½ [ Σ_{l<=ι} log2(1+λ_l) + (k-ι) log2(1+λ̄) ],  λ̄ = Σ_{l>ι} λ_l / (k-ι),  λ_ι > λ̄ >= λ_{ι+1}

is concave, equals the information at every k channels, and never exceeds the plain relaxation (the same construction
serves maximal subdeterminants in Nikolov 2015, Proc STOC, 601; from memory).
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import cho_factor, cho_solve, cholesky, eigh, solve_triangular

from layout.engine.information import BITS
from layout.engine.model import LinearModel
from layout.engine.relaxation import PooledRelaxation

FLAT = 1e8  # variance of the offset in units of a channel's own noise; adds about 1e-6 bits to a limit
RESIDUAL_BITS = 1e-5  # what compressing the target may add to the limit


def compressed(target: np.ndarray, channels: int, spare: float = RESIDUAL_BITS) -> tuple[np.ndarray, float]:
    """Target rows (n, p) in the fewest columns, and the bits, at most `spare`, that the rest could add to `channels`.

    Independent noise is at least 1 per channel, so what is left out adds at most the sum of the largest squared
    residual row norms, over 2 ln 2.
    """
    left, size, _ = np.linalg.svd(target, full_matrices=False)
    rows = left * size
    beyond = np.cumsum(rows[:, ::-1] ** 2, axis=1)[:, ::-1]  # squared norm of columns l and later
    most = np.sort(beyond, axis=0)[::-1][:channels].sum(axis=0) * BITS
    keep = int(np.searchsorted(-most, -spare))
    return rows[:, :keep], float(most[keep]) if keep < len(most) else 0.0


class RankAwareRelaxation:
    """f_k and its gradient from target rows (n, p), nuisance Gram B Bᵀ (n, n) and the channels' owners (n,).

    channels: the most channels that any allowed set brings.
    """

    def __init__(self, target: np.ndarray, nuisance: np.ndarray, owner: np.ndarray, channels: int) -> None:
        self._target, self._nuisance, self._owner, self._channels = target, nuisance, owner, channels

    def value_and_gradient(self, weights: np.ndarray, rows: np.ndarray | None = None) -> tuple[float, np.ndarray]:
        """f_k [bits] and its gradient (n_candidates,) at weights (n_candidates,) >= 0, not all 0.

        rows: channels to price (default all); candidates without a row among them get 0.
        """
        per_channel = weights[self._owner]
        live = np.flatnonzero(per_channel > 0)
        rows = np.arange(len(self._owner)) if rows is None else rows
        root = np.sqrt(per_channel[live])
        inner = root[:, None] * self._nuisance[np.ix_(live, live)] * root
        inner[np.diag_indices_from(inner)] += 1.0
        factor = cholesky(inner, lower=True, check_finite=False)
        seen = solve_triangular(factor, root[:, None] * self._target[live], lower=True, check_finite=False)
        pull = solve_triangular(
            factor, root[:, None] * self._nuisance[np.ix_(live, rows)], lower=True, check_finite=False
        )
        strength, directions = eigh(seen.T @ seen, check_finite=False)
        strength, directions = np.maximum(strength[::-1], 0.0), directions[:, ::-1]
        left = self._target[rows] - pull.T @ seen
        value, price = _value_and_prices(strength, directions, left, self._channels)
        gradient = np.bincount(self._owner[rows], weights=price, minlength=len(weights))
        return BITS * value, BITS * gradient


def rank_aware_in_source_space(
    model: LinearModel, weights: np.ndarray, target: np.ndarray, channels: int
) -> tuple[float, np.ndarray]:
    """f_k [bits] and its gradient (n_candidates,) from the model's rows: nothing is shared with the solver.

    target (n_channels, p): the compressed rows. (W⁻¹ + B Bᵀ)⁻¹ = W - W B (I + Bᵀ W B)⁻¹ Bᵀ W.
    """
    per_channel = weights[model.candidate_of_channel]
    nuisance = model.nuisance
    if model.offset.any():
        nuisance = np.column_stack([nuisance, flat_column(model.offset)])
    heavy_target, heavy_nuisance = per_channel[:, None] * target, per_channel[:, None] * nuisance
    factor = cho_factor(np.eye(nuisance.shape[1]) + nuisance.T @ heavy_nuisance, lower=True)
    known = cho_solve(factor, heavy_nuisance.T @ target)
    signal = target.T @ heavy_target - (heavy_target.T @ nuisance) @ known
    strength, directions = eigh(signal)
    strength, directions = np.maximum(strength[::-1], 0.0), directions[:, ::-1]
    value, price = _value_and_prices(strength, directions, target - nuisance @ known, channels)
    gradient = np.bincount(model.candidate_of_channel, weights=price, minlength=model.n_candidates)
    return BITS * value, BITS * gradient


def flat_column(offset: np.ndarray) -> np.ndarray:
    """The offset (n_channels,) as a nuisance column of large but finite variance, for a valid limit.

    The information with the finite variance is never below that with the flat prior, as the offset is better known.
    """
    return offset * np.sqrt(FLAT / np.mean(offset[offset != 0] ** 2))


def _value_and_prices(
    strength: np.ndarray, directions: np.ndarray, left: np.ndarray, channels: int
) -> tuple[float, np.ndarray]:
    whole, rest = split(strength, channels)
    value = np.log1p(strength[:whole]).sum() + (channels - whole) * np.log1p(rest)
    price = (left**2).sum(axis=1) / (1.0 + rest)
    price += (left @ directions[:, :whole]) ** 2 @ (1.0 / (1.0 + strength[:whole]) - 1.0 / (1.0 + rest))
    return float(value), price


class PooledRankAware:
    """f_k on a pool of candidates, in the form that the ascents take; they walk by the plain relaxation's Hessian."""

    def __init__(self, whole: RankAwareRelaxation, plain: PooledRelaxation) -> None:
        self._whole, self._plain, self._pool = whole, plain, plain.pool

    def _spread(self, weights: np.ndarray) -> np.ndarray:
        everywhere = np.zeros(self._plain.model.n_candidates)
        everywhere[self._pool] = weights
        return everywhere

    def value(self, weights: np.ndarray) -> float:
        """f_k at pool weights (n_pool,) [bits]."""
        return self._whole.value_and_gradient(self._spread(weights), np.zeros(0, dtype=int))[0]

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """f_k, its gradient over the pool, and the plain Hessian, which serves as a metric only."""
        value, gradient = self._whole.value_and_gradient(self._spread(weights), self._plain.rows)
        return value, gradient[self._pool], self._plain.second_order(weights)[2]

    def gradient_everywhere(self, weights: np.ndarray) -> np.ndarray:
        """The gradient of f_k over all candidates."""
        return self._whole.value_and_gradient(self._spread(weights))[1]


def split(strength: np.ndarray, channels: int) -> tuple[int, float]:
    """(ι, λ̄) for eigenvalues in falling order: the first ι stand for themselves, the rest share channels - ι places."""
    tails = np.append(np.cumsum(strength[::-1])[::-1], 0.0)
    for whole in range(min(channels, len(strength) + 1)):
        mean = tails[whole] / (channels - whole)
        if whole == len(strength) or strength[whole] <= mean:
            return whole, float(mean)
    return channels, 0.0
