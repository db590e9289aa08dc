"""What a derivative of a lead field is, and how to take one of any lead field by differences."""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from layout.units import MM

# Of fourth order: the error at 1 mm is 2e-5 and less for sources 10 mm and more from the sensors, and rounding plays no
# part until the step is under 1 µm (step study in tests/physics/test_lead_field_derivatives.py).
STEP = 1 * MM


class LeadFieldDerivatives(NamedTuple):
    """gain (n_channels, m, 3) [V or T per A·m]: the lead field L of each source's free moment, head frame.

    slopes (n_channels, m, 3): d(L q)/dr [V/m or T/m for moments in A·m], q held fixed in the head frame.
    """

    gain: np.ndarray
    slopes: np.ndarray


def central_differences(
    lead_field: Callable[[np.ndarray], np.ndarray], positions: np.ndarray, moments: np.ndarray, step: float = STEP
) -> np.ndarray:
    """d(L q)/dr (n_channels, m, 3) by fourth-order central differences with the step [m].

    lead_field takes positions (k, 3) [m] and gives the free lead field (n_channels, k, 3); moments (m, 3) [A·m]. It is
    called once, with the 12 m displaced positions.
    """
    positions, moments = (np.asarray(part, float).reshape(-1, 3) for part in (positions, moments))
    reach = np.array([1.0, -1.0, 2.0, -2.0])
    weights = np.array([8.0, -8.0, -1.0, 1.0]) / (12 * step)
    moves = step * reach[:, None, None] * np.eye(3)  # (4, 3 directions, 3)
    moved = positions[:, None, None] + moves
    gain = lead_field(moved.reshape(-1, 3))
    gain = gain.reshape(len(gain), len(positions), 4, 3, 3)
    return np.einsum("nmadj,mj,a->nmd", gain, moments, weights, optimize=True)
