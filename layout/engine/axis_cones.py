"""Splitting what a free axis may be into cones, so that branch and bound can go on where all sites are settled."""

from __future__ import annotations

import copy

import numpy as np

from layout.engine.axis_freedom import Turning
from layout.engine.axis_prices import tangents_of

MIXED = 1e-4  # a block whose largest eigenvalue falls this short of its trace has no single axis


def within_cone(turning: Turning, candidate: int, axis: np.ndarray, cosine: float) -> Turning:
    """The same with one candidate's axis (3,) kept in a cone: |u·axis| >= cosine."""
    out = copy.copy(turning)
    out.limited, out.normal, out.cosine = turning.limited.copy(), turning.normal.copy(), turning.cosine.copy()
    out.limited[candidate], out.normal[candidate], out.cosine[candidate] = True, axis, cosine
    return out


def most_mixed(turning: Turning, splittable: np.ndarray, weights: np.ndarray) -> int | None:
    """The candidate, of those that may be split (n,) bool, whose block (n, m, m) is farthest from a single axis."""
    ones = np.flatnonzero(splittable & turning.free & (turning.count == 1))
    if not len(ones):
        return None
    short = np.trace(weights[ones], axis1=1, axis2=2) - np.linalg.eigvalsh(weights[ones])[:, -1]
    return int(ones[short.argmax()]) if short.max() > MIXED else None


def cones_over(turning: Turning, candidate: int, block: np.ndarray) -> list[Turning]:
    """Cones that together cover the candidate's own, its block's (3, 3) leading axes in different ones.

    All axes: some axis of any orthonormal frame is within arccos(1/√3). A cone: one for each quarter of it.
    """
    leading = np.linalg.eigh(block)[1][:, ::-1].T
    if not turning.limited[candidate]:
        return [within_cone(turning, candidate, one, np.sqrt(1.0 / 3.0) * (1 - 1e-12)) for one in leading]
    middle = turning.normal[candidate]
    half_angle = np.arccos(turning.cosine[candidate])
    first = leading[1] - (leading[1] @ middle) * middle
    length = np.linalg.norm(first)
    first = first / length if length > 1e-6 else tangents_of(middle[None])[0, 0]
    second = np.cross(middle, first)
    lean, reach = quarter_of_cone(half_angle)
    sides = (first, second, -first, -second)
    return [
        within_cone(turning, candidate, np.cos(lean) * middle + np.sin(lean) * side, np.cos(reach) * (1 - 1e-12))
        for side in sides
    ]


def quarter_of_cone(half_angle: float) -> tuple[float, float]:
    """(lean, reach) [rad] of the least cone about an axis leaning by `lean` that holds a quarter of a cone.

    The farthest points of the quarter are its corners and the middle of its rim.
    """
    lean = np.linspace(0.2, 1.0, 400) * half_angle
    corner = np.arccos(np.cos(lean) * np.cos(half_angle) + np.sin(lean) * np.sin(half_angle) * np.sqrt(0.5))
    reach = np.maximum(np.maximum(lean, corner), half_angle - lean)
    best = int(reach.argmin())
    return float(lean[best]), float(reach[best])
