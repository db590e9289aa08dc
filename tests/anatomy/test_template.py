"""The template head: size, nesting, landmarks, and the files it needs."""

from itertools import pairwise

import numpy as np
import pytest
import trimesh
from built_heads import template
from references.head_size import AVERAGE_HEAD, MEN, WOMEN
from scipy.spatial import ConvexHull

from layout.anatomy import cortex_files, template_recipe
from layout.anatomy.frame import apply
from layout.anatomy.star_surface import icosphere, radius_along, real_harmonics
from layout.errors import FileError

SURFACES = ("inner_skull", "outer_skull", "scalp")


@pytest.fixture(scope="module")
def head():
    return template("standard")


@pytest.fixture(scope="module")
def pial(head):
    """Vertices of the outer cortical surface in the head frame [m]."""
    sides = cortex_files.read_cortex(cortex_files.cortex_folder())
    points = np.vstack([apply(template_recipe.MNI305_TO_MNI152, side.outer) for side in sides])
    return apply(head.mni_to_head, points * 1e-3)


def about_centre(head, name):
    centre = apply(head.mni_to_head, template_recipe.CENTRE * 1e-3)
    surface = getattr(head, name)
    return surface.vertices - centre, surface.faces


def gap(surface, points):
    """Smallest distance [mm] from points to a surface, by trimesh's exact point-triangle distances."""
    return trimesh.proximity.closest_point(surface.mesh, points)[1].min() * 1e3


def test_size_is_an_average_adults(head):
    """Length from glabella to the farthest point behind, breadth and tape circumference as on people."""
    points = head.scalp.vertices * 1e3
    middle = points[np.abs(points[:, 0]) < 3]
    glabella = max(middle[(middle[:, 1] > 0) & (middle[:, 2] > 20) & (middle[:, 2] < 45)], key=lambda p: p[1])
    behind = middle[middle[:, 1] < 0]
    occiput = behind[np.argmax(np.linalg.norm(behind - glabella, axis=1))]
    length = np.linalg.norm(occiput - glabella)
    above_ears = points[points[:, 2] > 15]
    breadth = np.ptp(above_ears[:, 0])
    along = (occiput - glabella) / length
    up = np.cross([1, 0, 0], -along)
    cut = trimesh.intersections.mesh_plane(head.scalp.mesh, up, glabella * 1e-3).reshape(-1, 3) * 1e3
    tape = ConvexHull(np.stack([cut[:, 0], cut @ along], axis=1)).area  # in two dimensions: the perimeter
    for name, value in {"length": length, "breadth": breadth, "circumference": tape}.items():
        low, high = AVERAGE_HEAD[name]
        assert low <= value <= high, (name, value)
        least = min(mean - 2 * sd for mean, sd in (MEN[name], WOMEN[name]))
        most = max(mean + 2 * sd for mean, sd in (MEN[name], WOMEN[name]))
        assert least <= value <= most, (name, value)


def test_height_over_the_ears_is_an_average_adults(head):
    height = head.scalp.vertices[:, 2].max() * 1e3
    assert WOMEN["tragion_to_top"][0] - 2 * WOMEN["tragion_to_top"][1] <= height
    assert height <= MEN["tragion_to_top"][0] + 2 * MEN["tragion_to_top"][1]


@pytest.mark.parametrize("name", SURFACES)
def test_surfaces_are_closed_outward_and_without_crossings(head, name):
    """Seen from the centre every face turns the same way and together they fill the sphere once.

    Then each ray from the centre meets the surface once, which leaves no room for a crossing.
    """
    vertices, faces = about_centre(head, name)
    assert vertices.shape == (2562, 3)
    mesh = getattr(head, name).mesh
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    assert mesh.volume > 0
    a, b, c = np.swapaxes(vertices[faces] / np.linalg.norm(vertices[faces], axis=2, keepdims=True), 0, 1)
    triple = np.einsum("ij,ij->i", a, np.cross(b, c))
    below = 1 + (a * b).sum(1) + (b * c).sum(1) + (c * a).sum(1)
    solid = 2 * np.arctan2(triple, below)  # van Oosterom & Strackee 1983, IEEE TBME 30:125
    assert solid.min() > 0
    assert solid.sum() == pytest.approx(4 * np.pi, rel=1e-9)


def test_surfaces_are_strictly_nested(head):
    directions, _ = icosphere(6)  # 40,962 rays
    radii = [radius_along(*about_centre(head, name), directions)[0] for name in SURFACES]
    for below, above in pairwise(radii):
        assert (above - below).min() > 4e-3


