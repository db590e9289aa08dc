"""Localisation of a dipole as a goal: a linearised Bayesian error in metres, to be made small.

Hypothesis j is a dipole at its place with an operating moment. Its p unknowns (three position components first, then
moment components), each in units of its prior standard deviation, have the information matrix

    M_j(w) = I + J_jᵀ (W⁻¹ + B Bᵀ [+ flat offset])⁻¹ J_j,      e_j² = Σ_a spread_ja² (M_j⁻¹)_aa,  a over the position,

J_j the channels' derivatives, W the weights. e_j is the Cramér-Rao bound of the position when the priors are wide
(Mosher, Spencer, Leahy & Lewis 1993, Electroencephalogr Clin Neurophysiol 86:303, from memory) and a bound of no
particular estimator otherwise: a *linearised error*. M_j is matrix-concave in w and e_j is the root of the trace of its
inverse, so e_j, its rms and its maximum over hypotheses are convex (information functions: Pukelsheim 1993, Optimal
Design of Experiments, ch. 5): minus the error is a concave score.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from layout.engine.localisation_pricing import PricedLocalisation
from layout.engine.localisation_relaxation import PooledLocalisation, errors_and_slopes
from layout.engine.model import ChannelTable
from layout.errors import LayoutError

KINDS = ("rms", "worst")


@dataclass(frozen=True)
class LocalisationModel(ChannelTable):
    """Derivatives of every channel with respect to the unknowns of m dipole hypotheses; rows in units of own noise.

    derivatives (n_channels, m, p): change of the channel's signal, in units of its independent noise, when an unknown
    moves by its prior standard deviation; position x, y, z first, then p - 3 moment components. nuisance B (n_channels,
    n_nuisance), b ~ N(0, I); offset (n_channels,) and candidate_of_channel (n_channels,): as in LinearModel. spread (m,
    3): prior standard deviation of the position components [m]. share (m,) >= 0: weights of the hypotheses in the rms,
    sum 1. region (m,) int: labels for reports and limits. LayoutError if shapes or values do not fit.
    """

    derivatives: np.ndarray
    nuisance: np.ndarray
    offset: np.ndarray
    candidate_of_channel: np.ndarray
    spread: np.ndarray
    share: np.ndarray
    region: np.ndarray

    def __post_init__(self) -> None:
        n, owner = len(self.offset), self.candidate_of_channel
        if self.derivatives.ndim != 3 or self.derivatives.shape[2] < 3 or self.derivatives.shape[1] < 1:
            raise LayoutError(
                f"derivatives must be channels x hypotheses x unknowns (3 or more), not {self.derivatives.shape}."
            )
        m = self.derivatives.shape[1]
        if len(self.derivatives) != n or self.nuisance.shape[0] != n or owner.shape != (n,):
            raise LayoutError(
                f"derivatives, nuisance, offset and candidate_of_channel must have one row per channel, not "
                f"{self.derivatives.shape}, {self.nuisance.shape}, {self.offset.shape}, {owner.shape}."
            )
        if self.spread.shape != (m, 3) or self.share.shape != (m,) or self.region.shape != (m,):
            raise LayoutError(
                f"spread, share and region must have one row for each of the {m} hypotheses, not "
                f"{self.spread.shape}, {self.share.shape}, {self.region.shape}."
            )
        for name in ("derivatives", "nuisance", "offset", "spread", "share"):
            if not np.isfinite(getattr(self, name)).all():
                raise LayoutError(f"{name} must be finite, but it holds NaN or infinite entries.")
        if not (self.spread > 0).all():
            raise LayoutError(f"spread must be positive, but its smallest entry is {self.spread.min():g} m.")
        if (self.share < 0).any() or abs(self.share.sum() - 1.0) > 1e-9:
            raise LayoutError(f"share must be >= 0 and sum to 1, but it sums to {self.share.sum():g}.")
        if n and (owner[0] != 0 or not np.isin(np.diff(owner), (0, 1)).all()):
            raise LayoutError("candidate_of_channel must be sorted and name every candidate from 0 on, without a hole.")

    @cached_property
    def padded_derivatives(self) -> np.ndarray:
        """The derivatives with a zero row for the silent channel (n_channels + 1, m, p)."""
        return np.concatenate([self.derivatives, np.zeros((1, *self.derivatives.shape[1:]))])

    @cached_property
    def nuisance_gram(self) -> np.ndarray:
        """I + B Bᵀ, with a last row and column for the silent channel (n_channels + 1 squared)."""
        n = self.n_channels
        gram = np.zeros((n + 1, n + 1))
        gram[:n, :n] = self.nuisance @ self.nuisance.T
        gram[np.diag_indices(n + 1)] += 1.0
        return gram

    def of_region(self, label: int) -> LocalisationModel:
        """The same channels with the hypotheses of one region only, their shares scaled to sum 1."""
        inside = self.region == label
        if not self.share[inside].sum() > 0:
            raise LayoutError(f"region must be one that holds hypotheses of positive share, but {label} does not.")
        return replace(
            self,
            derivatives=np.ascontiguousarray(self.derivatives[:, inside]),
            spread=self.spread[inside],
            share=self.share[inside] / self.share[inside].sum(),
            region=self.region[inside],
        )


def linearised_errors(model: LocalisationModel, chosen: np.ndarray) -> np.ndarray:
    """e_j of every hypothesis (m,) [m] for the chosen candidates, computed from the model's rows.

    A flat offset is removed by an orthonormal basis of the contrasts that do not see it, so that a single electrode
    carries exactly nothing.
    """
    rows = model.channels_of(chosen)
    signals = model.derivatives[rows]
    _, m, p = signals.shape
    signals = signals.reshape(len(rows), m * p)
    noise = np.eye(len(rows)) + model.nuisance[rows] @ model.nuisance[rows].T
    if (model.offset[rows] != 0).any():
        basis = np.linalg.qr(model.offset[rows][:, None], mode="complete")[0][:, 1:]
        signals, noise = basis.T @ signals, basis.T @ noise @ basis
    white = np.linalg.solve(np.linalg.cholesky(noise), signals).reshape(len(noise), m, p)
    matrices = np.eye(p) + np.einsum("cjp,cjq->jpq", white, white, optimize=True)
    variances = np.diagonal(np.linalg.inv(matrices), axis1=1, axis2=2)[:, :3]
    return np.sqrt((model.spread**2 * variances).sum(axis=1))


@dataclass(frozen=True)
class LocalisationGoal:
    """Minus the linearised localisation error [m]: kind "rms" over the hypotheses by share, or the "worst" of them.

    The relaxation and the tangents of "worst" work with the mean of order `sharpness` of the errors, which is convex
    and below the maximum by at most the factor m^(-1/sharpness): every limit stays valid, and the certificate (a mean
    of the hypotheses' tangents) closes to within that factor.
    """

    model: LocalisationModel
    kind: str = "rms"
    sharpness: float = 1000.0

    def __post_init__(self) -> None:
        if self.kind not in KINDS:
            raise LayoutError(f"kind must be one of {', '.join(KINDS)}, not {self.kind}.")

    @property
    def n_candidates(self) -> int:
        """Number of candidates."""
        return self.model.n_candidates

    @property
    def has_offset(self) -> np.ndarray:
        """Which candidates see the flat offset (n_candidates,) bool."""
        return self.model.has_offset

    @property
    def order(self) -> float:
        """Order of the mean of the errors in the relaxation."""
        return 2.0 if self.kind == "rms" else self.sharpness

    @cached_property
    def share(self) -> np.ndarray:
        """Weights of the hypotheses in that mean (m,)."""
        m = len(self.model.share)
        return self.model.share if self.kind == "rms" else np.full(m, 1.0 / m)

    def errors(self, chosen: np.ndarray) -> np.ndarray:
        """Linearised error of every hypothesis (m,) [m]."""
        return linearised_errors(self.model, chosen)

    def per_region(self, chosen: np.ndarray) -> dict[int, tuple[float, float]]:
        """(rms, worst) linearised error of each region's hypotheses [m], by label."""
        errors, model = self.errors(chosen), self.model
        report = {}
        for label in np.unique(model.region):
            inside = model.region == label
            share = model.share[inside] / (model.share[inside].sum() or 1.0)
            report[int(label)] = (float(np.sqrt(share @ errors[inside] ** 2)), float(errors[inside].max()))
        return report

    def score(self, chosen: np.ndarray) -> float:
        """Minus the rms or worst linearised error of a set [m]."""
        errors = self.errors(chosen)
        return -float(np.sqrt(self.model.share @ errors**2) if self.kind == "rms" else errors.max())

    @property
    def highest(self) -> float:
        """No error is negative."""
        return 0.0

    def pairs(self, candidates: np.ndarray) -> np.ndarray:
        """Score of every pair of single-channel candidates that see the offset (n, n) [m].

        A pair is one channel, the contrast o_k y_i - o_i y_k, so M_j is a rank-one change of I. Memory: a few n².
        """
        model = self.model
        rows = model.channels[candidates, 0]
        offset = model.padded_offset[rows]
        gram = model.nuisance_gram[np.ix_(rows, rows)]
        variance = _contrast(gram, offset)
        np.fill_diagonal(variance, 1.0)
        total = np.zeros_like(variance)
        for j, spread in enumerate(model.spread):
            signals = model.padded_derivatives[rows, j]
            position = signals[:, :3] * spread
            gain = _contrast(position @ position.T, offset) / (variance + _contrast(signals @ signals.T, offset))
            left = (spread**2).sum() - gain
            total = total + model.share[j] * left if self.kind == "rms" else np.maximum(total, left)
        return -np.sqrt(np.maximum(total, 0.0))

    def priced(self, chosen: np.ndarray) -> PricedLocalisation:
        """The chosen set with its additions, losses and swaps priced [m]."""
        return PricedLocalisation(self.model, chosen, self.kind == "worst")

    def relaxed(self, pool: np.ndarray) -> PooledLocalisation:
        """The relaxation on a pool of candidates."""
        return PooledLocalisation(self.model, pool, self.share, self.order)

    def tangent(self, weights: np.ndarray) -> tuple[float, np.ndarray]:
        """(f, g) [m] in source space. For "worst": a convex combination of the hypotheses' tangents."""
        errors, slopes = errors_and_slopes(self.model, weights)
        ratio = errors / errors.max()
        mix = self.share * ratio ** (self.order - 1.0)
        mix /= mix.sum() if self.kind == "worst" else np.sqrt(self.share @ ratio**2)
        gradient = np.bincount(self.model.candidate_of_channel, mix @ slopes, minlength=self.n_candidates)
        return -float(mix @ errors), gradient


def _contrast(gram: np.ndarray, offset: np.ndarray) -> np.ndarray:
    """|o_k x_i - o_i x_k|² for every pair, from the x's Gram matrix."""
    square = offset[:, None] ** 2 * np.diag(gram)[None, :]
    return square + square.T - 2.0 * np.outer(offset, offset) * gram
