"""What the report says of each sensor: place, worth, room to move and what can stand in for it."""

from __future__ import annotations

import math
from typing import Any

from layout.evidence.tolerance import LEVELS
from layout.outputs.placement_tables import PlacedSensor, Placement, Room
from layout.outputs.plain import fixed, one_line
from layout.outputs.report.scene import sensor_colour
from layout.outputs.result import RankedLayout, SensorRow
from layout.outputs.words import nearest_text
from layout.units import DEGREE, MM, PERCENT

COMPASS = ("front", "front left", "left", "back left", "back", "back right", "right", "front right")
INSTEAD = 3  # substitutes named for each sensor
SHOWN_LEVELS = (0, 1)  # of LEVELS: the drops that a sensor's card names; at the second many are beyond what was tried


def sensor_rows(layout: RankedLayout, placement: Placement | None, unit: str) -> list[dict[str, Any]]:
    """One entry per sensor, in order, every value as text. `placement` None: nothing on room and substitutes."""
    placed = {one.name: one for one in placement.sensors} if placement is not None else {}
    return [_row(row, placed.get(row.name), layout, unit) for row in layout.sensors]


def levels() -> list[str]:
    """The drops for which room is given, in per cent."""
    return [f"{level / PERCENT:g}" for level in LEVELS]


def _row(row: SensorRow, placed: PlacedSensor | None, layout: RankedLayout, unit: str) -> dict[str, Any]:
    is_electrode = row.kind_type == "electrode"
    share = 100.0 * row.worth / layout.value if layout.value else 0.0
    return {
        "number": row.number,
        "colour": sensor_colour(row),
        "site": one_line(row.site),
        "kind": one_line(row.kind),
        "role": row.role,
        "position_mm": ", ".join(fixed(value / MM, 1) for value in row.position),
        "axis_name": "" if is_electrode else one_line(row.axis_name),
        "axes": [] if is_electrode else [", ".join(fixed(value, 3) for value in axis) for axis in row.axes],
        "nearest": nearest_text(row),
        "landmarks_mm": ", ".join(fixed(value / MM, 0) for value in row.landmark_distance),
        "worth": fixed(row.worth, 3),
        "worth_text": f"{fixed(row.worth, 3)} {unit} ({fixed(share, 1)} % of the value)",
        "room": None if placed is None else _room_cells(placed),
        "room_texts": [] if placed is None else [(levels()[at], _room_text(placed, at)) for at in SHOWN_LEVELS],
        "instead": None if placed is None else [_instead(*one, layout) for one in placed.substitutes[:INSTEAD]],
    }


def _room_cells(placed: PlacedSensor) -> list[str]:
    """Slide, tilt and lift at every level, "1.2 / 3.4 / >5"; "–" where that way does not exist."""
    ways = ((placed.slide, MM, 1), (placed.tilt, DEGREE, 0), (placed.lift, MM, 1))
    return [
        "–" if room is None else " / ".join(_within(value, room, unit, digits) for value in room.worst)
        for room, unit, digits in ways
    ]


def _room_text(placed: PlacedSensor, at: int) -> str:
    """Room at one of LEVELS in words, with the worst direction of a slide."""
    slide = placed.slide
    said = [f"{_within(slide.worst[at], slide, MM, 1)} mm along the scalp{_towards(slide, at)}"]
    if placed.tilt is not None:
        said.append(f"{_within(placed.tilt.worst[at], placed.tilt, DEGREE, 0)}° of tilt")
    if placed.lift is not None:
        said.append(f"{_within(placed.lift.worst[at], placed.lift, MM, 1)} mm of lift")
    return ", ".join(said)


def _within(value: float, room: Room, unit: float, digits: int) -> str:
    return fixed(value / unit, digits) if math.isfinite(value) else f">{fixed(room.tried / unit, 0)}"


def _towards(room: Room, at: int) -> str:
    """Where a slide costs most, in eight words of direction; "" where none costs that much."""
    if not math.isfinite(room.worst[at]) or not room.toward[at]:
        return ""
    return f" (worst to the {COMPASS[round(float(room.toward[at]) / 45) % 8]})"


def _instead(name: str, value: float, layout: RankedLayout) -> tuple[str, str]:
    """A substitute's name, and the value it leaves in per cent."""
    return one_line(name), fixed(100.0 * value / layout.value, 1) if layout.value else "–"
