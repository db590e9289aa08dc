"""Own surfaces: the template written to files and read back is the template; broken files are mended or refused."""

import json
from dataclasses import replace

import numpy as np
import pytest
import trimesh
from built_heads import template
from exported_head import LAYERS, small_head, write_head, write_mesh
from scipy.spatial.transform import Rotation

from layout.anatomy.mesh_files import read_mesh
from layout.anatomy.missing_points import place_inion
from layout.anatomy.nesting import depth_inside
from layout.anatomy.own_head import build_own_head
from layout.errors import LayoutError

POSE = np.eye(4)
POSE[:3, :3] = Rotation.from_euler("xyz", [0.3, -0.2, 1.0]).as_matrix()
POSE[:3, 3] = 0.1, 0.2, -0.05
# [m] by which a coordinate may be off: doubles in metres, and numbers of single precision up to 0.3 m.
EXACT, SINGLE = 1e-15, 3e-8


def build(brief):
    return build_own_head(brief, lambda: template("standard"))


def edited(folder, name, change):
    """One of the written surfaces with vertices and faces changed."""
    path = next(folder.glob(f"{name}.*"))
    mesh = read_mesh(path)
    write_mesh(path, *change(mesh.vertices.copy(), mesh.faces.copy()))


def refused(brief):
    with pytest.raises(LayoutError) as refusal:
        build(brief)
    said = str(refusal.value)
    assert said.endswith(".")
    assert "\n" not in said
    return said


@pytest.mark.parametrize(
    ("kind", "unit", "pose", "off"),
    [
        ("gii", "m", None, EXACT),
        pytest.param("gii", "mm", POSE, EXACT, marks=pytest.mark.slow),
        pytest.param("off", "mm", POSE, EXACT, marks=pytest.mark.slow),
        pytest.param("obj", "m", None, EXACT, marks=pytest.mark.slow),
        pytest.param("ply", "mm", POSE, SINGLE, marks=pytest.mark.slow),
    ],
)
def test_written_and_read_back_the_template_is_the_same_head(tmp_path, kind, unit, pose, off):
    head = template("standard")
    own = build(write_head(head, tmp_path, kind, unit, pose))
    for name in LAYERS:
        np.testing.assert_array_equal(getattr(own, name).faces, getattr(head, name).faces)
        np.testing.assert_allclose(getattr(own, name).vertices, getattr(head, name).vertices, rtol=0, atol=off)
    for name, point in vars(head.landmarks).items():
        np.testing.assert_allclose(getattr(own.landmarks, name), point, rtol=0, atol=EXACT)
    np.testing.assert_array_equal(own.cortex.faces, head.cortex.faces)
    np.testing.assert_array_equal(own.cortex.side, head.cortex.side)
    np.testing.assert_allclose(own.cortex.positions, head.cortex.positions, rtol=0, atol=off)
    np.testing.assert_allclose(own.cortex.normals, head.cortex.normals, rtol=0, atol=1e3 * off)
    np.testing.assert_allclose(own.cortex.areas, head.cortex.areas, rtol=0, atol=1e-2 * off)
    np.testing.assert_array_equal(own.cortex_vertices.source, head.cortex_vertices.source)
    np.testing.assert_allclose(own.eyes, head.eyes, rtol=0, atol=EXACT)
    np.testing.assert_allclose(own.mni_to_head, head.mni_to_head, rtol=0, atol=1e-15)
    assert own.notes == ("The head is made of a person's own surfaces.",)


def test_stl_gives_the_same_surfaces_with_repeated_vertices_merged(tmp_path):
    head = small_head()
    own = build(write_head(head, tmp_path, "stl", "mm", POSE, masks=False))
    for name in LAYERS:
        a, b = getattr(own, name), getattr(head, name)
        np.testing.assert_allclose(a.vertices[a.faces], b.vertices[b.faces], rtol=0, atol=SINGLE)
    assert any(note == "scalp: 3,198 repeated vertices were merged." for note in own.notes)


def test_single_precision_gifti(tmp_path):
    head = small_head()
    brief = write_head(head, tmp_path, "gii", "mm")
    for name in LAYERS:
        surface = getattr(head, name)
        write_mesh(tmp_path / f"{name}.gii", surface.vertices * 1e3, surface.faces, dtype=np.float32)
    own = build(brief)
    np.testing.assert_allclose(own.scalp.vertices, head.scalp.vertices, rtol=0, atol=SINGLE)


