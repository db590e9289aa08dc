"""Even spreads: they cover, they are the same each time, fixed points stay."""

from itertools import combinations

import numpy as np
import pytest
from scipy.spatial.distance import cdist

from layout.evidence.spread import even_spread


def cap(n, seed):
    """Random points on the upper half of a sphere of 90 mm (n, 3) [m]."""
    points = np.random.default_rng(seed).standard_normal((n, 3))
    points[:, 2] = np.abs(points[:, 2])
    return 0.09 * points / np.linalg.norm(points, axis=1, keepdims=True)


def squares(points, chosen):
    """Sum of squared distances to the nearest chosen point [m²]."""
    return (cdist(points, points[list(chosen)]).min(axis=1) ** 2).sum()


@pytest.mark.parametrize("count", [1, 2, 3, 4])
def test_covers_nearly_as_well_as_the_best_of_all_subsets(count):
    """Within twice the least sum of squares over every subset, and within a quarter on average."""
    excess = []
    for seed in range(20):
        points = cap(14, seed)
        best = min(squares(points, chosen) for chosen in combinations(range(14), count))
        excess.append(squares(points, even_spread(points, count)) / best)
    assert min(excess) >= 1 - 1e-12
    assert np.mean(excess) < 1.25
    assert max(excess) < 2


def test_every_free_point_is_the_middle_of_those_it_serves():
    points = cap(120, 9)
    chosen = even_spread(points, 15, np.array([7, 30]))
    serving = cdist(points, points[chosen]).argmin(axis=1)
    for seed in range(2, 15):
        served = np.flatnonzero(serving == seed)
        middle = points[served].mean(axis=0)
        assert chosen[seed] == served[np.linalg.norm(points[served] - middle, axis=1).argmin()]


def test_one_in_each_of_four_clusters():
    corners = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [1, 1, 0.0]])
    points = np.concatenate([corner + 0.02 * np.random.default_rng(2).random((9, 3)) for corner in corners])
    assert sorted(even_spread(points, 4) // 9) == [0, 1, 2, 3]
    assert sorted(even_spread(points, 4, np.array([11])) // 9) == [0, 1, 2, 3]


@pytest.mark.parametrize("count", [2, 7, 24, 60])
def test_the_same_points_each_time_and_none_twice(count):
    points = cap(60, 5)
    chosen = even_spread(points, count)
    np.testing.assert_array_equal(chosen, even_spread(points, count))
    assert len(np.unique(chosen)) == count == len(chosen)


def test_fixed_points_stay_and_come_first():
    points = cap(80, 6)
    fixed = np.array([40, 3, 17])
    chosen = even_spread(points, 12, fixed)
    np.testing.assert_array_equal(chosen[:3], fixed)
    assert len(np.unique(chosen)) == 12
    np.testing.assert_array_equal(even_spread(points, 3, fixed), fixed)
    np.testing.assert_array_equal(even_spread(points, 2, fixed), fixed[:2])
    assert len(even_spread(points, 0)) == 0


def test_covers_better_than_chance():
    points = cap(300, 7)
    rng = np.random.default_rng(1)
    by_chance = [squares(points, rng.choice(300, 20, replace=False)) for _ in range(200)]
    assert squares(points, even_spread(points, 20)) < min(by_chance)
