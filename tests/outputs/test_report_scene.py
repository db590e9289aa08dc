"""What the turning head is drawn from: the numbers in the page are the head's and the sensors' own."""

import base64
import dataclasses
import json

import numpy as np
import pytest
import trimesh
from made_evidence import with_evidence
from scipy.spatial import cKDTree

from layout.anatomy.head import Surface
from layout.outputs.report.scene import MOST_SCALP, SHAFT, STEP, TIP, arrows, packed, region_borders, scene_json
from layout.units import MM


def unpacked(entry, columns=None):
    flat = np.frombuffer(base64.b64decode(entry["data"]), "<" + entry["type"])
    return flat if columns is None else flat.reshape(-1, columns)


@pytest.fixture(scope="module")
def evident(result):
    return with_evidence(result)


@pytest.fixture(scope="module")
def scene(evident):
    return json.loads(scene_json(evident))


def test_meshes_and_places_are_kept_to_half_a_step(scene, evident):
    head = evident.head
    assert unpacked(scene["cortex"]["points"], 3) * STEP == pytest.approx(head.cortex.positions / MM, abs=STEP / 2)
    assert np.array_equal(unpacked(scene["cortex"]["faces"], 3), head.cortex.faces)
    assert unpacked(scene["scalp"]["points"], 3) * STEP == pytest.approx(head.scalp.vertices / MM, abs=STEP / 2)
    for layout, drawn in zip(evident.layouts, scene["layouts"], strict=True):
        positions = np.array([row.position for row in layout.sensors]) / MM
        assert unpacked(drawn["places"], 3) * STEP == pytest.approx(positions, abs=STEP / 2)
        assert drawn["numbers"] == [row.number for row in layout.sensors]
        assert drawn["hollow"] == [row.role == "reference" for row in layout.sensors]
    assert len(unpacked(scene["sites"], 3)) == len(evident.candidates.sites)


def test_regions_and_their_borders(scene, evident):
    number = unpacked(scene["cortex"]["region"])
    for place, region in enumerate(evident.regions, 1):
        assert set(np.flatnonzero(number == place)) == set(region.members)  # these regions do not overlap
    positions, faces = evident.head.cortex.positions, evident.head.cortex.faces
    expected = set()
    for region in evident.regions:  # brute force: the middles of all edges that leave the region, face by face
        inside = set(region.members.tolist())
        for face in faces:
            for a, b in ((0, 1), (1, 2), (2, 0)):
                if (face[a] in inside) != (face[b] in inside):
                    expected.add(tuple(np.round((positions[face[a]] + positions[face[b]]) / 2, 9)))
    ends = region_borders(evident.head, evident.regions)
    assert {tuple(point) for point in np.round(ends, 9)} == expected
    assert len(unpacked(scene["cortex"]["borders"], 3)) == len(ends)


def test_arrows_are_solid_and_point_along_the_axes():
    rng = np.random.default_rng(3)
    starts, axes = rng.normal(size=(5, 3)) * 0.1, rng.normal(size=(5, 3))
    axes /= np.linalg.norm(axes, axis=1, keepdims=True)
    vertices, faces = arrows(starts, axes)
    assert faces.max() == len(vertices) - 1
    for one, (start, axis) in enumerate(zip(starts, axes, strict=True)):
        points = vertices[one * len(vertices) // 5 : (one + 1) * len(vertices) // 5]
        farthest = points[((points - start) @ axis).argmax()]
        assert (farthest - start) / MM == pytest.approx((SHAFT + TIP) * axis, abs=1e-9)
        across = (points - start) - np.outer((points - start) @ axis, axis)
        assert across.mean(axis=0) / MM == pytest.approx(np.zeros(3), abs=1e-9)
    one = trimesh.Trimesh(*arrows(np.zeros((1, 3)), np.array([[0.0, 0.6, 0.8]])))
    assert one.is_winding_consistent
    assert len(arrows(np.zeros((0, 3)), np.zeros((0, 3)))[1]) == 0


def test_a_fine_scalp_is_thinned_as_little_as_shows(result):
    ball = trimesh.creation.icosphere(subdivisions=5)
    scalp = Surface(ball.vertices * (0.078, 0.097, 0.095), ball.faces)
    fine = dataclasses.replace(result, head=dataclasses.replace(result.head, scalp=scalp))
    thin = unpacked(json.loads(scene_json(fine))["scalp"]["points"], 3) * STEP * MM
    assert len(ball.vertices) > MOST_SCALP >= len(thin) > 0.9 * MOST_SCALP
    moved = np.abs(np.linalg.norm(thin / (0.078, 0.097, 0.095), axis=1) - 1) * 0.09
    assert moved.max() < 0.1 * MM
    assert cKDTree(thin).query(scalp.vertices)[0].max() < 6 * MM  # and no part of it is missing


def test_sensitivity_is_on_one_scale_for_all_layouts(scene, evident):
    steps = [unpacked(one).astype(float) for one in scene["sensitivity"]["steps"]]
    top = max(np.percentile(one, 99.5) for one in evident.evidence.sensitivity)
    for drawn, value in zip(steps, evident.evidence.sensitivity, strict=True):
        assert drawn == pytest.approx(255 * np.minimum(value / top, 1), abs=0.5)
    assert max(one.max() for one in steps) == 255


def test_packing_knows_its_type():
    for code in ("i1", "u1", "i2", "u2", "u4"):
        entry = packed(np.array([[1, 2], [3, 4]], code))
        assert entry["type"] == code
        assert unpacked(entry).tolist() == [1, 2, 3, 4]
