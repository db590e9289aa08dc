"""Housings against housings, scalp and electrodes: closed forms, brute sampling and two geometry libraries."""

import csv
import dataclasses
import io
import json

import numpy as np
import pytest
import shapely
import trimesh
from helmet_cases import helmet_case, parts_of
from hypothesis import given, settings
from hypothesis import strategies as st
from made_result import make_result
from manifold3d import Manifold, Mesh64
from scipy.spatial import cKDTree
from scipy.spatial.transform import Rotation

from layout.anatomy.head import Surface
from layout.outputs.helmet.clash import Clash, clash_sentence, clashes_csv, room_of
from layout.outputs.helmet.columns import CLASHES
from layout.outputs.helmet.gaps import box_corners, box_gaps, scalp_gaps
from layout.outputs.helmet.meshes import box
from layout.outputs.helmet.poses import helmet_poses_json
from layout.outputs.helmet.sensors import housed_sensors
from layout.sensing.overlap import boxes_overlap

SIZE = np.array([0.012, 0.016, 0.024])


def pose_at(place, rotvec=(0, 0, 0)):
    pose = np.eye(4)
    pose[:3, :3], pose[:3, 3] = Rotation.from_rotvec(rotvec).as_matrix(), place
    return pose


def gap(pose_a, pose_b, size_a=SIZE, size_b=SIZE):
    return float(box_gaps(pose_a[None], np.array(size_a)[None], pose_b[None], np.array(size_b)[None])[0])


@pytest.mark.parametrize(
    ("place", "rotvec", "expected"),
    [
        ((0.015, 0, 0), (0, 0, 0), 0.003),  # side by side
        ((0.0121, 0, 0), (0, 0, 0), 0.0001),  # just apart
        ((0.0119, 0, 0), (0, 0, 0), -0.0001),  # just meeting
        ((0.015, 0.020, 0), (0, 0, 0), 0.005),  # edge to edge: 3 and 4
        ((0.013, 0.018, 0.026), (0, 0, 0), 0.003),  # corner to corner: 1, 2 and 2
        # turned by 45 degrees: a corner of the second, 14 / sqrt(2) from its middle, towards a side of the first
        ((0.018, 0, 0), (0, 0, np.pi / 4), 0.018 - 0.006 - 0.014 / np.sqrt(2)),
        ((0.015, 0, 0), (0, 0, np.pi / 4), 0.015 - 0.006 - 0.014 / np.sqrt(2)),
        # crossed edges: bars turned by 45 degrees about their lengths, at right angles to one another
        ((0, 0, 0.0), (0, 0, 0), -0.012),  # the same place: out along the width
    ],
)
def test_closed_forms(place, rotvec, expected):
    assert gap(pose_at((0, 0, 0)), pose_at(place, rotvec)) == pytest.approx(expected, rel=1e-9, abs=1e-15)


@pytest.mark.parametrize("between", [0.002, -0.002])
def test_crossed_edges(between):
    """Square bars on edge, one along x, one along y: the way between them is along z only."""
    bar = np.array([0.01, 0.01, 0.2])
    along_x = pose_at((-0.1, 0, 0)) @ pose_at((0, 0, 0), (0, np.pi / 2, 0)) @ pose_at((0, 0, 0), (0, 0, np.pi / 4))
    along_y = pose_at((0, -0.1, 0.01 * np.sqrt(2) + between)) @ pose_at((0, 0, 0), (-np.pi / 2, 0, 0))
    along_y = along_y @ pose_at((0, 0, 0), (0, 0, np.pi / 4))
    assert gap(along_x, along_y, bar, bar) == pytest.approx(between, rel=1e-9)


def solid(pose, size):
    vertices, faces = box(pose, size)
    return Manifold(Mesh64(1000 * vertices, faces.astype(np.uint64)))


VECTOR = st.tuples(*[st.floats(-1, 1)] * 3)
LENGTHS = st.tuples(*[st.floats(5e-3, 40e-3)] * 3)


