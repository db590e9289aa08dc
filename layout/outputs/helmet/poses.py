"""Where every housing of a layout stands, as tables for CAD: helmet-poses.csv and helmet-poses.json, in mm."""

from __future__ import annotations

import csv
import io
import json
from typing import Any

import numpy as np

from layout.outputs.helmet.clash import Room, clash_sentence, room_of
from layout.outputs.helmet.columns import HEAD_FRAME, HOUSING_FRAME, MOST_CHANNELS, POSES
from layout.outputs.helmet.sensors import HousedSensor, housed_sensors
from layout.outputs.helmet.shell import (
    COLLAR,
    FIT,
    MARGIN,
    WALL,
    HelmetShell,
    helmet_shell,
    mould,
)
from layout.outputs.plain import fixed, for_json, one_line
from layout.outputs.result import DesignResult, RankedLayout
from layout.units import MM

SCHEMA = 1  # of helmet-poses.json
THIN_WEB = 1.2 * MM  # walls thinner than some two lines of plastic do not print well


def helmet_poses_csv(
    result: DesignResult,
    layout: RankedLayout,
    sensors: tuple[HousedSensor, ...] | None = None,
    room: Room | None = None,
    shell: HelmetShell | None = None,
) -> str:
    """One row per housed sensor (at least one); columns.json defines the columns. What is not given is made."""
    sensors, room, shell = _made(result, layout, sensors, room, shell)
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(POSES)
    for number, one in enumerate(sensors):
        row, neighbour = one.row, int(room.neighbour[number])
        table.writerow(
            [
                row.number,
                one_line(row.name),
                one_line(row.kind),
                one_line(row.site),
                *(
                    fixed(value, 4 if at % 4 == 3 and at < 12 else 8)
                    for at, value in enumerate(pose_in_mm(one).ravel())
                ),
                *_lengths(one.size),
                *_lengths(row.position),
                *_lengths(one.centre),
                *_by_channel(row.axes, MOST_CHANNELS, 8),
                *_by_channel(one.axes, MOST_CHANNELS, 8),
                *_by_channel(one.baselines / MM if row.kind_type == "gradiometer" else np.zeros((0, 3)), 2, 4),
                *_lengths(row.scalp_position),
                one_line(row.nearest_name),
                fixed(row.nearest_offset / MM, 2),
                *_lengths(np.array([one.lift, one.hair, one.slot_gap, room.scalp_gap[number]]), 3),
                "" if neighbour < 0 else sensors[neighbour].row.number,
                fixed(room.neighbour_gap[number] / MM, 3),
                fixed((one.size[2] - shell.tops[number]) / MM, 3),
            ]
        )
    return text.getvalue()


def helmet_poses_json(
    result: DesignResult,
    layout: RankedLayout,
    sensors: tuple[HousedSensor, ...] | None = None,
    room: Room | None = None,
    shell: HelmetShell | None = None,
) -> str:
    """The poses with their frames in words, the clash check and the shell's measures; what is not given is made."""
    sensors, room, shell = _made(result, layout, sensors, room, shell)
    content = {
        "schema": SCHEMA,
        "layout": layout.rank,
        "head": result.head.name,
        "units": "mm",
        "frames": {
            "head": HEAD_FRAME,
            "housing": HOUSING_FRAME,
            "housing_to_head": "4x4 by rows, for column vectors (x, y, z, 1) in mm",
        },
        "sensors": [_sensor(number, one, sensors, room, shell) for number, one in enumerate(sensors)],
        "clash_check": {
            "summary": clash_sentence(room),
            "method": "exact for boxes and for the scalp's triangles; electrodes by their footprints",
            "clashes": [
                {"parts": clash.parts, "first": clash.first, "second": clash.second, "depth_mm": _mm(clash.depth)}
                for clash in room.clashes
            ],
        },
        "shell": _shell(sensors, room, shell),
        "cautions": _cautions(result, sensors, shell),
    }
    return json.dumps(for_json(content), indent=1, ensure_ascii=False) + "\n"


def pose_in_mm(one: HousedSensor) -> np.ndarray:
    """Housing frame to head frame (4, 4), translation in mm."""
    pose = one.pose.copy()
    pose[:3, 3] /= MM
    return pose


def _made(
    result: DesignResult,
    layout: RankedLayout,
    sensors: tuple[HousedSensor, ...] | None,
    room: Room | None,
    shell: HelmetShell | None,
) -> tuple[tuple[HousedSensor, ...], Room, HelmetShell]:
    sensors = sensors or housed_sensors(result, layout)
    return sensors, room or room_of(result, layout, sensors), shell or helmet_shell(mould(result.head), sensors)


