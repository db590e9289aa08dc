"""Steps of a dipole fit that stay in the brain."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from layout.units import MM

LONGEST_STEP = 15 * MM
CONVERGED = 1e-6 * MM  # a step so short is the last whatever it gains
SHARPEST = 5 * MM  # radius of the brain's surface, as far as steps along it heed it


def held_steps(
    hold: Callable[[np.ndarray], np.ndarray],
    places: np.ndarray,
    matrix: np.ndarray,
    downhill: np.ndarray,
    damping: np.ndarray,
) -> tuple[np.ndarray, np.ndarray]:
    """Places (n, 3) [m] in the brain after damped steps, none longer than LONGEST_STEP, and what they should gain (n,).

    hold: as a `Forward` has it. matrix (n, 3, 3) and downhill (n, 3): the normal equations of each fit's misfit at its
    place; damping (n,): times a third of the matrix's trace, on its diagonal.

    A step that would leave the brain ends where the same quadratic model is least on the brain's surface, taken as a
    plane and then as the sphere that a first move finds: a fit drawn outward slides to its end rather than creep there.
    """
    size = np.einsum("nkk->n", matrix)
    size = np.where(size > 0, size, 1.0)  # nothing seen: no step
    matrix = matrix + damping[:, None, None] * np.eye(3) * (size / 3)[:, None, None]
    step = _shortened(np.linalg.solve(matrix, downhill[:, :, None])[:, :, 0])
    inside = hold(places + step)
    outward = places + step - inside
    beyond = np.linalg.norm(outward, axis=1)
    left = np.flatnonzero(beyond > CONVERGED)
    if len(left):
        normal = outward[left] / beyond[left, None]
        room = np.einsum("nk,nk->n", normal, inside[left] - places[left])
        along = _shortened(_on_plane(matrix[left], downhill[left], normal, room))
        # The surface falls off under the plane, which costs what the pull outward is worth: a curvature of its own.
        short = hold(places[left] + along)
        fall = np.einsum("nk,nk->n", normal, places[left] + along - short)
        pull = np.einsum("nk,nk->n", normal, downhill[left] - np.einsum("nij,nj->ni", matrix[left], along))
        bent = 2 * fall / np.maximum((along**2).sum(axis=1), CONVERGED**2)
        cost = np.maximum(pull, 0.0) * np.clip(bent, 0.0, 1 / SHARPEST)
        matrix[left] += cost[:, None, None] * np.eye(3)
        inside[left] = hold(places[left] + _shortened(_on_plane(matrix[left], downhill[left], normal, room)))
    moved = inside - places
    return inside, 2 * np.einsum("nk,nk->n", downhill, moved) - np.einsum("nj,njk,nk->n", moved, matrix, moved)


def _on_plane(matrix: np.ndarray, downhill: np.ndarray, normal: np.ndarray, room: np.ndarray) -> np.ndarray:
    """The steps (n, 3) [m] at which the quadratic models are least, those with normal · step = room (n,) [m]."""
    both = np.linalg.solve(matrix, np.stack([downhill, normal], axis=2))
    beyond = np.einsum("nk,nkc->nc", normal, both)
    return both[:, :, 0] - both[:, :, 1] * ((beyond[:, 0] - room) / beyond[:, 1])[:, None]


def _shortened(step: np.ndarray) -> np.ndarray:
    length = np.linalg.norm(step, axis=1, keepdims=True)
    return step * np.minimum(1.0, LONGEST_STEP / np.maximum(length, 1e-12))