@settings(max_examples=150, deadline=None)
@given(VECTOR, VECTOR, LENGTHS, LENGTHS)
def test_random_boxes_as_another_library_and_as_moving_them_apart(place, turn, size_a, size_b):
    a, b = pose_at((0, 0, 0)), pose_at(0.035 * np.array(place), 3 * np.array(turn))
    size_a, size_b = np.array(size_a), np.array(size_b)
    found = gap(a, b, size_a, size_b)
    assert gap(b, a, size_b, size_a) == pytest.approx(found, rel=1e-6, abs=1e-12)
    first, second = solid(a, size_a), solid(b, size_b)
    if found > 1e-5:
        assert first.min_gap(second, 200) == pytest.approx(1000 * found, abs=1e-3)
        assert (first ^ second).is_empty()
        return
    if found > -1e-5:
        return
    assert (first ^ second).volume() > 0
    # no shorter way parts them in any of many directions, and some way a little longer does
    ways = np.random.default_rng(1).normal(size=(400, 3))
    ways = np.concatenate([ways, a[:3, :3].T, b[:3, :3].T, np.cross(a[:3, :3].T[:, None], b[:3, :3].T).reshape(-1, 3)])
    ways = ways[np.linalg.norm(ways, axis=1) > 1e-6]
    ways = np.concatenate([ways, -ways]) / np.linalg.norm(np.concatenate([ways, ways]), axis=1, keepdims=True)
    n = len(ways)

    def still_meeting(by):
        moved = np.tile(b, (n, 1, 1))
        moved[:, :3, 3] += by * ways
        return boxes_overlap(np.tile(a, (n, 1, 1)), np.tile(size_a, (n, 1)), moved, np.tile(size_b, (n, 1)))

    assert still_meeting(-found - 1e-6).all()
    assert not still_meeting(-found + 1e-6).all()


def test_distances_as_dense_samples_of_the_surfaces_say():
    random = np.random.default_rng(2)
    for _ in range(5):
        a, b = pose_at((0, 0, 0)), pose_at((0.03, 0.02, 0.01) + 0.01 * random.normal(size=3), random.normal(size=3))
        clouds = [trimesh.Trimesh(*box(one, SIZE)).sample(6000, seed=3) for one in (a, b)]
        sampled = cKDTree(clouds[0]).query(clouds[1])[0].min()
        assert gap(a, b) <= sampled + 1e-12
        assert gap(a, b) == pytest.approx(sampled, abs=1e-3)


def sheet(height, half=0.05, steps=20):
    """A square sheet of scalp z = height(x, y), facing up."""
    line = np.linspace(-half, half, steps + 1)
    x, y = (grid.ravel() for grid in np.meshgrid(line, line, indexing="ij"))
    corner = (np.arange(steps)[:, None] * (steps + 1) + np.arange(steps)).ravel()
    faces = np.concatenate(
        [
            np.column_stack([corner, corner + steps + 1, corner + steps + 2]),
            np.column_stack([corner, corner + steps + 2, corner + 1]),
        ]
    )
    return Surface(np.column_stack([x, y, height(x, y)]), faces)


def test_gap_to_a_flat_and_to_a_sloping_scalp():
    flat = sheet(lambda x, y: 0 * x)
    assert scalp_gaps(flat, pose_at((0.001, 0, 0.002))[None], SIZE[None])[0] == pytest.approx(0.002)
    assert scalp_gaps(flat, pose_at((0.001, 0, -0.003))[None], SIZE[None])[0] == pytest.approx(-0.003)
    slope = sheet(lambda x, y: 0.2 * x - 0.1 * y)
    highest = 0.2 * 0.006 + 0.1 * 0.008  # at a corner of the face
    assert scalp_gaps(slope, pose_at((0, 0, 0))[None], SIZE[None])[0] == pytest.approx(-highest)
    assert np.isinf(scalp_gaps(flat, pose_at((1, 0, 0))[None], SIZE[None])[0])


def test_gap_as_dense_samples_of_the_head_say():
    head = make_result().head.scalp
    cloud = trimesh.Trimesh(head.vertices, head.faces, process=False).sample(150_000, seed=4)
    _, room, _ = parts_of(helmet_case)
    assert room.scalp_gap == pytest.approx([0.002] * 3 + [0.0] * 2, abs=2e-4)  # hair of the brief; no hair
    random = np.random.default_rng(5)
    for _ in range(5):
        normal = random.normal(size=3) + np.array([0, 0, 2])
        normal /= np.linalg.norm(normal)
        turn = Rotation.align_vectors(normal[None], [[0, 0, 1]])[0].as_rotvec()
        pose = pose_at(np.array([0, 0, 0.03]) + 0.09 * normal, turn)
        local = (cloud - pose[:3, 3]) @ pose[:3, :3]
        below = (np.abs(local[:, :2]) <= SIZE[:2] / 2).all(axis=1) & (local[:, 2] > -0.06)
        found = scalp_gaps(head, pose[None], SIZE[None])[0]
        assert found <= -local[below, 2].max() + 1e-12
        assert found == pytest.approx(-local[below, 2].max(), abs=3e-4)


@pytest.fixture(scope="module")
def mixed():
    """Electrodes and magnetometers at neighbouring sites, 8 mm apart: much clashes."""
    result = make_result()
    sensors = housed_sensors(result, result.layouts[0])
    return result, result.layouts[0], sensors, room_of(result, result.layouts[0], sensors)