@pytest.mark.parametrize("name", [*LAYERS, "cortex_left"])
def test_surfaces_that_look_inwards_are_turned(tmp_path, name):
    head = small_head()
    brief = write_head(head, tmp_path)
    edited(tmp_path, name, lambda v, f: (v, f[:, ::-1]))
    own = build(brief)
    assert f"{name}: its faces looked inwards and were turned round." in own.notes
    np.testing.assert_allclose(own.scalp.normals, head.scalp.normals, atol=1e-9)
    np.testing.assert_allclose(own.inner_skull.normals, head.inner_skull.normals, atol=1e-9)
    np.testing.assert_allclose(own.cortex.normals, head.cortex.normals, atol=1e-9)


def test_faces_turned_here_and_there_are_made_to_agree(tmp_path):
    head = small_head()
    brief = write_head(head, tmp_path)
    edited(tmp_path, "scalp", lambda v, f: (v, np.where((np.arange(len(f)) % 7 == 0)[:, None], f[:, ::-1], f)))
    own = build(brief)
    assert "scalp: 183 faces were turned to agree with the others." in own.notes
    np.testing.assert_allclose(own.scalp.normals, head.scalp.normals, atol=1e-9)


def test_a_broken_length_unit_is_refused_with_the_likely_one(tmp_path):
    head = small_head()
    brief = write_head(head, tmp_path, unit="mm")
    assert refused(replace(brief, unit=1.0)) == (
        'head.units "m" makes the scalp 196 m long, which must be 140 to 600 mm; the files seem to be in mm.'
    )
    assert refused(replace(brief, unit=None)) == (
        'head.units must be "mm" or "m" (the scalp files measure 196 across: they seem to be in mm), but it is missing.'
    )
    (tmp_path / "m").mkdir()
    brief = write_head(head, tmp_path / "m", unit="m")
    assert "seem to be in m)" in refused(replace(brief, unit=None))
    assert "seem to be in m." in refused(replace(brief, unit=1e-3))


def test_landmarks_in_another_unit_or_frame_are_refused(tmp_path):
    brief = write_head(small_head(), tmp_path, unit="mm")
    path = tmp_path / "landmarks.json"
    marks = json.loads(path.read_text())
    path.write_text(json.dumps({name: [x / 1e3 for x in point] for name, point in marks.items()}))
    assert "LPA to RPA must measure 90 to 200 mm, but it measures 0.156 mm" in refused(brief)
    path.write_text(json.dumps({name: [x + 60 for x in point] for name, point in marks.items()}))
    assert "must lie within 25 mm of the scalp" in refused(brief)
    line = {"NAS": [0, 0, 0], "LPA": [-70, 0, 0], "RPA": [70, 0, 0]}
    path.write_text(json.dumps(line))
    assert "must not lie on one line" in refused(brief)


def test_bids_landmarks_state_their_own_unit(tmp_path):
    head = small_head()
    brief = write_head(head, tmp_path, unit="mm")
    marks = json.loads((tmp_path / "landmarks.json").read_text())
    bids = {
        "EEGCoordinateSystem": "Other",
        "AnatomicalLandmarkCoordinates": {
            name.upper(): [x / 10 for x in marks[name]] for name in ("nas", "lpa", "rpa")
        },
        "AnatomicalLandmarkCoordinateUnits": "cm",
    }
    path = tmp_path / "sub-01_coordsystem.json"
    path.write_text(json.dumps(bids))
    own = build(replace(brief, landmarks=path))
    np.testing.assert_allclose(own.landmarks.nas, head.landmarks.nas, atol=1e-12)


def test_a_missing_landmark_is_refused_and_a_missing_inion_placed_by_a_stated_rule(tmp_path):
    head = small_head()
    assert "must give the landmark LPA" in refused(write_head(head, tmp_path, points=("nas", "rpa", "inion")))
    (tmp_path / "b").mkdir()
    own = build(write_head(head, tmp_path / "b", points=("nas", "lpa", "rpa")))
    assert any(note.startswith("The inion was not given") for note in own.notes)
    _, y, z = own.landmarks.inion
    assert np.degrees(np.arctan2(z, -y)) == pytest.approx(8.4, abs=0.1)  # the template's, as the note says
    assert abs(depth_inside(own.scalp, own.landmarks.inion[None])[0]) < 1e-9
    # On the template itself the rule finds the template's inion, but for its 0.4 mm off the midline.
    average = template("standard")
    again, _ = place_inion(average.scalp, average)
    assert np.linalg.norm(again - average.landmarks.inion) < 0.5e-3


