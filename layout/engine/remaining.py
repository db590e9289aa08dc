"""What is left to choose once some candidates are chosen: the same problem, smaller, and of the same form."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_factor, cho_solve, cholesky, solve_triangular

from layout.engine.information import information
from layout.engine.model import ChannelTable, LinearModel


@dataclass(frozen=True)
class Remaining(ChannelTable):
    """The candidates that may still join, given the chosen ones.

    candidates (n_candidates,): their numbers in the whole model; value [bits]: information of the chosen; both_gram and
    nuisance_gram: covariances conditioned on the chosen channels (ChannelTable's padding kept), so that the information
    of chosen and S together is value + the information of S under these. Once a chosen channel sees the offset, what it
    leaves unknown is part of both covariances and offset is zero. target (n_channels, p): rows A
    with both - nuisance = A Aᵀ.
    """

    candidates: np.ndarray
    value: float
    both_gram: np.ndarray
    nuisance_gram: np.ndarray
    offset: np.ndarray
    candidate_of_channel: np.ndarray
    target: np.ndarray


def remaining(model: LinearModel, chosen: np.ndarray, candidates: np.ndarray, target: np.ndarray) -> Remaining:
    """`candidates` (sorted, none of them chosen) given `chosen`; costs one factorisation and O(c n²).

    target (n_channels, p): the whole model's target rows, or fewer columns with (nearly) the same products.
    """
    rows = model.channels_of(chosen)
    left = model.channels_of(candidates)
    owner = np.searchsorted(candidates, model.candidate_of_channel[left])
    seen = bool((model.offset[rows] != 0).any())
    grams = [_conditioned(gram, rows, left, model.offset, seen) for gram in (model.both_gram, model.nuisance_gram)]
    offset = np.zeros(len(left)) if seen else model.offset[left]
    rest = _target_given(model, rows, left, target, seen)
    return Remaining(candidates, information(model, chosen), *grams, offset, owner, rest)


def _target_given(model: LinearModel, rows: np.ndarray, left: np.ndarray, target: np.ndarray, seen: bool) -> np.ndarray:
    """Target rows of the channels left: less what the chosen predict, for the posterior spread of what is wanted."""
    if not len(rows):
        return target[left]
    gram, offset, mine = model.nuisance_gram, model.offset, target[rows]
    factor = cho_factor(gram[np.ix_(rows, rows)], lower=True, check_finite=False)
    solved = cho_solve(factor, mine, check_finite=False)
    out = target[left] - gram[np.ix_(left, rows)] @ solved
    spread = np.eye(target.shape[1]) + mine.T @ solved
    if seen:
        u = cho_solve(factor, offset[rows], check_finite=False)
        along = (u @ mine) / (offset[rows] @ u)
        out -= np.outer(offset[left] - gram[np.ix_(left, rows)] @ u, along)
        spread -= np.outer(u @ mine, along)
    return solve_triangular(cholesky(spread, lower=True), out.T, lower=True, check_finite=False).T


def _conditioned(gram: np.ndarray, rows: np.ndarray, left: np.ndarray, offset: np.ndarray, seen: bool) -> np.ndarray:
    padded = np.append(left, len(gram) - 1)
    out = gram[np.ix_(padded, padded)]
    if len(rows):
        cross = gram[np.ix_(rows, padded)]
        factor = cho_factor(gram[np.ix_(rows, rows)], lower=True, check_finite=False)
        out -= cross.T @ cho_solve(factor, cross, check_finite=False)
        if seen:
            u = cho_solve(factor, offset[rows], check_finite=False)
            unexplained = np.append(offset[left], 0.0) - cross.T @ u
            out += np.outer(unexplained, unexplained) / (offset[rows] @ u)
    return out