def test_pairs_that_meet_are_those_whose_solids_share_volume(mixed):
    _, _, sensors, room = mixed
    solids = {one.row.number: solid(one.pose, one.size) for one in sensors}
    numbers = sorted(solids)
    expected = {(a, b) for a in numbers for b in numbers if a < b and (solids[a] ^ solids[b]).volume() > 1e-6}
    found = {(clash.first, clash.second) for clash in room.clashes if clash.parts == "two housings"}
    assert found == expected
    assert len(expected) > 3
    depths = [clash.depth for clash in room.clashes if clash.parts == "two housings"]
    assert depths == sorted(depths, reverse=True)


def test_electrodes_under_housings_are_found():
    made = make_result()
    layout = made.layouts[0]
    electrode = next(row for row in layout.sensors if row.kind_type == "electrode")
    housed = next(row for row in layout.sensors if row.kind_type == "magnetometer")
    pose = made.candidates.housing_pose[housed.candidate]
    width = made.brief.stock[1].housing[0]

    def clashes(right):
        """With the electrode's point so far to the right of the middle of the face."""
        moved = dataclasses.replace(electrode, scalp_position=pose[:3, 3] + right * pose[:3, 0], normal=pose[:3, 2])
        one = dataclasses.replace(layout, sensors=(moved, housed))
        return room_of(made, one, housed_sensors(made, one)).clashes

    assert clashes(width / 2 - 1e-4) == (Clash("housing and electrode", housed.number, electrode.number, None),)
    assert clashes(width / 2 + 1e-4) == ()


def test_electrodes_strewn_about_as_outlines_say(mixed):
    result, layout, sensors, _ = mixed
    electrode = next(row for row in layout.sensors if row.kind_type == "electrode")
    random = np.random.default_rng(6)
    strewn = []
    for number in range(100, 160):
        pose = sensors[number % len(sensors)].pose
        place = pose[:3, 3] + pose[:3, :2] @ random.uniform(-0.015, 0.015, 2)
        strewn.append(dataclasses.replace(electrode, number=number, scalp_position=place, normal=pose[:3, 2]))
    housed = tuple(row for row in layout.sensors if row.kind_type != "electrode")
    clashes = room_of(result, dataclasses.replace(layout, sensors=(*strewn, *housed)), sensors).clashes
    found = {(one.first, one.second) for one in clashes if one.parts == "housing and electrode"}
    inside, close = set(), set()
    for one in sensors:
        face = shapely.box(-one.size[0] / 2, -one.size[1] / 2, one.size[0] / 2, one.size[1] / 2)
        for row in strewn:
            point = shapely.Point((one.pose[:3, :3].T @ (row.scalp_position - one.pose[:3, 3]))[:2])
            pair = (one.row.number, row.number)
            if face.exterior.distance(point) < 1e-3:  # the plane of comparison lies between the two: 1 mm is left open
                close.add(pair)
            elif face.contains(point):
                inside.add(pair)
    assert found - close == inside
    assert len(inside) > 10


def test_the_table_and_the_sentence(mixed):
    _, layout, _, room = mixed
    rows = list(csv.DictReader(io.StringIO(clashes_csv(layout, room), newline="")))
    assert list(rows[0]) == list(CLASHES)
    assert len(rows) == len(room.clashes)
    for row, clash in zip(rows, room.clashes, strict=True):
        assert (row["parts"], int(row["first_number"])) == (clash.parts, clash.first)
        if clash.depth is not None:
            assert float(row["depth_mm"]) == pytest.approx(1000 * clash.depth, abs=5e-4)
    assert clash_sentence(room).startswith("Clashes (up to ")
    housings = sum(clash.parts == "two housings" for clash in room.clashes)
    assert f"{housings} pairs of housings that meet" in clash_sentence(room)
    _, free, _ = parts_of(helmet_case)
    apart = 1000 * free.neighbour_gap.min()
    assert clash_sentence(free) == (
        f"No housing meets another, the scalp or an electrode; the nearest two housings are {apart:.2f} mm apart."
    )


def test_the_json_tells_the_same(mixed):
    result, layout, sensors, room = mixed
    shell = dataclasses.replace(parts_of(helmet_case)[2], tops=np.full(len(sensors), 0.018))
    content = json.loads(helmet_poses_json(result, layout, sensors, room, shell))
    told = [(one["parts"], one["first"], one["second"]) for one in content["clash_check"]["clashes"]]
    assert told == [(clash.parts, clash.first, clash.second) for clash in room.clashes]


def test_corners_stand_on_the_face():
    corners = box_corners(np.eye(4), SIZE)
    assert corners.min(axis=0).tolist() == [-0.006, -0.008, 0]
    assert corners.max(axis=0).tolist() == [0.006, 0.008, 0.024]
