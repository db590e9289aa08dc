"""Sources of the template's cortex: counts, areas, normals, parents, neighbours."""

import numpy as np
import pytest
import trimesh
from built_heads import template
from references.average_cortex import CORTEX_AREA_CM2, CORTEX_VERTICES, CORTEX_VERTICES_TOLERANCE
from scipy.sparse.csgraph import connected_components

from layout.anatomy.cortex import PARENT_VERTICES, not_cortex
from layout.anatomy.cortex_files import cortex_folder, read_cortex
from layout.anatomy.frame import apply
from layout.anatomy.mesh_graph import at_face_centres, edges, face_links, parent_faces
from layout.anatomy.star_surface import icosphere, radius_along
from layout.anatomy.template_recipe import MNI305_TO_MNI152

MESHES = ("coarse", "standard", "fine")


@pytest.mark.parametrize("mesh", MESHES)
def test_sources_are_well_formed(mesh):
    cortex = template(mesh).cortex
    n = len(cortex)
    assert cortex.positions.shape == cortex.normals.shape == (n, 3)
    assert cortex.side.shape == (n,)
    assert cortex.side.dtype == np.int8
    np.testing.assert_allclose(np.linalg.norm(cortex.normals, axis=1), 1, atol=1e-12)
    assert cortex.areas.min() > 0
    assert cortex.faces.min() == 0
    assert cortex.faces.max() == n - 1
    assert (np.ptp(cortex.side[cortex.faces], axis=1) == 0).all()
    assert connected_components(edges(cortex.faces, n))[0] == 2


def test_densities_share_the_total_area_and_double():
    coarse, standard, fine = (template(mesh).cortex for mesh in MESHES)
    for side in (-1, 1):
        whole = standard.areas[standard.side == side].sum()
        for other in (coarse, fine):
            assert other.areas[other.side == side].sum() == pytest.approx(whole, rel=1e-12)
    assert len(fine) == pytest.approx(2 * len(standard), rel=0.01)
    assert len(coarse) == pytest.approx(len(standard) / 4, rel=0.01)
    low, high = CORTEX_AREA_CM2
    assert low <= standard.areas.sum() * 1e4 <= high


def test_total_area_is_the_kept_triangles_area():
    """Vertex shares against trimesh's area of the triangles between sources: more only by the border's."""
    cortex = template("standard").cortex
    inside = trimesh.Trimesh(cortex.positions, cortex.faces, process=False).area
    assert inside < cortex.areas.sum() < 1.01 * inside


def test_left_out_wall_agrees_with_the_makers_label():
    side = template("standard").cortex.side
    for which, count in CORTEX_VERTICES.items():
        assert (side == which).sum() == pytest.approx(count, rel=CORTEX_VERTICES_TOLERANCE)


def test_sources_lie_between_the_two_surfaces():
    head = template("standard")
    sides = read_cortex(cortex_folder())
    for side in sides:
        keep = ~not_cortex(side)
        outer, inner = (
            apply(head.mni_to_head, apply(MNI305_TO_MNI152, x[keep]) * 1e-3) for x in (side.outer, side.inner)
        )
        positions = head.cortex.positions[head.cortex.side == side.side]
        np.testing.assert_allclose(positions, (outer + inner) / 2, atol=1e-9)
        normals = head.cortex.normals[head.cortex.side == side.side]
        outward = np.einsum("ij,ij->i", normals, outer - inner)
        thick = np.linalg.norm(outer - inner, axis=1) > 1e-3
        assert (outward[thick] > 0).mean() > 0.99  # normals point from white matter to the surface
        assert np.sign(positions[:, 0].mean()) == side.side


def test_every_source_is_inside_the_inner_skull():
    for mesh in MESHES:
        head = template(mesh)
        centre = head.inner_skull.vertices.mean(axis=0)
        out = head.cortex.positions - centre
        reach = np.linalg.norm(out, axis=1)
        bone = head.inner_skull
        above, _ = radius_along(bone.vertices - centre, bone.faces, out / reach[:, None])
        assert (above - reach).min() > 2e-3


def test_coarse_is_the_parent_mesh():
    """Every coarse source is one of the standard ones, and the parent faces close to one outward surface."""
    coarse, standard = template("coarse").cortex, template("standard").cortex
    known = {tuple(p) for p in standard.positions}
    assert all(tuple(p) in known for p in coarse.positions)
    side = read_cortex(cortex_folder())[0]
    faces = parent_faces(side.faces, PARENT_VERTICES)
    parent = trimesh.Trimesh(side.inner[:PARENT_VERTICES], faces, process=False)
    assert parent.is_watertight
    assert parent.is_winding_consistent
    assert parent.euler_number == 2
    assert parent.volume > 0


def test_parent_faces_of_a_halved_mesh():
    whole = trimesh.creation.icosphere(subdivisions=2)
    halves = trimesh.creation.icosphere(subdivisions=3)
    np.testing.assert_allclose(halves.vertices[: len(whole.vertices)], whole.vertices, atol=1e-15)
    found = parent_faces(halves.faces, len(whole.vertices))

    def canonical(faces):
        first = np.argmin(faces, axis=1)
        turned = np.take_along_axis(faces, (first[:, None] + np.arange(3)) % 3, axis=1)
        return sorted(map(tuple, turned))

    assert canonical(found) == canonical(np.asarray(whole.faces))
    with pytest.raises(ValueError, match="halved"):
        parent_faces(halves.faces[:, ::-1], len(whole.vertices) - 1)


def test_face_links_close_the_sphere():
    """The links over the faces of a closed mesh are a closed outward mesh with the faces as vertices."""
    directions, faces = icosphere(2)
    links = face_links(faces)
    mesh = trimesh.Trimesh(directions[faces].mean(axis=1), links, process=False)
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    assert mesh.euler_number == 2
    assert mesh.volume == pytest.approx(trimesh.Trimesh(directions, faces).volume, rel=0.1)


def test_interpolation_at_face_centres_keeps_the_curve():
    """On a sphere, where the plain mean of a face's corners lies h²/2 too deep (h: corner to centre)."""
    plain, curved = [], []
    for subdivisions in (2, 3, 4):
        directions, faces = icosphere(subdivisions)
        plain.append(1 - np.linalg.norm(directions[faces].mean(axis=1), axis=1).min())
        curved.append(np.abs(1 - np.linalg.norm(at_face_centres(directions, faces), axis=1)).max())
    assert curved[0] < 0.2 * plain[0]
    assert curved[2] < 0.2 * plain[2]
    assert plain[1] / plain[2] == pytest.approx(4, rel=0.05)