@pytest.mark.slow
def test_gaps_between_layers(head, pial):
    """Clearances the recipe gives [mm]: the cortex's in MNI152 size, the others even in the head's own."""
    cortex = pial - apply(head.mni_to_head, template_recipe.CENTRE * 1e-3)
    reach = np.linalg.norm(cortex, axis=1)
    above = radius_along(*about_centre(head, "inner_skull"), cortex / reach[:, None])[0] - reach
    assert above.min() > 0
    near = pial[above < 6e-3]  # slanted as these surfaces are, all that come within 3 mm
    assert gap(head.inner_skull, near) / template_recipe.SCALE >= 2.0
    assert gap(head.outer_skull, head.inner_skull.vertices) >= 5.0
    assert gap(head.inner_skull, head.outer_skull.vertices) >= 5.0
    assert gap(head.scalp, head.outer_skull.vertices) >= 5.7
    assert gap(head.outer_skull, head.scalp.vertices) >= 5.7
    assert gap(head.scalp, near) >= 14.0


def test_scalp_has_no_creases(head):
    """Neighbouring faces, some 4 mm wide, turn by less than 12°: normals of sites can be trusted."""
    assert np.degrees(head.scalp.mesh.face_adjacency_angles.max()) < 12


def test_landmarks_define_the_frame_and_lie_on_the_scalp(head):
    marks = head.landmarks
    np.testing.assert_allclose(marks.lpa + marks.rpa, 0, atol=1e-12)
    np.testing.assert_allclose(marks.lpa[1:], 0, atol=1e-12)
    assert marks.rpa[0] > 0
    assert marks.nas[1] > 0
    assert abs(marks.nas[2]) < 1e-12
    assert marks.inion[1] < 0
    points = np.stack(list(vars(marks).values()))
    assert trimesh.proximity.closest_point(head.scalp.mesh, points)[1].max() < 1e-6


def test_mni_to_head_scales_by_the_recipe(head):
    linear = head.mni_to_head[:3, :3]
    np.testing.assert_allclose(linear.T @ linear, np.eye(3) * template_recipe.SCALE**2, atol=1e-12)
    assert np.linalg.det(linear) > 0


def test_stated_landmarks_end_near_the_scalps_own(head):
    """Landmarks in MNI152, from memory: projecting them on this earless scalp moves them a little."""
    x, y, z = template_recipe.PREAURICULAR
    stated = {
        "nas": template_recipe.NASION,
        "inion": template_recipe.INION,
        "rpa": (x, y, z),
        "lpa": (-x, y, z),
    }
    for name, point in stated.items():
        there = apply(head.mni_to_head, np.array(point) * 1e-3)
        moved = np.linalg.norm(there - getattr(head.landmarks, name))
        assert moved < (12e-3 if name in ("lpa", "rpa") else 5e-3), (name, moved)


def test_eyes_lie_under_the_lids_and_outside_the_skull(head):
    depth = trimesh.proximity.signed_distance(head.scalp.mesh, head.eyes) * 1e3
    assert (depth > 12).all()
    assert (depth < 20).all()
    assert (trimesh.proximity.signed_distance(head.outer_skull.mesh, head.eyes) < 0).all()
    assert head.eyes[0, 0] < 0 < head.eyes[1, 0]


def test_harmonics_are_orthonormal():
    """Against exact quadrature: Gauss-Legendre in z, even steps in azimuth."""
    z, weight = np.polynomial.legendre.leggauss(16)
    azimuth = np.arange(32) * 2 * np.pi / 32
    zz, aa = (grid.ravel() for grid in np.meshgrid(z, azimuth))
    rho = np.sqrt(1 - zz**2)
    basis, degrees = real_harmonics(np.stack([rho * np.cos(aa), rho * np.sin(aa), zz], axis=1), 10)
    assert degrees.tolist() == [degree for degree in range(11) for _ in range(2 * degree + 1)]
    full = np.tile(weight, 32) * 2 * np.pi / 32
    np.testing.assert_allclose(basis.T @ (full[:, None] * basis), np.eye(121), atol=1e-12)


def test_radius_along_meets_the_same_point_as_a_ray(head):
    vertices, faces = about_centre(head, "scalp")
    rng = np.random.default_rng(1)
    rays = rng.normal(size=(50, 3))
    rays /= np.linalg.norm(rays, axis=1, keepdims=True)
    mesh = trimesh.Trimesh(vertices, faces, process=False)
    points, which, _ = mesh.ray.intersects_location(np.zeros((50, 3)), rays, multiple_hits=False)
    expected = np.linalg.norm(points, axis=1)[np.argsort(which)]
    np.testing.assert_allclose(radius_along(vertices, faces, rays)[0], expected, rtol=1e-9)


def test_a_missing_package_is_one_sentence(monkeypatch):
    monkeypatch.setattr(cortex_files, "find_spec", lambda name: None)
    with pytest.raises(FileError, match=r"^The template head needs the files of the package nilearn.*\.$"):
        cortex_files.cortex_folder()


def test_a_missing_or_damaged_file_is_named(tmp_path):
    with pytest.raises(FileError, match=r"pial_left\.gii\.gz"):
        cortex_files.read_cortex(tmp_path)
    (tmp_path / "pial_left.gii.gz").write_bytes(b"no surface")
    with pytest.raises(FileError, match=r"pial_left\.gii\.gz"):
        cortex_files.read_cortex(tmp_path)
