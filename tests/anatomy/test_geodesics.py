"""Distances over the scalp: great circles, quarter ellipses, starts inside faces, points near the start."""

import numpy as np
import pytest
from ellipsoids import ellipsoid, equator_landmarks, quarter_ellipse

from layout.anatomy.geodesics import geodesic_distances, great_circle_distances, landmark_distances
from layout.anatomy.head import Landmarks
from layout.anatomy.scalp_points import dense_cloud, project

RADIUS = 0.09  # m


def test_closed_form_of_a_sphere_scalp():
    centre, size = np.array([0.01, -0.02, 0.03]), (RADIUS,) * 3
    marks = equator_landmarks(size)
    moved = Landmarks(*[p + centre for p in (marks.nas, marks.lpa, marks.rpa, marks.inion)])
    points = ellipsoid(size, 2).vertices
    starts = np.array([marks.nas, marks.lpa, marks.rpa, marks.inion])
    found = great_circle_distances(centre, moved, points + centre)
    assert np.allclose(found, great_circle(starts, points), atol=1e-9)


def great_circle(starts, points):
    a, b = (x / np.linalg.norm(x, axis=1, keepdims=True) for x in (points, starts))
    return RADIUS * np.arccos(np.clip(a @ b.T, -1, 1))


def test_great_circles_from_the_landmarks():
    size = (RADIUS,) * 3
    scalp, marks = ellipsoid(size), equator_landmarks(size)
    points = dense_cloud(ellipsoid(size, 2), 1).positions[::3]
    starts = np.array([marks.nas, marks.lpa, marks.rpa, marks.inion])
    found = landmark_distances(scalp, marks, points)
    assert found.shape == (len(points), 4)
    assert np.abs(found - great_circle(starts, points)).max() < 0.5e-3


def test_starts_inside_faces_and_on_edges():
    scalp = ellipsoid((RADIUS,) * 3)
    triangle = scalp.vertices[scalp.faces[1000]]
    inside = triangle.mean(axis=0)
    edge = triangle[:2].mean(axis=0)
    near_corner = 0.985 * triangle[0] + 0.01 * triangle[1] + 0.005 * triangle[2]
    starts = np.array([inside, edge, near_corner, triangle[2]])
    points = np.array([-inside, inside, edge, scalp.vertices[77], scalp.vertices[2000]])
    found = geodesic_distances(scalp, starts, points)
    assert np.abs(found - great_circle(starts, points)).max() < 0.5e-3


def test_points_near_a_start():
    """Where a source is a few millimetres away linear interpolation over a face would be off by a good part
    of it.
    """
    scalp = ellipsoid((RADIUS,) * 3)
    start = scalp.vertices[500:501]
    around = start + np.random.default_rng(4).normal(scale=4e-3, size=(40, 3))
    points = project(scalp, around).positions
    found = geodesic_distances(scalp, start, points)
    assert np.abs(found - great_circle(start, points)).max() < 0.1e-3


def test_quarter_ellipses():
    a, b, c = axes = (0.078, 0.098, 0.09)
    top = np.array([[0.0, 0.0, c]])
    found = landmark_distances(ellipsoid(axes), equator_landmarks(axes), top)[0]
    expected = [quarter_ellipse(b, c), quarter_ellipse(a, c), quarter_ellipse(a, c), quarter_ellipse(b, c)]
    assert found == pytest.approx(expected, rel=1e-3)


def test_a_distance_is_the_same_both_ways():
    axes = (0.078, 0.098, 0.09)
    scalp = ellipsoid(axes, 3)
    points = project(scalp, np.random.default_rng(1).normal(size=(6, 3))).positions
    found = geodesic_distances(scalp, points, points)
    assert np.abs(found - found.T).max() < 0.3e-3
    assert np.diag(found).max() < 0.2e-3