def test_holes(tmp_path):
    """One face and a face's neighbourhood left out are filled; a scalp cut open at the ears is refused."""
    head = small_head()
    brief = write_head(head, tmp_path)

    def without_a_ring(v, f):
        return v, f[~(f == 234).any(axis=1)][1:]

    edited(tmp_path, "outer_skull", without_a_ring)
    own = build(brief)
    assert "outer_skull: 2 holes were filled." in own.notes
    assert own.outer_skull.mesh.is_watertight
    assert own.outer_skull.mesh.volume == pytest.approx(head.outer_skull.mesh.volume, rel=1e-3)
    edited(tmp_path, "scalp", lambda v, f: (v, f[(v[f][:, :, 2] > -0.03).all(axis=1)]))
    assert "scalp: must be a closed surface, but it has a hole of 2" in refused(brief)


def test_specks_fins_and_second_bodies(tmp_path):
    head = small_head()
    brief = write_head(head, tmp_path)
    edited(tmp_path, "scalp", lambda v, f: (np.vstack([v, v * 0.1 + 0.2]), np.vstack([f, f + len(v)])))
    own = build(brief)
    assert "scalp: 1 smaller body was left out." in own.notes
    np.testing.assert_allclose(own.scalp.vertices, head.scalp.vertices, rtol=0, atol=EXACT)
    edited(tmp_path, "inner_skull", lambda v, f: (np.vstack([v, v * 0.9]), np.vstack([f, f + len(v)])))
    assert "inner_skull: must hold one surface, but it holds 2, the second 81 % as large." in refused(brief)
    write_head(head, tmp_path)
    edited(tmp_path, "scalp", lambda v, f: (np.vstack([v, v[f[7, :1]] * 1.1]), np.vstack([f, [*f[7, :2], len(v)]])))
    own = build(brief)
    assert any("belongs to more than two faces" in note for note in own.notes)
    assert own.scalp.mesh.is_watertight


def test_crossings_are_smoothed_away_or_refused(tmp_path):
    head = small_head()
    brief = write_head(head, tmp_path)
    noise = np.random.default_rng(2).normal(size=head.scalp.vertices.shape)
    outward = np.einsum("nd,nd->n", noise, head.scalp.normals)
    noise += (np.abs(outward) - outward)[:, None] * head.scalp.normals  # nothing goes inwards, towards the skull

    def rough(size):
        def change(v, f):
            near = np.linalg.norm(head.scalp.vertices - head.scalp.vertices[100], axis=1) < 0.04
            return head.scalp.vertices + size * noise * near[:, None], f

        return change

    edited(tmp_path, "scalp", rough(9e-3))
    own = build(brief)
    assert any(note.startswith("scalp: ") and "passed through others" in note for note in own.notes)
    assert np.linalg.norm(own.scalp.vertices - head.scalp.vertices, axis=1).max() < 25e-3
    edited(tmp_path, "scalp", rough(30e-3))
    assert "scalp: must not pass through itself" in refused(brief)


def test_small_breaches_of_nesting_are_mended_and_said(tmp_path):
    head = small_head()
    brief = write_head(head, tmp_path)
    top = np.argmax(head.outer_skull.vertices[:, 2])
    out = head.outer_skull.normals[top]

    def bulge(v, f):
        near = np.exp(-np.sum((head.outer_skull.vertices - head.outer_skull.vertices[top]) ** 2, axis=1) / 0.015**2)
        return v + 9e-3 * near[:, None] * out, f

    edited(tmp_path, "outer_skull", bulge)
    own = build(brief)
    assert any(note.startswith("outer_skull within scalp: ") and "moved inwards" in note for note in own.notes)
    assert depth_inside(own.scalp, own.outer_skull.vertices).min() >= 2e-3
    assert -depth_inside(own.outer_skull, own.scalp.vertices).max() >= 2e-3
    assert own.scalp.vertices == pytest.approx(head.scalp.vertices, abs=EXACT)
    assert refused(replace(brief, inner_skull=brief.outer_skull, outer_skull=brief.inner_skull)).startswith(
        "inner_skull within outer_skull: must lie inside"
    )


