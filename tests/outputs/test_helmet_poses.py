"""Helmet poses read back from their text: they rebuild positions and axes of the sensors as the physics has them."""

import csv
import dataclasses
import io
import itertools
import json

import numpy as np
import pytest
from helmet_cases import TARGET, THREE, angle_between, helmet_case, parts_of, slot_case
from hypothesis import example, given, settings
from hypothesis import strategies as st
from studies import BAND, SPHERE, study_of

from layout.outputs.helmet.columns import POSES
from layout.outputs.helmet.poses import helmet_poses_csv, helmet_poses_json, pose_in_mm
from layout.outputs.helmet.sensors import HousedSensor, housed_sensors
from layout.sensing.housing import Rest, poses

PLACE = 0.01  # mm
TURN = 0.01  # degrees


@pytest.fixture(scope="module", params=[helmet_case, slot_case], ids=["on the scalp", "in slots"])
def case(request):
    result = request.param()
    layout, parts = result.layouts[0], parts_of(request.param)
    return result, layout, helmet_poses_csv(result, layout, *parts), helmet_poses_json(result, layout, *parts)


def from_csv(text):
    """Sensors from the table: matrix, size, and per channel axis and baseline in the housing frame."""
    sensors = []
    for row in csv.DictReader(io.StringIO(text, newline="")):
        cell = {name.removesuffix("_mm"): value for name, value in row.items()}
        matrix = np.array([[float(cell[f"m{i}{j}"]) for j in range(1, 5)] for i in range(1, 5)])
        vectors = {
            kind: np.array(
                [
                    [float(cell[f"{kind}{channel}_in_housing_{axis}"]) for axis in "xyz"]
                    for channel in range(1, 4)
                    if cell.get(f"{kind}{channel}_in_housing_x")
                ]
            )
            for kind in ("axis", "baseline")
        }
        centre = np.array([float(cell[f"centre_in_housing_{axis}"]) for axis in "xyz"])
        sensors.append((int(cell["number"]), matrix, centre, vectors["axis"], vectors["baseline"]))
    return sensors


def from_json(text):
    return [
        (
            one["number"],
            np.array(one["housing_to_head"]),
            np.array(one["centre_in_housing_mm"]),
            np.array(one["axes_in_housing"]),
            np.array(one.get("baselines_in_housing_mm", [])),
        )
        for one in json.loads(text)["sensors"]
    ]


@pytest.mark.parametrize("read", [from_csv, from_json])
def test_the_text_rebuilds_what_the_physics_uses(case, read):
    result, layout, *texts = case
    candidates = result.candidates
    sensors = read(texts[read is from_json])
    assert [number for number, *_ in sensors] == [row.number for row in layout.sensors]
    for (_, matrix, centre, axes, baselines), row in zip(sensors, layout.sensors, strict=True):
        channels = candidates.candidate_of_channel == row.candidate
        place = (matrix @ [*centre, 1.0])[:3]
        assert np.abs(place - 1000 * candidates.positions[channels]).max() < PLACE
        assert axes.shape == candidates.axes[channels].shape
        assert angle_between(axes @ matrix[:3, :3].T, candidates.axes[channels]) < TURN
        if row.kind_type == "gradiometer":
            rebuilt = baselines @ matrix[:3, :3].T
            assert np.abs(rebuilt - 1000 * candidates.baselines[channels]).max() < PLACE


@pytest.mark.parametrize("read", [from_csv, from_json])
def test_the_points_of_cells_and_coils_come_back(read):
    result = helmet_case()
    layout = result.layouts[0]
    text = (helmet_poses_csv if read is from_csv else helmet_poses_json)(result, layout, *parts_of(helmet_case))
    pickup, owner = result.candidates.pickup, result.candidates.candidate_of_channel
    for (_, matrix, centre, axes, baselines), row in zip(read(text), layout.sensors, strict=True):
        for number, channel in enumerate(np.flatnonzero(owner == row.candidate)):
            points = pickup.positions[pickup.channel == channel]
            if row.kind_type == "gradiometer":
                expected = centre + np.array([0.5, -0.5])[:, None] * baselines[number]
            else:
                corner = 3 / (2 * np.sqrt(3))  # Gauss-Legendre points of a cell of 3 mm
                expected = centre + corner * np.array([[x, y, z] for x in (-1, 1) for y in (-1, 1) for z in (-1, 1)])
            rebuilt = expected @ matrix[:3, :3].T + matrix[:3, 3]
            assert np.abs(np.sort(rebuilt, axis=0) - np.sort(1000 * points, axis=0)).max() < PLACE
            on_channel = pickup.axes[pickup.channel == channel]
            assert angle_between(np.tile(axes[number] @ matrix[:3, :3].T, (len(on_channel), 1)), on_channel) < TURN


