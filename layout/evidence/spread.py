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
    distance = cdist(points, points)
    chosen = list(fixed) or [int(np.argmin(np.linalg.norm(points - points.mean(axis=0), axis=1)))]
    nearest = distance[chosen].min(axis=0)
    while len(chosen) < count:
        chosen.append(int(np.argmax(nearest)))
        nearest = np.minimum(nearest, distance[chosen[-1]])
    chosen = np.array(chosen[:count])
    for _ in range(SETTLING_STEPS):
        serving = np.argmin(distance[:, chosen], axis=1)
        moved = chosen.copy()
        for seed in range(len(fixed), count):
            served = np.flatnonzero(serving == seed)
            if len(served):
                middle = points[served].mean(axis=0)
                moved[seed] = served[np.argmin(((points[served] - middle) ** 2).sum(axis=1))]
        if (moved == chosen).all():
            break
        chosen = moved
    return chosen
