"""helmet.glb and scalp-and-sensors.stl as an independent reader sees them."""

import io
import json

import numpy as np
import pytest
import trimesh
from helmet_cases import angle_between, helmet_case, parts_of, slot_case

from layout.outputs.helmet.glb import HEAD_TO_GLTF, helmet_glb
from layout.outputs.helmet.meshes import arrow, binary_stl, box, strokes
from layout.outputs.helmet.stl import sensors_stl

NAMES = ["scalp", "housing", "number", "sensitive axis", "x of the housing", "gradient"]


@pytest.fixture(scope="module", params=[helmet_case, slot_case], ids=["on the scalp", "in slots"])
def case(request):
    result = request.param()
    return result, result.layouts[0], parts_of(request.param)[0]


@pytest.fixture(scope="module")
def scene(case):
    return trimesh.load(io.BytesIO(helmet_glb(case[0], case[1])), file_type="glb", process=False)


def parts(scene, node):
    """Material name -> mesh in the node's own frame."""
    found = {}
    for name in scene.graph.nodes_geometry:
        if name == node or name.startswith(f"{node}_"):
            mesh = scene.geometry[scene.graph[name][1]]
            found[mesh.visual.material.name] = mesh
    return found


def test_nodes_rebuild_the_poses(case, scene):
    _, layout, sensors = case
    upright = scene.graph.get("head frame")[0]
    np.testing.assert_allclose(upright, HEAD_TO_GLTF)
    for one, row in zip(sensors, layout.sensors, strict=True):
        name = next(node for node in scene.graph.nodes if node.startswith(f"sensor {row.number:02d} "))
        pose = np.linalg.inv(upright) @ scene.graph.get(name)[0]
        assert np.abs(pose[:3, 3] - one.pose[:3, 3]).max() < 1e-5  # 0.01 mm, in metres
        assert max(angle_between(pose[:3, k], one.pose[:3, k]) for k in range(3)) < 0.01


def test_the_head_stands_upright_and_looks_at_the_viewer(case, scene):
    head = case[0].head
    upright = scene.graph.get("head frame")[0]
    top = np.append(head.scalp.vertices[head.scalp.vertices[:, 2].argmax()], 1)
    assert (upright @ top)[1] == pytest.approx(top[2])  # glTF: y up
    assert (upright @ [*head.landmarks.nas, 1])[2] > 0.05  # z towards the viewer
    assert np.linalg.det(upright[:3, :3]) == pytest.approx(1)
    scalp = parts(scene, "scalp")["scalp"]
    np.testing.assert_allclose(scalp.vertices, head.scalp.vertices, atol=1e-7)  # in metres
    assert scalp.is_watertight


def test_boxes_arrows_and_numbers_are_in_place(case, scene):
    result, layout, sensors = case
    for one, row in zip(sensors, layout.sensors, strict=True):
        name = next(node for node in scene.graph.nodes if node.startswith(f"sensor {row.number:02d} "))
        own = parts(scene, name)
        planar = row.kind_type == "gradiometer"
        assert sorted(own) == sorted(NAMES[1:] if planar else NAMES[1:-1])
        np.testing.assert_allclose(own["housing"].extents, one.size, atol=1e-8)
        np.testing.assert_allclose(own["housing"].bounds.mean(axis=0), [0, 0, one.size[2] / 2], atol=1e-8)
        drawn = [("sensitive axis", row.axes[:1] if planar else row.axes)]
        if planar:
            baselines = result.candidates.baselines[result.candidates.candidate_of_channel == row.candidate]
            drawn.append(("gradient", baselines / np.linalg.norm(baselines, axis=1, keepdims=True)))
        for material, expected in drawn:
            arrows = own[material]
            arrows.merge_vertices(merge_norm=True)
            bodies = arrows.split(only_watertight=True)
            assert len(bodies) == len(expected)
            far = [np.linalg.norm(body.vertices - one.centre, axis=1).argmax() for body in bodies]
            tips = np.array([body.vertices[tip] for body, tip in zip(bodies, far, strict=True)])
            ways = (tips - one.centre) / np.linalg.norm(tips - one.centre, axis=1, keepdims=True)
            turned = ways @ one.pose[:3, :3].T
            assert all(min(angle_between(axis, way) for way in turned) < 0.01 for axis in expected)
            outside = (tips < one.size * [-0.5, -0.5, 0]) | (tips > one.size * [0.5, 0.5, 1])
            assert outside.any(axis=1).all()  # every arrow can be seen
        assert own["number"].bounds[0, 2] == pytest.approx(one.size[2])
        assert (own["number"].extents[:2] < one.size[:2]).all()
        assert own["x of the housing"].bounds[1, 0] > one.size[0] / 2 + 0.003


