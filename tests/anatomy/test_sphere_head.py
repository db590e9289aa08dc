"""The layered-sphere head."""

import numpy as np
import pytest
import trimesh
from built_heads import sphere

from layout.anatomy.frame import head_frame
from layout.anatomy.sphere_head import EYE_DEPTH, LOWEST, build_sphere_head
from layout.errors import BriefError

MESHES = ("coarse", "standard", "fine")


def test_surfaces_are_spheres():
    head = sphere("standard")
    for name, radius in (("inner_skull", 0.080), ("outer_skull", 0.085), ("scalp", 0.092)):
        surface = getattr(head, name)
        np.testing.assert_allclose(np.linalg.norm(surface.vertices, axis=1), radius, rtol=1e-12)
        assert surface.mesh.is_watertight
        assert surface.mesh.volume == pytest.approx(4 / 3 * np.pi * radius**3, rel=2e-3)
        np.testing.assert_allclose(surface.normals, surface.vertices / radius, atol=5e-3)
    assert head.mni_to_head is None
    assert not head.normal_orientation


def test_landmarks_are_in_the_head_frame():
    head = sphere("standard")
    np.testing.assert_allclose(head_frame(head.landmarks), np.eye(4), atol=1e-15)
    np.testing.assert_array_equal(head.landmarks.inion, [0, -0.092, 0])


@pytest.mark.parametrize("mesh", MESHES)
def test_sources_fill_the_cap_evenly(mesh):
    """Exact cap: area 2πR²(1 - l), and centre of mass at z = R(1 + l)/2 (Archimedes: area is even in z)."""
    cortex = sphere(mesh).cortex
    radius = 0.068
    np.testing.assert_allclose(np.linalg.norm(cortex.positions, axis=1), radius, rtol=1e-12)
    np.testing.assert_allclose(cortex.normals, cortex.positions / radius, atol=1e-12)
    assert cortex.areas.sum() == pytest.approx(2 * np.pi * radius**2 * (1 - LOWEST), rel=1e-12)
    mean_z = cortex.areas @ cortex.positions[:, 2] / cortex.areas.sum()
    assert mean_z == pytest.approx(radius * (1 + LOWEST) / 2, rel=0.01)
    assert cortex.areas.max() < 2 * cortex.areas.min()
    assert ((cortex.side == -1) == (cortex.positions[:, 0] < 0)).all()
    mesh = trimesh.Trimesh(cortex.positions, cortex.faces, process=False)
    assert (np.einsum("ij,ij->i", mesh.face_normals, mesh.triangles_center) > 0).all()


def test_densities_double():
    coarse, standard, fine = (len(sphere(mesh).cortex) for mesh in MESHES)
    assert fine == pytest.approx(2 * standard, rel=0.01)
    assert coarse == pytest.approx(standard / 4, rel=0.02)


def test_four_layers_use_the_fluid_as_the_brain_surface():
    head = build_sphere_head((0.079, 0.080, 0.085, 0.090), 0.012, "coarse")
    assert np.linalg.norm(head.inner_skull.vertices[0]) == pytest.approx(0.080)
    assert np.linalg.norm(head.cortex.positions[0]) == pytest.approx(0.067)
    np.testing.assert_array_equal(head.sphere[1], [0.079, 0.080, 0.085, 0.090])


def test_eyes_are_in_front_under_the_scalp():
    eyes = sphere("standard").eyes
    np.testing.assert_allclose(np.linalg.norm(eyes, axis=1), 0.092 - EYE_DEPTH)
    assert (eyes[:, 1] > np.abs(eyes[:, 0])).all()
    assert eyes[0, 0] < 0 < eyes[1, 0]


@pytest.mark.parametrize(
    ("radii", "depth", "sentence"),
    [
        ((0.08, 0.085), 0.01, r"^head\.radii_mm must be three or four increasing radii, not \[80, 85\]\.$"),
        ((0.08, 0.08, 0.09), 0.01, r"^head\.radii_mm must be .* not \[80, 80, 90\]\.$"),
        ((0.0, 0.08, 0.09), 0.01, r"^head\.radii_mm must be .* not \[0, 80, 90\]\.$"),
        ((0.08, 0.085, 0.092), 0.08, r"^head\.cortex_depth_mm must be between 0 and .* 80 mm, not 80\.$"),
        ((0.08, 0.085, 0.092), 0.0, r"^head\.cortex_depth_mm must be between 0 and .* 80 mm, not 0\.$"),
    ],
)
def test_impossible_spheres_are_refused(radii, depth, sentence):
    with pytest.raises(BriefError, match=sentence):
        build_sphere_head(radii, depth, "coarse")
