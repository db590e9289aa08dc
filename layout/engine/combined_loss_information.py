"""The information when any one candidate may fall silent, relaxed: all losses from one factorisation.

With G_X(w) = X (I + Xᵀ W X)⁻¹ Xᵀ (+ r rᵀ/q for a flat offset, see relaxation.py) of each side, C less B, losing
channels b of weight w changes the information by ½ log2 det(I - w G_bb) and G to G + G_:b (I/w - G_bb)⁻¹ G_b:.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import cholesky, solve_triangular

from layout.engine.combined import LEAST_MIX, soft_curvature, soft_minimum
from layout.engine.information import BITS
from layout.engine.model import LinearModel
from layout.engine.relaxation import PooledRelaxation

LEAST_LEFT = 1e-7  # det(I - w G_bb) below which an update would be rounding: the loss is evaluated afresh


class RelaxedInformationLoss:
    """The soft minimum of the information's relaxation [bits] with each of its pool's candidates silent.

    O(p³) for p pooled channels, however many losses count.
    """

    def __init__(self, model: LinearModel, pool: np.ndarray, steepness: float) -> None:
        self.model, self.pool, self._steepness = model, pool, steepness
        self._plain = PooledRelaxation(model, pool)
        self.rows = model.channels_of(pool)
        self._owner = np.searchsorted(pool, model.candidate_of_channel[self.rows])

    def _left(self, weights: np.ndarray, near: np.ndarray, far: np.ndarray) -> list[np.ndarray]:
        """G between channels `near` and `far` of the model, of both sides."""
        live = weights[self._owner] > 0
        rows, root = self.rows[live], np.sqrt(weights[self._owner][live])
        offset, sides = self.model.offset, []
        for gram in (self.model.both_gram, self.model.nuisance_gram):
            own, to_near, to_far = (_signal(gram, rows, columns) for columns in (rows, near, far))
            factor = cholesky(np.eye(len(rows)) + root[:, None] * own * root, lower=True, check_finite=False)
            stack = root[:, None] * np.column_stack([to_near, to_far, offset[rows]])
            half = solve_triangular(factor, stack, lower=True, check_finite=False)
            half_near, half_far, white = half[:, : len(near)], half[:, len(near) : -1], half[:, -1]
            left = _signal(gram, near, far) - half_near.T @ half_far
            q = white @ white
            if q > 0:
                left += np.outer(offset[near] - half_near.T @ white, (offset[far] - half_far.T @ white) / q)
            sides.append(left)
        return sides

    def _losses(self, weights: np.ndarray) -> tuple[float, np.ndarray, list[list[np.ndarray] | None], np.ndarray]:
        """Soft minimum, mix (n_pool,), (I/w - G_bb)⁻¹ of both sides by loss (None: none, or afresh), live owners."""
        live = weights[self._owner] > 0
        owner = self._owner[live]
        whole = self._plain.value(weights)
        values, inners = np.full(len(weights), whole), [None] * len(weights)
        if len(owner):
            sides = self._left(weights, self.rows[live], self.rows[live])
        for lost in np.unique(owner):
            block = np.flatnonzero(owner == lost)
            left = [np.eye(len(block)) - weights[lost] * side[np.ix_(block, block)] for side in sides]
            sizes = [np.linalg.slogdet(part) for part in left]
            if all(sign > 0 and size > np.log(LEAST_LEFT) for sign, size in sizes):
                values[lost] = whole + BITS * (sizes[0][1] - sizes[1][1])
                inners[lost] = [weights[lost] * np.linalg.inv(part) for part in left]
            else:
                values[lost] = self._plain.value(_silenced(weights, lost))
        height, mix = soft_minimum(values, self._steepness, self.model.n_candidates)
        return height, mix, inners, owner

    def value(self, weights: np.ndarray) -> float:
        """Score at pool weights (n_pool,) >= 0 [bits]."""
        return self._losses(weights)[0]

    def second_order(self, weights: np.ndarray) -> tuple[float, np.ndarray, np.ndarray]:
        """Score, gradient (n_pool,) and Hessian (n_pool, n_pool) at pool weights (n_pool,) >= 0 [bits]."""
        height, mix, inners, owner = self._losses(weights)
        _, gradient, hessian = self._plain.second_order(weights)
        kept = np.flatnonzero(mix > LEAST_MIX * mix.max())
        whole = self._left(weights, self.rows, self.rows) if len(owner) else []
        start = np.searchsorted(self._owner, np.arange(len(self.pool)))
        gradients, mean = np.empty((len(kept), len(weights))), np.zeros_like(hessian)
        for place, lost in enumerate(kept):
            if weights[lost] == 0:
                slope, bend = gradient.copy(), hessian.copy()
            elif inners[lost] is None:
                _, slope, bend = self._plain.second_order(_silenced(weights, lost))
            else:
                block = np.flatnonzero(self._owner == lost)
                slope, bend = 0.0, 0.0
                for sign, left, inner in zip((1.0, -1.0), whole, inners[lost], strict=True):
                    changed = left + left[:, block] @ inner @ left[block]
                    slope = slope + sign * BITS * np.diag(changed)
                    bend = bend - sign * BITS * changed * changed
                slope = np.add.reduceat(slope, start)
                bend = np.add.reduceat(np.add.reduceat(bend, start, axis=0), start, axis=1)
            slope[lost] = bend[lost] = bend[:, lost] = 0.0
            gradients[place] = slope
            mean += mix[lost] * bend
        share = mix[kept] / mix[kept].sum()
        return height, *soft_curvature(share, gradients, mean / mix[kept].sum(), self._steepness)

    def gradient_everywhere(self, weights: np.ndarray) -> np.ndarray:
        """Supergradient over all candidates (n_candidates,), pooled or not [bits]."""
        _, mix, inners, owner = self._losses(weights)
        gradient = self._plain.gradient_everywhere(weights)
        kept = np.flatnonzero(mix > LEAST_MIX * mix.max())
        live = self.rows[weights[self._owner] > 0]
        sides = self._left(weights, live, np.arange(self.model.n_channels)) if len(owner) else []
        total = np.zeros(self.model.n_candidates)
        for lost in kept:
            slope = gradient
            if weights[lost] > 0 and inners[lost] is None:
                slope = self._plain.gradient_everywhere(_silenced(weights, lost))
            elif weights[lost] > 0:
                block = np.flatnonzero(owner == lost)
                change = np.zeros(self.model.n_channels)
                for sign, side, inner in zip((1.0, -1.0), sides, inners[lost], strict=True):
                    change += sign * BITS * (side[block] * (inner @ side[block])).sum(axis=0)
                slope = slope + np.bincount(self.model.candidate_of_channel, change, self.model.n_candidates)
            part = mix[lost] * slope
            part[self.pool[lost]] = 0.0
            total += part
        return total / mix[kept].sum()


def _signal(gram: np.ndarray, rows: np.ndarray, columns: np.ndarray) -> np.ndarray:
    """X Xᵀ between channels, from I + X Xᵀ."""
    return gram[np.ix_(rows, columns)] - (rows[:, None] == columns[None, :])


def _silenced(weights: np.ndarray, lost: int) -> np.ndarray:
    without = weights.copy()
    without[lost] = 0.0
    return without