def test_the_file_says_what_it_is(case):
    data = helmet_glb(case[0], case[1])
    assert data[:4] == b"glTF"
    assert int.from_bytes(data[8:12], "little") == len(data)
    length = int.from_bytes(data[12:16], "little")
    content = json.loads(data[20 : 20 + length])
    assert content["asset"] == {"version": "2.0"}  # no stamp of whatever made it
    assert content["nodes"][0]["extras"]["units"] == "metres"
    materials = content["materials"]
    assert [one["name"] for one in materials] == (NAMES if case[0] is helmet_case() else NAMES[:-1])
    assert len({tuple(one["pbrMetallicRoughness"]["baseColorFactor"]) for one in materials}) == len(materials)
    assert helmet_glb(case[0], case[1]) == data


def test_the_stl_holds_the_scalp_and_true_boxes_in_millimetres(case):
    result, _, sensors = case
    data = sensors_stl(result, result.layouts[0])
    mesh = trimesh.load(io.BytesIO(data), file_type="stl")
    bodies = mesh.split(only_watertight=False)
    assert len(bodies) == len(sensors) + 1
    assert all(body.is_watertight and body.volume > 0 for body in bodies)
    scalp, *boxes = sorted(bodies, key=lambda body: -body.volume)
    np.testing.assert_allclose(scalp.extents, 1000 * np.ptp(result.head.scalp.vertices, axis=0), atol=1e-4)
    left = list(boxes)
    for one in sensors:
        centre = 1000 * (one.pose[:3, 3] + one.pose[:3, 2] * one.size[2] / 2)
        nearest = min(left, key=lambda body: np.linalg.norm(body.centroid - centre))
        left.remove(nearest)
        assert np.abs(nearest.centroid - centre).max() < 0.01
        local = (nearest.vertices - centre) @ one.pose[:3, :3]
        np.testing.assert_allclose(np.ptp(local, axis=0), 1000 * one.size, atol=1e-3)
    assert b"mm" in data[:80]


def test_an_stl_is_one_record_after_the_other():
    data = binary_stl(box(np.eye(4), np.array([1.0, 2.0, 3.0])), "a box")
    assert len(data) == 84 + 12 * 50
    mesh = trimesh.load(io.BytesIO(data), file_type="stl")
    assert mesh.is_watertight
    assert mesh.volume == pytest.approx(6)
    np.testing.assert_allclose(mesh.bounds, [[-0.5, -1, 0], [0.5, 1, 3]])


@pytest.mark.parametrize("direction", [(0, 0, 1), (0, 0, -1), (1, 0, 0), (0.6, -0.64, 0.48)])
def test_arrows_are_closed_and_point(direction):
    direction = np.array(direction, dtype=float)
    mesh = trimesh.Trimesh(*arrow(direction, 0.02, 0.0005))
    assert mesh.is_watertight
    assert mesh.volume > 0
    assert mesh.vertices[(mesh.vertices @ direction).argmax()] == pytest.approx(0.02 * direction)


def test_digits_read_as_digits():
    """Seen as dots on a grid of 3 by 5, as every pocket calculator shows them."""
    shown = {0: "### #.# #.# #.# ###", 1: "..# ..# ..# ..# ..#", 2: "### ..# ### #.. ###", 3: "### ..# ### ..# ###"}
    shown |= {4: "#.# #.# ### ..# ..#", 5: "### #.. ### ..# ###", 6: "### #.. ### #.# ###", 7: "### ..# ..# ..# ..#"}
    shown |= {8: "### #.# ### #.# ###", 9: "### #.# ### ..# ###"}
    for number, text in shown.items():
        places = strokes(number, 1.0)
        x = np.array([-0.55 / 2 + 0.08, 0, 0.55 / 2 - 0.08])
        y = np.array([0.42, 0.21, 0, -0.21, -0.42])
        inside = (
            (x[None, :, None] >= places[:, 0])
            & (x[None, :, None] <= places[:, 0] + places[:, 2])
            & (y[:, None, None] >= places[:, 1])
            & (y[:, None, None] <= places[:, 1] + places[:, 3])
        ).any(axis=2)
        assert " ".join("".join(".#"[dot] for dot in line) for line in inside.astype(int)) == text
    assert len(strokes(18, 1.0)) == 2 + 7
    assert strokes(88, 1.0)[:, 0].min() == pytest.approx(-(strokes(88, 1.0)[:, 0] + strokes(88, 1.0)[:, 2]).max())
