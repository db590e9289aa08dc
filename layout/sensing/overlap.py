"""Do two housings meet? Box against box by separating axes."""

from __future__ import annotations

import numpy as np


def boxes_overlap(poses_a: np.ndarray, housing_a: np.ndarray, poses_b: np.ndarray, housing_b: np.ndarray) -> np.ndarray:
    """Which pairs of boxes share volume (n,) bool.

    poses (n, 4, 4): box frame to head frame, origin at the centre of the face, z outward; housings (n, 3)
    [m]: extent along x, y, z, the box lying from z = 0 to its length. Separating-axis test (Gottschalk, Lin,
    Manocha 1996, SIGGRAPH 171); boxes that only touch do not overlap.
    """
    axes_a, axes_b = poses_a[:, :3, :3], poses_b[:, :3, :3]
    half_a, half_b = np.asarray(housing_a) / 2, np.asarray(housing_b) / 2
    centre_a = poses_a[:, :3, 3] + axes_a[:, :, 2] * half_a[:, 2:3]
    centre_b = poses_b[:, :3, 3] + axes_b[:, :, 2] * half_b[:, 2:3]
    between = centre_b - centre_a
    directions = [axes_a[:, :, i] for i in range(3)] + [axes_b[:, :, i] for i in range(3)]
    directions += [np.cross(axes_a[:, :, i], axes_b[:, :, j]) for i in range(3) for j in range(3)]
    apart = np.zeros(len(between), dtype=bool)
    for direction in directions:
        reach = np.einsum("nk,nk->n", np.abs(np.einsum("nd,ndk->nk", direction, axes_a)), half_a)
        reach += np.einsum("nk,nk->n", np.abs(np.einsum("nd,ndk->nk", direction, axes_b)), half_b)
        size = np.linalg.norm(direction, axis=1)
        apart |= (size > 1e-9) & (np.abs(np.einsum("nd,nd->n", direction, between)) >= reach - 1e-9 * size)
    return ~apart
