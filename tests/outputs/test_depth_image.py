"""The depth buffer against ray casting and a sphere's own formula."""

import numpy as np
import trimesh

from layout.outputs.pictures.depth_image import seen_faces


def test_same_faces_as_ray_casting():
    rng = np.random.default_rng(3)
    ball = trimesh.creation.icosphere(subdivisions=2)
    # folds that hide each other, in general position
    points = np.asarray(ball.vertices) * (1 + 0.5 * rng.random((len(ball.vertices), 1)))
    points = points * 18 + [30.217, 29.611, 0.0]
    mesh = trimesh.Trimesh(points, ball.faces, process=False)
    face, weights, height = seen_faces(points, np.asarray(ball.faces), (60, 62))
    rows, columns = np.indices(face.shape)
    origins = np.stack([columns.ravel(), rows.ravel(), np.full(face.size, 100.0)], axis=1)
    ray_face = mesh.ray.intersects_first(origins, np.tile([0.0, 0.0, -1.0], (face.size, 1)))
    np.testing.assert_array_equal(face.ravel(), ray_face)
    hit = face >= 0
    corners = points[ball.faces[face[hit]]]
    spot = np.einsum("pk,pkx->px", weights[hit], corners)
    np.testing.assert_allclose(spot[:, :2], np.stack([columns[hit], rows[hit]], axis=1), atol=1e-9)
    np.testing.assert_allclose(spot[:, 2], height[hit], atol=1e-9)


def test_height_of_a_sphere():
    ball = trimesh.creation.icosphere(subdivisions=5)
    points = np.asarray(ball.vertices) * 40 + 50
    face, _, height = seen_faces(points, np.asarray(ball.faces), (101, 101))
    rows, columns = np.indices(face.shape)
    distance2 = (rows - 50.0) ** 2 + (columns - 50.0) ** 2
    core = distance2 < 30**2
    # a chord of a 1.4-pixel triangle lies at most 1.4² / (8 * 40) under the arc; the slant is cos >= 0.66
    assert np.abs(height - (50 + np.sqrt(np.clip(40**2 - distance2, 0, None))))[core].max() < 0.02
    assert abs(np.count_nonzero(face >= 0) / (np.pi * 40**2) - 1) < 0.01


def test_off_picture_and_edge_on_triangles_are_nothing():
    points = np.array([[-9.0, -9, 0], [-5, -9, 0], [-9, -5, 0], [2, 2, 0], [2, 2, 5], [2, 2, 9]])
    face, weights, height = seen_faces(points, np.array([[0, 1, 2], [3, 4, 5]]), (6, 6))
    assert (face == -1).all()
    assert (weights == 0).all()
    assert np.isneginf(height).all()
