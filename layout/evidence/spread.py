"""Even spreads: the layout of somebody who covers the allowed places and does not choose."""

from __future__ import annotations

import numpy as np
from scipy.spatial.distance import cdist

SETTLING_STEPS = 20


def even_spread(points: np.ndarray, count: int, fixed: np.ndarray | None = None) -> np.ndarray:
    """`count` of the points (n, 3) that cover all of them evenly; `fixed` ones are always among them.

    Farthest-point seeds from the point nearest to the middle, then every free seed moves to the point nearest to the
    mean of those it serves, until nothing moves (k-medoids in the manner of Lloyd 1982, IEEE Trans Inf Theory
    28:129). Nothing is drawn at random. Returns indices (count,), the fixed ones first.
    """
    fixed = np.zeros(0, dtype=int) if fixed is None else np.asarray(fixed, dtype=int)
    if count <= len(fixed):
        return fixed[:count]
    distance = cdist(points, points)
    chosen = list(fixed) or [int(np.argmin(np.linalg.norm(points - points.mean(axis=0), axis=1)))]
    nearest = distance[chosen].min(axis=0)
    while len(chosen) < count:
        chosen.append(int(np.argmax(nearest)))
        nearest = np.minimum(nearest, distance[chosen[-1]])
    chosen = np.array(chosen)
    for _ in range(SETTLING_STEPS):
        moved = _middles(points, np.argmin(distance[:, chosen], axis=1), chosen)
        moved[: len(fixed)] = fixed
        if (moved == chosen).all():
            break
        chosen = moved
    return chosen


def _middles(points: np.ndarray, serving: np.ndarray, chosen: np.ndarray) -> np.ndarray:
    """For each seed (count,) the point nearest to the mean of those it serves; itself if it serves none.

    serving (n,): which seed serves each point.
    """
    served = np.bincount(serving, minlength=len(chosen))
    sums = np.stack([np.bincount(serving, x, len(chosen)) for x in points.T], axis=1)
    means = sums / np.maximum(served, 1)[:, None]
    order = np.lexsort((((points - means[serving]) ** 2).sum(axis=1), serving))
    moved = chosen.copy()
    some = served > 0
    moved[some] = order[(np.cumsum(served) - served)[some]]
    return moved
