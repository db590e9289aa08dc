"""Crossing faces against linear programming, and on bodies where the answer is known."""

import numpy as np
import pytest
from scipy.optimize import linprog

from layout.anatomy.star_surface import icosphere
from layout.anatomy.triangle_crossings import crossing_faces


def have_a_common_point(a, b):
    """Whether barycentric coordinates of one point exist in both triangles (3, 3)."""
    equal = np.hstack([a.T, -b.T])
    sums = np.array([[1, 1, 1, 0, 0, 0], [0, 0, 0, 1, 1, 1]])
    return linprog(np.zeros(6), A_eq=np.vstack([equal, sums]), b_eq=[0, 0, 0, 1, 1], method="highs").status == 0


def test_pairs_of_random_triangles_agree_with_a_linear_programme():
    rng = np.random.default_rng(5)
    met = 0
    for _ in range(150):
        points = rng.normal(size=(6, 3))
        found = crossing_faces(points, np.array([[0, 1, 2], [3, 4, 5]]))
        expected = have_a_common_point(points[:3], points[3:])
        met += expected
        assert found.tolist() == [expected, expected]
    assert 15 < met < 135


def test_a_soup_of_triangles_agrees_with_all_pairs():
    rng = np.random.default_rng(6)
    corners = rng.uniform(size=(30, 1, 3)) + 0.2 * rng.normal(size=(30, 3, 3))
    found = crossing_faces(corners.reshape(-1, 3), np.arange(90).reshape(30, 3))
    expected = np.zeros(30, dtype=bool)
    for i in range(30):
        for j in range(i + 1, 30):
            if have_a_common_point(corners[i], corners[j]):
                expected[[i, j]] = True
    np.testing.assert_array_equal(found, expected)
    assert 0 < expected.sum() < 30


def test_triangles_with_a_common_corner_cross_where_an_edge_goes_through():
    fan = np.array([[0, 0, 0], [2, 0, 0], [0, 2, 0], [1, 0.2, -1], [0.2, 1, 1], [3, -1, 1.0], [3, -1, -1.0]])
    assert crossing_faces(fan, np.array([[0, 1, 2], [0, 3, 4]])).all()
    assert not crossing_faces(fan, np.array([[0, 1, 2], [0, 5, 6]])).any()


def test_neighbours_cross_only_when_folded_flat():
    flat = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0.3, 0.9, 1e-6], [0.3, -0.9, 0.0]])
    assert crossing_faces(flat, np.array([[0, 1, 2], [1, 0, 3]])).all()
    assert not crossing_faces(flat, np.array([[0, 1, 2], [1, 0, 4]])).any()


@pytest.mark.parametrize("axis", [0, 1, 2])
def test_a_sphere_does_not_cross_itself_and_two_that_overlap_do(axis):
    vertices, faces = icosphere(2)
    vertices = vertices * np.array([1.0, 1.3, 0.8])
    assert not crossing_faces(vertices, faces).any()
    shift = np.eye(3)[axis] * 0.7
    both = crossing_faces(np.vstack([vertices, vertices + shift]), np.vstack([faces, faces + len(vertices)]))
    # The ones that cross lie on the middle plane between the two, where both surfaces are at one place.
    middle = np.vstack([vertices[faces], vertices[faces] + shift]).mean(axis=1)
    assert both.any()
    assert np.abs(middle[both][:, axis] - 0.35).max() < 0.25
    apart = np.vstack([vertices, vertices + 4 * np.eye(3)[axis]])
    assert not crossing_faces(apart, np.vstack([faces, faces + len(vertices)])).any()
