"""Arc fractions: the sphere's closed form, the exact ellipse, round trips, and the same fractions on another
head.
"""

import numpy as np
import pytest
from ellipsoids import ellipse_fraction, ellipsoid, equator_landmarks

from layout.anatomy.arcs import arc_fractions, point_at
from layout.anatomy.head import Landmarks
from layout.anatomy.positions import standard_positions
from layout.anatomy.scalp_points import dense_cloud, project

HEAD_AXES = (0.078, 0.098, 0.09)  # m


def test_named_positions_on_the_sphere():
    scalp, marks = ellipsoid(subdivisions=5), equator_landmarks()
    found = standard_positions(scalp, marks)
    names = ["Nz", "Fpz", "Cz", "Pz", "Iz", "C3", "C4", "T7", "T8h"]
    expected = [
        (0, 0.5),
        (0.1, 0.5),
        (0.5, 0.5),
        (0.7, 0.5),
        (1, 0.5),
        (0.5, 0.3),
        (0.5, 0.7),
        (0.5, 0.1),
        (0.5, 0.85),
    ]
    fractions = arc_fractions(scalp, marks, np.array([found[name] for name in names]))
    assert np.allclose(fractions, expected, atol=1e-6)


def test_closed_form_on_the_sphere():
    """Planes through the x axis are meridians about it: s is the elevation over 180°, t the angle from LPA
    over 180°.
    """
    scalp, marks = ellipsoid(subdivisions=5), equator_landmarks()
    points = dense_cloud(ellipsoid(subdivisions=2), 1).positions
    points = project(scalp, points[np.abs(points[:, 0]) < 0.95]).positions
    x, y, z = (points / np.linalg.norm(points, axis=1, keepdims=True)).T
    s = np.arctan2(z, y) / np.pi
    s = np.where(s < -0.5, s + 2, s)
    t = np.arccos(-x) / np.pi
    fractions = arc_fractions(scalp, marks, points)
    below = np.isclose(s, -0.5, atol=1e-6) | np.isclose(s, 1.5, atol=1e-6)  # where the scale is cut open
    assert np.allclose(fractions[~below], np.column_stack([s, t])[~below], atol=6e-4)
    assert np.allclose(fractions[below, 1], t[below], atol=6e-4)


def test_below_the_fiducials_the_scale_goes_on():
    scalp, marks = ellipsoid(subdivisions=4), equator_landmarks()
    low = project(scalp, np.array([[0.0, 0.9, -0.3], [0.0, -0.9, -0.3]])).positions
    (front, _), (back, _) = arc_fractions(scalp, marks, low)
    assert front == pytest.approx(-np.arctan2(0.3, 0.9) / np.pi, abs=1e-3)
    assert back == pytest.approx(1 + np.arctan2(0.3, 0.9) / np.pi, abs=1e-3)


def test_exact_ellipse_arcs():
    scalp, marks = ellipsoid(HEAD_AXES, 5), equator_landmarks(HEAD_AXES)
    a, b, c = HEAD_AXES
    front, side = np.array([0.0, 0.06, 0.07]), np.array([-0.06, 0.0, 0.05])
    (s, middle), (half, t) = arc_fractions(scalp, marks, project(scalp, np.array([front, side])).positions)
    on = project(scalp, np.array([front, side])).positions
    assert s == pytest.approx(ellipse_fraction(b, c, on[0, 1], on[0, 2]), abs=5e-4)
    assert t == pytest.approx(ellipse_fraction(a, c, -on[1, 0], on[1, 2]), abs=5e-4)
    assert (middle, half) == pytest.approx((0.5, 0.5), abs=1e-6)


@pytest.mark.parametrize("skewed", [False, True])
def test_round_trip(skewed):
    scalp, marks = ellipsoid(HEAD_AXES), equator_landmarks(HEAD_AXES)
    if skewed:
        moved = np.array(
            [[0.004, 0.098, -0.01], [-0.078, 0.006, 0.004], [0.078, -0.003, -0.005], [-0.006, -0.095, 0.02]]
        )
        marks = Landmarks(*project(scalp, moved).positions)
    points = project(scalp, dense_cloud(scalp, 0.01).positions[::5] * 0.999).positions
    far = np.minimum(*[np.linalg.norm(points - ear, axis=1) for ear in (marks.lpa, marks.rpa)]) > 15e-3
    points = points[far]
    assert len(points) > 400
    back = point_at(scalp, marks, arc_fractions(scalp, marks, points))
    assert np.linalg.norm(back - points, axis=1).max() < 1e-6


def test_one_site_on_two_sizes_of_one_head():
    small, large = (tuple(np.array(HEAD_AXES) * size) for size in (1.0, 1.1))
    sites = np.array([[0.1, 0.3], [0.4, 0.62], [0.93, 0.5], [0.3, 0.2]])
    a = point_at(ellipsoid(small), equator_landmarks(small), sites)
    b = point_at(ellipsoid(large), equator_landmarks(large), sites)
    assert np.allclose(a * 1.1, b, atol=1e-9)
