"""Turning single axes to their best, one after the other: the compiled kernel for axes without a tilt limit."""

from __future__ import annotations

import numba
import numpy as np


@numba.njit(cache=True)
def turn_in_place(
    both: np.ndarray,
    nuisance: np.ndarray,
    mixing: np.ndarray,
    offset: np.ndarray,
    columns: np.ndarray,
    starts: np.ndarray,
    tolerance: float,
    sweeps: int,
) -> float:
    """Turn the channels `columns` of mixing (n_components, n_channels) until a round gains less than tolerance [nats].

    both, nuisance: I + C Cᵀ and I + B Bᵀ of the components; offset (n_channels,); starts: the first of the three
    components that each turning channel mixes. The best axis is the leading generalised eigenvector of the covariances
    given the other channels. Returns twice the gain in nats; mixing is changed in place.
    """
    total = 0.0
    for _ in range(sweeps):
        gained = 0.0
        for turn in range(len(columns)):
            column, first = columns[turn], starts[turn]
            others = np.array([c for c in range(mixing.shape[1]) if c != column])
            rest = np.ascontiguousarray(mixing[:, others])
            above = _given(both, rest, offset[others], first)
            below = _given(nuisance, rest, offset[others], first)
            inverse = np.linalg.inv(np.linalg.cholesky(below))
            vectors = np.linalg.eigh(inverse @ above @ inverse.T)[1]
            axis = inverse.T @ np.ascontiguousarray(vectors[:, 2])
            axis /= np.sqrt((axis * axis).sum())
            old = mixing[first : first + 3, column].copy()
            new = np.log((axis @ (above @ axis)) / (axis @ (below @ axis)))
            gain = new - np.log((old @ (above @ old)) / (old @ (below @ old)))
            if gain > 0:
                mixing[first : first + 3, column] = axis
                gained += gain
        total += gained
        if gained <= tolerance:
            break
    return total


@numba.njit(cache=True)
def _given(gram: np.ndarray, rest: np.ndarray, offset: np.ndarray, first: int) -> np.ndarray:
    """Covariance (3, 3) of three components given the other channels, the flat offset included where they see it."""
    block = gram[first : first + 3, first : first + 3].copy()
    if rest.shape[1] == 0:
        return block
    seen = gram @ rest
    inner = rest.T @ seen
    cross = np.ascontiguousarray(seen[first : first + 3].T)
    block -= cross.T @ np.linalg.solve(inner, cross)
    if np.abs(offset).max() > 0:
        u = np.linalg.solve(inner, offset)
        left = cross.T @ u
        block += np.outer(left, left) / (offset @ u)
    return block
