"""The shell to print, read back from its STL and measured by rays and by distances to the scalp."""

import dataclasses
import io

import numpy as np
import pytest
import trimesh
from helmet_cases import helmet_case, parts_of, slot_case
from made_result import make_result

from layout.anatomy.head import Surface
from layout.anatomy.template import build_template
from layout.outputs.helmet.envelope import Envelope, spherical
from layout.outputs.helmet.sensors import housed_sensors
from layout.outputs.helmet.shell import (
    COLLAR,
    FIT,
    GUIDED,
    MARGIN,
    NOTCH,
    RAISED,
    RIM_BACK,
    RIM_FRONT,
    ROOM,
    WALL,
    _dome,
    _undercut,
    helmet_shell,
    helmet_shell_stl,
    mould,
)

RADIUS = 92.0  # mm, of the sphere head's scalp
OFF = 0.16  # mm: both sides are raised by the sag of a facet, 0.12 mm on a sphere, and some


def read(result, shell):
    return trimesh.load(io.BytesIO(helmet_shell_stl(result, result.layouts[0], shell)), file_type="stl")


@pytest.fixture(scope="module", params=[helmet_case, slot_case], ids=["on the scalp", "in slots"])
def case(request):
    sensors, _, shell = parts_of(request.param)
    return sensors, shell, read(request.param(), shell)


@pytest.fixture(scope="module")
def crowded():
    """Housings that meet: their holes run into one another."""
    result = make_result("magnetometer")
    sensors = housed_sensors(result, result.layouts[0])
    shell = helmet_shell(mould(result.head), sensors)
    return result, sensors, shell, read(result, shell)


def hits(mesh, sensor, across, low):
    """Heights [mm] along the housing's z, from `low` up to past its end, where rays inwards at x, y (n, 2) [mm] meet
    the shell: one sorted list per ray."""
    turn, face, length = sensor.pose[:3, :3], 1000 * sensor.pose[:3, 3], 1000 * sensor.size[2]
    origins = np.column_stack([across, np.full(len(across), length + 20)]) @ turn.T + face
    ways = np.tile(-turn[:, 2], (len(across), 1))
    points, ray, _ = mesh.ray.intersects_location(origins, ways, multiple_hits=True)
    heights = (points - face) @ turn[:, 2]
    return [sorted(heights[(ray == one) & (heights > low)]) for one in range(len(across))]


def is_sound(mesh, shell):
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    assert mesh.body_count == 1
    assert mesh.volume == pytest.approx(1e9 * shell.volume, rel=1e-5)
    assert mesh.volume > 0


def holes_are_clear(mesh, sensors, shell):
    for one in sensors:
        half = 1000 * (one.size[:2] / 2 + FIT) - 0.02
        inside = half * np.stack(np.meshgrid(*[np.linspace(-1, 1, 4)] * 2), axis=-1).reshape(-1, 2)
        below = -1000 * (one.lift + shell.room) - 10
        assert not any(hits(mesh, one, inside, below)), one.row.number


def test_one_closed_piece_with_a_hole_for_every_sensor(case):
    sensors, shell, mesh = case
    is_sound(mesh, shell)
    assert mesh.euler_number == 2 - 2 * len(sensors)  # a ball with so many handles
    assert shell.loose == 0
    holes_are_clear(mesh, sensors, shell)


def test_the_collar_stands_just_outside_each_hole(case):
    sensors, shell, mesh = case
    for one, top in zip(sensors, 1000 * shell.tops, strict=True):
        half = 1000 * (one.size[:2] / 2 + FIT)
        for beside, full in ((0.05, True), (1000 * COLLAR - 0.05, True), (1000 * COLLAR + RAISED * 1000 + 0.05, False)):
            x, y = half + beside
            places = np.array([(-x, 0.1), (0.1, -y), (0.1, y), (x, 3), (x, -3)])
            for heights in hits(mesh, one, places, -1000 * (one.lift + shell.room)):
                assert (heights[-1] == pytest.approx(top, abs=1e-3)) == full
                wall = 1000 * (shell.room + WALL - one.lift)
                assert heights[-1] > wall - 2.5  # the shell, whose outer side falls off to all sides of the sensor


def test_the_notch_is_on_the_side_of_x(case):
    sensors, shell, mesh = case
    for one, top in zip(sensors, 1000 * shell.tops, strict=True):
        x, y = 1000 * (one.size[:2] / 2 + FIT + COLLAR / 2)
        places = np.array([(x, 0), (x, 1.4), (x, 1.6), (-x, 0), (0, y), (0, -y)])
        tops = [heights[-1] for heights in hits(mesh, one, places, -10)]
        expected = top - 1000 * NOTCH[1] * np.array([1, 1, 0, 0, 0, 0])
        assert tops == pytest.approx(expected, abs=1e-3)


