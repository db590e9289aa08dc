"""What the turning head of the report is drawn from: meshes, places and colours as compact text, millimetres."""

from __future__ import annotations

import base64
import json
from typing import Any

import numpy as np

from layout.anatomy.head import Head, Region
from layout.anatomy.mesh_repair import decimate
from layout.outputs.pictures.backdrop import region_colour
from layout.outputs.pictures.figure import GROUND_COLOUR, KIND_COLOURS
from layout.outputs.plain import for_json
from layout.outputs.result import DesignResult, RankedLayout, SensorRow
from layout.units import MM

STEP = 0.01  # mm: coordinates are whole numbers of this, far finer than a screen shows
MOST_SCALP = 8000  # vertices: what is taken away above that moves the surface by less than a line's width
CORTEX_GREY = "#CCCCCF"  # as on the flat pictures
STEPS = 255  # of the sensitivity's colours
FULL = 99.5  # percentile of the sensitivity that gets the last colour, so that few sources do not darken all others
SHAFT, TIP, THICKNESS, SIDES = 15.0, 7.0, 0.9, 8  # mm, of arrows; sides of their round parts


def scene_json(result: DesignResult) -> str:
    """The scene as JSON that no text inside can end early: "<", ">" and "&" are written as escapes."""
    head = result.head
    scene = {
        "scalp": _mesh(*decimate(head.scalp.vertices, head.scalp.faces, MOST_SCALP)),
        "cortex": _mesh(head.cortex.positions, head.cortex.faces)
        | {
            "region": packed(_region_of(head, result.regions).astype(np.uint8)),
            "borders": packed(in_steps(region_borders(head, result.regions))),
        },
        "grey": CORTEX_GREY,
        "regionColours": [region_colour(index) for index in range(len(result.regions))],
        "sites": packed(in_steps(_sites(result))),
        "landmarks": [
            {"name": name, "at": (point / MM).round(1).tolist()}
            for name, point in (
                ("nasion", head.landmarks.nas),
                ("LPA", head.landmarks.lpa),
                ("RPA", head.landmarks.rpa),
                ("inion", head.landmarks.inion),
            )
        ],
        "layouts": [_layout(layout) for layout in result.layouts],
        "sensitivity": _sensitivity(result),
        "step": STEP,
    }
    text = json.dumps(for_json(scene), separators=(",", ":"))
    return text.replace("&", "\\u0026").replace("<", "\\u003c").replace(">", "\\u003e")


def packed(array: np.ndarray) -> dict[str, Any]:
    """An integer array as base64 of its little-endian bytes, row by row, with its type: i1, u1, i2, u2 or u4."""
    array = np.ascontiguousarray(array)
    code = array.dtype.kind + str(array.dtype.itemsize)
    return {"type": code, "data": base64.b64encode(array.astype("<" + code).tobytes()).decode("ascii")}


def in_steps(points: np.ndarray) -> np.ndarray:
    """Points (n, 3) [m] as whole numbers of STEP, int16: heads reach 327 mm from their origin at most."""
    steps = np.round(np.asarray(points, float) / MM / STEP)
    return np.clip(steps, -32767, 32767).astype(np.int16)


def region_borders(head: Head, regions: tuple[Region, ...]) -> np.ndarray:
    """Ends (2 n, 3) [m] of the line pieces that run between members and others, through the edges' middles."""
    pieces = [np.zeros((0, 3))]
    for region in regions:
        member = np.zeros(len(head.cortex), bool)
        member[region.members] = True
        inside = member[head.cortex.faces]
        cut = head.cortex.faces[(inside.sum(axis=1) % 3) > 0]
        odd = np.where(member[cut].sum(axis=1) == 1, member[cut].argmax(axis=1), (~member[cut]).argmax(axis=1))
        corner = head.cortex.positions[cut]
        rows = np.arange(len(cut))
        alone = corner[rows, odd]
        ends = [(alone + corner[rows, (odd + step) % 3]) / 2 for step in (1, 2)]
        pieces.append(np.stack(ends, axis=1).reshape(-1, 3))
    return np.concatenate(pieces)