@pytest.mark.slow
def test_fine_surfaces_are_thinned_to_the_size_asked_for(tmp_path):
    """A scalp of 163,842 vertices (subdivided four times), and a cortex of 1,284 vertices to 600 sources."""
    head = small_head()
    brief = write_head(head, tmp_path, unit="mm", cortex_sources=600, vertices=700)
    fine = trimesh.remesh.subdivide_loop(head.scalp.vertices * 1e3, head.scalp.faces, 4)
    assert len(fine[0]) == 163_842
    write_mesh(tmp_path / "scalp.gii", *fine)
    own = build(brief)
    assert "scalp: thinned from 163,842 to 700 vertices." in own.notes
    assert own.scalp.mesh.is_watertight
    reference = trimesh.Trimesh(fine[0] / 1e3, fine[1], process=False)
    assert own.scalp.mesh.volume == pytest.approx(reference.volume, rel=5e-3)
    assert len(own.cortex) == pytest.approx(600, abs=20)
    assert own.cortex.areas.sum() == pytest.approx(head.cortex.areas.sum(), rel=1e-9)
    np.testing.assert_allclose(np.linalg.norm(own.cortex.normals, axis=1), 1, atol=1e-12)
    # Every vertex of the file has a source near it, and sources point as the surface near them does.
    source = own.cortex_vertices.source
    away = np.linalg.norm(own.cortex.positions[source] - own.cortex_vertices.positions, axis=1)
    assert away.max() < 14e-3  # the bumpy body's longest edges have 11 mm
    nearest = np.linalg.norm(own.cortex.positions[:, None] - head.cortex.positions[None], axis=2).argmin(axis=1)
    alike = np.einsum("nd,nd->n", own.cortex.normals, head.cortex.normals[nearest])
    assert alike.min() > 0.5
    assert alike.mean() > 0.98


@pytest.mark.parametrize(
    ("layers", "said"),
    [
        (("scalp",), ("inner skull was not given: it is a smooth hull", "outer skull was not given: it is the inner")),
        pytest.param((), ("inner skull was not", "outer skull was not", "scalp was not given"), marks=pytest.mark.slow),
        pytest.param(
            ("scalp", "outer_skull"),
            ("inner skull was not given: it is the outer skull less 5.97 mm",),
            marks=pytest.mark.slow,
        ),
        pytest.param(
            ("scalp", "inner_skull"),
            ("outer skull was not given: it is the inner skull and 5.97 mm",),
            marks=pytest.mark.slow,
        ),
        pytest.param(
            ("outer_skull",),
            ("inner skull was not given: it is the outer", "scalp was not given"),
            marks=pytest.mark.slow,
        ),
    ],
)
def test_missing_layers_are_made_and_said(tmp_path, layers, said):
    head = template("standard")
    own = build(write_head(head, tmp_path, "gii", "mm", POSE, layers=layers))
    notes = " ".join(own.notes)
    assert all(words in notes for words in said)
    assert notes.count("was not given: it is") == len(said)
    for name in layers:
        np.testing.assert_allclose(getattr(own, name).vertices, getattr(head, name).vertices, rtol=0, atol=EXACT)
    skull = depth_inside(own.outer_skull, own.inner_skull.vertices)
    made = {"inner_skull", "outer_skull"} - set(layers)
    if made:  # the published thickness, but for what the faces' flatness takes
        assert np.median(skull) == pytest.approx(5.97e-3, rel=0.01)
    assert depth_inside(own.scalp, own.outer_skull.vertices).min() >= 2e-3
    assert depth_inside(own.inner_skull, own.cortex.positions).min() >= 1e-3
    # The template's own layers are within some millimetres of the made ones over the upper head.
    for name in LAYERS:
        upper = getattr(own, name).vertices[getattr(own, name).vertices[:, 2] > 0.02]
        away = depth_inside(getattr(head, name), upper)
        assert np.sqrt(np.mean(away**2)) < 4e-3, name


def test_one_file_for_both_sides(tmp_path):
    head = small_head()
    brief = write_head(head, tmp_path, masks=False)
    mesh = head.cortex_surface
    write_mesh(tmp_path / "cortex.gii", mesh.vertices, mesh.faces)
    own = build(replace(brief, cortex={"both": tmp_path / "cortex.gii"}))
    two = build(brief)
    np.testing.assert_array_equal(own.cortex.side, two.cortex.side)
    np.testing.assert_allclose(own.cortex.positions, two.cortex.positions, atol=1e-12)
    np.testing.assert_allclose(own.cortex.normals, two.cortex.normals, atol=1e-9)
    assert any(note.startswith("No cortex mask was given") for note in own.notes)


def test_the_mni_transform_must_be_one(tmp_path):
    brief = write_head(small_head(), tmp_path, unit="mm")
    assert "changes them by 0.001" in refused(
        replace(brief, mni_to_files=((0.001, 0, 0, 0), (0, 0.001, 0, 0), (0, 0, 0.001, 0)))
    )
    path = tmp_path / "mni.json"
    path.write_text(json.dumps(brief.mni_to_files))
    own = build(replace(brief, mni_to_files=path))
    np.testing.assert_allclose(own.mni_to_head, small_head().mni_to_head, atol=1e-12)
    path.write_text("[[1, 2], 3]")
    assert "3 or 4 rows of 4 numbers" in refused(replace(brief, mni_to_files=path)) or "cannot be read" in refused(
        replace(brief, mni_to_files=path)
    )
