"""A chosen set of turned sensors, with every change of one sensor priced at that sensor's best axis, in closed form.

Given the others, a sensor of axis u adds ½ log2 of uᵀ K_C u / uᵀ K_B u, K the 3 x 3 covariances of its components
conditioned on the others: a generalised Rayleigh quotient, whose maximiser is the leading generalised eigenvector. The
flat offset, once some other channel sees it, adds r rᵀ / q to each covariance (notation of information.py).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_solve, cholesky, solve_triangular

from layout.engine.axis_freedom import TurnedChannels, Turning
from layout.engine.axis_prices import best_ratio_frames
from layout.engine.information import BITS


@dataclass(frozen=True)
class _Side:
    """One of the two covariances given some chosen channels: log-determinant, q, what they leave of the offset and of
    each candidate's components: remainder (n, m), blocks (n, m, m).
    """

    log_det: float
    q: float
    remainder: np.ndarray
    blocks: np.ndarray


class TurnedSet:
    """chosen (k,) candidates in frames (k, m, m), conditioned on; k may be 0."""

    def __init__(self, turning: Turning, chosen: np.ndarray, frames: np.ndarray) -> None:
        self.turning = turning
        self.chosen = np.asarray(chosen, dtype=int)
        channels, offset = turning.model.channels, turning.model.padded_offset
        table = TurnedChannels(turning, self.chosen, frames)
        self._place = table.candidate_of_channel
        self._seeing = np.bincount(self._place, weights=table.offset != 0, minlength=len(self.chosen)) > 0
        own_noise = table.own_noise()
        self._whole, self._inverse, self._pull, self._u = [], [], [], []
        for gram, own, turned in zip(
            turning.grams, turning.blocks, (table.both_gram, table.nuisance_gram), strict=True
        ):
            cross = table.across(gram, np.arange(len(gram))) + own_noise
            factor = cholesky(turned[:-1, :-1], lower=True, check_finite=False)
            half = solve_triangular(factor, cross, lower=True, check_finite=False)
            inverse = cho_solve((factor, True), np.eye(len(factor)), check_finite=False)
            u = inverse @ table.offset
            seen = half[:, channels]
            blocks = own + np.eye(turning.width) - np.einsum("cnk,cnl->nkl", seen, seen, optimize=True)
            log_det = 2.0 * np.log(np.diag(factor)).sum()
            remainder = (offset - cross.T @ u)[channels]
            self._whole.append(_Side(log_det, float(table.offset @ u), remainder, blocks))
            self._inverse.append(inverse)
            self._pull.append(solve_triangular(factor, half, lower=True, trans=1, check_finite=False)[:, channels])
            self._u.append(u)

    @property
    def value(self) -> float:
        """Information of the set [bits]."""
        both, nuisance = self._whole
        total = both.log_det - nuisance.log_det
        if self._seeing.any():
            total += np.log(both.q / nuisance.q)
        return float(BITS * total)

    def additions(self) -> tuple[np.ndarray, np.ndarray]:
        """Information with each candidate added at its best axis (n,) [bits], -inf for the chosen; frames (n, m, m)."""
        return self._scores(self._whole, bool(self._seeing.any()), self.chosen)

    def swaps(self, place: int) -> tuple[np.ndarray, np.ndarray]:
        """The same with chosen[place] dropped: for itself, a turn to its best axis; -inf for the other chosen."""
        seen = bool(np.delete(self._seeing, place).any())
        return self._scores([self._without(side, place) for side in (0, 1)], seen, np.delete(self.chosen, place))

    def _without(self, side: int, place: int) -> _Side:
        rows = np.flatnonzero(self._place == place)
        whole, pull, u = self._whole[side], self._pull[side][rows], self._u[side][rows]
        inner = self._inverse[side][np.ix_(rows, rows)]
        back = np.linalg.solve(inner, pull.reshape(len(rows), -1)).reshape(pull.shape)
        lost = np.linalg.solve(inner, u)
        return _Side(
            whole.log_det + np.linalg.slogdet(inner)[1],
            whole.q - u @ lost,
            whole.remainder + np.tensordot(lost, pull, axes=1),
            whole.blocks + np.einsum("cnk,cnl->nkl", pull, back),
        )

    def _scores(self, sides: list[_Side], seen: bool, taken: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        total = sides[0].log_det - sides[1].log_det
        blocks = [side.blocks.copy() for side in sides]
        if seen:
            total += np.log(sides[0].q / sides[1].q)
            for block, side in zip(blocks, sides, strict=True):
                block += side.remainder[:, :, None] * side.remainder[:, None, :] / side.q
        for block in blocks:
            block[taken] = np.eye(self.turning.width)  # nothing is left of a chosen sensor; keep its block invertible
        gain, frames = best_ratio_frames(self.turning, np.arange(self.turning.n_candidates), *blocks)
        first = np.flatnonzero(self.turning.model.has_offset)
        if not seen and len(first):
            forms = [
                (side.remainder[first] * np.linalg.solve(block[first], side.remainder[first, :, None])[:, :, 0]).sum(1)
                for side, block in zip(sides, blocks, strict=True)
            ]
            gain[first] += np.log(forms[0] / forms[1])
        score = BITS * (total + gain)
        score[taken] = -np.inf
        return score, frames
