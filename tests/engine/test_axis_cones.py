"""Cones that split an axis cover what they split."""

import numpy as np
import pytest
from axis_instances import cap_directions, components_model, directions

from layout.engine.axis_cones import cones_over, most_mixed, quarter_of_cone, within_cone
from layout.engine.axis_freedom import FreeAxes, Turning


def held(cones, candidate, axes):
    """Whether some cone holds each axis."""
    return np.any([np.abs(axes @ one.normal[candidate]) >= one.cosine[candidate] for one in cones], axis=0)


def test_three_cones_cover_all_axes():
    model, free = components_model(1, 3)
    block = np.cov(np.random.default_rng(1).standard_normal((3, 9)))
    cones = cones_over(Turning(model, FreeAxes(free)), 1, block)
    assert len(cones) == 3
    assert held(cones, 1, directions(5000)).all()
    assert not cones[0].limited[[0, 2]].any()


@pytest.mark.parametrize("half_angle", [0.05, 0.4, 0.9553])
def test_four_smaller_cones_cover_a_cone(half_angle):
    model, free = components_model(2, 3)
    rng = np.random.default_rng(2)
    middle = rng.standard_normal(3)
    middle /= np.linalg.norm(middle)
    whole = within_cone(Turning(model, FreeAxes(free)), 2, middle, np.cos(half_angle))
    cones = cones_over(whole, 2, np.cov(rng.standard_normal((3, 9))))
    assert held(cones, 2, cap_directions(middle, half_angle, 6000)).all()
    assert quarter_of_cone(half_angle)[1] < 0.85 * half_angle


def test_only_a_block_of_several_axes_is_split():
    model, free = components_model(3, 2)
    turning = Turning(model, FreeAxes(free))
    axis = np.array([0.6, 0.8, 0.0])
    blocks = np.stack([np.outer(axis, axis), np.diag([0.7, 0.3, 0.0])])
    assert most_mixed(turning, np.ones(2, dtype=bool), blocks) == 1
    assert most_mixed(turning, np.array([True, False]), blocks) is None
