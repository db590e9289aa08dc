"""Rigid housings: tangent to a sphere, clear of a bump, averaged normals; poses are right-handed and face
the front.
"""

import numpy as np
import pytest
import trimesh
from synthetic_head import ellipsoid_head

from layout.anatomy.head import Surface
from layout.anatomy.scalp_points import SurfaceCloud, dense_cloud, project, tangents_at
from layout.sensing.housing import CLOUD_EDGE, Footprint, Rest, face_radius, poses, rest_on_scalp

RADIUS = 0.09  # m


@pytest.fixture(scope="module")
def sphere():
    return ellipsoid_head((RADIUS,) * 3, 5).scalp


def test_on_a_sphere_the_face_is_the_tangent_plane(sphere):
    sites = sphere.vertices[::400]
    rest = rest_on_scalp(Footprint(dense_cloud(sphere, CLOUD_EDGE), 0.0104), sites, hair=3e-3)
    assert np.allclose(rest.axes, sites / RADIUS, atol=1.5e-3)  # 0.1 degrees
    assert np.linalg.norm(rest.faces, axis=1) == pytest.approx(RADIUS + 3e-3, abs=5e-5)


@pytest.mark.slow
def test_a_bump_under_the_face_pushes_the_housing_out(sphere):
    """A 4 mm bump 7 mm beside the site: under the 10 mm face it lifts it to the bump's top; a 2.5 mm face
    does not meet it.
    """
    v, faces = trimesh.remesh.subdivide(sphere.vertices, sphere.faces)
    beside = (v[:, 2] > 0) & (np.abs(np.linalg.norm(v[:, :2], axis=1) - 0.007) < 0.5e-3)
    top = v[np.flatnonzero(beside)[0]]
    bump = 4e-3 * np.exp(-np.sum((v - top) ** 2, axis=1) / 1.2e-3**2)
    bumpy = Surface(v + bump[:, None] * v / np.linalg.norm(v, axis=1, keepdims=True), faces)
    cloud = dense_cloud(bumpy, 1e-3)
    site, up = np.array([[0, 0, RADIUS]]), np.array([[0.0, 0, 1]])
    summit = bumpy.vertices[:, 2].max() - RADIUS
    assert summit > 3e-3
    assert Footprint(cloud, 0.0104).clearance(site, up)[0] == pytest.approx(summit, abs=1e-4)
    assert Footprint(cloud, 0.0025).clearance(site, up)[0] == pytest.approx(0, abs=1e-4)


def test_no_scalp_under_any_face_stands_above_it(head):
    scalp = head.scalp
    cloud = dense_cloud(scalp, CLOUD_EDGE)
    sites = project(scalp, scalp.vertices[::50] * 0.999).positions
    rest = rest_on_scalp(Footprint(cloud, 0.0104), sites, hair=0.0)
    for axis, face in zip(rest.axes, rest.faces, strict=True):
        offset = cloud.positions - face
        height = offset @ axis
        under = (np.linalg.norm(offset - height[:, None] * axis, axis=1) <= 0.0104) & (height > -0.02)
        assert height[under].max() <= 1e-9


def test_normal_is_the_average_over_the_footprint(sphere):
    """Half flat, half sloping 20°: at the crease the averaged normal leans by half of it, the small face's
    too.
    """
    x, y = np.meshgrid(np.linspace(-0.03, 0.03, 61), np.linspace(-0.03, 0.03, 61))
    slope = np.tan(np.radians(20))
    points = np.column_stack([x.ravel(), y.ravel(), np.where(x > 0, -slope * x, 0).ravel()])
    normals = np.where(x.ravel()[:, None] > 1e-9, [np.sin(np.radians(20)), 0, np.cos(np.radians(20))], [0, 0, 1.0])
    areas = np.where(x.ravel() > 1e-9, 1 / np.cos(np.radians(20)), 1.0)
    areas[np.abs(x.ravel()) < 1e-9] = 0.0
    found = Footprint(SurfaceCloud(points, normals, areas), 0.010).normals(np.zeros((1, 3)))[0]
    assert np.degrees(np.arctan2(found[0], found[2])) == pytest.approx(10, abs=0.8)


def test_poses():
    axes = np.array([[0, 0, 1.0], [1.0, 0, 0], [0, 0.6, 0.8], [0, 1.0, 0], [0, -1.0, 0]])
    pose = poses(Rest(axes, np.full((5, 3), 0.1)))
    assert np.allclose(np.linalg.det(pose[:, :3, :3]), 1)
    assert np.allclose(np.einsum("nij,nik->njk", pose[:, :3, :3], pose[:, :3, :3]), np.eye(3))
    assert np.allclose(pose[:, :3, 2], axes)
    assert np.allclose(pose[:, :3, 3], 0.1)
    assert np.allclose(pose[0], [[1, 0, 0, 0.1], [0, 1, 0, 0.1], [0, 0, 1, 0.1], [0, 0, 0, 1]])


def test_tangents_point_to_the_front_as_nearly_as_they_can():
    normals = np.random.default_rng(2).normal(size=(500, 3))
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    first, second = np.moveaxis(tangents_at(normals), 1, 0)
    assert np.allclose(np.einsum("nd,nd->n", first, normals), 0, atol=1e-12)
    assert np.allclose(np.cross(normals, first), second)
    turned = np.cos(0.1) * first + np.sin(0.1) * second
    assert (first[:, 1] > turned[:, 1]).all()


def test_face_radius():
    assert face_radius((0.006, 0.008, 1.0)) == pytest.approx(0.005)