def arrows(starts: np.ndarray, axes: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Round arrows as one mesh: vertices (m, 3), faces (f, 3). starts (n, 3) [m], axes (n, 3) unit."""
    angles = 2 * np.pi * np.arange(SIDES) / SIDES
    rings = ((0.0, THICKNESS), (SHAFT, THICKNESS), (SHAFT, 2.6 * THICKNESS), (SHAFT + TIP, 0.0))  # along, radius
    least = np.eye(3)[np.abs(axes).argmin(axis=1)]
    across = np.cross(axes, least)
    across /= np.linalg.norm(across, axis=1, keepdims=True)
    other = np.cross(axes, across)
    round_about = np.cos(angles)[None, :, None] * across[:, None] + np.sin(angles)[None, :, None] * other[:, None]
    points = [starts[:, None] + MM * (along * axes[:, None] + radius * round_about) for along, radius in rings]
    vertices = np.stack(points, axis=1).reshape(-1, 3)  # arrow, ring, side
    here = np.arange(SIDES)
    after = (here + 1) % SIDES
    band = np.concatenate([np.stack([here, after, after + SIDES], 1), np.stack([here, after + SIDES, here + SIDES], 1)])
    one = np.concatenate([band + SIDES * ring for ring in range(len(rings) - 1)])
    faces = np.concatenate([one + SIDES * len(rings) * number for number in range(len(starts))] or [one[:0]])
    return vertices, faces


def sensor_colour(row: SensorRow) -> str:
    """Colour of a sensor's disc, as on the flat pictures."""
    return GROUND_COLOUR if row.role == "ground" else KIND_COLOURS[row.kind_number % len(KIND_COLOURS)]


def _mesh(vertices: np.ndarray, faces: np.ndarray) -> dict[str, Any]:
    corner = np.uint16 if len(vertices) <= 2**16 else np.uint32
    return {"points": packed(in_steps(vertices)), "faces": packed(np.asarray(faces).astype(corner))}


def _region_of(head: Head, regions: tuple[Region, ...]) -> np.ndarray:
    """Number of the region from 1 at each source (n_sources,), 0 outside; the first one wins where two overlap."""
    found = np.zeros(len(head.cortex), int)
    for number in range(len(regions), 0, -1):
        found[regions[number - 1].members] = number
    return found


def _sites(result: DesignResult) -> np.ndarray:
    return result.candidates.sites.positions[np.unique(result.candidates.singles.site)]


def _layout(layout: RankedLayout) -> dict[str, Any]:
    pointed = [(row, axis) for row in layout.sensors if row.kind_type != "electrode" for axis in row.axes]
    starts = np.array([row.position for row, _ in pointed]).reshape(-1, 3)
    axes = np.array([axis for _, axis in pointed]).reshape(-1, 3)
    vertices, faces = arrows(starts, axes)
    return {
        "rank": layout.rank,
        "numbers": [row.number for row in layout.sensors],
        "places": packed(in_steps(np.array([row.position for row in layout.sensors]))),
        "normals": packed(np.round(100 * np.array([row.normal for row in layout.sensors])).astype(np.int8)),
        "colours": [sensor_colour(row) for row in layout.sensors],
        "hollow": [row.role == "reference" for row in layout.sensors],
        "axes": _mesh(vertices, faces),
        "axisColour": sensor_colour(pointed[0][0] if pointed else layout.sensors[0]),
    }


def _sensitivity(result: DesignResult) -> dict[str, Any] | None:
    """Per layout the colour step of each source; one scale for all layouts, so that they compare."""
    if result.evidence is None or not result.evidence.sensitivity:
        return None
    top = sensitivity_top(result.evidence.sensitivity)
    return {
        "steps": [
            packed(np.round(STEPS * np.clip(one / top, 0, 1)).astype(np.uint8)) for one in result.evidence.sensitivity
        ]
    }


def sensitivity_top(sensitivity: tuple[np.ndarray, ...]) -> float:
    """The sensitivity that gets the last colour: the FULL percentile of the layout in which that is largest."""
    return max(float(np.percentile(one, FULL)) for one in sensitivity) or 1.0
