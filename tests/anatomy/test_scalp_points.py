"""Surfaces that go from one process to another."""

import pickle

import numpy as np

from layout.anatomy.scalp_points import project
from layout.anatomy.sphere_head import build_sphere_head


def test_a_surface_that_was_used_can_be_sent_to_another_process():
    """The search tree of its mesh is a pointer into this process: with it, the copy's tree would be empty."""
    scalp = build_sphere_head((80e-3, 85e-3, 92e-3), 12e-3, "coarse").scalp
    place = np.array([[0.0, 0.02, 0.13]])
    expected = project(scalp, place).positions
    np.testing.assert_array_equal(project(pickle.loads(pickle.dumps(scalp)), place).positions, expected)
