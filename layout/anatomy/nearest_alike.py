"""Nearest points on a folded surface that do not jump to the other bank of a fold."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from layout.units import MM

NORMAL_REACH = 5 * MM  # opposite normals count as twice this distance: the banks of a fold lie on each other


def nearest_alike(
    positions: np.ndarray, normals: np.ndarray, to_positions: np.ndarray, to_normals: np.ndarray
) -> np.ndarray:
    """The nearest of the second set (m, 3) [m] for each of the first (n,), by place and unit normal together.

    Squared distance plus NORMAL_REACH² times the squared difference of the normals.
    """
    tree = cKDTree(np.hstack([to_positions, NORMAL_REACH * to_normals]))
    return tree.query(np.hstack([positions, NORMAL_REACH * normals]))[1]