def test_columns_and_measures(case):
    result, layout, text, as_json = case
    rows = list(csv.DictReader(io.StringIO(text, newline="")))
    assert list(rows[0]) == list(POSES)
    content = json.loads(as_json)
    assert content["units"] == "mm"
    for row, one, sensor in zip(rows, content["sensors"], layout.sensors, strict=True):
        housing = result.brief.stock[sensor.kind_number].housing
        assert [float(row[name]) for name in ("width_mm", "depth_mm", "length_mm")] == pytest.approx(
            [1000 * edge for edge in housing]
        )
        matrix = np.array(one["housing_to_head"])
        standoff = 1000 * result.brief.stock[sensor.kind_number].standoff
        assert one["centre_in_housing_mm"] == pytest.approx([0, 0, standoff], abs=1e-5)
        # the face is above the place on the scalp by the lift, and that is hair, slot gap and what a flat face needs
        face = np.array(one["scalp_mm"]) + one["lift_mm"] * matrix[:3, 2]
        assert np.abs(face - matrix[:3, 3]).max() < PLACE
        rest = one["lift_mm"] - one["hair_mm"] - one["slot_gap_mm"]
        assert -1e-6 < rest < 1.5
        for name in ("lift", "hair", "slot_gap", "scalp_gap", "housing_gap"):
            assert float(row[f"{name}_mm"]) == pytest.approx(one[f"{name}_mm"], abs=6e-4)
        assert row["nearest_standard_position"] == one["nearest_standard_position"] == sensor.nearest_name
        assert int(row["nearest_housing"]) == one["nearest_housing"]


def test_a_slot_that_ends_early_is_told(case):
    result, _, _, as_json = case
    gaps = [one["slot_gap_mm"] for one in json.loads(as_json)["sensors"]]
    if result is slot_case():
        assert gaps[0] == 0
        assert gaps[1] > 3
    else:
        assert gaps == [0] * 5


UNIT = st.tuples(*[st.floats(-1, 1)] * 3).filter(lambda v: np.linalg.norm(v) > 0.05)


@settings(max_examples=200, deadline=None)
@example((0.0, 1.0, 1.2e-7), (0.0, 0.0, 0.0))  # all but straight ahead, where "to the front" is not defined
@given(UNIT, st.tuples(*[st.floats(-0.15, 0.15)] * 3))
def test_rotations_are_right_handed_and_survive_the_text(axis, place):
    axis = np.array(axis) / np.linalg.norm(axis)
    pose = poses(Rest(axis[None], np.array(place)[None]))[0]
    case = helmet_case()
    row = dataclasses.replace(case.layouts[0].sensors[0], position=np.array(place) + 0.0065 * axis, axes=axis[None])
    one = HousedSensor(
        row, np.array([0.012, 0.016, 0.024]), pose, np.array([0, 0, 0.0065]), axis[None] @ pose[:3, :3],
        np.zeros((1, 3)), 0.0, 0.0, 0.0,
    )  # fmt: skip
    matrix = pose_in_mm(one)
    text = np.array([float(f"{value:.8f}") for value in matrix.ravel()]).reshape(4, 4)
    turn = text[:3, :3]
    assert np.abs(turn.T @ turn - np.eye(3)).max() < 1e-7
    assert np.linalg.det(turn) == pytest.approx(1.0, abs=1e-7)
    assert angle_between(turn[:, 2], axis) < TURN
    assert np.abs((text @ [0, 0, 6.5, 1])[:3] - 1000 * row.position).max() < PLACE
    assert matrix[3].tolist() == [0, 0, 0, 1]


def test_same_result_same_text_whoever_makes_the_parts():
    result, parts = slot_case(), parts_of(slot_case)
    layout = result.layouts[0]
    assert helmet_poses_csv(result, layout) == helmet_poses_csv(result, layout, *parts)
    assert helmet_poses_json(result, layout, *parts) == helmet_poses_json(result, layout, *parts)


def test_sensors_whose_axes_lie_differently_are_warned_of():
    content = json.loads(helmet_poses_json(helmet_case(), helmet_case().layouts[0], *parts_of(helmet_case)))
    told = [text for text in content["cautions"] if "axes_in_housing" in text]
    assert [text.split(":")[0] for text in told] == ["cell"]
    lying = {}
    for one in content["sensors"]:
        if one["kind"] == "cell":
            lying.setdefault(str(np.abs(np.round(one["axes_in_housing"], 3))), []).append(str(one["number"]))
    assert len(lying) > 1
    assert "alike within " + "; ".join(", ".join(numbers) for numbers in lying.values()) + ")" in told[0]


def test_a_two_axis_sensor_is_turned_with_its_axes():
    """One sensor that can only be turned: its axes lie in its housing as they always do, whatever the choice."""
    result = slot_case()
    first, second = housed_sensors(result, result.layouts[0])
    assert (first.row.axis_name, second.row.axis_name) == ("normal+tangent1", "normal+tangent2")
    np.testing.assert_allclose(first.axes, [[0, 0, 1], [0, 1, 0]], atol=1e-9)
    np.testing.assert_allclose(second.axes, first.axes, atol=1e-9)
    assert not any("lie alike" in one for one in json.loads(helmet_poses_json(result, result.layouts[0]))["cautions"])


def test_housings_that_would_meet_only_when_turned_exclude_each_other():
    """Faces of 20 x 10 mm some 14 mm apart: across they may be free of each other, not once one of them is turned."""
    excluded = {}
    for axes in ("normal", "two_axis"):
        stock = THREE.replace('"any_of_three"', f'"{axes}"').replace("[12, 16, 24]", "[20, 10, 24]")
        stock = stock.replace("count = 4", "count = 2").replace('family = "10-20"', "grid_mm = 14")
        study = study_of(SPHERE, TARGET, stock.replace("cell_mm", 'footprint = "housing"\ncell_mm'), BAND)
        sites = [np.unique(study.candidates.site[clique]) for clique in study.candidates.cliques]
        excluded[axes] = {pair for one in sites for pair in itertools.combinations(one.tolist(), 2)}
    assert excluded["two_axis"] > excluded["normal"]
