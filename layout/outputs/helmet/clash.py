"""What of a layout would not fit on the head: housings that meet, press into the scalp, or stand on an electrode."""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass
from typing import Literal

import numpy as np

from layout.anatomy.scalp_points import tangents_at
from layout.brief.objects_stock import FootprintBrief
from layout.outputs.helmet.gaps import box_gaps, scalp_gaps
from layout.outputs.helmet.sensors import HousedSensor, stacked
from layout.outputs.plain import fixed, one_line
from layout.outputs.result import DesignResult, RankedLayout, SensorRow
from layout.sensing.footprints import footprints_overlap
from layout.units import MM

TOUCHING = 1e-6  # [m] what is nearer than this, or less deep, touches and does not clash
_FAR = 40e-3  # [m] an electrode farther from a face than this is not below it

Parts = Literal["two housings", "housing and scalp", "housing and electrode"]


@dataclass(frozen=True)
class Clash:
    """Two parts in each other's way. first, second: placing numbers (second None: the scalp); depth [m]: the shortest
    way that parts two housings, or how far the scalp stands up into a housing along its length; None for electrodes,
    whose height is not known.
    """

    parts: Parts
    first: int
    second: int | None
    depth: float | None


@dataclass(frozen=True)
class Room:
    """The room that housed sensors have, n sensors.

    neighbour (n,): row of the nearest other housing, -1 where there is none; neighbour_gap (n,) [m]: distance to it,
    negative where the two share volume, inf where there is none; scalp_gap (n,) [m]: between face and scalp along the
    housing's length, negative where the scalp stands up into the housing; clashes: worst first within each kind.
    """

    neighbour: np.ndarray
    neighbour_gap: np.ndarray
    scalp_gap: np.ndarray
    clashes: tuple[Clash, ...]


def room_of(result: DesignResult, layout: RankedLayout, sensors: tuple[HousedSensor, ...]) -> Room:
    """The room of the layout's housed sensors, at least one."""
    poses, sizes = stacked(sensors)
    numbers = [one.row.number for one in sensors]
    n = len(sensors)
    gaps = np.full((n, n), np.inf)
    for one in range(n - 1):
        rest = np.arange(one + 1, n)
        here = np.full(len(rest), one)
        gaps[one, rest] = gaps[rest, one] = box_gaps(poses[here], sizes[here], poses[rest], sizes[rest])
    scalp = scalp_gaps(result.head.scalp, poses, sizes)
    meeting = [(gaps[a, b], a, b) for a in range(n) for b in range(a + 1, n) if gaps[a, b] < -TOUCHING]
    clashes = [Clash("two housings", numbers[a], numbers[b], float(-gap)) for gap, a, b in sorted(meeting)]
    pressed = sorted((scalp[one], one) for one in range(n) if scalp[one] < -TOUCHING)
    clashes += [Clash("housing and scalp", numbers[one], None, float(-gap)) for gap, one in pressed]
    clashes += _on_electrodes(result, layout, sensors)
    nearest = gaps.argmin(axis=1) if n > 1 else np.array([-1])
    return Room(nearest, gaps.min(axis=1), scalp, tuple(clashes))


def _on_electrodes(result: DesignResult, layout: RankedLayout, sensors: tuple[HousedSensor, ...]) -> list[Clash]:
    """Electrodes (the ground too) whose footprint lies under a housing's face."""
    electrodes = [row for row in layout.sensors if row.kind_type == "electrode"]
    if not electrodes:
        return []
    shapes: list[FootprintBrief | None] = [_contact(result, row) for row in electrodes]
    shapes += [FootprintBrief("rectangle", one.size[0], one.size[1]) for one in sensors]
    normals = np.array([row.normal for row in electrodes])
    frames = np.concatenate([normals[:, None], tangents_at(normals)], axis=1)
    poses, _ = stacked(sensors)
    turns = poses[:, :3, :3].transpose(0, 2, 1)
    frames = np.concatenate([frames, np.stack([turns[:, 2], turns[:, 1], -turns[:, 0]], axis=1)])
    centres = np.concatenate([[row.scalp_position for row in electrodes], poses[:, :3, 3]])
    away = np.linalg.norm(centres[None, : len(electrodes)] - poses[:, None, :3, 3], axis=2)
    pairs = np.argwhere(away < _FAR)
    rows = np.column_stack([len(electrodes) + pairs[:, 0], pairs[:, 1]])
    found = footprints_overlap(rows, np.arange(len(shapes)), shapes, np.zeros(len(shapes)), centres, frames)
    return [
        Clash("housing and electrode", sensors[one].row.number, electrodes[other].number, None)
        for one, other in pairs[found]
    ]


def _contact(result: DesignResult, row: SensorRow) -> FootprintBrief:
    """The room of an electrode: its footprint, else its disc, else its point (the ground: the point)."""
    if row.kind_number < 0:
        return FootprintBrief("circle", 0.0, 0.0)
    entry = result.brief.stock[row.kind_number]
    return entry.footprint or FootprintBrief("circle", entry.disc_diameter, entry.disc_diameter)


def clash_sentence(room: Room) -> str:
    """What clashes and how much room is left, in one sentence."""
    kinds: tuple[Parts, ...] = ("two housings", "housing and scalp", "housing and electrode")
    counts = {kind: sum(clash.parts == kind for clash in room.clashes) for kind in kinds}
    least = room.neighbour_gap.min()
    if not room.clashes:
        beside = f"; the nearest two housings are {fixed(least / MM, 2)} mm apart" if np.isfinite(least) else ""
        return f"No housing meets another, the scalp or an electrode{beside}."
    said = (
        (counts["two housings"], "{} of housings that meet", "pair"),
        (counts["housing and scalp"], "{} that the scalp stands up into", "housing"),
        (counts["housing and electrode"], "{} under a housing", "electrode"),
    )
    parts = [
        text.format(f"{count} {thing}" if count == 1 else f"{count} {thing}s") for count, text, thing in said if count
    ]
    deepest = max((clash.depth for clash in room.clashes if clash.depth is not None), default=None)
    depth = "" if deepest is None else f" (up to {fixed(deepest / MM, 2)} mm)"
    return f"Clashes{depth}: {', '.join(parts)}; clashes.csv lists them."


def clashes_csv(layout: RankedLayout, room: Room) -> str:
    """One row per clash; columns.json defines the columns."""
    names = {row.number: one_line(row.name) for row in layout.sensors}
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(("parts", "first_number", "first_name", "second_number", "second_name", "depth_mm"))
    for one in room.clashes:
        second = ("", "") if one.second is None else (one.second, names[one.second])
        depth = "" if one.depth is None else fixed(one.depth / MM, 3)
        table.writerow((one.parts, one.first, names[one.first], *second, depth))
    return text.getvalue()
