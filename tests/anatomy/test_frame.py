"""The head frame against its definition."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from layout.anatomy.frame import apply, head_frame
from layout.anatomy.head import Landmarks

angle = st.floats(-3, 3)


@given(angle, angle, angle, st.floats(-0.5, 0.5), st.floats(-0.02, 0.02))
def test_any_pose_comes_back(a, b, c, shift, slant):
    """Landmarks that lie in the frame already, moved anywhere, come back to where they were."""
    there = Landmarks(
        nas=np.array([slant, 0.1, 0.0]),
        lpa=np.array([-0.07, 0.0, 0.0]),
        rpa=np.array([0.07, 0.0, 0.0]),
        inion=np.array([0.0, -0.09, 0.01]),
    )
    away = np.array([shift, 2 * shift, -shift])
    turn = Rotation.from_euler("xyz", [a, b, c])
    moved = Landmarks(**{k: turn.apply(p) + away for k, p in vars(there).items()})
    transform = head_frame(moved)
    for name, point in vars(there).items():
        np.testing.assert_allclose(apply(transform, getattr(moved, name)), point, atol=1e-12)
    assert np.linalg.det(transform[:3, :3]) == pytest.approx(1, abs=1e-12)


def test_points_on_one_line_are_refused():
    line = {k: np.array([x, 0.0, 0.0]) for k, x in (("nas", 0.01), ("lpa", -0.1), ("rpa", 0.1), ("inion", 0.0))}
    with pytest.raises(ValueError, match="one line"):
        head_frame(Landmarks(**line))
