"""Plain meshes for CAD and viewers: boxes, arrows, stroke digits; and the STL file."""

from __future__ import annotations

import numpy as np

from layout.outputs.helmet.gaps import box_corners

Mesh = tuple[np.ndarray, np.ndarray]  # vertices (n, 3), faces (m, 3) turned outwards

_BOX_FACES = np.array(
    [
        *([0, 2, 6], [0, 6, 4], [1, 5, 7], [1, 7, 3], [0, 4, 5], [0, 5, 1]),
        *([2, 3, 7], [2, 7, 6], [0, 1, 3], [0, 3, 2], [4, 6, 7], [4, 7, 5]),
    ]
)
# The strokes of each digit, of seven: top, upper left, upper right, middle, lower left, lower right, bottom.
_DIGITS = {
    "0": "1110111",
    "1": "0010010",
    "2": "1011101",
    "3": "1011011",
    "4": "0111010",
    "5": "1101011",
    "6": "1101111",
    "7": "1010010",
    "8": "1111111",
    "9": "1111011",
}
_WIDE, _STROKE, _STEP = 0.55, 0.16, 0.8  # of a digit's height


def box(pose: np.ndarray, size: np.ndarray) -> Mesh:
    """A box of extents `size` (3,) that stands on z = 0 of its pose (4, 4)."""
    return box_corners(pose, size), _BOX_FACES


def joined(meshes: list[Mesh]) -> Mesh:
    """Several meshes as one."""
    firsts = np.cumsum([0, *(len(vertices) for vertices, _ in meshes[:-1])])
    return (
        np.concatenate([vertices for vertices, _ in meshes]),
        np.concatenate([faces + first for (_, faces), first in zip(meshes, firsts, strict=True)]),
    )


def strokes(number: int, height: float) -> np.ndarray:
    """The number in straight strokes: rectangles (n, 4) as left, bottom, width, height, centred on the origin."""
    wide, stroke, step = _WIDE * height, _STROKE * height, _STEP * height
    half = (height + stroke) / 2
    places = np.array(
        [
            (0, height - stroke, wide, stroke),
            (0, half - stroke, stroke, half),
            (wide - stroke, half - stroke, stroke, half),
            (0, half - stroke, wide, stroke),
            (0, 0, stroke, half),
            (wide - stroke, 0, stroke, half),
            (0, 0, wide, stroke),
        ]
    )
    text = str(number)
    found = [
        places[[one for one, drawn in enumerate(_DIGITS[digit]) if drawn == "1"]] + [place * step, 0, 0, 0]
        for place, digit in enumerate(text)
    ]
    left, bottom = -(wide + (len(text) - 1) * step) / 2, -height / 2
    return np.concatenate(found) + np.array([left, bottom, 0, 0])


def strokes_width(number: int, height: float) -> float:
    """How wide the number is."""
    return (_WIDE + (len(str(number)) - 1) * _STEP) * height


def arrow(direction: np.ndarray, length: float, radius: float) -> Mesh:
    """A thin six-sided arrow (shaft and head) from the origin along a unit direction (3,)."""
    across = np.linalg.svd(direction[None])[2][1:]
    if np.linalg.det(np.vstack([across, direction])) < 0:
        across = across[::-1]
    angles = np.arange(6) * np.pi / 3
    ring = np.cos(angles)[:, None] * across[0] + np.sin(angles)[:, None] * across[1]
    neck = 0.75 * length
    outline = [(radius, 0.0), (radius, neck), (2.5 * radius, neck)]
    vertices = np.concatenate(
        [np.zeros((1, 3)), *(r * ring + height * direction for r, height in outline), [length * direction]]
    )
    here, there = np.arange(6), (np.arange(6) + 1) % 6
    faces = [np.column_stack([np.zeros(6, int), 1 + there, 1 + here])]
    for level in range(2):
        low, high = 1 + 6 * level, 7 + 6 * level
        faces.append(np.column_stack([low + here, low + there, high + there]))
        faces.append(np.column_stack([low + here, high + there, high + here]))
    faces.append(np.column_stack([13 + here, 13 + there, np.full(6, 19)]))
    return vertices, np.concatenate(faces)


def binary_stl(mesh: Mesh, title: str) -> bytes:
    """A mesh as binary STL in the mesh's own units; `title` (ASCII) fills the start of the 80 bytes of header."""
    vertices, faces = mesh
    corners = vertices[faces].astype("<f4")
    normals = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    length = np.linalg.norm(normals, axis=1, keepdims=True)
    record = np.zeros(len(faces), dtype=[("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])
    record["normal"] = normals / np.where(length > 0, length, 1.0)
    record["corners"] = corners
    return title.encode("ascii")[:80].ljust(80) + np.uint32(len(faces)).astype("<u4").tobytes() + record.tobytes()
