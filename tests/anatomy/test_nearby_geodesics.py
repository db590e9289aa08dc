"""Distances to near points against great circles on a sphere."""

import numpy as np
import pytest
import trimesh

from layout.anatomy.head import Surface
from layout.anatomy.nearby_geodesics import distances_within, nearest_along

RADIUS = 0.09


@pytest.fixture(scope="module")
def ball():
    mesh = trimesh.creation.icosphere(subdivisions=4, radius=RADIUS)
    return Surface(np.asarray(mesh.vertices), np.asarray(mesh.faces))


@pytest.fixture(scope="module")
def points(ball):
    ways = np.random.default_rng(5).normal(size=(40, 3))
    return trimesh.proximity.closest_point(ball.mesh, RADIUS * ways / np.linalg.norm(ways, axis=1, keepdims=True))[0]


def _great_circle(start, points):
    return RADIUS * np.arccos(np.clip(points @ start / np.linalg.norm(points, axis=1) / np.linalg.norm(start), -1, 1))


@pytest.mark.parametrize("reach", [0.03, 0.08, 0.3])
def test_within_reach_they_are_great_circles_and_beyond_it_infinite(ball, points, reach):
    found = distances_within(ball, points[0], points[1:], reach)
    true = _great_circle(points[0], points[1:])
    clear = np.abs(true - reach) > 2e-3  # not at the edge of the reach
    np.testing.assert_array_equal(np.isfinite(found)[clear], (true < reach)[clear])
    inside = np.isfinite(found)
    np.testing.assert_allclose(found[inside], true[inside], rtol=2e-3, atol=1e-4)


def test_the_nearest_are_found_in_order(ball, points):
    true = _great_circle(points[0], points[1:])
    which, lengths = nearest_along(ball, points[0], points[1:], 5)
    np.testing.assert_array_equal(which, np.argsort(true)[:5])
    np.testing.assert_allclose(lengths, np.sort(true)[:5], rtol=2e-3)


def test_fewer_points_than_asked_for(ball, points):
    assert len(nearest_along(ball, points[0], points[1:3], 5)[0]) == 2
    assert len(nearest_along(ball, points[0], points[:0], 5)[0]) == 0
