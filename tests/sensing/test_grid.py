"""The even grid: no two sites too near, no hole, mirror images, the same every time, ordered front to
back.
"""

import numpy as np
import pytest
from scipy.spatial import cKDTree
from synthetic_head import ellipsoid_head

from layout.anatomy.head import Surface
from layout.anatomy.scalp_points import dense_cloud, project
from layout.errors import BriefError
from layout.sensing.grid import even_grid

BOTTOM = -0.05  # m


def lopsided(scalp):
    """The same scalp with its right side 8 % wider and a bump."""
    v = scalp.vertices.copy()
    v[:, 0] *= np.where(v[:, 0] > 0, 1.08, 1.0)
    v *= 1 + 0.06 * np.exp(-np.sum((v - [0.05, 0.05, 0.05]) ** 2, axis=1) / 0.03**2)[:, None]
    return Surface(v, scalp.faces)


@pytest.mark.parametrize("pitch", [0.010, 0.015, 0.021, 0.035])
@pytest.mark.parametrize("shape", ["ellipsoid", "lopsided"])
def test_even_at_any_pitch(head, pitch, shape):
    scalp = head.scalp if shape == "ellipsoid" else lopsided(head.scalp)
    sites = even_grid(scalp, pitch, BOTTOM)
    nearest = cKDTree(sites).query(sites, k=2)[0][:, 1]
    assert nearest.min() >= 0.9 * pitch
    assert np.median(nearest) < 1.15 * pitch
    inside = dense_cloud(scalp, 3e-3).positions
    inside = inside[inside[:, 2] > BOTTOM + 0.5 * pitch]
    assert cKDTree(sites).query(inside)[0].max() <= pitch
    assert np.linalg.norm(project(scalp, sites).positions - sites, axis=1).max() < 3e-6


def test_left_and_right_mirror_each_other(head):
    sites = even_grid(head.scalp, 0.015, BOTTOM)
    assert cKDTree(sites).query(sites * [-1, 1, 1])[0].max() < 1e-5
    assert (np.abs(sites[:, 0]) < 1e-6).sum() > 5


def test_the_same_every_time(head):
    assert np.array_equal(even_grid(head.scalp, 0.02, BOTTOM), even_grid(head.scalp, 0.02, BOTTOM))


def test_order_front_to_back_and_left_to_right(head):
    pitch = 0.02
    sites = even_grid(head.scalp, pitch, BOTTOM)
    band = np.floor(-sites[:, 1].round(5) / pitch)
    assert (np.diff(band) >= 0).all()
    same = np.diff(band) == 0
    assert (np.diff(sites[:, 0])[same] > -2e-5).all()
    assert sites[0, 1] > 0.08
    assert sites[-1, 1] < -0.08


def test_a_coarse_mesh_does_not_matter():
    sites = even_grid(ellipsoid_head(subdivisions=2).scalp, 0.012, BOTTOM)
    nearest = cKDTree(sites).query(sites, k=2)[0][:, 1]
    assert nearest.min() >= 0.9 * 0.012


def test_too_wide_a_pitch_is_refused(head):
    with pytest.raises(BriefError, match=r"grid_pitch_mm.*200"):
        even_grid(head.scalp, 0.2, BOTTOM)
