"""Numbered discs must neither overlap nor wander."""

import numpy as np
import pytest

from layout.outputs.pictures.spreading import spread_apart


def _nearest(places):
    length = np.linalg.norm(places[:, None] - places[None], axis=2)
    np.fill_diagonal(length, np.inf)
    return length.min()


@pytest.mark.parametrize("seed", range(5))
def test_crowded_discs_part(seed):
    anchors = np.random.default_rng(seed).random((30, 2)) * 45
    places = spread_apart(anchors, 10.0)
    assert _nearest(anchors) < 5
    assert _nearest(places) > 9.7
    # 30 discs of 10 need at least a square of 52 or so, however well they are packed
    assert np.linalg.norm(places - anchors, axis=1).max() < 30


def test_equal_anchors_part_and_the_same_way_each_time():
    anchors = np.zeros((4, 2))
    places = spread_apart(anchors, 10.0)
    assert _nearest(places) > 9.7
    np.testing.assert_array_equal(places, spread_apart(anchors, 10.0))


def test_free_discs_stay():
    anchors = np.array([[0.0, 0], [30, 0], [0, 30]])
    np.testing.assert_array_equal(spread_apart(anchors, 10.0), anchors)
    assert spread_apart(np.zeros((0, 2)), 10.0).shape == (0, 2)