def test_the_number_stands_out_of_one_side(case):
    sensors, _, mesh = case
    for one in sensors:
        local = (mesh.vertices - 1000 * one.pose[:3, 3]) @ one.pose[:3, :3]
        half = 1000 * (one.size[:2] / 2 + FIT + COLLAR)
        near = (np.abs(local[:, :2]) < half + 2).all(axis=1) & (local[:, 2] > 0) & (local[:, 2] < 1000 * one.size[2])
        raised = np.abs(np.abs(local[near][:, :2]) - half - 1000 * RAISED) < 1e-3
        assert raised.any(axis=0).sum() == 1


def test_collars_hold_most_of_a_housing_and_always_stand_out_of_the_wall(case):
    sensors, shell, _ = case
    for one, top in zip(sensors, shell.tops, strict=True):
        assert top >= GUIDED * one.size[2] - 1e-12
        assert top + one.lift > shell.room + WALL


def test_the_shell_keeps_its_distance_and_its_thickness(case):
    sensors, shell, mesh = case
    assert shell.room == ROOM + max(one.hair for one in sensors)
    points = np.vstack([mesh.vertices, mesh.triangles_center])
    assert np.linalg.norm(points, axis=1).min() > RADIUS + 1000 * shell.room
    random = np.random.default_rng(7)
    ways = random.normal(size=(300, 3))
    ways = ways[ways[:, 2] > 0.8 * np.abs(ways[:, :2]).max(axis=1)]
    ways /= np.linalg.norm(ways, axis=1, keepdims=True)
    away = np.array([[np.linalg.norm(np.cross(way, one.pose[:3, 3])) for one in sensors] for way in ways])
    ways = ways[(away > 0.025).all(axis=1)]
    assert len(ways) > 20
    points, ray, _ = mesh.ray.intersects_location(np.zeros_like(ways), ways, multiple_hits=True)
    reach = np.linalg.norm(points, axis=1)
    for one in range(len(ways)):
        inner, outer = sorted(reach[ray == one])
        assert inner == pytest.approx(RADIUS + 1000 * shell.room, abs=OFF)
        assert outer - inner == pytest.approx(1000 * WALL, abs=0.05)


@pytest.mark.slow
def test_distance_and_thickness_on_a_head_that_is_no_sphere(crowded):
    result, sensors, shell, mesh = crowded
    scalp = result.head.scalp
    inside = trimesh.Trimesh(1000 * scalp.vertices, scalp.faces, process=False)
    assert not inside.contains(mesh.vertices[::7]).any()
    random = np.random.default_rng(8)
    chosen = random.choice(len(mesh.faces), 400, replace=False, p=mesh.area_faces / mesh.area)
    points = mesh.triangles_center[chosen]
    distance = np.abs(trimesh.proximity.signed_distance(inside, points))
    assert distance.min() > 1000 * shell.room
    # the inner and the outer side lie at the room and at room and wall; what is neither belongs to collars and rim
    axes = np.array([one.pose[:3, 2] for one in sensors])
    faces = np.array([one.pose[:3, 3] for one in sensors]) * 1000
    offset = points[:, None] - faces
    beside = np.linalg.norm(offset - np.einsum("psd,sd->ps", offset, axes)[..., None] * axes, axis=2).min(axis=1)
    low = points[:, 2] < 1000 * shell.rim[1] + 5
    free = distance[(beside > 18) & ~low]
    to_sides = np.minimum(np.abs(free - 1000 * shell.room), np.abs(free - 1000 * (shell.room + WALL)))
    assert len(free) > 30
    assert to_sides.max() < OFF


@pytest.mark.slow
def test_no_facet_is_nearer_to_the_average_head_than_told():
    """The template has corners that stand out between the rays from its middle, on the forehead most of all."""
    head = build_template("coarse")
    scalp = head.scalp
    _, hollow = _dome(mould(head), np.full(120, np.radians(10)), 3e-3)
    mesh = trimesh.Trimesh(*hollow, process=False)
    points, _ = trimesh.sample.sample_surface(mesh, 6000, seed=5)
    points = points[points[:, 2] > 0.03]
    distance = trimesh.proximity.closest_point(scalp.mesh, points)[1]
    assert distance.min() > 3e-3 - 0.05e-3
    assert np.median(distance) < 3.2e-3


@pytest.mark.slow
def test_holes_that_run_into_one_another_leave_one_closed_piece(crowded):
    _, sensors, shell, mesh = crowded
    is_sound(mesh, shell)
    holes_are_clear(mesh, sensors, shell)


