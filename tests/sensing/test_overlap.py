"""Box against box, compared with points thrown into both."""

import numpy as np
from scipy.spatial.transform import Rotation

from layout.sensing.overlap import boxes_overlap

SIZE = np.array([0.012, 0.016, 0.024])


def pose(rotation, origin):
    result = np.eye(4)
    result[:3, :3], result[:3, 3] = rotation, origin
    return result


def test_side_by_side():
    here = np.tile(np.eye(4), (4, 1, 1))
    there = np.array([pose(np.eye(3), p) for p in ([0.0119, 0, 0], [0.012, 0, 0], [0, 0, 0.025], [0, 0.015, 0.02])])
    sizes = np.tile(SIZE, (4, 1))
    assert boxes_overlap(here, sizes, there, sizes).tolist() == [True, False, False, True]


def test_against_points_in_both():
    rng = np.random.default_rng(5)
    n = 300
    a, b = (
        np.array([pose(r.as_matrix(), rng.uniform(-0.014, 0.014, 3)) for r in Rotation.random(n, random_state=seed)])
        for seed in (1, 2)
    )
    sizes = np.tile(SIZE, (n, 1))
    found = boxes_overlap(a, sizes, b, sizes)
    grid = np.stack(np.meshgrid(*[np.linspace(0, 1, 25)] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
    local = (grid - [0.5, 0.5, 0.0]) * SIZE
    shared = np.zeros(n, dtype=bool)
    for i in range(n):
        world = local @ a[i, :3, :3].T + a[i, :3, 3]
        inside = (world - b[i, :3, 3]) @ b[i, :3, :3]
        shared[i] = (
            (np.abs(inside[:, :2]) < SIZE[:2] / 2).all(axis=1) & (inside[:, 2] > 0) & (inside[:, 2] < SIZE[2])
        ).any()
    assert 50 < shared.sum() < 280
    assert found[shared].all()
    # A grid misses thin overlaps only.
    assert (found & ~shared).sum() <= 0.06 * n


def test_crossed_boxes_apart_by_edges_only():
    """No face separates them, an edge-edge axis does: two thin bars crossed at 90° and 45°, lifted past each
    other.
    """
    bar = np.tile([0.002, 0.002, 0.1], (2, 1))
    a = np.array([pose(Rotation.from_euler("z", 45, degrees=True).as_matrix(), [0, 0, -0.05])] * 2)
    turn = Rotation.from_euler("xz", [90, 0], degrees=True) * Rotation.from_euler("z", 45, degrees=True)
    b = np.array([pose(turn.as_matrix(), [x, 0.05, 0]) for x in (0.0029, 0.0027)])
    assert boxes_overlap(a, bar, b, bar).tolist() == [False, True]
