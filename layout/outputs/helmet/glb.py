"""helmet.glb: scalp and numbered housings in place for any viewer of glTF 2.0 (metres, y up)."""

from __future__ import annotations

import json
from typing import Any

import numpy as np

from layout.outputs.helmet.columns import HEAD_FRAME, HOUSING_FRAME
from layout.outputs.helmet.meshes import Mesh, arrow, box, joined, strokes
from layout.outputs.helmet.sensors import HousedSensor, housed_sensors
from layout.outputs.plain import one_line
from layout.outputs.result import DesignResult, RankedLayout
from layout.units import MM

# glTF's y is up and z towards the viewer: the head stands upright and looks at the viewer.
HEAD_TO_GLTF = np.array([[-1.0, 0, 0, 0], [0, 0, 1, 0], [0, 1, 0, 0], [0, 0, 0, 1]])
OUTSIDE, ARROW_RADIUS = 7 * MM, 0.5 * MM  # an arrow's tip stands out of the housing by so much
_RAISED = 0.3 * MM  # numbers stand out of the end of a housing
_MATERIALS = (  # name, base colour (linear), roughness
    ("scalp", (0.72, 0.58, 0.48), 0.9),
    ("housing", (0.10, 0.25, 0.45), 0.6),
    ("number", (0.95, 0.95, 0.95), 0.8),
    ("sensitive axis", (0.95, 0.55, 0.05), 0.5),
    ("x of the housing", (0.45, 0.75, 0.65), 0.5),
    ("gradient", (0.80, 0.45, 0.65), 0.5),
)


class _Parts:
    """Meshes and the bytes they are made of."""

    def __init__(self) -> None:
        self.data = bytearray()
        self.views: list[dict[str, Any]] = []
        self.accessors: list[dict[str, Any]] = []
        self.meshes: list[dict[str, Any]] = []
        self.last_material = 0

    def add(self, name: str, parts: list[tuple[Mesh, int]], smooth: bool = False) -> int:
        """A mesh of one part per material number, and its place in the list; flat faces unless `smooth`."""
        primitives = []
        for (vertices, faces), material in parts:
            self.last_material = max(self.last_material, material)
            points, corners = (vertices, faces) if smooth else (vertices[faces].reshape(-1, 3), None)
            tri = vertices[faces]
            normals = np.cross(tri[:, 1] - tri[:, 0], tri[:, 2] - tri[:, 0])
            if smooth:
                around = np.zeros_like(points)
                np.add.at(around, faces.ravel(), np.repeat(normals, 3, axis=0))
                normals = around
            else:
                corners = np.arange(len(points)).reshape(-1, 3)
                normals = np.repeat(normals, 3, axis=0)
            normals = normals / np.linalg.norm(normals, axis=1, keepdims=True)
            points = points.astype("<f4")
            primitives.append(
                {
                    "attributes": {
                        "POSITION": self._accessor(points, 34962, "VEC3", points.min(axis=0), points.max(axis=0)),
                        "NORMAL": self._accessor(normals.astype("<f4"), 34962, "VEC3"),
                    },
                    "indices": self._accessor(corners.astype("<u4").ravel(), 34963, "SCALAR"),
                    "material": material,
                }
            )
        self.meshes.append({"name": name, "primitives": primitives})
        return len(self.meshes) - 1

    def _accessor(self, values: np.ndarray, target: int, shape: str, low=None, high=None) -> int:
        self.views.append({"buffer": 0, "byteOffset": len(self.data), "byteLength": values.nbytes, "target": target})
        self.data += values.tobytes()  # all are four bytes wide, so that the next one is aligned
        accessor = {
            "bufferView": len(self.views) - 1,
            "componentType": 5126 if values.dtype.kind == "f" else 5125,
            "count": len(values),
            "type": shape,
        }
        if low is not None:
            accessor |= {"min": [float(value) for value in low], "max": [float(value) for value in high]}
        self.accessors.append(accessor)
        return len(self.accessors) - 1