def _sensor(
    number: int, one: HousedSensor, sensors: tuple[HousedSensor, ...], room: Room, shell: HelmetShell
) -> dict[str, Any]:
    row, neighbour = one.row, int(room.neighbour[number])
    content = {
        "number": row.number,
        "name": row.name,
        "kind": row.kind,
        "site": row.site,
        "housing_to_head": pose_in_mm(one),
        "housing_size_mm": one.size / MM,
        "centre_mm": row.position / MM,
        "centre_in_housing_mm": np.round(one.centre / MM, 6),
        "axes": row.axes,
        "axes_in_housing": np.round(one.axes, 9),
    }
    if row.kind_type == "gradiometer":
        content["baselines_in_housing_mm"] = np.round(one.baselines / MM, 6)
    return content | {
        "scalp_mm": row.scalp_position / MM,
        "nearest_standard_position": row.nearest_name,
        "offset_mm": row.nearest_offset / MM,
        "lift_mm": one.lift / MM,
        "hair_mm": one.hair / MM,
        "slot_gap_mm": one.slot_gap / MM,
        "scalp_gap_mm": round(room.scalp_gap[number] / MM, 6),
        "nearest_housing": None if neighbour < 0 else sensors[neighbour].row.number,
        "housing_gap_mm": _mm(room.neighbour_gap[number]),
        "stands_out_of_collar_mm": (one.size[2] - shell.tops[number]) / MM,
    }


def _shell(sensors: tuple[HousedSensor, ...], room: Room, shell: HelmetShell) -> dict[str, Any]:
    thin = [
        [one.row.number, sensors[room.neighbour[number]].row.number]
        for number, one in enumerate(sensors)
        if room.neighbour_gap[number] - 2 * FIT < THIN_WEB
    ]
    return {
        "file": "helmet-shell.stl",
        "made_for": "the scalp of this head and no other",
        "gap_to_scalp_mm": shell.room / MM,
        "wall_mm": WALL / MM,
        "collar_wall_mm": COLLAR / MM,
        "fit_per_side_mm": FIT / MM,
        "rim_above_landmark_plane_mm": {"lowest": shell.rim[0] / MM, "highest": shell.rim[1] / MM},
        "rim_lowered_for_sensors": list(shell.lowered),
        "scalp_wider_than_opening_mm": shell.undercut / MM,
        "margin_around_collars_mm": MARGIN / MM,
        "notch": "in the top of each collar, on the side of the housing's x",
        "number": "raised on one side of each collar",
        "extent_mm": np.ptp(shell.mesh[0], axis=0) / MM,
        "volume_cm3": shell.volume * 1e6,
        "left_out_because_loose_cm3": shell.loose * 1e6,
        "holes_with_less_than_1.2_mm_between": sorted({tuple(sorted(pair)) for pair in thin}),
    }


def _cautions(result: DesignResult, sensors: tuple[HousedSensor, ...], shell: HelmetShell) -> list[str]:
    cautions = [
        "For planning only, not a medical device; the sensors' makers say what a helmet for them must be like (heat, "
        "cables, materials near the sensors).",
        "A shell fits the head it was made for; measure the person, and check the fit with the sensors taken out.",
    ]
    if result.head.name == "template":
        cautions.append("The template head is an average of many and has no ears: it is nobody's own head.")
    if shell.undercut > 0.5 * MM:
        cautions.append(
            f"The head above the rim is {fixed(shell.undercut / MM, 1)} mm wider than the opening of the shell: it "
            "must be put on tilted, or cut in two and joined on the head."
        )
    for kind in dict.fromkeys(one.row.kind for one in sensors):
        lying: dict[bytes, list[str]] = {}
        for one in sensors:
            if one.row.kind == kind:
                lying.setdefault(np.round(np.abs(one.axes), 4).tobytes(), []).append(str(one.row.number))
        if len(lying) > 1:
            groups = "; ".join(", ".join(numbers) for numbers in lying.values())
            cautions.append(
                f"{one_line(kind)}: the sensitive axes do not lie alike in all housings (axes_in_housing; alike within "
                f"{groups}); a sensor whose axes are fixed must be turned in its place, and its hole, which is not "
                "turned here, and its clash check with it."
            )
    return cautions


def _mm(value: float | None) -> float | None:
    return None if value is None or not np.isfinite(value) else value / MM


def _lengths(values: np.ndarray, digits: int = 4) -> list[str]:
    return [fixed(value / MM, digits) for value in values]


def _by_channel(rows: np.ndarray, channels: int, digits: int) -> list[str]:
    """The rows (m, 3) of up to `channels` channels, empty for those that are not there."""
    texts = [fixed(value, digits) for value in rows.ravel()]
    return texts + [""] * (3 * channels - len(texts))
