"""Background columns: the patches' responses against plain loops."""

from dataclasses import replace

import numpy as np
import pytest

from layout.anatomy.sphere_head import build_sphere_head
from layout.noise import background
from layout.noise.background import average_referenced_rms, background_columns, patch_columns
from layout.physics.channels import electrodes_at, joined, normal_magnetometers_above
from layout.physics.sphere_model import fit_sphere_model, map_cortex


@pytest.fixture
def cortex():
    """labels out of order, sources without area, and a patch of nothing else: (areas, labels)."""
    rng = np.random.default_rng(4)
    labels = rng.permutation(np.repeat([0, 1, 2, 3], [5, 9, 1, 7]))
    areas = rng.uniform(1, 3, len(labels)) * (rng.random(len(labels)) > 0.3)
    areas[labels == 2] = 0.0
    return areas, labels


def test_patch_columns_along_normals_against_a_loop(cortex):
    areas, labels = cortex
    gain = np.random.default_rng(1).standard_normal((6, len(areas)))
    expected = np.zeros((6, 4))
    for source, patch in enumerate(labels):
        expected[:, patch] += gain[:, source] * areas[source]
    np.testing.assert_allclose(patch_columns(gain, areas, labels), expected, rtol=1e-13, atol=1e-13)
    assert (expected[:, 2] == 0).all()


def test_patch_columns_of_free_moments_share_the_variance_among_three_components(cortex):
    """The covariance is the mean over x, y and z of that of moments held along x, y or z."""
    areas, labels = cortex
    gain = np.random.default_rng(2).standard_normal((6, len(areas), 3))
    columns = patch_columns(gain, areas, labels)
    assert columns.shape == (6, 12)
    covariance = np.zeros((6, 6))
    for axis in range(3):
        for patch in range(4):
            members = np.flatnonzero(labels == patch)
            seen = sum(gain[:, j, axis] * areas[j] for j in members)
            covariance += np.outer(seen, seen) / 3
    np.testing.assert_allclose(columns @ columns.T, covariance, rtol=1e-12)


def test_rms_against_the_mean():
    columns = np.random.default_rng(3).standard_normal((7, 5))
    centring = np.eye(7) - 1 / 7
    covariance = centring @ columns @ columns.T @ centring
    assert average_referenced_rms(columns) == pytest.approx(np.sqrt(np.trace(covariance) / 7), rel=1e-13)
    assert average_referenced_rms(columns + np.arange(5)) == pytest.approx(average_referenced_rms(columns), rel=1e-12)


@pytest.mark.parametrize("along_normals", [True, False])
def test_pieces_do_not_show(monkeypatch, along_normals):
    """Cut into many pieces or computed at once, with labels out of order, the columns are the same."""
    head = build_sphere_head((0.080, 0.085, 0.092), 0.012, "coarse")
    head = replace(head, normal_orientation=along_normals)
    cortex = map_cortex(fit_sphere_model(head, np.array([0.33, 0.0165, 0.33])), head)
    points = 0.092 * np.array([[0, 0, 1.0], [0.6, 0, 0.8], [0, 0.8, 0.6]])
    channels = joined(electrodes_at(points), normal_magnetometers_above(points, points / 0.092, 6.5e-3))
    rng = np.random.default_rng(6)
    n = len(head.cortex)
    labels = rng.integers(0, 40, n)
    areas = head.cortex.areas * (rng.random(n) > 0.1)
    gain = channels.lead_field(cortex, np.arange(n), free=not along_normals).gain
    expected = patch_columns(gain, areas, labels)
    for size in (1, 5000, 10**9):
        monkeypatch.setattr(background, "GAIN_AT_ONCE", size)
        columns = background_columns(channels, cortex, labels, areas)
        np.testing.assert_allclose(columns, expected, rtol=1e-10, atol=1e-10 * np.abs(expected).max(axis=1).min())
