"""Nearest points on a surface against trimesh."""

import numpy as np
import pytest
import trimesh

from layout.anatomy.head import Surface
from layout.physics.nearest_point import nearest_on_surface


def test_same_distances_and_sides_as_the_library(ellipsoid_head):
    surface = ellipsoid_head.inner_skull
    rng = np.random.default_rng(1)
    points = rng.uniform((-0.12, -0.12, -0.08), (0.12, 0.12, 0.16), size=(400, 3))
    near = nearest_on_surface(surface, points)
    # in mm: the library takes squared distances within 1e-8 for equal, in m that is 0.1 mm
    library = trimesh.Trimesh(1e3 * surface.vertices, surface.faces, process=False)
    _, distance, _ = trimesh.proximity.closest_point(library, 1e3 * points)
    np.testing.assert_allclose(1e3 * np.abs(near.inside_depth), distance, rtol=0, atol=1e-8)
    np.testing.assert_array_equal(near.inside_depth > 0, library.contains(1e3 * points))
    np.testing.assert_allclose(
        np.linalg.norm(near.points - points, axis=1), np.abs(near.inside_depth), rtol=0, atol=1e-15
    )


def test_one_triangle_all_regions():
    """One triangle: nearest at corners, edges and inside, where the answer is known by hand."""
    surface = Surface(np.array([[0, 0, 0], [1.0, 0, 0], [0, 1.0, 0]]), np.array([[0, 1, 2]]))
    points = np.array([[0.2, 0.3, 2], [-1, -1, 0.5], [3, -1, 0], [-1, 3, 0], [0.4, -2, 1], [-2, 0.4, 1], [1, 1, -1.0]])
    expected = [[0.2, 0.3, 0], [0, 0, 0], [1, 0, 0], [0, 1, 0], [0.4, 0, 0], [0, 0.4, 0], [0.5, 0.5, 0]]
    near = nearest_on_surface(surface, points)
    np.testing.assert_allclose(near.points, expected, rtol=0, atol=1e-14)
    np.testing.assert_array_equal(near.inside_depth < 0, [True, True, False, False, True, True, False])


def test_normals_are_first_order_in_the_mesh_width():
    """On icospheres 10 mm under the surface the error against the radius halves with every subdivision."""
    u = np.random.default_rng(2).normal(size=(2000, 3))
    u /= np.linalg.norm(u, axis=1, keepdims=True)
    worst = []
    for subdivisions in (3, 4, 5):
        ball = trimesh.creation.icosphere(subdivisions=subdivisions, radius=0.08)
        near = nearest_on_surface(Surface(ball.vertices, ball.faces), 0.07 * u)
        worst.append(np.arccos(np.clip(np.sum(near.normals * u, axis=1), -1, 1)).max())
    assert worst[1] == pytest.approx(worst[0] / 2, rel=0.1)
    assert worst[2] == pytest.approx(worst[1] / 2, rel=0.1)


def test_normals_follow_an_ellipsoid(ellipsoid_head):
    """Against the exact normal (gradient of the quadric) blending adds nothing to the vertices' own error."""
    surface, axes, centre = ellipsoid_head.inner_skull, np.array([0.068, 0.084, 0.072]), [0.001, 0.004, 0.04]

    def error(points, normals):
        exact = (points - centre) / axes**2
        exact /= np.linalg.norm(exact, axis=1, keepdims=True)
        return np.arccos(np.clip(np.sum(exact * normals, axis=1), -1, 1)).max()

    rng = np.random.default_rng(3)
    inside = centre + rng.uniform(0.3, 1, (600, 1)) * (surface.vertices[rng.integers(0, 2562, 600)] - centre)
    near = nearest_on_surface(surface, inside)
    assert error(near.points, near.normals) <= error(surface.vertices, surface.normals) < np.radians(0.5)


def test_no_face_is_passed_over():
    """Against every face measured: faces large and small, a last cluster not full, points near and far."""
    rng = np.random.default_rng(4)
    for n_faces in (1, 31, 32, 33, 320, 1280):
        size = 10.0 ** rng.uniform(-3, -1, (n_faces, 1, 1))
        corners = rng.normal(0, 0.05, (n_faces, 1, 3)) + size * rng.normal(size=(n_faces, 3, 3))
        surface = Surface(corners.reshape(-1, 3), np.arange(3 * n_faces).reshape(-1, 3))
        points = np.concatenate([rng.uniform(-0.2, 0.2, (60, 3)), surface.vertices[:90]])
        every = np.array(
            [
                np.linalg.norm(trimesh.triangles.closest_point(corners, np.tile(p, (n_faces, 1))) - p, axis=1).min()
                for p in points
            ]
        )
        found = nearest_on_surface(surface, points)
        np.testing.assert_allclose(np.abs(found.inside_depth), every, rtol=0, atol=1e-14)


def test_no_points(round_head):
    assert nearest_on_surface(round_head.inner_skull, np.empty((0, 3))).points.shape == (0, 3)
