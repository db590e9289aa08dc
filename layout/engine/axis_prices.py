"""The best axis of a sensor against a 3 x 3 matrix, free or within a tilt of a given normal, and its certified price.

A relaxed sensor of r free axes is a positive semidefinite block 0 <= W <= I of trace r, so the block G of a gradient
prices it at the sum of its r largest eigenvalues. Within a tilt of θ from the unit normal n the block of one axis keeps
nᵀ W n >= cos²θ tr W, and Lagrange duality gives the price min over μ >= 0 of λmax(G + μ (n nᵀ - cos²θ I)): any μ
is valid, and two homogeneous conditions leave a maximiser of rank one (the S-lemma; Pólik & Terlaky 2007, SIAM Review
49:371, from memory), so the least is attained by an axis.
"""

from __future__ import annotations

import numpy as np

from layout.engine.axis_freedom import Turning

DIRECTIONS = 48  # places tried on the rim of a tilt limit before Newton's steps


def best_frames(turning: Turning, candidates: np.ndarray, blocks: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Certified price (n,) of each candidate against its block (n, m, m), and the frame (n, m, m) that reaches it.

    The columns of a frame are the channels in component coordinates; a zero column is a channel that is not there. An
    ordinary candidate's price is the trace.
    """
    price = np.einsum("nii->n", blocks).copy()
    frames = turning.own[candidates]
    free = np.flatnonzero(turning.free[candidates])
    if not len(free):
        return price, frames
    size, vectors = np.linalg.eigh(blocks[free, :3, :3])
    used = turning.count[candidates[free]][:, None] > np.arange(3)[None, :]
    price[free] = np.where(used, size[:, ::-1], 0.0).sum(axis=1)
    frames[free, :3, :3] = np.where(used[:, None, :], vectors[:, :, ::-1], 0.0)
    limited = np.flatnonzero(turning.limited[candidates])
    if len(limited):
        one = candidates[limited]
        normal, cosine, own = turning.normal[one], turning.cosine[one], blocks[limited, :3, :3]
        axis = best_in_cap(own, normal, cosine)
        price[limited] = cap_price(own, normal, cosine, axis)
        frames[limited, :3, 0] = axis
    return price, frames


def best_ratio_frames(
    turning: Turning, candidates: np.ndarray, above: np.ndarray, below: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Largest log det(Fᵀ above F) - log det(Fᵀ below F) of each candidate (n,), and its frame F (n, m, m).

    above, below (n, m, m): positive definite. The best r axes span the r leading generalised eigenvectors.
    """
    gain = np.linalg.slogdet(above)[1] - np.linalg.slogdet(below)[1]
    frames = turning.own[candidates]
    free = np.flatnonzero(turning.free[candidates])
    if not len(free):
        return gain, frames
    values, vectors = _generalised(above[free, :3, :3], below[free, :3, :3])
    used = turning.count[candidates[free]][:, None] > np.arange(3)[None, :]
    gain[free] = np.where(used, np.log(values), 0.0).sum(axis=1)
    spanned = np.linalg.qr(vectors)[0]  # orthonormal columns that keep the span of the leading ones
    frames[free, :3, :3] = np.where(used[:, None, :], spanned, 0.0)
    limited = np.flatnonzero(turning.limited[candidates])
    if len(limited):
        one = candidates[limited]
        above, below = above[limited, :3, :3], below[limited, :3, :3]
        axis = _best_ratio_in_cap(above, below, frames[limited, :3, 0], turning.normal[one], turning.cosine[one])
        gain[limited] = np.log(_form(above, axis) / _form(below, axis))
        frames[limited, :3, 0] = axis
    return gain, frames


def _generalised(above: np.ndarray, below: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Generalised eigenvalues, falling, and eigenvectors (as columns)."""
    inverse = np.linalg.inv(np.linalg.cholesky(below))
    values, vectors = np.linalg.eigh(inverse @ above @ np.swapaxes(inverse, -1, -2))
    return np.maximum(values[..., ::-1], 1e-300), np.swapaxes(inverse, -1, -2) @ vectors[..., ::-1]


def _form(blocks: np.ndarray, axis: np.ndarray) -> np.ndarray:
    return np.einsum("ni,nij,nj->n", axis, blocks, axis)


def best_in_cap(blocks: np.ndarray, normal: np.ndarray, cosine: np.ndarray) -> np.ndarray:
    """Unit axes u (n, 3) of largest uᵀ G u with |u·n| >= cosine, for G (n, 3, 3), unit normals (n, 3), cosine (n,).

    Where the leading eigenvector is outside, the best axis is on the rim: any other stationary axis inside is a saddle.
    """
    axis = np.linalg.eigh(blocks)[1][:, :, -1]
    along = np.einsum("ni,ni->n", axis, normal)
    axis = np.where(along < 0, -1.0, 1.0)[:, None] * axis
    outside = np.flatnonzero(np.abs(along) < cosine)
    if len(outside):
        axis[outside] = _best_on_rim(blocks[outside], normal[outside], cosine[outside])
    return axis


def _best_on_rim(blocks: np.ndarray, normal: np.ndarray, cosine: np.ndarray) -> np.ndarray:
    """The best u = c n + s t, t a unit tangent: a trigonometric polynomial of degree two in the angle of t."""
    tangents = tangents_of(normal)
    sine = np.sqrt(np.maximum(0.0, 1.0 - cosine**2))
    slope = (2.0 * cosine * sine)[:, None] * np.einsum("nai,nij,nj->na", tangents, blocks, normal)
    inner = (sine**2)[:, None, None] * np.einsum("nai,nij,nbj->nab", tangents, blocks, tangents)
    even, odd = 0.5 * (inner[:, 0, 0] - inner[:, 1, 1]), inner[:, 0, 1]

    def height(angle: np.ndarray) -> np.ndarray:
        once = slope[:, :1] * np.cos(angle) + slope[:, 1:] * np.sin(angle)
        return once + even[:, None] * np.cos(2 * angle) + odd[:, None] * np.sin(2 * angle)

    grid = np.broadcast_to(np.arange(DIRECTIONS) * (2 * np.pi / DIRECTIONS), (len(blocks), DIRECTIONS))
    angle = np.take_along_axis(grid, height(grid).argmax(axis=1)[:, None], axis=1)
    for _ in range(6):
        c1, s1, c2, s2 = np.cos(angle), np.sin(angle), np.cos(2 * angle), np.sin(2 * angle)
        first = -slope[:, :1] * s1 + slope[:, 1:] * c1 - 2 * even[:, None] * s2 + 2 * odd[:, None] * c2
        second = -slope[:, :1] * c1 - slope[:, 1:] * s1 - 4 * even[:, None] * c2 - 4 * odd[:, None] * s2
        step = np.divide(-first, second, out=np.zeros_like(first), where=second < 0)
        trial = angle + np.clip(step, -np.pi / DIRECTIONS, np.pi / DIRECTIONS)
        angle = np.where(height(trial) >= height(angle), trial, angle)
    tangent = np.cos(angle) * tangents[:, 0] + np.sin(angle) * tangents[:, 1]
    return cosine[:, None] * normal + sine[:, None] * tangent


def cap_price(blocks: np.ndarray, normal: np.ndarray, cosine: np.ndarray, axis: np.ndarray) -> np.ndarray:
    """An upper limit (n,) of uᵀ G u over the axes with |u·n| >= cosine, tight where `axis` is the best of them.

    The multiplier follows from stationarity, (G + μ (n nᵀ - c² I)) u ∥ u, on the rim; any μ >= 0 gives a valid limit.
    """
    along = np.einsum("ni,ni->n", axis, normal)
    away = normal - along[:, None] * axis
    pull = np.einsum("ni,nij,nj->n", away, blocks, axis)
    room = along * np.einsum("ni,ni->n", away, normal)
    rim = np.abs(along) <= cosine * (1.0 + 1e-12)
    multiplier = np.where(rim, np.maximum(np.divide(-pull, room, out=np.zeros_like(pull), where=room > 0), 0.0), 0.0)
    tilt = np.einsum("ni,nj->nij", normal, normal) - (cosine**2)[:, None, None] * np.eye(3)
    price = np.linalg.eigvalsh(blocks + multiplier[:, None, None] * tilt)[:, -1]
    return np.where(cosine >= 1.0, _form(blocks, normal), price)


def _best_ratio_in_cap(
    above: np.ndarray, below: np.ndarray, start: np.ndarray, normal: np.ndarray, cosine: np.ndarray
) -> np.ndarray:
    """Best axis for uᵀ above u / uᵀ below u within the tilt, by Dinkelbach's steps (1967, Manage Sci 13:492)."""
    inside = np.abs(np.einsum("ni,ni->n", start, normal)) >= cosine
    axis = np.where(inside[:, None], start, normal)
    for _ in range(30):
        ratio = _form(above, axis) / _form(below, axis)
        trial = best_in_cap(above - ratio[:, None, None] * below, normal, cosine)
        better = _form(above, trial) / _form(below, trial)
        axis = np.where((better > ratio)[:, None], trial, axis)
        if (better <= ratio * (1.0 + 1e-14)).all():
            break
    return axis


def tangents_of(normal: np.ndarray) -> np.ndarray:
    """Two unit vectors (n, 2, 3) at right angles to each unit normal (n, 3) and to each other."""
    least = np.eye(3)[np.abs(normal).argmin(axis=1)]
    first = np.cross(normal, least)
    first /= np.linalg.norm(first, axis=1)[:, None]
    return np.stack([first, np.cross(normal, first)], axis=1)