def sensor_at(way, size=(0.012, 0.016, 0.024), number=1):
    """A sensor on the sphere, straight out along `way`."""
    like = parts_of(helmet_case)[0][0]
    z = np.array(way) / np.linalg.norm(way)
    x = np.cross([0.0, 1.0, 0.3], z)
    x /= np.linalg.norm(x)
    pose = np.eye(4)
    pose[:3, :3] = np.column_stack([x, np.cross(z, x), z])
    pose[:3, 3] = RADIUS / 1000 * z
    row = dataclasses.replace(like.row, number=number)
    return dataclasses.replace(like, row=row, pose=pose, size=np.array(size), lift=0.0, hair=0.0)


@pytest.mark.slow
def test_an_island_between_holes_is_left_out_and_told():
    sensors = []
    for number, (side, size) in enumerate(
        zip(
            [(0, 0.015), (0, -0.015), (0.017, 0), (-0.017, 0)],
            [(0.042, 0.008)] * 2 + [(0.008, 0.036)] * 2,
            strict=True,
        ),
        1,
    ):
        one = sensor_at((0, 0, 1), (*size, 0.024), number)
        one.pose[:3, :3] = np.eye(3)
        one.pose[:2, 3] = side
        sensors.append(one)
    shell = helmet_shell(mould(helmet_case().head), tuple(sensors))
    assert shell.loose > 1e-7
    is_sound(read(helmet_case(), shell), shell)


def test_the_rim_leaves_face_and_ears_free():
    head = helmet_case().head
    shell = helmet_shell(mould(head), (sensor_at((0, 0, 1)),))
    assert shell.lowered == ()
    assert shell.undercut == 0
    x, y, z = shell.mesh[0].T
    before = y > -0.02  # the face and both ears
    assert z[before].min() > RIM_FRONT - 1.5e-3  # the rim is square to the scalp: one of its edges is lower
    assert z[before & (z < RIM_FRONT + 1e-3)].size > 20
    inion = head.landmarks.inion[2]
    behind = (np.abs(x) < 0.02) & (y < 0)
    assert z[behind].min() == pytest.approx(inion + RIM_BACK, abs=1.5e-3)
    assert shell.rim == pytest.approx([inion + RIM_BACK, RIM_FRONT], abs=1e-3)


@pytest.mark.slow
def test_the_rim_comes_down_for_a_low_sensor():
    low = sensor_at((1, 0, 0.05), number=2)
    shell = helmet_shell(mould(helmet_case().head), (sensor_at((0, 0, 1)), low))
    assert shell.lowered == (2,)
    mesh = read(helmet_case(), shell)
    is_sound(mesh, shell)
    # all around the collar there is shell, up to nearly the whole margin (the rim is cut square to the scalp)
    turn = np.arange(16) / 16 * 2 * np.pi
    around = 1000 * (np.hypot(*(low.size[:2] / 2 + FIT + COLLAR)) + 0.95 * MARGIN)
    ring = around * np.column_stack([np.cos(turn), np.sin(turn)])
    for heights in hits(mesh, low, ring, -10):
        assert len(heights) == 2
    assert shell.mesh[0][:, 2][shell.mesh[0][:, 1] > 0.085].min() > RIM_FRONT - 1.5e-3  # not over the face


def test_an_opening_narrower_than_the_head_is_measured():
    head = helmet_case().head
    rim = np.full(120, np.radians(-30))
    inside = 0.095 * spherical(np.arange(120) * np.radians(3), rim)
    narrow = _undercut(mould(head), rim, inside)
    assert narrow == pytest.approx(0.092 - 0.095 * np.cos(np.radians(30)), abs=1e-4)


def test_the_swollen_scalp_of_a_box_is_a_box_with_rounded_edges():
    """Faces, edges and corners each in closed form."""
    box = trimesh.creation.box((0.2, 0.2, 0.2))
    envelope = Envelope(Surface(np.asarray(box.vertices), np.asarray(box.faces)), np.zeros(3))
    ways = np.array([[0, 0, 1], [0.3, 0.2, 1], [1, 0, 1], [1, 1, 1]], dtype=float)
    lengths = np.linalg.norm(ways, axis=1)
    found = envelope.radii(ways / lengths[:, None], (0.01, 0.02)) / lengths[:, None]
    for column, d in enumerate((0.01, 0.02)):
        expected = [0.1 + d, 0.1 + d, 0.1 + d / np.sqrt(2), 0.1 + d / np.sqrt(3)]
        assert found[:, column] == pytest.approx(expected, rel=1e-9)


@pytest.mark.slow
def test_same_sensors_same_bytes():
    result = helmet_case()
    sensors, _, shell = parts_of(helmet_case)
    again = helmet_shell(mould(result.head), sensors)
    layout = result.layouts[0]
    assert helmet_shell_stl(result, layout, again) == helmet_shell_stl(result, layout, shell)
