"""Plane cuts: length of a circle, agreement with another library's section, and what cannot be cut."""

import numpy as np
import pytest
import trimesh
from ellipsoids import ellipsoid

from layout.anatomy.contours import cumulative_length, plane_loops, three_point_contour, three_point_loop
from layout.anatomy.head import Surface
from layout.anatomy.scalp_points import project
from layout.errors import LayoutError

LEFT, TOP, RIGHT = np.eye(3)[0] * -1, np.eye(3)[2], np.eye(3)[0]


def test_half_circle_of_the_sphere_has_length_pi():
    contour = three_point_contour(ellipsoid(subdivisions=5), LEFT, TOP, RIGHT)
    assert contour.end_length == pytest.approx(np.pi, rel=5e-4)
    assert contour.via_fraction == pytest.approx(0.5, abs=1e-9)
    assert np.allclose(contour.at(0.0), LEFT)
    assert np.allclose(contour.at(1.0), RIGHT)
    assert np.allclose(contour.at(0.5), TOP)
    assert contour.at(np.linspace(0, 1, 7)).shape == (7, 3)


def test_the_way_goes_through_the_middle_point():
    over = three_point_contour(ellipsoid(), LEFT, TOP, RIGHT)
    under = three_point_contour(ellipsoid(), LEFT, -TOP, RIGHT)
    assert over.points[:, 2].min() > -1e-12
    assert under.points[:, 2].max() < 1e-12


def test_loop_closes_and_holds_all_three_points():
    surface = ellipsoid((0.08, 0.1, 0.09))
    start, via, end = project(surface, np.array([[0.07, 0.03, 0.05], [0.0, 0.09, 0.06], [-0.06, 0.0, 0.07]])).positions
    loop = three_point_loop(surface, start, via, end)
    assert np.allclose(loop.points[0], loop.points[-1])
    assert np.allclose(loop.at_length(loop.via_length), via, atol=1e-12)
    assert np.allclose(loop.at_length(loop.end_length), end, atol=1e-12)
    assert loop.via_length < loop.end_length < loop.lengths[-1]
    assert np.linalg.norm(project(surface, loop.points).positions - loop.points, axis=1).max() < 1e-12


def test_whole_cut_agrees_with_another_library():
    surface = ellipsoid((0.08, 0.1, 0.09))
    normal = np.array([0.3, -0.5, 0.81])
    normal /= np.linalg.norm(normal)
    (loop,) = plane_loops(surface, normal, 0.02)
    section = surface.mesh.section(plane_origin=normal * 0.02, plane_normal=normal)
    assert cumulative_length(loop)[-1] == pytest.approx(section.length, rel=1e-9)


def test_of_two_bodies_the_one_with_the_points_is_cut():
    near, far = ellipsoid(subdivisions=3), ellipsoid(subdivisions=3)
    both = Surface(
        np.vstack([far.vertices + np.array([5, 0, 0]), near.vertices]),
        np.vstack([far.faces, near.faces + len(far.vertices)]),
    )
    contour = three_point_contour(both, LEFT, TOP, RIGHT)
    assert np.linalg.norm(contour.points, axis=1).max() < 1.001


def test_points_on_a_line_are_refused():
    with pytest.raises(LayoutError, match="line"):
        three_point_contour(ellipsoid(), LEFT, np.zeros(3), RIGHT)


def test_a_plane_that_misses_is_refused():
    with pytest.raises(LayoutError, match="does not cut"):
        three_point_contour(ellipsoid(), LEFT + 9 * TOP, np.array([0, 1, 9.0]), RIGHT + 9 * TOP)


def test_an_open_surface_is_refused():
    mesh = trimesh.creation.icosphere(subdivisions=3)
    faces = np.asarray(mesh.faces)[mesh.triangles_center[:, 2] < 0.7]
    with pytest.raises(LayoutError, match="closed"):
        three_point_contour(Surface(np.asarray(mesh.vertices), faces), LEFT, TOP, RIGHT)