def helmet_glb(result: DesignResult, layout: RankedLayout) -> bytes:
    """Scalp and housed sensors as binary glTF 2.0.

    Below the root (which turns the head frame upright) the node "scalp" and, per sensor, a node "sensor 07 NAME" whose
    matrix is the pose in metres; its mesh is the housing in its own frame with the number on its outer end, and
    an arrow per sensitive axis (and gradient of a planar gradiometer) from the sensitive centre. The top of the
    number points along the housing's y, the short arrow along its x.
    """
    parts = _Parts()
    scalp = (result.head.scalp.vertices, result.head.scalp.faces)
    nodes: list[dict[str, Any]] = [
        {
            "name": "head frame",
            "matrix": _by_columns(HEAD_TO_GLTF),
            "children": [],
            "extras": {"units": "metres", "frame": f"below this node: {HEAD_FRAME}; this node turns z up into y up"},
        },
        {"name": "scalp", "mesh": parts.add("scalp", [(scalp, 0)], smooth=True)},
    ]
    for one in housed_sensors(result, layout):
        name = f"sensor {one.row.number:02d} {one_line(one.row.name)}"
        nodes.append(
            {
                "name": name,
                "matrix": _by_columns(one.pose),
                "mesh": parts.add(name, _sensor_parts(one)),
                "extras": {"number": one.row.number, "kind": one_line(one.row.kind), "frame": HOUSING_FRAME},
            }
        )
    nodes[0]["children"] = list(range(1, len(nodes)))
    content = {
        "asset": {"version": "2.0"},
        "scene": 0,
        "scenes": [{"name": f"layout {layout.rank}", "nodes": [0]}],
        "nodes": nodes,
        "meshes": parts.meshes,
        "materials": [
            {
                "name": name,
                "pbrMetallicRoughness": {
                    "baseColorFactor": [*colour, 1.0],
                    "metallicFactor": 0.0,
                    "roughnessFactor": roughness,
                },
            }
            for name, colour, roughness in _MATERIALS[: 1 + parts.last_material]
        ],
        "accessors": parts.accessors,
        "bufferViews": parts.views,
        "buffers": [{"byteLength": len(parts.data)}],
    }
    text = json.dumps(content, separators=(",", ":"), ensure_ascii=True).encode("ascii")
    text += b" " * (-len(text) % 4)
    chunks = _chunk(text, b"JSON") + _chunk(bytes(parts.data), b"BIN\0")
    return b"glTF" + np.array([2, 12 + len(chunks)], dtype="<u4").tobytes() + chunks


def _sensor_parts(one: HousedSensor) -> list[tuple[Mesh, int]]:
    """Housing, number and axes in the housing frame, each with its material."""
    width, depth, length = one.size
    number = one.row.number
    height = min(0.6 * depth, 0.9 * width / (0.75 * len(str(number))))
    digits = []
    for left, low, wide, tall in strokes(number, height):
        place = np.eye(4)
        place[:3, 3] = (left + wide / 2, low + tall / 2, length)
        digits.append(box(place, np.array([wide, tall, _RAISED])))
    axes = _arrows(one, one.axes)
    middle = np.array([width / 2, 0.0, 0.9 * length])
    x_mark = _moved(arrow(np.array([1.0, 0.0, 0.0]), 4 * MM, ARROW_RADIUS), middle)
    parts = [(box(np.eye(4), one.size), 1), (joined(digits), 2), (joined(axes), 3), (x_mark, 4)]
    across = np.abs(np.einsum("nd,nd->n", one.baselines, one.axes)) < 0.5 * np.linalg.norm(one.baselines, axis=1)
    if across.any():  # planar gradiometers
        ways = one.baselines[across] / np.linalg.norm(one.baselines[across], axis=1, keepdims=True)
        parts.append((joined(_arrows(one, ways)), 5))
    return parts


def _arrows(one: HousedSensor, ways: np.ndarray) -> list[Mesh]:
    """An arrow from the sensitive centre out of the housing for each different unit direction of `ways` (n, 3)."""
    different = [way for k, way in enumerate(ways) if k == 0 or (np.abs(ways[:k] - way).max(axis=1) > 1e-6).all()]
    return [_moved(arrow(way, _way_out(one, way) + OUTSIDE, ARROW_RADIUS), one.centre) for way in different]


def _way_out(one: HousedSensor, axis: np.ndarray) -> float:
    """How far [m] from the sensitive centre along a unit axis (3,) the housing ends."""
    low, high = one.size * [-0.5, -0.5, 0.0], one.size * [0.5, 0.5, 1.0]
    ahead = np.where(axis > 0, high, low) - one.centre
    moving = np.abs(axis) > 1e-9
    return float((ahead[moving] / axis[moving]).min())


def _moved(mesh: Mesh, by: np.ndarray) -> Mesh:
    return mesh[0] + by, mesh[1]


def _by_columns(matrix: np.ndarray) -> list[float]:
    return [float(value) + 0.0 for value in matrix.T.ravel()]


def _chunk(data: bytes, name: bytes) -> bytes:
    return np.array([len(data)], dtype="<u4").tobytes() + name + data
